"""Clocks: the replay's arithmetic on a clock that is moved by hand."""

from __future__ import annotations

import math

import pytest

from gnssmon.clocks import ManualClock, ReplayClock, SystemClock


def test_manual_clock_moves_only_by_sleeping() -> None:
    """Both hands move by what was slept, the wall clock also by being set."""
    clock = ManualClock(100.0)

    clock.sleep(2.5)
    clock.sleep(-1.0)
    clock.set(7.0)
    clock.sleep(1.0)

    assert (clock.now(), clock.steady()) == (8.0, 3.5)


def test_planned_actions_run_in_order_at_their_time() -> None:
    """An action sees its own time, whatever the length of the sleep that crosses it."""
    clock = ManualClock()
    seen: list[float] = []
    clock.at(2.0, lambda: seen.append(clock.steady()))
    clock.at(1.0, lambda: seen.append(clock.steady()))

    clock.sleep(0.5)
    clock.sleep(10.0)

    assert seen == [1.0, 2.0]
    assert clock.steady() == 10.5


def test_replay_runs_at_its_rate_and_jumps() -> None:
    """Log time = jump + rate * time passed since; a new rate counts from where time was."""
    clock = ManualClock()
    replay = ReplayClock(clock, 10.0)
    assert math.isnan(replay.time_s())

    replay.jump(1000.0)
    clock.sleep(3.0)
    assert replay.time_s() == 1030.0
    replay.rate = 0.5
    clock.sleep(4.0)

    assert replay.time_s() == 1032.0
    assert replay.wait_s(1033.0) == 2.0
    assert replay.wait_s(1032.0) == 0.0


def test_standing_and_endless_rates() -> None:
    """At rate 0 nothing is ever due that lies ahead; at an infinite rate everything is."""
    clock = ManualClock()
    replay = ReplayClock(clock, 0.0)
    replay.jump(5.0)
    clock.sleep(100.0)

    assert (replay.time_s(), replay.wait_s(5.1), replay.wait_s(5.0)) == (5.0, math.inf, 0.0)
    replay.rate = math.inf
    assert (replay.time_s(), replay.wait_s(1e9)) == (5.0, 0.0)
    with pytest.raises(ValueError, match="cannot run"):
        replay.rate = -1.0
    with pytest.raises(ValueError, match="cannot run"):
        replay.rate = math.nan


def test_system_clock_agrees_with_itself() -> None:
    """The steady hand never goes back, and sleeping for nothing or less returns at once."""
    clock = SystemClock()
    first = clock.steady()

    clock.sleep(-5.0)
    clock.sleep(0.0)

    assert 0.0 <= clock.steady() - first < 1.0
    assert clock.now() > 1.7e9
