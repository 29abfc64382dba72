"""What an epoch says: which sentence is believed, what counts, and what stays unknown."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from gnssmon.constellations.identity import label, signal_label, system_of
from gnssmon.epochs import grouping
from gnssmon.epochs.batch import KINDS, EpochBatch
from gnssmon.pipeline import Pipeline

Assemble = Callable[..., EpochBatch]

PLACE = "4717.11399,N,00833.91590,E"


def gga(time: str, quality: str = "1", place: str = PLACE, rest: str = "08,1.01,499.6,M,48.0,M,,") -> str:
    return f"GPGGA,{time},{place},{quality},{rest}"


def rmc(time: str, date: str = "200525", status: str = "A", mode: str = "A") -> str:
    return f"GPRMC,{time},{status},{PLACE},1.0,90.0,{date},,,{mode}"


def in_view(batch: EpochBatch, epoch: int) -> list[str]:
    chosen = batch.signals.epoch == epoch
    return [
        f"{label(s)} {signal_label(int(system_of(s)), r)}"
        for s, r in zip(batch.signals.satellite[chosen], batch.signals.signal[chosen], strict=True)
    ]


def used(batch: EpochBatch, epoch: int) -> list[str]:
    return [label(code) for code in batch.used.satellite[batch.used.epoch == epoch]]


def test_values_of_a_published_sentence(assemble: Assemble) -> None:
    """$GPGGA,092725.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,*5B of a maker's interface description."""
    batch = assemble([gga("092725.00")])
    assert len(batch) == 1
    assert batch.latitude_deg[0] == pytest.approx(47.2852331667, abs=1e-10)
    assert batch.longitude_deg[0] == pytest.approx(8.5652650000, abs=1e-10)
    assert batch.height_m[0] == pytest.approx(547.6)
    assert (batch.quality[0], batch.satellites_used[0], batch.hdop[0]) == (1, 8, 1.01)
    assert batch.axis_ms[0] == ((9 * 60 + 27) * 60 + 25) * 1000
    assert (batch.utc_ms[0], batch.station[0]) == (-1, -1)
    assert np.isnan([batch.correction_age_s[0], batch.pdop[0], batch.speed_mps[0], batch.heading_deg[0]]).all()
    assert batch.counted.tolist() == [True]


def test_gga_is_believed_before_gns_rmc_and_gll(assemble: Assemble) -> None:
    """Position and quality come whole from one sentence, whatever the order of arrival."""
    texts = [
        "GPGLL,0100.0,N,00100.0,E,000000.00,A,A",
        rmc("000000.00").replace(PLACE, "0200.0,N,00200.0,E"),
        "GNGNS,000000.00,0300.0,N,00300.0,E,RR,10,1.0,1.0,1.0,,",
        gga("000000.00", "5", "0400.0,N,00400.0,E"),
    ]
    seen = []
    for count in range(1, 5):
        for order in (texts[:count], texts[:count][::-1]):
            batch = assemble(order)
            seen.append((round(batch.latitude_deg[0]), int(batch.quality[0])))
    assert seen == [(1, 1), (1, 1), (2, 1), (2, 1), (3, 4), (3, 4), (4, 5), (4, 5)]


def test_first_of_repeated_gga_counts(assemble: Assemble) -> None:
    """A GGA repeated within an epoch is one epoch, and the first is taken."""
    batch = assemble([gga("000000.00", "1"), gga("000000.00", "2"), gga("000001.00", "2")])
    assert batch.counted.tolist() == [True, True]
    assert batch.quality.tolist() == [1, 2]


def test_whole_solution_is_believed_before_single_systems(assemble: Assemble) -> None:
    """A GNS for each system beside the GN one is one epoch, and GN gives the values."""
    texts = [
        "GPGNS,000000.00,,,,,,05,,,,,",
        "GLGNS,000000.00,,,,,,04,,,,,",
        f"GNGNS,000000.00,{PLACE},RRAN,09,0.9,100.0,40.0,1.0,0007",
    ]
    batch = assemble([text.replace("000000.00", f"00000{k}.00") for k in range(3) for text in texts])
    assert batch.counted.tolist() == [True] * 3
    assert batch.satellites_used.tolist() == [9] * 3
    assert batch.quality.tolist() == [4] * 3
    assert batch.station.tolist() == [7] * 3


