"""Each check answers yes where its fault is, no on the healthy site, and cannot say where nothing is known."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gnssmon.diagnosis import FINDINGS, diagnose, position, receiver_setup, sky, stream
from gnssmon.diagnosis.finding import CannotSay, Facts, Fine, Found
from gnssmon.quantities import Estimate
from gnssmon.receiver import ReceiverState
from gnssmon.statistics.subject import Site
from tests.diagnosis.facts import facts, pictures


def test_healthy_site_is_accused_of_nothing():
    """No check finds anything wrong with a healthy hour."""
    assert diagnose(facts()) == ()


def test_nothing_known_is_accused_of_nothing():
    """Before the first byte every check says that it cannot say, or finds nothing."""
    empty = Facts(
        estimates={}, by_type={}, talkers={}, pictures=_empty_pictures(), receiver=ReceiverState(), site=Site()
    )

    assert diagnose(empty) == ()


def _empty_pictures():
    whole = pictures()
    return replace(
        whole,
        sky=replace(whole.sky, horizon_deg=np.full(36, np.nan), horizon_low_deg=np.full(36, np.nan)),
        level=replace(whole.level, signals=(), mean_dbhz=np.empty((0, 18)), count=np.empty((0, 18), dtype=np.int64)),
        fix=replace(whole.fix, by_quality=np.empty((0, 9), dtype=np.int64)),
    )


def test_every_check_has_its_words():
    """Title, code of our own in lower-case words, advice and source: none is empty, no code stands twice."""
    codes = [check.code for check in FINDINGS]

    assert len(set(codes)) == len(codes)
    for check in FINDINGS:
        assert check.__doc__
        assert check.advice.strip()
        assert check.source.strip()
        assert check.code == check.code.lower()
        assert check.severity in {"info", "warning", "serious"}


def _shadow(height_deg: float, first: int, last: int):
    whole = pictures()
    horizon, low = whole.sky.horizon_deg.copy(), whole.sky.horizon_low_deg.copy()
    for sector in range(first, last):
        horizon[sector % 36], low[sector % 36] = height_deg, height_deg - 3.0
    return replace(whole, sky=replace(whole.sky, horizon_deg=horizon, horizon_low_deg=low))


def _weak(level_dbhz: float):
    whole = pictures()
    return replace(whole, level=replace(whole.level, mean_dbhz=np.full((1, 18), level_dbhz)))


def _estimated():
    whole = pictures()
    quality = whole.fix.by_quality.copy()
    quality[:10, 1], quality[:10, 6] = 0, 60
    return replace(whole, fix=replace(whole.fix, by_quality=quality))


def _unnamed():
    whole = pictures()
    return replace(whole, level=replace(whole.level, signals=("G",)))


SHIFTED = {f"reference.{axis}_m": Estimate(value, (value - 0.01, value + 0.01)) for axis, value in
           {"east": 0.61, "north": 0.65, "up": 0.002}.items()}  # fmt: skip

FAULTS = [
    (stream.EpochsMissing, facts({"stream.completeness": 0.97})),
    (stream.ChecksumFailures, facts({"stream.checksum_failure_share": 0.01})),
    (stream.LineSaturated, facts({"stream.link_load": 2.23}, site=Site(baud=9600))),
    (stream.ForeignBytes, facts({"stream.non_nmea_share": 0.1})),
    (stream.OutputTooSlow, facts({"stream.interval_s": 12.0})),
    (receiver_setup.NoPositionSentence, facts(by_type={"RMC": 100})),
    (receiver_setup.NoPositionSentence, facts(by_type={"GSV": 100})),
    (receiver_setup.NoSatelliteSentences, facts(by_type={"GGA": 100})),
    (receiver_setup.SignalsNotNamed, facts(drawn=_unnamed())),
    (receiver_setup.NoDate, facts(receiver=ReceiverState(axis_ms=1))),
    (receiver_setup.SatelliteCountCapped, facts({"satellites.used_mean": 12.0, "satellites.used_listed_mean": 27.7})),
    (receiver_setup.SeparationMissing, facts(receiver=ReceiverState(altitude_m=310.0))),
    (receiver_setup.AntennaSupervisor, facts(receiver=ReceiverState(texts=("ANTSTATUS=OK", "ANTSTATUS=OPEN")))),
    (receiver_setup.NotRealPositions, facts(drawn=_estimated())),
    (sky.SkyBlocked, facts(drawn=_shadow(35.0, 19, 28))),
    (sky.LevelsLow, facts(drawn=_weak(34.0))),
    (sky.SystemMissing, facts({"satellites.systems": 1.0})),
    (position.FixLost, facts({"fix.losses": 2.0, "fix.longest_outage_s": 12.0})),
    (position.NeverFixed, facts({"fix.share_none": 1.0})),
    (position.Frozen, facts({"scatter.east_std_m": 0.0, "scatter.north_std_m": 0.0})),
    (position.HeavyTails, facts({"scatter.r95_m": 4.0})),
    (position.OffsetFromReference, facts(SHIFTED, site=Site(reference=(50.85, 4.36, 103.9)))),
    (position.OldCorrections, facts({"corrections.age_max_s": 60.0})),
]


@pytest.mark.parametrize(("check", "spoilt"), FAULTS, ids=lambda value: getattr(value, "code", ""))
def test_fault_is_found_with_its_numbers(check, spoilt):
    """The fault is found, said in one sentence, and nothing else serious is."""
    answer = check.check(spoilt)

    assert isinstance(answer, Found)
    assert answer.summary.strip().endswith((".", "”.", "”"))


def test_every_check_is_tried():
    """A new check needs a fault of its own here."""
    assert {check for check, _ in FAULTS} == set(FINDINGS)


def test_blocked_sector_is_named_by_its_edges():
    """Sectors 19 to 27, azimuths 190 to 280 degrees, are named, also across north."""
    answer = sky.SkyBlocked.check(facts(drawn=_shadow(35.0, 19, 28)))
    across = sky.SkyBlocked.check(facts(drawn=_shadow(35.0, 34, 39)))

    assert isinstance(answer, Found)
    assert (answer.evidence["azimuth_from_deg"], answer.evidence["azimuth_to_deg"]) == (190, 280)
    assert isinstance(across, Found)
    assert (across.evidence["azimuth_from_deg"], across.evidence["azimuth_to_deg"]) == (340, 30)


def test_weak_signals_are_no_horizon():
    """Where all levels are low, low satellites are lost without anything in their way."""
    weak = replace(_weak(34.0), sky=_shadow(35.0, 0, 36).sky)

    assert isinstance(sky.SkyBlocked.check(facts(drawn=weak)), CannotSay)
    assert isinstance(sky.LevelsLow.check(facts(drawn=weak)), Found)


def test_one_narrow_sector_is_not_held_against_the_site():
    """A single sector of ten degrees may be a single satellite's pass."""
    assert isinstance(sky.SkyBlocked.check(facts(drawn=_shadow(35.0, 5, 6))), Fine)


