"""A whole run: the same seed gives the same bytes, and time goes as a receiver's does."""

from __future__ import annotations

import re
from itertools import pairwise

import pynmea2
import pytest

from gnssmon.configuration import load
from gnssmon.simulation.generator import BLOCK_S, Generator, generate
from gnssmon.simulation.scenario import Scenario, load_scenario

SITE = "title = 't'\n[site]\nlatitude_deg = 10.0\nlongitude_deg = 20.0\nheight_m = 5.0\n"


def scenario(rest: str) -> Scenario:
    return load(Scenario, SITE + rest, name="test")


def run(scene: Scenario, duration_s: float, seed: int = 1) -> list[tuple[float, bytes]]:
    return list(generate(scene, duration_s=duration_s, seed=seed))


def lines(scene: Scenario, duration_s: float, kind: str) -> list[list[str]]:
    """Fields behind the address of every sentence of a kind."""
    text = b"".join(data for _, data in run(scene, duration_s)).decode("ascii")
    return [line[7 : line.index("*")].split(",") for line in text.splitlines() if line[3:6] == kind]


@pytest.mark.parametrize("name", ["open_roof", "noisy_line", "power_dips", "bad_connector"])
def test_same_seed_same_bytes_whatever_the_length(name):
    """A longer run begins with the shorter one, bytes and times; another seed is another run."""
    scene = load_scenario(name)
    short, longer, other = run(scene, 90.0), run(scene, BLOCK_S + 60.0), run(scene, 90.0, seed=2)

    assert longer[: len(short)] == short
    assert other != short


def test_epochs_due():
    """Rates from 0.2 to 50 Hz: one epoch a period, in steps of the period, none more or less."""
    for rate_hz, seconds, expected in ((0.2, 60, 12), (1.0, 60, 60), (10.0, 6, 60), (50.0, 4, 200), (0.7, 60, 42)):
        scene = scenario(f"[stream]\nrate_hz = {rate_hz}\nsentences = ['GGA']\nbaud = 460800\n")
        clocks = [fields[0] for fields in lines(scene, seconds, "GGA")]

        assert len(clocks) == expected
        assert len(set(clocks)) == expected
        seconds_of_day = [int(c[:2]) * 3600 + int(c[2:4]) * 60 + float(c[4:]) for c in clocks]
        steps = [b - a for a, b in pairwise(seconds_of_day)]
        assert steps == pytest.approx([1 / rate_hz] * (expected - 1), abs=0.011)


def test_satellites_now_and_then():
    """GSV with every tenth epoch."""
    scene = scenario("[stream]\nrate_hz = 10.0\nsatellites_every = 10\nbaud = 460800\n")

    assert len(lines(scene, 5, "GGA")) == 50
    first_sets = [fields for fields in lines(scene, 5, "GSV") if fields[1] == "1"]
    assert len(first_sets) == 5 * len({(f[-1], f[3]) for f in lines(scene, 0.05, "GSV") if f[1] == "1"})


def test_midnight_and_new_year():
    """23:59:59 of the old year, then 00:00:00 of the new one."""
    rmc = lines(scenario("[stream]\nstart = '2027-12-31T23:59:58Z'\n"), 4, "RMC")

    assert [(f[0], f[8]) for f in rmc] == [
        ("235958.00", "311227"), ("235959.00", "311227"), ("000000.00", "010128"), ("000001.00", "010128")
    ]  # fmt: skip


def test_leap_second():
    """2016-12-31 had 23:59:60 (IERS Bulletin C 52); a host's clock stands still meanwhile, and agrees after it."""
    scene = scenario("[stream]\nstart = '2016-12-31T23:59:58Z'\nleap_second = true\njitter_s = 0.0\n")
    rmc = lines(scene, 5, "RMC")

    assert [(f[0], f[8]) for f in rmc] == [
        ("235958.00", "311216"), ("235959.00", "311216"), ("235960.00", "311216"), ("000000.00", "010117"),
        ("000001.00", "010117"),
    ]  # fmt: skip
    start_s = 1_483_228_798.0
    late = [at - start_s for at, _ in run(scene, 5)]
    assert late == pytest.approx([0.2, 1.2, 2.0, 2.2, 3.2], abs=0.06)


def test_week_rollover():
    """A date 7168 days in the past: 2005-05-22 for 2025-01-05 (diagnosis sheet, section 6, number 12)."""
    rmc = lines(scenario("[stream]\nstart = '2025-01-05T10:00:00Z'\nweek_offset = -1024\n"), 1, "RMC")

    assert (rmc[0][0], rmc[0][8]) == ("100000.00", "220505")


def test_clock_jump():
    """Two seconds ahead for five seconds, then right."""
    gga = lines(scenario("[[event]]\nkind = 'clock_jump'\nat = '0s'\nfor = '5s'\nseconds = 2.0\n"), 8, "GGA")

    assert [f[0][4:] for f in gga] == ["02.00", "03.00", "04.00", "05.00", "06.00", "05.00", "06.00", "07.00"]


