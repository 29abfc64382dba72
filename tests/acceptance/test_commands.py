"""gnssmon criteria and gnssmon compare, run as a user would."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from gnssmon.acceptance.criteria import load_criteria, preset_names, preset_text
from gnssmon.report import result as results
from tests.journeys.program import gnssmon
from tests.report.hand_made import empty_pictures, snapshot


@pytest.fixture
def before(tmp_path: Path) -> Path:
    path = tmp_path / "before.json"
    path.write_text(results.dumps(results.result(snapshot())))
    return path


def _after(tmp_path: Path, loss_db: float) -> Path:
    facts = results.result(snapshot())
    for signal in facts["levels"]["signals"].values():
        signal["mean_dbhz"] = [None if level is None else level - loss_db for level in signal["mean_dbhz"]]
    path = tmp_path / f"after_{loss_db}.json"
    path.write_text(results.dumps(facts))
    return path


def test_criteria_lists_the_presets():
    """Without a name each preset stands on a line with what it is for."""
    done = gnssmon("criteria")

    assert done.returncode == 0
    assert [line.split()[0] for line in done.stdout.decode().splitlines()] == list(preset_names())


def test_printed_preset_is_a_criteria_file(tmp_path):
    """What is printed can be kept, edited and used: the same criteria come back."""
    done = gnssmon("criteria", "rtk-rover")
    (tmp_path / "mine.toml").write_bytes(done.stdout)

    assert done.stdout.decode() == preset_text("rtk-rover")
    assert load_criteria(str(tmp_path / "mine.toml")).criteria == load_criteria("rtk-rover").criteria


def test_unknown_preset_is_wrong_usage():
    """Exit code 2, the nearest preset on stderr, nothing on stdout."""
    done = gnssmon("criteria", "rtk-rovr")

    assert (done.returncode, done.stdout) == (2, b"")
    assert b"'rtk-rover'" in done.stderr


@pytest.mark.parametrize(
    ("loss_db", "code", "word"), [(0.0, 0, "NO DIFFERENCE"), (3.0, 1, "WORSE"), (-3.0, 0, "BETTER")]
)
def test_compare_exits_by_the_outcome(tmp_path, before, loss_db, code, word):
    """0: better or nothing shown; 1: worse."""
    done = gnssmon("compare", str(before), str(_after(tmp_path, loss_db)))

    assert done.returncode == code, done.stderr
    assert done.stdout.decode().startswith(word)


def test_compare_writes_json_and_nothing_else(tmp_path, before):
    """``--json -`` puts one object on standard output."""
    done = gnssmon("compare", str(before), str(_after(tmp_path, 3.0)), "--json", "-")

    facts = json.loads(done.stdout)
    assert (facts["schema"], facts["outcome"]) == ("gnssmon.comparison/1", "worse")


def test_compare_without_anything_to_compare(tmp_path):
    """Exit code 3 when no row can be told."""
    path = tmp_path / "empty.json"
    path.write_text(results.dumps(results.result(snapshot(estimates={}, pictures=empty_pictures()))))

    assert gnssmon("compare", str(path), str(path)).returncode == 3


@pytest.mark.parametrize(
    ("content", "code", "words"),
    [
        ('{"schema": 1}', 2, b"no result of gnssmon check --json"),
        ('{"broken"', 2, b"cannot be read as JSON"),
        (None, 4, b"missing.nmea"),
    ],
)
def test_compare_tells_what_it_cannot_read(tmp_path, before, content, code, words):
    """Another JSON file is wrong usage; a log that is not there is a source that failed."""
    path = tmp_path / "missing.nmea"
    if content is not None:
        path.write_text(content)

    done = gnssmon("compare", str(before), str(path))

    assert done.returncode == code
    assert words in done.stderr
    assert done.stderr.count(b"\n") == 1