@pytest.mark.parametrize(
    ("modes", "quality"),
    [
        ("N", 0),
        ("NN", 0),
        ("A", 1),
        ("AD", 2),
        ("PA", 3),
        ("RRAN", 4),
        ("FDA", 5),
        ("E", 6),
        ("M", 7),
        ("S", 8),
        ("", -1),
    ],
)
def test_quality_of_gns_letters(assemble: Assemble, modes: str, quality: int) -> None:
    """The best letter stands for the whole: R F P D A E M S N (common practice); values as IEC 61162-1 pairs them."""
    assert assemble([f"GNGNS,000000.00,{PLACE},{modes},09,0.9,100.0,40.0,,"]).quality.tolist() == [quality]


@pytest.mark.parametrize(
    ("status", "mode", "quality"),
    [
        ("A", "A", 1),
        ("A", "D", 2),
        ("A", "R", 4),
        ("A", "F", 5),
        ("V", "N", 0),
        ("V", "R", 0),
        ("A", "", 1),
        ("V", "", 0),
    ],
)
def test_quality_of_rmc(assemble: Assemble, status: str, mode: str, quality: int) -> None:
    """Status V is no fix whatever the letter says; A without a letter (before NMEA 2.3) is autonomous."""
    assert assemble([rmc("000000.00", status=status, mode=mode)]).quality.tolist() == [quality]


@pytest.mark.parametrize(("given", "expected"), [("", 0), ("0", 0), ("8", 8), ("9", -1)])
def test_quality_of_gga(assemble: Assemble, given: str, expected: int) -> None:
    """The field is never empty by the standard, so an empty one means no fix; above 8 it is a maker's own."""
    assert assemble([gga("000000.00", given)]).quality.tolist() == [expected]


def test_gga_of_nothing_does_not_spoil_an_epoch(assemble: Assemble) -> None:
    """An empty GGA has no time: it opens nothing, and what was said before stays."""
    batch = assemble([gga("000000.00", "4"), "GPGGA,,,,,,,,,,M,,M,,", rmc("000001.00", status="V", mode="N")])
    assert batch.quality.tolist() == [4, 0]
    assert batch.counted.tolist() == [True, False]  # GGA leads, and the second epoch has none with a time


def test_leading_sentence(assemble: Assemble) -> None:
    """GGA leads where it comes at least every second time; else the stream is counted by what it has."""
    assert assemble([rmc(f"00000{k}.00") for k in range(4)]).counted.all()
    assert assemble([f"GPGLL,{PLACE},00000{k}.00,A,A" for k in range(4)]).counted.all()
    slow = [text for k in range(10) for text in ([rmc(f"00000{k}.00")] + ([gga(f"00000{k}.00")] if k % 5 == 0 else []))]
    assert assemble(slow).counted[2:].all()


def test_log_that_begins_within_a_burst(assemble: Assemble) -> None:
    """RMC alone in the first epoch does not make RMC the leading sentence when GGA follows in the next."""
    batch = assemble([rmc("000000.00"), gga("000001.00"), rmc("000001.00"), gga("000002.00"), rmc("000002.00")])
    assert batch.counted.tolist() == [False, True, True]


def test_dop(assemble: Assemble) -> None:
    """GSA gives position and vertical DOP, and the horizontal one where GGA has none; 0.0 is no DOP."""
    gsa = "GPGSA,A,3,01,02,03,04,,,,,,,,,1.8,0.8,1.6"
    none = "GPGSA,A,1,,,,,,,,,,,,,0.0,0.0,0.0"
    batch = assemble([gga("000000.00"), none, gsa, rmc("000001.00"), gsa, gga("000002.00"), none])
    np.testing.assert_array_equal(batch.pdop, [1.8, 1.8, np.nan])
    np.testing.assert_array_equal(batch.hdop, [1.01, 0.8, 1.01])
    np.testing.assert_array_equal(batch.vdop, [1.6, 1.6, np.nan])


