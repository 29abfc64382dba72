"""Every real log beside the project gives the figures of the independent reference result that lies with it.

The reference was computed with pynmea2, NumPy and pyproj alone (``reference.py`` beside the logs): counts must agree
exactly, latitudes and longitudes to 1e-9 degrees, ENU figures to 1 mm, mean C/N0 to 0.001 dB-Hz.
"""

from __future__ import annotations

import json

import pytest

from tests.journeys.program import REAL_LOGS, check_json

LOGS = sorted(path.name for path in REAL_LOGS.glob("*.nmea"))

QUALITY = {
    "0": "fix.share_none",
    "1": "fix.share_autonomous",
    "2": "fix.share_differential",
    "4": "fix.share_rtk_fixed",
    "5": "fix.share_rtk_float",
    "6": "fix.share_estimated",
}


def test_logs_are_found():
    """Where the folder of real logs is there, it holds logs; where it is not, the run says so."""
    if not REAL_LOGS.exists():
        pytest.skip(f"no real logs in ../{REAL_LOGS.parent.name}/{REAL_LOGS.name}: nothing was compared")
    assert len(LOGS) >= 5


@pytest.mark.parametrize("name", LOGS)
def test_figures_of_the_reference(name):
    """Counts, shares, mean position, scatter and levels are those of the reference result."""
    expected = json.loads((REAL_LOGS / "REFERENCE.json").read_text())[name]
    result = check_json(str(REAL_LOGS / name))
    stream, quantities = result["stream"], result["quantities"]

    assert expected["sentences"] == stream["by_type"]
    assert expected["checksum_failures"] == stream["checksum_failures"]
    assert expected["epochs"] == quantities["stream.epochs"]
    for quality, share in QUALITY.items():
        assert expected["quality"].get(quality, 0) / expected["epochs"] == pytest.approx(quantities[share], abs=1e-12)
    if expected["cn0_mean"] is None:
        assert quantities["cn0.mean_dbhz"] is None
    else:
        assert expected["cn0_mean"] == pytest.approx(quantities["cn0.mean_dbhz"], abs=0.001)
    latitude, longitude, height = expected["mean"]
    assert latitude == pytest.approx(quantities["scatter.mean_latitude_deg"], abs=1e-9)
    assert longitude == pytest.approx(quantities["scatter.mean_longitude_deg"], abs=1e-9)
    assert height == pytest.approx(quantities["scatter.mean_ellipsoidal_height_m"], abs=0.001)
    for axis, std in zip(("east", "north", "up"), expected["std_enu"], strict=True):
        assert std == pytest.approx(quantities[f"scatter.{axis}_std_m"], abs=0.001)
    assert expected["cep50"] == pytest.approx(quantities["scatter.cep50_m"], abs=0.001)
    assert expected["r95"] == pytest.approx(quantities["scatter.r95_m"], abs=0.001)
    assert expected["satellites_mean"] == pytest.approx(quantities["satellites.used_mean"], abs=1e-9)
