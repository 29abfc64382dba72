"""Before against after: intervals, directions, what could have been seen, and no ghosts."""

from __future__ import annotations

import copy
import math
from typing import Any

import jsonschema
import numpy as np
import pytest

from gnssmon.acceptance.comparison import Difference, compare
from gnssmon.estimators.uncertainty import normal
from gnssmon.report import comparison as comparisons
from gnssmon.report import result as results
from tests.acceptance.made_levels import Sky
from tests.report.hand_made import HOSTILE, empty_pictures, snapshot


@pytest.fixture
def before() -> dict[str, Any]:
    return results.result(snapshot())


def _rows(before: dict[str, Any], after: dict[str, Any]) -> dict[str, Difference]:
    return {row.name: row for row in compare(before, after).differences}


def _weaker(result: dict[str, Any], db: float) -> dict[str, Any]:
    changed = copy.deepcopy(result)
    for signal in changed["levels"]["signals"].values():
        signal["mean_dbhz"] = [None if level is None else level - db for level in signal["mean_dbhz"]]
    return changed


def test_same_against_itself_shows_no_difference(before):
    """Nothing is better or worse than itself, and the reader is told that it is the same input."""
    compared = compare(before, before)

    assert compared.outcome == "no difference shown"
    assert all(row.difference in (0.0, None) for row in compared.differences)
    assert "Both are the same input." in compared.notes


def test_loss_of_level_is_found_with_its_size(before):
    """A loss of 3 dB at every elevation is 3 dB worse, the interval holds it, and each signal says so too."""
    compared = compare(before, _weaker(before, 3.0))
    rows = {row.name: row for row in compared.differences}

    assert compared.outcome == "worse"
    assert rows["level"].difference == pytest.approx(-3.0)
    assert rows["level"].outcome == "worse"
    assert {name for name in rows if name.startswith("level.")} == {
        "level.G1",
        "level.G5",
        "level.E1",
        "level.E5a",
        "level.C2a",
    }
    assert all(rows[name].outcome == "worse" for name in rows if name.startswith("level."))
    assert compare(_weaker(before, 3.0), before).outcome == "better"