def test_motion_heading_and_the_receivers_own_sigmas(assemble: Assemble) -> None:
    """Speed in m/s (1 kn = 1852/3600 m/s) from RMC before VTG; heading from HDT; sigmas east and north from GST."""
    texts = ["GPVTG,80.0,T,,M,9.0,N,16.7,K,A", rmc("000000.00"), "HEHDT,119.9,T", "GPGST,000000.00,1.8,,,,1.7,1.3,2.2"]
    batch = assemble([*texts, gga("000001.00"), texts[0], "GPTHS,45.0,A", gga("000002.00"), "GPTHS,45.0,V"])
    assert batch.speed_mps[:2] == pytest.approx([1852 / 3600, 9 * 1852 / 3600])
    np.testing.assert_array_equal(batch.course_deg, [90.0, 80.0, np.nan])
    np.testing.assert_array_equal(batch.heading_deg, [119.9, 45.0, np.nan])
    assert (batch.sigma_north_m[0], batch.sigma_east_m[0], batch.sigma_up_m[0]) == (1.7, 1.3, 2.2)


def test_satellites_belong_to_the_epoch_they_come_in(assemble: Assemble) -> None:
    """Sets come in some epochs only; the parts of a torn set are evidence all the same; padding and groups without a
    number are not."""
    texts = [
        gga("000000.00"),
        "GPGSV,2,1,05,01,40,100,44,02,50,200,,03,60,300,30,04,70,010,20,1",
        gga("000001.00"),
        gga("000002.00"),
        "GLGSV,1,1,02,,,,26.9,70,10,020,30,3",
        "GPGSV,1,1,01,46,35,140,40,1",
        "GPGSV,1,1,00",
    ]
    batch = assemble(texts)
    assert [in_view(batch, k) for k in range(3)] == [["G01 G1", "G02 G1", "G03 G1", "G04 G1"], [], ["R06 R2", "S33 S1"]]
    np.testing.assert_array_equal(batch.signals.cn0_dbhz, np.float32([44, np.nan, 30, 20, 30, 40]))


def test_used_satellites_once_each(assemble: Assemble) -> None:
    """GSA by system; one satellite repeated for each signal is one; 195 under system 1 is J03 (a public sample)."""
    texts = [
        gga("000000.00"),
        "GNGSA,A,3,03,04,195,,,,,,,,,,1.13,0.61,0.94,1",
        "GNGSA,A,3,03,04,,,,,,,,,,,1.13,0.61,0.94,1,8",
        "GNGSA,A,3,65,,,,,,,,,,,,1.13,0.61,0.94,2",
        "GNGSA,A,3,03,,,,,,,,,,,,1.13,0.61,0.94,3",
    ]
    assert used(assemble(texts), 0) == ["G03", "G04", "R01", "E03", "J03"]


def test_bare_numbers_are_gps_in_old_streams_only(assemble: Assemble) -> None:
    """GN without a system id: 1-32 are GPS by NMEA up to 4.0, but not where the stream lists others by such numbers."""
    gsa = ["GNGSA,A,3,07,08,,,,,,,,,,,1.8,0.8,1.6", "GNGSA,A,3,70,,,,,,,,,,,,1.8,0.8,1.6"]
    old = ["GPGSV,1,1,01,07,40,100,44", "GLGSV,1,1,01,70,40,100,44"]
    assert used(assemble([gga("000000.00"), *gsa, *old]), 0) == ["G07", "G08", "R06"]
    assert used(assemble([gga("000000.00"), *gsa, *old, "GAGSV,1,1,01,07,40,100,44"]), 0) == ["R06", "?07", "?08"]


