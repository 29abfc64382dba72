"""The error ellipse of plane vectors, and the circles that normal errors of that ellipse would fill."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

AZIMUTHS = 256
"""Azimuths of the sum that stands for an integral; the integrand is smooth for every axis ratio, zero included."""


def ellipse(covariance: Floats) -> tuple[float, float, float]:
    """Semi-axes a ≥ b and azimuth of a (deg, 0 to 180, from north clockwise) of the 1-sigma ellipse of an east-north
    covariance, shape (2, 2).

    a² and b² are its eigenvalues; tan 2α = 2 σEN / (σN² - σE²).
    """
    east, north, mixed = float(covariance[0, 0]), float(covariance[1, 1]), float(covariance[0, 1])
    middle = (east + north) / 2.0
    reach = math.hypot((east - north) / 2.0, mixed)
    azimuth_deg = math.degrees(0.5 * math.atan2(2.0 * mixed, north - east)) % 180.0
    return math.sqrt(middle + reach), math.sqrt(max(middle - reach, 0.0)), azimuth_deg


def gaussian_radius(share: float, major: float, minor: float) -> float:
    """Radius that holds ``share`` of normal errors with these standard deviations along the axes.

    A normal error is a Rayleigh length along a random azimuth of the unit circle, stretched to the ellipse:
    P(R > r) = (1/2π) ∫ exp(-r² / 2(a² cos²φ + b² sin²φ)) dφ. The integral is a sum over even azimuths, inverted by
    bisection.
    """
    if major <= 0.0:
        return 0.0
    ratio = minor / major
    azimuth = (np.arange(AZIMUTHS) + 0.5) * (2.0 * math.pi / AZIMUTHS)
    square = np.cos(azimuth) ** 2 + ratio**2 * np.sin(azimuth) ** 2
    low, high = 0.0, 8.0
    for _ in range(50):
        radius = (low + high) / 2.0
        inside = 1.0 - float(np.mean(np.exp(-(radius**2) / (2.0 * square))))
        low, high = (radius, high) if inside < share else (low, radius)
    return major * (low + high) / 2.0
