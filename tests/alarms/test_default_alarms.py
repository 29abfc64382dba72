"""The default alarms on streams of any rate: silence is called, a slow receiver is not accused of it."""

from __future__ import annotations

import numpy as np
import pytest

from gnssmon.alarms.rules import default_alarms
from gnssmon.alarms.watching import Watch
from gnssmon.statistics.subject import Site
from tests.statistics.batches import make_batch


def _watch(step_s: float, count: int, silent_s: int) -> set[tuple[str, str]]:
    """Quantity and severity of what was raised by a steady stream that then falls silent."""
    watch = Watch(default_alarms(), Site())
    axis_ms = np.arange(count) * round(step_s * 1000)
    raised = watch.update(make_batch(axis_ms), utc_offset_ms=None)
    for second in range(silent_s):
        raised += watch.silence(int(axis_ms[-1]) + 1000 * second, utc_offset_ms=None)
    return {(event.quantity, event.severity) for event in raised}


@pytest.mark.parametrize("step_s", [0.02, 0.1, 0.2, 1.0, 2.0, 5.0, 12.0, 30.0])
def test_steady_stream_raises_nothing(step_s):
    """From 50 Hz to one epoch in half a minute: nothing is missing, so nothing is called."""
    assert _watch(step_s, 400, 0) == set()


@pytest.mark.parametrize("step_s", [0.1, 1.0, 2.0])
def test_silence_is_called(step_s):
    """A stream of 2 s or faster that stops is called within 10 s: caution after 3 s, warning after 7 s."""
    assert {("stream.completeness", "warning"), ("stream.completeness", "serious")} <= _watch(step_s, 200, 10)
