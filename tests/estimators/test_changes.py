"""Jumps: found when there, not found when not."""

from __future__ import annotations

import numpy as np
import pytest

from gnssmon.estimators import changes
from tests.estimators.noise import autonomous_like, rtk_like


def _walk(noise, seed: int, seconds: int) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    return np.arange(seconds) * 1000, noise(rng, 2, seconds, 1.0).T.copy()


@pytest.mark.parametrize("noise", [rtk_like, autonomous_like])
def test_noise_alone_does_not_jump(noise):
    """No alarm in six two-hour records of each kind of noise."""
    for seed in range(6):
        found = changes.find_jumps(*_walk(noise, seed, 7200))
        assert found is not None
        assert len(found.axis_ms) == 0


@pytest.mark.parametrize(("noise", "step_m"), [(rtk_like, 0.03), (autonomous_like, 1.0)])
def test_a_step_is_found_with_its_time_and_size(noise, step_m):
    """A step of the position shows once, within a window's length of its time and with its size."""
    for seed in range(4):
        axis_ms, enu_m = _walk(noise, seed, 3600)
        enu_m[2003:, 0] += step_m
        found = changes.find_jumps(axis_ms, enu_m)
        assert found is not None

        assert len(found.axis_ms) == 1
        assert found.axis_ms[0] == pytest.approx(2_003_000, abs=changes.WINDOW_MS)
        assert found.size[0, 0] == pytest.approx(step_m, abs=0.4 * step_m)


def test_an_excursion_is_no_jump():
    """A position that goes and comes back within a window or two has not jumped."""
    axis_ms, enu_m = _walk(rtk_like, 1, 3600)
    enu_m[1000:1010] += 5.0
    found = changes.find_jumps(axis_ms, enu_m)
    assert found is not None

    assert len(found.axis_ms) == 0


def test_coarse_digits_do_not_jump():
    """A position that flickers between two neighbouring digits has not jumped."""
    axis_ms, enu_m = _walk(rtk_like, 1, 3600)
    found = changes.find_jumps(axis_ms, np.round(enu_m / 0.02) * 0.02)
    assert found is not None

    assert len(found.axis_ms) == 0


def test_window_medians_are_numpys():
    """Medians per window with gaps and uneven counts are NumPy's; a clock that stands still is bounded."""
    rng = np.random.default_rng(1)
    axis_ms = np.sort(rng.integers(0, 500_000, 300))
    values = rng.normal(size=(300, 2))
    window, medians = changes.window_medians(axis_ms, values)

    expected = [np.median(values[axis_ms // changes.WINDOW_MS == key], axis=0) for key in window]
    assert medians == pytest.approx(np.array(expected))
    _, still = changes.window_medians(np.zeros(10_000, dtype=np.int64), np.ones((10_000, 1)))
    assert still.tolist() == [[1.0]]


def test_too_short_to_say():
    """Two minutes do not tell what is usual."""
    assert changes.find_jumps(np.arange(100) * 1000, np.zeros((100, 2))) is None
    assert changes.find_jumps(np.empty(0, dtype=np.int64), np.empty((0, 2))) is None