def test_frozen_receiver_repeats_its_last_epoch():
    """Time and position stand still while sentences keep coming; the truth counts the epochs as missing."""
    scene = scenario("[[event]]\nkind = 'frozen'\nat = '5s'\nfor = '4s'\n")
    gga = lines(scene, 12, "GGA")
    made = Generator(scene, duration_s=12.0)
    list(made.chunks())

    assert [f[0][4:6] for f in gga] == ["00", "01", "02", "03", "04", "04", "04", "04", "04", "09", "10", "11"]
    assert len({tuple(f) for f in gga[4:9]}) == 1
    assert made.truth()["epochs"]["sent"] == 8
    assert made.truth()["epochs"]["gaps"][0]["epochs"] == 4


def test_cold_start_knows_neither_time_nor_sky():
    """At first no time; satellites appear one by one, without directions until the first fix."""
    scene = scenario("[receiver]\ntime_to_first_fix = '50s'\n")
    gga, gsv = lines(scene, 120, "GGA"), lines(scene, 120, "GSV")

    assert gga[0][0] == ""
    assert [f[5] for f in gga].index("1") >= 50
    assert all(f[0] for f in gga[25:])
    seen = [f for f in gsv[:60] if len(f) > 4]
    assert not any(f[4] for f in seen[:3])
    assert gsv[-1][4]


def test_static_hold():
    """One position for the whole run."""
    gga = lines(scenario("[receiver]\nstatic_hold = true\n"), 60, "GGA")

    assert len({(f[1], f[3], f[8]) for f in gga}) == 1


def test_movement():
    """One metre a second towards the north is 60 m in a minute."""
    scene = load(Scenario, SITE + "speed_mps = 1.0\n[receiver]\nmode = 'rtk'\n", name="moving")
    text = b"".join(data for _, data in run(scene, 61.0)).decode("ascii")
    fixes = [pynmea2.parse(line) for line in text.splitlines() if line[3:6] == "GGA"]

    # One minute of latitude at 10 degrees north is 1843.5 m (meridian radius 6 337 359 m, computed with pyproj).
    assert (fixes[-1].latitude - fixes[0].latitude) * 60 * 1843.5 == pytest.approx(60.0, abs=0.1)


def test_texts():
    """An event's text comes once in ten seconds while it lasts."""
    scene = scenario("[[event]]\nkind = 'text'\nat = '20s'\nfor = '40s'\ntext = 'ANTSTATUS=OPEN'\n")

    assert [f[3] for f in lines(scene, 120, "TXT")] == ["ANTSTATUS=OPEN"] * 4


def test_truth_counts_what_was_written():
    """Shares, gaps, levels and link load of the truth are those of a plain count over the bytes."""
    scene = scenario("[[event]]\nkind = 'silence'\nat = '100s'\nfor = '7s'\nevery = '60s'\n")
    made = Generator(scene, duration_s=300.0, seed=4)
    data = b"".join(part for _, part in made.chunks())
    truth = made.truth()
    gga = re.findall(rb"\$GNGGA,(\d+)", data)
    levels = [
        int(level)
        for line in re.findall(rb"\$GPGSV,\d,\d,\d\d,(.*),1\*", data)
        for level in line.split(b",")[3::4]
        if level
    ]

    assert truth["epochs"]["due"] == 300
    assert truth["epochs"]["sent"] == len(gga) == 300 - 4 * 7
    assert [gap["epochs"] for gap in truth["epochs"]["gaps"]] == [7, 7, 7, 7]
    assert truth["epochs"]["gaps"][0]["from_utc"] == "2026-03-01T00:01:40.000Z"
    assert truth["cn0"]["by_signal"]["G1"]["count"] == len(levels)
    assert truth["cn0"]["by_signal"]["G1"]["mean_dbhz"] == pytest.approx(sum(levels) / len(levels), abs=1e-9)
    assert truth["line"]["sent_bytes"] == len(data)
    assert truth["line"]["load"] == pytest.approx(len(data) * 10 / 115_200 / 300)
    assert len(truth["events"][0]["times"]) == 4
    assert truth["fix"]["share"]["autonomous"] == 1.0


def test_bias_and_jump_are_told():
    """What was added to all positions, and the jump, stand in the truth's realised mean."""
    scene = scenario(
        "[receiver]\nmode = 'rtk'\nbias_east_m = 0.5\n[[event]]\nkind = 'jump'\nat = '100s'\nfor = '50s'\nup_m = 2.0\n"
    )
    made = Generator(scene, duration_s=200.0)
    list(made.chunks())
    mean = made.truth()["position_error"]["realised"]["mean_m"]

    assert mean == pytest.approx([0.5, 0.0, 0.5], abs=0.06)
    assert made.truth()["site"]["bias_m"] == [0.5, 0.0, 0.0]
