"""Dilution of precision against closed forms and published check values."""

from __future__ import annotations

import math

import numpy as np
import pytest

from gnssmon.geodesy.dop import dilution


def _dilution(azimuth_deg, elevation_deg, clock=None):
    azimuth = np.array([azimuth_deg], dtype=float)
    elevation = np.array([elevation_deg], dtype=float)
    clocks = np.zeros(azimuth.shape[1], dtype=np.intp) if clock is None else np.array(clock, dtype=np.intp)
    return dilution(azimuth, elevation, np.ones(azimuth.shape, dtype=bool), clocks)


@pytest.mark.parametrize("count", [3, 4, 6])
@pytest.mark.parametrize("elevation_deg", [0.0, 5.0, 15.0, 30.0, 45.0])
def test_zenith_and_ring(count, elevation_deg):
    """A satellite overhead and a ring of n at elevation e: HDOP 2/(√n cos e), VDOP √(1 + 1/n)/(1 - sin e),
    TDOP √(sin² e + 1/n)/(1 - sin e). Derived by hand from the normal equations."""
    s, c = math.sin(math.radians(elevation_deg)), math.cos(math.radians(elevation_deg))
    ring = [360.0 * i / count for i in range(count)]
    found = _dilution([0.0, *ring], [90.0, *[elevation_deg] * count])

    assert found.hdop[0] == pytest.approx(2 / (math.sqrt(count) * c), abs=1e-9)
    assert found.vdop[0] == pytest.approx(math.sqrt(1 + 1 / count) / (1 - s), abs=1e-9)
    assert found.tdop[0] == pytest.approx(math.sqrt(s * s + 1 / count) / (1 - s), abs=1e-9)
    assert found.pdop[0] == pytest.approx(math.hypot(found.hdop[0], found.vdop[0]), abs=1e-9)


def test_regular_tetrahedron():
    """Four satellites at the corners of a regular tetrahedron: PDOP 1.5, TDOP 0.5, the least for four."""
    found = _dilution([0.0, 0.0, 120.0, 240.0], [90.0, *[-math.degrees(math.asin(1 / 3))] * 3])

    assert found.pdop[0] == pytest.approx(1.5, abs=1e-9)
    assert found.tdop[0] == pytest.approx(0.5, abs=1e-9)


def test_two_rings():
    """Rings of four at 15 and at 60 degrees: HDOP 2/√(n₁c₁² + n₂c₂²) = 0.919402, VDOP 1.164525, TDOP 0.744289."""
    ring = [0.0, 90.0, 180.0, 270.0]
    found = _dilution(ring * 2, [15.0] * 4 + [60.0] * 4)

    assert found.hdop[0] == pytest.approx(0.919402, abs=1e-6)
    assert found.vdop[0] == pytest.approx(1.164525, abs=1e-6)
    assert found.tdop[0] == pytest.approx(0.744289, abs=1e-6)


def test_fixed_set():
    """Six directions worked out with an independent matrix inversion (numpy.linalg.pinv of the design matrix)."""
    azimuth, elevation = [0, 45, 135, 225, 315, 90], [90, 60, 40, 20, 30, 10]
    a, e = np.radians(azimuth), np.radians(elevation)
    design = np.column_stack([np.cos(e) * np.sin(a), np.cos(e) * np.cos(a), np.sin(e), np.ones(6)])
    inverse = np.linalg.pinv(design)
    variance = (inverse**2).sum(axis=1)
    found = _dilution(azimuth, elevation)

    assert found.edop[0] == pytest.approx(math.sqrt(variance[0]), abs=1e-9)
    assert found.ndop[0] == pytest.approx(math.sqrt(variance[1]), abs=1e-9)
    assert found.hdop[0] == pytest.approx(1.153848, abs=1e-6)
    assert found.vdop[0] == pytest.approx(1.469809, abs=1e-6)


def test_north_blocked():
    """With satellites in the south only the north component degrades: NDOP 1.455041 against EDOP 0.683163."""
    found = _dilution([100, 140, 180, 220, 260, 190], [20, 45, 70, 30, 15, 10])

    assert found.edop[0] == pytest.approx(0.683163, abs=1e-6)
    assert found.ndop[0] == pytest.approx(1.455041, abs=1e-6)


def test_one_ring_is_singular():
    """Satellites at one elevation cannot tell height from clock: no number is given."""
    found = _dilution([0, 60, 120, 180, 240, 300], [30.0] * 6)

    assert np.isnan(found.hdop[0])
    assert np.isnan(found.pdop[0])


def test_single_satellite_of_another_system_adds_nothing():
    """A lone satellite with a clock of its own leaves PDOP at 8/3; a second one of its system helps."""
    azimuth, elevation = [0.0, 0.0, 120.0, 240.0], [90.0, 30.0, 30.0, 30.0]
    alone = _dilution(azimuth, elevation)
    foreign = _dilution([*azimuth, 200.0], [*elevation, 50.0], [0, 0, 0, 0, 1])
    two = _dilution([*azimuth, 200.0, 20.0], [*elevation, 50.0, 15.0], [0, 0, 0, 0, 1, 1])

    assert alone.pdop[0] == pytest.approx(8 / 3, abs=1e-9)
    assert foreign.pdop[0] == pytest.approx(8 / 3, abs=1e-9)
    assert two.pdop[0] < foreign.pdop[0]


def test_unused_satellites_do_not_count():
    """What is not used has no influence, whatever its direction, known or not."""
    azimuth = np.array([[0.0, 0.0, 120.0, 240.0, 77.0, np.nan]])
    elevation = np.array([[90.0, 30.0, 30.0, 30.0, 12.0, np.nan]])
    used = np.array([[True, True, True, True, False, False]])

    found = dilution(azimuth, elevation, used, np.zeros(6, dtype=np.intp))

    assert found.pdop[0] == pytest.approx(8 / 3, abs=1e-9)
