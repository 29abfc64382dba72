"""Error ellipse and Gaussian radii against published factors."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from gnssmon.estimators.ellipse import ellipse, gaussian_radius


def test_worked_example():
    """σE² = 4, σN² = 1, σEN = 1: a 2.074313, b 0.835000, azimuth 73.154966° (eigenvalues, worked by hand)."""
    assert ellipse(np.array([[4.0, 1.0], [1.0, 1.0]])) == pytest.approx((2.074313, 0.835000, 73.154966), abs=1e-6)


@given(st.floats(0.1, 10.0), st.floats(0.1, 10.0), st.floats(0.0, 180.0, exclude_max=True))
@settings(max_examples=60)
def test_axes_come_back(one, other, azimuth_deg):
    """A covariance made from axes and azimuth gives them back."""
    major, minor = max(one, other), min(one, other)
    toward = np.radians(azimuth_deg)
    axis, across = np.array([np.sin(toward), np.cos(toward)]), np.array([np.cos(toward), -np.sin(toward)])
    found = ellipse(major**2 * np.outer(axis, axis) + minor**2 * np.outer(across, across))

    assert found[:2] == pytest.approx((major, minor), rel=1e-6)
    if major > 1.001 * minor:
        assert abs((found[2] - azimuth_deg + 90.0) % 180.0 - 90.0) < 1e-3


@pytest.mark.parametrize("share", [0.50, 0.68, 0.95, 0.99])
def test_circular_factor(share):
    """A circle's radii are Rayleigh quantiles: √χ² with two degrees of freedom (1.1774, 1.5096, 2.4477, 3.0349)."""
    assert gaussian_radius(share, 2.0, 2.0) == pytest.approx(2.0 * np.sqrt(stats.chi2.ppf(share, 2)), rel=1e-9)


@pytest.mark.parametrize(
    ("ratio", "cep", "r95"),
    [(0.9, 1.1181, 2.3318), (0.7, 0.9962, 2.1460), (0.5, 0.8704, 2.0359), (0.3, 0.7499, 1.9842), (0.1, 0.6820, 1.9625)],
)
def test_elliptical_factors(ratio, cep, r95):
    """CEP and R95 in units of the larger sigma, by numerical integration apart from this program."""
    assert gaussian_radius(0.50, 1.0, ratio) == pytest.approx(cep, abs=1e-4)
    assert gaussian_radius(0.95, 1.0, ratio) == pytest.approx(r95, abs=1e-4)


def test_line_and_point():
    """A line's radii are those of one normal distribution (0.6745, 1.9600 sigma); a point has none."""
    assert gaussian_radius(0.50, 3.0, 0.0) == pytest.approx(3.0 * 0.67449, rel=1e-4)
    assert gaussian_radius(0.95, 3.0, 0.0) == pytest.approx(3.0 * 1.95996, rel=1e-4)
    assert gaussian_radius(0.95, 0.0, 0.0) == 0.0