def test_offset_inside_its_interval_is_no_finding():
    """A mean whose interval holds zero proves no offset."""
    near = {f"reference.{axis}_m": Estimate(0.01, (-0.02, 0.04)) for axis in ("east", "north", "up")}

    assert isinstance(position.OffsetFromReference.check(facts(near, site=Site(reference=(50.0, 4.0, 100.0)))), Fine)


def test_offset_without_interval_is_no_finding():
    """Where no interval can be given, nothing is claimed."""
    unsure = {f"reference.{axis}_m": Estimate(5.0) for axis in ("east", "north", "up")}
    answer = position.OffsetFromReference.check(facts(unsure, site=Site(reference=(50.0, 4.0, 100.0))))

    assert isinstance(answer, Fine | CannotSay)


def test_vertical_offset_of_a_separation_is_hinted_at():
    """An offset up of about the geoid separation: the hint of geodesy (altitude taken for a height)."""
    up = {"reference.up_m": Estimate(20.3, (20.1, 20.5)), "reference.east_m": Estimate(0.0, (-1, 1))}
    up["reference.north_m"] = Estimate(0.0, (-1, 1))
    answer = position.OffsetFromReference.check(facts(up, site=Site(reference=(50.0, 4.0, 100.0))))

    assert isinstance(answer, Found)
    assert "geoid separation" in answer.summary


def test_most_serious_comes_first():
    """Findings are sorted by severity."""
    found = diagnose(facts({"fix.losses": 3.0, "fix.longest_outage_s": 30.0, "satellites.systems": 1.0}))

    assert [finding.severity for finding in found] == ["serious", "info"]
