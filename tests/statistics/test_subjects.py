"""What every subject must obey: the merge law; unit, meaning and source of each quantity; silence when empty."""

from __future__ import annotations

import functools
import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk
from gnssmon.epochs.batch import EpochBatch
from gnssmon.pipeline import Pipeline
from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario
from gnssmon.statistics import SUBJECTS
from gnssmon.statistics.catalogue import QUANTITIES, find
from gnssmon.statistics.subject import Site, Span

SITE = Site(reference=(45.07, 7.68, 291.8), mask_deg=10.0, baud=115_200)
UNITS = {"1", "B/s", "count", "dB-Hz", "deg", "m", "mm/h", "ppm", "s", "share"}


@functools.cache
def stream() -> EpochBatch:
    """Eight minutes of a simulated station with a cut in its corrections: every subject has something to count."""
    pipeline = Pipeline()
    data = b"".join(part for _, part in generate(load_scenario("lost_corrections"), duration_s=480.0, seed=11))
    pipeline.feed(Chunk(data))
    whole = Pipeline()
    head = whole.feed(Chunk(data))
    # One batch of nearly everything: the last two epochs stay open until the end, and are not needed here.
    assert len(head) > 470
    return head


def parts(cuts: list[int]) -> list[EpochBatch]:
    """The stream in pieces, some of them empty or of a single epoch."""
    whole = stream()
    edges = [0, *sorted(cut % (len(whole) + 1) for cut in cuts), len(whole)]
    return [whole.part(a, b) for a, b in itertools.pairwise(edges)]


def same(one, other) -> bool:
    """Equal to the rounding of sums."""
    if one is None or other is None:
        return one is other
    if isinstance(one, tuple):
        return len(one) == len(other) and all(same(a, b) for a, b in zip(one, other, strict=True))
    return math.isclose(one, other, rel_tol=1e-6, abs_tol=1e-6)


@pytest.mark.parametrize("name", SUBJECTS)
@settings(max_examples=12, deadline=None)
@given(cuts=st.lists(st.integers(0, 600), max_size=4))
def test_any_cut_gives_the_same_answers(name, cuts):
    """update(a), update(b) and merge of a's and b's statistics answer like one pass over both."""
    once, stepwise, merged = (SUBJECTS[name](SITE) for _ in range(3))
    once.update(stream())
    for part in parts(cuts):
        stepwise.update(part)
        piece = SUBJECTS[name](SITE)
        piece.update(part)
        merged.merge(piece)

    expected = {key: estimate.value for key, estimate in once.summary().items()}
    assert {k for k, v in stepwise.summary().items() if not same(expected[k], v.value)} == set()
    assert {k for k, v in merged.summary().items() if not same(expected[k], v.value)} == set()


@pytest.mark.parametrize("name", SUBJECTS)
def test_a_span_sees_only_its_own_epochs(name):
    """The later half asked of the whole stream's statistics answers like statistics of the later half alone."""
    whole = stream()
    middle_ms = int(whole.axis_ms[0]) // 60_000 * 60_000 + 4 * 60_000
    begin = int(np.searchsorted(whole.axis_ms, middle_ms))
    every, later = SUBJECTS[name](SITE), SUBJECTS[name](SITE)
    every.update(whole)
    later.update(whole.part(begin, len(whole)))

    expected = later.summary()
    found = every.summary(Span(from_ms=middle_ms))

    # The waits count from the start of the stream that was seen, which differs here.
    skipped = {"fix.time_to_first_fix_s", "fix.time_to_fixed_s"}
    assert {k for k in expected if k not in skipped and not same(expected[k].value, found[k].value)} == set()


@pytest.mark.parametrize("name", SUBJECTS)
def test_nothing_in_nothing_out(name):
    """Without a single epoch no quantity has a value, and nothing is raised."""
    subject = SUBJECTS[name](SITE)
    subject.update(stream().part(0, 0))
    subject.picture()

    assert {key for key, estimate in subject.summary().items() if estimate.value is not None} <= {"stream.epochs"}


@pytest.mark.parametrize("name", SUBJECTS)
def test_every_answer_is_a_quantity(name):
    """Each name in a summary is in the catalogue, families by their members; each quantity of a subject is answered."""
    subject = SUBJECTS[name](SITE)
    subject.update(stream())
    answers = subject.summary()

    assert [key for key in answers if find(key) is None] == []
    plain = {quantity.name for quantity in subject.QUANTITIES if not quantity.name.endswith("*")}
    assert plain <= set(answers)


def test_every_quantity_is_explained():
    """Unit, meaning and source are there; the name ends in its unit where it has one."""
    suffixes = {"m": "_m", "ppm": "_ppm", "s": "_s", "deg": "_deg", "dB-Hz": "_dbhz"}
    for quantity in QUANTITIES:
        assert quantity.unit in UNITS, quantity
        assert quantity.meaning.endswith("."), quantity
        assert quantity.source, quantity
        name = quantity.name.removesuffix(".*")
        if quantity.unit in suffixes:
            assert name.endswith(suffixes[quantity.unit]), quantity


CONTRACT = (
    "stream.completeness",
    "stream.epochs",
    "stream.gaps",
    "stream.longest_gap_s",
    "stream.interval_s",
    "stream.checksum_failure_share",
    "stream.duration_s",
    "stream.link_load",
    "fix.share_none",
    "fix.share_autonomous",
    "fix.share_differential",
    "fix.share_rtk_float",
    "fix.share_rtk_fixed",
    "fix.share_estimated",
    "fix.losses",
    "fix.time_to_first_fix_s",
    "fix.longest_outage_s",
    "satellites.used_mean",
    "satellites.used_min",
    "satellites.in_view_mean",
    "satellites.systems",
    "cn0.mean_dbhz",
    "cn0.median_dbhz",
    "cn0.strongest4_mean_dbhz",
    "cn0.mean_dbhz.G1",
    "cn0.mean_dbhz.E5a",
    "dop.pdop_median",
    "dop.hdop_median",
    "dop.hdop_recomputed_median",
    "dop.pdop_max",
    "scatter.east_std_m",
    "scatter.north_std_m",
    "scatter.up_std_m",
    "scatter.cep50_m",
    "scatter.r95_m",
    "scatter.drms_m",
    "scatter.drms2_m",
    "scatter.vertical_68_m",
    "scatter.vertical_95_m",
    "scatter.sep50_m",
    "scatter.effective_samples",
    "scatter.mean_latitude_deg",
    "scatter.mean_longitude_deg",
    "scatter.mean_ellipsoidal_height_m",
    "scatter.ellipse_major_m",
    "scatter.ellipse_minor_m",
    "scatter.ellipse_azimuth_deg",
    "reference.east_m",
    "reference.north_m",
    "reference.up_m",
    "reference.horizontal_m",
    "corrections.age_median_s",
    "corrections.age_max_s",
    "sky.coverage_share",
    "sky.obstructed_share",
    "sky.mask_deg",
)


@pytest.mark.parametrize("name", CONTRACT)
def test_quantities_of_the_contract_exist(name):
    """Every quantity that outside checks may name is known."""
    assert find(name) is not None
