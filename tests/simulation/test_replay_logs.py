"""The practice logs are what their README says: small, complete, and the simulator's own bytes."""

from __future__ import annotations

import gzip
import json
import re
from pathlib import Path

import pytest

from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario
from gnssmon.utc import parse_duration_s

FOLDER = Path(__file__).parents[2] / "replay_logs"
ROWS = re.findall(r"^\| `(\w+)\.nmea\.gz` \| (\w+) \|", (FOLDER / "README.md").read_text(), flags=re.MULTILINE)


def test_readme_lists_every_log():
    """A row for each log, a truth beside each; none above a megabyte, four together."""
    logs = sorted(path.name.removesuffix(".nmea.gz") for path in FOLDER.glob("*.nmea.gz"))

    assert len(logs) >= 5
    assert sorted(name for name, _ in ROWS) == logs
    assert sorted(path.name.removesuffix(".truth.json") for path in FOLDER.glob("*.json")) == logs
    sizes = [path.stat().st_size for path in FOLDER.iterdir()]
    assert max(sizes) < 1_000_000
    assert sum(sizes) < 4_000_000


@pytest.mark.parametrize(("name", "length"), ROWS)
def test_each_can_be_made_again(name, length):
    """The scenario of its name, seed 1, gives the log to the byte; the truth beside it speaks of that run.

    When a change of the simulator is meant, make the logs again by the command in their README.
    """
    kept = gzip.decompress((FOLDER / f"{name}.nmea.gz").read_bytes())
    truth = json.loads((FOLDER / f"{name}.truth.json").read_text())

    made = b"".join(data for _, data in generate(load_scenario(name), duration_s=parse_duration_s(length), seed=1))

    assert made == kept
    assert (truth["scenario"], truth["seed"], truth["line"]["sent_bytes"]) == (name, 1, len(kept))
