"""Fix quality and errors: what is configured comes out, within stated statistical bounds."""

from __future__ import annotations

import math

import numpy as np
import pytest

from gnssmon.simulation.noise import GaussMarkov
from gnssmon.simulation.position import (
    AUTONOMOUS,
    DIFFERENTIAL,
    ERRORS,
    ESTIMATED,
    FIXED,
    FLOAT,
    LOST_FIXED_S,
    LOST_FLOAT_S,
    NONE,
    USUAL_DOP,
    Fixing,
    Wandering,
)
from gnssmon.simulation.scenario import ReceiverTruth


def qualities(receiver: ReceiverTruth, seconds: int, **lacks: tuple[int, int]) -> tuple[list[int], list[float]]:
    """Quality and age per second; ``corrections``, ``satellites``, ``powered``: lacking from one second to another."""

    def there(name: str, t: int) -> bool:
        first, last = lacks.get(name, (0, 0))
        return not first <= t < last

    fixing = Fixing(receiver)
    steps = [
        fixing.step(
            float(t),
            12 if there("satellites", t) else 3,
            powered=there("powered", t),
            blocked=False,
            corrections=there("corrections", t),
        )
        for t in range(seconds)
    ]
    return [quality for quality, _ in steps], [age_s for _, age_s in steps]


def test_gauss_markov_process():
    """Variance one, correlation exp(-t / tau), whatever pieces it is taken in."""
    process = GaussMarkov(400, time_constant_s=50.0, step_s=1.0, rng=np.random.default_rng(3))
    values = np.concatenate([process.take(n) for n in (1, 0, 99, 300)])

    # 400 independent processes: the variance at one instant is known to 4 sqrt(2 / 400).
    assert values[-1].var() == pytest.approx(1.0, abs=0.28)
    assert values.var() == pytest.approx(1.0, abs=0.1)
    lagged = (values[:-50] * values[50:]).mean()
    assert lagged == pytest.approx(math.exp(-1.0), abs=0.08)


def test_standard_deviations_are_the_configured_ones():
    """Over many runs the spread of an instant's error is size times dilution per axis."""
    for quality in (AUTONOMOUS, DIFFERENTIAL, FLOAT, FIXED):
        runs = np.array(
            [
                Wandering(1.0, 1.0, np.random.default_rng(seed)).take(
                    np.array([quality]), np.array([[USUAL_DOP, 2 * USUAL_DOP, 4 * USUAL_DOP]])
                )[0]
                for seed in range(600)
            ]
        )
        # 600 independent values: one standard deviation of a standard deviation is 1 / sqrt(1200) = 2.9 %.
        assert runs.std(axis=0) == pytest.approx(ERRORS[quality].std_m() * np.array([1.0, 2.0, 4.0]), rel=0.12)
        assert runs.mean(axis=0) == pytest.approx(np.zeros(3), abs=0.2 * 4 * ERRORS[quality].std_m())


def test_fixed_without_a_break():
    """A run that begins with a fix and corrections is fixed from the first epoch, its age the latency's."""
    quality, age_s = qualities(ReceiverTruth(mode="rtk", correction_latency_s=0.8), 100)

    assert set(quality) == {FIXED}
    assert set(age_s) == {1.0}


def test_decay_without_corrections_and_recovery():
    """Age grows by a second each second; float from 10 s on, autonomous from 60 s on; then float, then fixed again."""
    receiver = ReceiverTruth(mode="rtk", float_s=30.0)
    quality, age_s = qualities(receiver, 400, corrections=(100, 250))

    assert np.diff(age_s[100:159]).tolist() == [1.0] * 58
    fell = {value: quality.index(value) for value in (FLOAT, AUTONOMOUS)}
    assert age_s[fell[FLOAT]] == LOST_FIXED_S + 1
    assert age_s[fell[AUTONOMOUS] - 1] == LOST_FLOAT_S
    assert set(quality[fell[AUTONOMOUS] : 250]) == {AUTONOMOUS}
    assert set(quality[250:280]) == {FLOAT}
    assert set(quality[280:]) == {FIXED}


def test_differential():
    """Quality 2 with an age between latency and latency plus interval."""
    receiver = ReceiverTruth(mode="differential", correction_latency_s=2.5, correction_interval_s=3.0)
    quality, age_s = qualities(receiver, 60)

    assert set(quality) == {DIFFERENTIAL}
    assert min(age_s) >= 2.5
    assert max(age_s) <= 5.5


def test_three_satellites_are_no_fix():
    """Below four satellites there is no fix; two seconds after they are back there is one."""
    quality, _ = qualities(ReceiverTruth(), 60, satellites=(20, 30))

    assert [t for t, value in enumerate(quality) if value == NONE] == list(range(20, 31))


def test_coasting():
    """Estimated for the time that is set, then nothing."""
    quality, _ = qualities(ReceiverTruth(coasting_s=15.0), 60, satellites=(20, 50))

    assert quality[20:35] == [ESTIMATED] * 15
    assert quality[35:50] == [NONE] * 15


def test_first_fix_and_restart():
    """No fix before its time, at the start and after power was off."""
    quality, _ = qualities(ReceiverTruth(time_to_first_fix_s=25.0), 200, powered=(100, 110))

    assert [t for t, value in enumerate(quality) if value == NONE] == [*range(25), *range(100, 135)]