def test_same_levels_lower_in_the_sky_are_no_loss(before):
    """Levels are matched by elevation: a log with its satellites at lower elevations is not weaker for that."""
    after = copy.deepcopy(before)
    for signal in after["levels"]["signals"].values():
        signal["count"] = [count if k < 8 else count // 60 for k, count in enumerate(signal["count"])]

    assert _rows(before, after)["level"].difference == pytest.approx(0.0)


def test_unchanged_site_is_seldom_accused():
    """40 pairs of one-hour logs of an unchanged site under other satellites: at 5 % nominal, at most 6 alarms
    (binomial: more than 6 of 40 has a chance of 0.3 % at 5 %); a loss of 1.5 dB is found in most."""
    generator = np.random.default_rng(11)
    alarms = found = 0
    for _ in range(40):
        sky, start_h = Sky(generator), generator.uniform(0.0, 12.0)
        first = results.result(snapshot()) | sky.log(start_h, 1.0)
        for offset_db in (0.0, -1.5):
            second = results.result(snapshot()) | sky.log(start_h + 4.0, 1.0, offset_db=offset_db)
            row = _rows(first, second)["level"]
            if offset_db:
                found += row.outcome == "worse"
            else:
                alarms += row.outcome != "no difference shown"

    assert alarms <= 6
    assert found >= 30


def test_difference_of_two_quantities_has_the_published_interval(before):
    """Zou & Donner (2008), eq. 1 to 2: L = d - sqrt((after - l2)^2 + (u1 - before)^2), and U likewise."""
    after = copy.deepcopy(before)
    after["quantities"]["scatter.r95_m"], after["intervals"]["scatter.r95_m"] = 2.5, [2.1, 3.1]

    row = _rows(before, after)["scatter.r95_m"]

    assert row.difference == pytest.approx(2.5 - 1.31)
    assert row.interval == pytest.approx(
        (1.19 - math.hypot(2.5 - 2.1, 1.62 - 1.31), 1.19 + math.hypot(3.1 - 2.5, 1.31 - 1.12))
    )
    assert row.outcome == "worse"


def test_smallest_difference_follows_power(before):
    """Half width times (z95 + z80)/z95: found in four of five (z 1.960 and 0.8416, any table of the normal)."""
    row = _rows(before, before)["scatter.r95_m"]

    assert row.interval is not None
    assert row.smallest == pytest.approx(row.interval[1] * (1.959964 + 0.841621) / 1.959964, rel=1e-5)
    assert normal(0.6) == pytest.approx(0.841621, abs=1e-6)


def test_raised_horizon_is_worse_and_says_where(before):
    """A new wall from 200 to 250 degrees: the mean horizon is higher, and the sectors are named."""
    after = copy.deepcopy(before)
    for key in ("deg", "low_deg", "high_deg"):
        after["horizon"][key][22:27] = [value + 25.0 for value in after["horizon"][key][22:27]]

    row = _rows(before, after)["horizon"]

    assert row.outcome == "worse"
    assert row.difference == pytest.approx(5 * 25.0 / 34)
    assert "higher at azimuth 220-230, 230-240, 240-250, 250-260, 260-270" in row.note
    assert "34 sectors" in row.note


def test_completeness_counts_gaps_as_events(before):
    """Four gaps in six hours against 400: worse; against five: nothing shown."""
    many, few = copy.deepcopy(before), copy.deepcopy(before)
    many["quantities"] |= {"stream.completeness": 0.98, "stream.gaps": 400, "stream.epochs": 21_168}
    few["quantities"] |= {"stream.completeness": 0.99977, "stream.gaps": 5, "stream.epochs": 21_595}

    assert _rows(before, many)["stream.completeness"].outcome == "worse"
    assert _rows(before, few)["stream.completeness"].outcome == "no difference shown"


def test_one_better_one_worse_is_mixed(before):
    """Stronger signals and more scatter at once are neither better nor worse."""
    after = _weaker(before, -3.0)
    after["quantities"]["scatter.r95_m"], after["intervals"]["scatter.r95_m"] = 9.0, [8.0, 11.0]

    assert compare(before, after).outcome == "mixed"


def test_looking_at_many_rows_needs_more_than_one_of_them(before):
    """A single row that is just outside its own 95 % does not decide over all rows (Bonferroni)."""
    after = copy.deepcopy(before)
    after["quantities"]["scatter.r95_m"], after["intervals"]["scatter.r95_m"] = 1.80, [1.43, 2.4]

    compared = compare(before, after)

    assert {row.name: row for row in compared.differences}["scatter.r95_m"].outcome == "worse"
    assert compared.outcome == "no difference shown"


def test_what_is_missing_cannot_be_compared():
    """An empty log against an empty log: every row says why, nothing is raised, and the outcome is unknown."""
    empty = results.result(snapshot(estimates={}, pictures=empty_pictures()))

    compared = compare(empty, empty)

    assert compared.outcome == "cannot be compared"
    assert all(row.outcome == "cannot be compared" and row.note for row in compared.differences)


@pytest.mark.parametrize("changed", ["same", "weaker", "empty", "hostile"])
def test_json_obeys_its_schema_and_text_its_width(before, changed):
    """Checked by jsonschema; 80 columns; no control character whatever the labels hold."""
    after = {
        "same": before,
        "weaker": _weaker(before, 2.0),
        "empty": results.result(snapshot(estimates={}, pictures=empty_pictures())),
        "hostile": before | {"source": before["source"] | {"label": HOSTILE}},
    }[changed]
    compared = compare(before, after)
    facts = comparisons.facts(compared, before, after)

    jsonschema.Draft202012Validator.check_schema(comparisons.schema())
    jsonschema.Draft202012Validator(comparisons.schema()).validate(facts)
    results.dumps(facts)
    shown = comparisons.lines(compared, before, after)
    assert max(map(len, shown)) <= 80
    assert all(line.isprintable() for line in shown)
    assert shown[0] == compared.outcome.upper()