def test_dates_from_rmc_and_zda(assemble: Assemble) -> None:
    """A date counts for its own epoch wherever in it the sentence comes, and is carried on; ZDA has the whole year."""
    batch = assemble(
        [gga("235959.00"), rmc("235959.00", "311299"), gga("000000.00"), "GPZDA,000001.00,01,01,2000,00,00"]
    )
    # date -u -d "1999-12-31T23:59:59Z" +%s: 946684799
    assert batch.utc_ms.tolist() == [946_684_799_000, 946_684_800_000, 946_684_801_000]


def test_clock_sentence_across_midnight(assemble: Assemble) -> None:
    """ZDA of 23:59:59.990 belongs to the epoch of 00:00:00.000, whose date is the next day."""
    batch = assemble(["GPZDA,235959.990,31,12,1999,00,00", gga("000000.00")])
    assert batch.utc_ms.tolist() == [946_684_800_000]


@pytest.mark.parametrize(
    "zda", ["GPZDA,000000.00,00,00,0000,00,00", "GPZDA,000000.00,31,02,2024,00,00", "GPZDA,000000.00,,,,,"]
)
def test_impossible_dates_are_no_dates(assemble: Assemble, zda: str) -> None:
    """A day that the calendar does not have leaves the stream undated."""
    assert assemble([gga("000000.00"), zda]).utc_ms.tolist() == [-1]


def test_leap_second(assemble: Assemble) -> None:
    """$GNRMC,235960.00 of 2016-12-31, the last leap second (IERS Bulletin C 52), is an epoch of its own."""
    batch = assemble([rmc("235959.00", "311216"), rmc("235960.00", "311216"), rmc("000000.00", "010117")])
    assert batch.counted.all()
    assert np.diff(batch.axis_ms).tolist() == [1000, 1000]
    assert np.diff(batch.utc_ms).tolist() == [1000, 0]


def test_arrival(assemble: Assemble) -> None:
    """First sentence, last sentence and position sentence of an epoch have their own times of arrival."""
    batch = assemble([rmc("000000.00"), gga("000000.00"), "GPVTG,80.0,T,,M,9.0,N,16.7,K,A"], [10.0, 10.1, 10.2])
    assert (batch.received_s[0], batch.position_received_s[0], batch.completed_s[0]) == (10.0, 10.1, 10.2)


def test_kinds_and_size(assemble: Assemble) -> None:
    """Every sentence of an epoch counts in its bytes, a maker's own too; kinds are the types there were."""
    texts = [rmc("000000.00"), "PXYZ,1,2", gga("000000.00"), gga("000001.00")]
    batch = assemble(texts)
    assert batch.size.tolist() == [sum(len(text) + 6 for text in texts[:3]), len(texts[3]) + 6]
    assert batch.kinds.tolist() == [1 << KINDS.index("RMC") | 1 << KINDS.index("GGA"), 1 << KINDS.index("GGA")]


def test_endless_epoch_is_bounded(assemble: Assemble, monkeypatch: pytest.MonkeyPatch) -> None:
    """A clock that stands still gives one counted epoch; what is held stays bounded, and no evidence is lost."""
    monkeypatch.setattr(grouping, "MOST_SENTENCES", 10)
    gsv = "GPGSV,1,1,01,07,40,100,44"
    batch = assemble([gga("000000.00"), gsv] * 30)
    assert batch.counted.sum() == 1
    assert len(batch) == 6
    assert len(batch.signals.epoch) == 30
    assert set(batch.axis_ms.tolist()) == {0}


def test_stream_without_any_time(assemble: Assemble) -> None:
    """Satellites of a receiver that knows no time are evidence; nothing is counted and no time is claimed."""
    pipeline = Pipeline()
    batch = assemble(["GPGGA,,,,,,0,,,,,,,,", "GPGSV,1,1,01,07,40,100,44,1"] * 3, pipeline=pipeline)
    assert (len(batch), len(batch.signals.epoch), batch.counted.any(), batch.utc_ms[0]) == (1, 3, False, -1)
    assert pipeline.extent.first is None


def test_nothing(assemble: Assemble) -> None:
    """A stream without sentences has no epochs."""
    assert len(assemble([])) == 0
