"""Tracking and use of satellites: thresholds, re-acquisition, cold start."""

from __future__ import annotations

import numpy as np
import pytest

from gnssmon.simulation.scenario import ReceiverTruth
from gnssmon.simulation.tracking import EPHEMERIS_S, MARGIN_DB, SEARCH_SHARE, Tracking

SECONDS = 200


def track(
    level: np.ndarray, *, elevation_deg: float = 40.0, powered: np.ndarray | None = None, **settings: float
) -> tuple[np.ndarray, np.ndarray]:
    """Tracked (t,) and used (t,) of one satellite with one signal."""
    receiver = ReceiverTruth(signals=("G1",), **settings)  # type: ignore[arg-type]
    tracking = Tracking(receiver, np.array([0]), np.array([True]), np.random.default_rng(1))
    time_s = np.arange(float(len(level)))
    on = np.ones(len(level), dtype=bool) if powered is None else powered
    tracked, used = tracking.take(time_s, level[:, None, None], np.full((len(level), 1), elevation_deg), on)
    return tracked[:, 0, 0], used[:, 0]


def test_lost_below_the_threshold_and_found_again_above_a_margin():
    """Lost at once; a level between threshold and margin keeps a signal but does not find it again."""
    level = np.full(SECONDS, 40.0)
    level[50:100] = 23.9
    level[100:150] = 24.0 + MARGIN_DB / 2

    tracked, used = track(level)

    assert tracked[:50].all()
    assert not tracked[50:152].any()
    assert tracked[152:].all()  # two seconds above the margin
    assert used[:50].all()
    assert not used[50:152].any()
    # A short loss does not cost the orbit that was read before.
    assert used[152:].all()


def test_weak_but_tracked_is_not_used():
    """Between the thresholds of tracking and use a satellite is listed with a level and left out of the fix."""
    tracked, used = track(np.full(SECONDS, 26.0))

    assert tracked.all()
    assert not used.any()


def test_mask():
    """Below the mask a satellite is tracked, not used."""
    tracked, used = track(np.full(SECONDS, 40.0), elevation_deg=4.9)

    assert tracked.all()
    assert not used.any()


def test_a_new_satellite_is_used_after_its_message_was_read():
    """30 s after it was found: GPS repeats its orbit every 30 s (IS-GPS-200)."""
    level = np.full(SECONDS, np.nan)
    level[20:] = 40.0
    tracked, used = track(level)

    assert np.flatnonzero(tracked)[0] == 22
    assert np.flatnonzero(used)[0] == 22 + EPHEMERIS_S


def test_cold_start_takes_its_time():
    """Found within the given part of the time to first fix, used later; so again after a power cut."""
    powered = np.ones(600, dtype=bool)
    powered[300:310] = False
    tracked, used = track(np.full(600, 40.0), powered=powered, time_to_first_fix_s=80.0)

    first, again = np.flatnonzero(tracked)[0], 310 + np.flatnonzero(tracked[310:])[0]
    assert SEARCH_SHARE[0] * 80 <= first <= SEARCH_SHARE[1] * 80 + 1
    assert SEARCH_SHARE[0] * 80 <= again - 310 <= SEARCH_SHARE[1] * 80 + 1
    assert not tracked[300:310].any()
    assert np.flatnonzero(used)[0] == first + EPHEMERIS_S


@pytest.mark.parametrize("cut", [1, 7, 100])
def test_cuts_change_nothing(cut):
    """Asked in pieces, the receiver does the same."""
    rng = np.random.default_rng(5)
    level = 25.0 + np.cumsum(rng.normal(0.0, 1.0, SECONDS))[:, None, None]
    receiver = ReceiverTruth(signals=("G1",), time_to_first_fix_s=30.0)

    def run(sizes: list[int]) -> np.ndarray:
        tracking = Tracking(receiver, np.array([0]), np.array([True]), np.random.default_rng(1))
        out, at = [], 0
        for size in sizes:
            part = slice(at, at + size)
            time_s = np.arange(float(at), at + size)
            out.append(tracking.take(time_s, level[part], np.full((size, 1), 30.0), np.ones(size, dtype=bool))[0])
            at += size
        return np.concatenate(out)

    assert run([cut, SECONDS - cut]).tolist() == run([SECONDS]).tolist()
