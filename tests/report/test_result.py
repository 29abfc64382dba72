"""The JSON result: the contract's keys, its own schema, strict JSON whatever the snapshot holds."""

from __future__ import annotations

import json
import math
from dataclasses import replace

import jsonschema
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.diagnosis.finding import Finding
from gnssmon.quantities import Estimate
from gnssmon.report import result as results
from gnssmon.report.result import Json
from gnssmon.snapshot import SourceFacts
from gnssmon.statistics import catalogue
from tests.report.hand_made import HOSTILE, empty_pictures, snapshot

CONTRACT = {
    "schema": None,
    "verdict": None,
    "criteria": {"quantity", "unit", "value", "interval", "confidence", "limit", "comparison", "result", "note"},
    "findings": {"code", "severity", "summary", "evidence", "advice"},
    "quantities": None,
    "stream": {
        "bytes",
        "sentences",
        "checksum_failures",
        "malformed",
        "non_nmea_bytes",
        "by_type",
        "talkers",
        "first_utc",
        "last_utc",
    },
    "source": None,
    "alarms": {"quantity", "raised_utc", "cleared_utc", "worst", "limit"},
}
"""Keys that outside checks rely on: the table in the interface contract."""


def _validate(facts: Json) -> None:
    jsonschema.Draft202012Validator(results.schema()).validate(facts)


def _strict(text: str) -> Json:
    def refuse(word: str) -> float:
        raise AssertionError(f"{word} is not JSON")

    loaded: Json = json.loads(text, parse_constant=refuse)
    return loaded


def test_schema_is_itself_valid():
    """The shipped file is a JSON Schema of the version that it names (checked by jsonschema)."""
    jsonschema.Draft202012Validator.check_schema(results.schema())


def test_holds_every_key_of_the_contract():
    """Outside checks find what the contract names, under the names of the contract."""
    facts = results.result(snapshot())

    for key, inner in CONTRACT.items():
        assert key in facts
        if inner is not None:
            one = facts[key][0] if isinstance(facts[key], list) else facts[key]
            assert inner <= set(one), key
    _validate(facts)


@pytest.mark.parametrize(
    "given_snapshot",
    [
        snapshot(),
        snapshot("rtk-rover"),
        snapshot(estimates={}, pictures=empty_pictures(), findings=(), alarms=(), utc_offset_ms=None),
        snapshot(source=SourceFacts(label=HOSTILE, kind="live")),
        snapshot(
            findings=(
                Finding(code="a-b", severity="info", summary=HOSTILE, evidence={"x": math.nan, "y": None, HOSTILE: 1}),
            )
        ),
    ],
    ids=["full", "mixed", "empty", "hostile source", "hostile finding"],
)
def test_every_snapshot_gives_strict_json_under_the_schema(given_snapshot):
    """Full, empty and hostile snapshots alike; the text survives a strict reader and is plain ASCII."""
    text = results.dumps(results.result(given_snapshot))

    _validate(_strict(text))
    assert text.isascii()
    assert not any(ord(character) < 0x20 and character != "\n" for character in text)


def test_every_quantity_is_there_and_null_where_unknown():
    """The flat object names the whole catalogue; what could not be computed is null, and so is what is not finite."""
    quantities = results.result(snapshot())["quantities"]

    assert {quantity.name for quantity in catalogue.QUANTITIES if not quantity.name.endswith("*")} <= set(quantities)
    assert quantities["stream.epochs"] == 21_596
    assert quantities["reference.north_m"] is None
    assert quantities["timing.nonsense"] is None
    assert quantities["sky.mask_deg"] == [10.0] * 31 + [None] * 5
    assert quantities["cn0.mean_dbhz.G1"] == 43.2


@given(
    value=st.one_of(st.none(), st.floats(), st.integers(-5, 5)),
    low=st.floats(),
    high=st.floats(),
)
@settings(max_examples=60, deadline=None)
def test_no_number_breaks_the_format(value, low, high):
    """Whatever floats an estimate holds, the result is strict JSON under the schema."""
    given_snapshot = replace(
        snapshot(pictures=empty_pictures()), estimates={"scatter.r95_m": Estimate(value, (low, high))}
    )

    _validate(_strict(results.dumps(results.result(given_snapshot))))


def test_interval_margin_and_forecast_of_a_criterion():
    """Margin is how far the value lies inside the limit: 3.0 - 1.31 = 1.69."""
    by_name = {criterion["quantity"]: criterion for criterion in results.result(snapshot())["criteria"]}

    assert by_name["scatter.r95_m"]["interval"] == [1.12, 1.62]
    assert by_name["scatter.r95_m"]["margin"] == pytest.approx(1.69)
    assert by_name["scatter.r95_m"]["result"] == "met"


def test_same_snapshot_same_text():
    """Nothing of the clock or the machine goes in."""
    assert results.dumps(results.result(snapshot())) == results.dumps(results.result(snapshot()))
