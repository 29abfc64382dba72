"""Tables of a log: complete or not there, readable by others, the same epochs as the statistics count."""

from __future__ import annotations

import csv
import functools
import json
import operator
from pathlib import Path

import pynmea2
import pytest

from gnssmon.errors import ConfigurationError, OutputError
from gnssmon.export import Export
from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario
from tests.journeys.program import gnssmon


@pytest.fixture(scope="module")
def log(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Half a minute of a simulated roof."""
    path = tmp_path_factory.mktemp("log") / "roof.nmea"
    path.write_bytes(b"".join(data for _, data in generate(load_scenario("open_roof"), duration_s=30.0, seed=3)))
    return path


def gga(log: Path) -> list[pynmea2.GGA]:
    return [pynmea2.parse(text) for text in log.read_text("ascii").splitlines() if text[3:6] == "GGA"]


def test_epochs_as_csv_hold_what_pynmea2_reads(log, tmp_path):
    """One row an epoch: positions, heights and satellites are those of the GGA sentences."""
    target = tmp_path / "epochs.csv"
    assert gnssmon("export", str(log), "--to", str(target)).returncode == 0
    with target.open(newline="") as file:
        rows = list(csv.DictReader(file))

    witnesses = gga(log)
    assert len(rows) == len(witnesses) == 30
    for row, witness in zip(rows, witnesses, strict=True):
        assert float(row["latitude_deg"]) == witness.latitude
        assert float(row["longitude_deg"]) == witness.longitude
        assert float(row["altitude_m"]) == witness.altitude
        assert int(row["satellites_used"]) == int(witness.num_sats)
    assert rows[0]["utc"] == "2026-03-01T00:00:00.000Z"


def test_signals_as_csv_hold_every_group(log, tmp_path):
    """One row a satellite and signal: as many as the GSV sentences list."""
    target = tmp_path / "signals.csv"
    assert gnssmon("export", str(log), "--to", str(target), "--signals").returncode == 0
    with target.open(newline="") as file:
        rows = list(csv.DictReader(file))

    listed = sum((text.split("*")[0].count(",") - 4) // 4 for text in log.read_text().splitlines() if "GSV" in text[:7])
    assert len(rows) == listed
    assert {row["signal"] for row in rows} == {"G1", "G5", "R1", "R2", "E1", "E5a", "C1", "C2a"}


def test_geojson_is_json_with_points(log, tmp_path):
    """RFC 7946: longitude first, then latitude, then height above the ellipsoid."""
    target = tmp_path / "epochs.geojson"
    assert gnssmon("export", str(log), "--to", str(target)).returncode == 0
    features = json.loads(target.read_text())["features"]

    witness = gga(log)[0]
    longitude, latitude, height = features[0]["geometry"]["coordinates"]
    assert (longitude, latitude) == (witness.longitude, witness.latitude)
    assert height == pytest.approx(witness.altitude + float(witness.geo_sep), abs=1e-9)
    assert len(features) == 30


def test_parquet_reads_back(log, tmp_path):
    """With the extra installed a Parquet file holds the same table; without, one line says how to get it."""
    target = tmp_path / "epochs.parquet"
    done = gnssmon("export", str(log), "--to", str(target))
    try:
        import pyarrow.parquet
    except ImportError:
        assert done.returncode == 2
        assert b"pip install 'gnssmon[parquet]'" in done.stderr
        assert not target.exists()
        return
    assert pyarrow.parquet.read_table(target).num_rows == 30


def test_a_cut_log_gives_what_could_be_read(log, tmp_path):
    """A truncated .gz: the rows so far are there, and the exit code says that the source ended early."""
    import gzip

    packed = gzip.compress(log.read_bytes())
    cut = tmp_path / "cut.nmea.gz"
    cut.write_bytes(packed[: len(packed) // 2])
    target = tmp_path / "cut.csv"

    assert gnssmon("export", str(cut), "--to", str(target)).returncode == 4
    assert target.exists()


def test_wrong_targets_are_answered(tmp_path):
    """An unknown suffix, signals on a map, a folder that is not there: one line each, and nothing left behind."""
    with pytest.raises(ConfigurationError, match="suffix"):
        Export(tmp_path / "x.xls", signals=False)
    with pytest.raises(ConfigurationError, match="map"):
        Export(tmp_path / "x.geojson", signals=True)
    with pytest.raises(OutputError, match="cannot be written"):
        Export(tmp_path / "no" / "x.csv", signals=False)

    assert list(tmp_path.iterdir()) == []


def test_a_failure_leaves_the_old_file(tmp_path):
    """What stood there stays when the new table is not completed."""
    target = tmp_path / "x.csv"
    target.write_text("old")
    with pytest.raises(RuntimeError), Export(target, signals=False):
        raise RuntimeError

    assert [path.name for path in tmp_path.iterdir()] == ["x.csv"]
    assert target.read_text() == "old"


def test_what_was_not_stated_stays_empty(tmp_path):
    """A satellite without a level or a direction, and an epoch without a height, leave empty fields, not zeros."""
    log = tmp_path / "sparse.nmea"
    sentences = ("GPGGA,120000.00,4800.0000,N,01100.0000,E,1,05,1.2,,M,,M,,", "GPGSV,1,1,02,07,45,120,,09,,,38")
    checksums = [functools.reduce(operator.xor, sentence.encode()) for sentence in sentences]
    log.write_text("".join(f"${s}*{c:02X}\r\n" for s, c in zip(sentences, checksums, strict=True)))
    tables = []
    for name, options in (("epochs.csv", ()), ("signals.csv", ("--signals",))):
        assert gnssmon("export", str(log), "--to", str(tmp_path / name), *options).returncode == 0
        with (tmp_path / name).open(newline="") as file:
            tables.append(list(csv.DictReader(file)))

    (epoch,), signals = tables
    assert (epoch["altitude_m"], epoch["ellipsoidal_height_m"], epoch["pdop"], epoch["hdop"]) == ("", "", "", "1.2")
    fields = ("satellite", "signal", "elevation_deg", "azimuth_deg", "cn0_dbhz", "used")
    assert [tuple(row[field] for field in fields) for row in signals] == [
        ("G07", "G", "45.0", "120.0", "", "False"),
        ("G09", "G", "", "", "38.0", "False"),
    ]
    assert epoch["utc"] == signals[0]["utc"] == "T12:00:00.000Z"
