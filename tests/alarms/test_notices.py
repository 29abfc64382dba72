"""The event log and the alarm command: one line and one start an event, no shell, a time limit, never in the way."""

from __future__ import annotations

import json
import os
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from gnssmon import notices
from gnssmon.alarms.states import AlarmEvent
from gnssmon.errors import ConfigurationError, OutputError
from gnssmon.notices import COMMAND_S, MOST_RUNNING, Notices

RAISED = AlarmEvent(
    quantity="fix.share_none",
    severity="serious",
    limit=0.99,
    worst=1.0,
    raised_ms=1000,
    cleared_ms=None,
    raised_utc="2025-05-20T05:30:01.000Z",
    cleared_utc=None,
    note="No \u202eposition; $(touch x) `touch x` & \x00",
)
CLEARED = replace(RAISED, cleared_ms=9000, cleared_utc="2025-05-20T05:30:09.000Z")


class _Hands:
    """A clock that stands where the test puts it."""

    steady_s = 0.0

    def now(self) -> float:
        return self.steady_s

    def steady(self) -> float:
        return self.steady_s

    def sleep(self, seconds: float) -> None:
        self.steady_s += seconds


def _ended(told: Notices) -> None:
    for process, _ in told._running:
        process.wait(30)
    told.tick()


def test_log_holds_one_json_line_an_event(tmp_path: Path):
    """Lines are added to what is there, each strict JSON and plain ASCII."""
    log = tmp_path / "events.jsonl"
    log.write_text('{"event": "earlier"}\n')
    told = Notices(_Hands(), log=log)

    told.tell([RAISED])
    told.tell([CLEARED])
    told.close()

    text = log.read_text()
    lines = [json.loads(one) for one in text.splitlines()]
    assert [one["event"] for one in lines] == ["earlier", "raised", "cleared"]
    assert lines[2]["cleared_utc"] == "2025-05-20T05:30:09.000Z"
    assert lines[1]["note"] == RAISED.note
    assert text.isascii()


def test_command_finds_the_event_in_its_environment(tmp_path: Path):
    """No shell stands between: what looks like a command in a note stays text."""
    script = tmp_path / "script with space.py"
    script.write_text(
        "import os, pathlib\n"
        "told = {k: v for k, v in os.environ.items() if k.startswith('GNSSMON_')}\n"
        "pathlib.Path(__file__).with_suffix('.txt').write_text(repr(told))\n"
    )
    told = Notices(_Hands(), command=f"{sys.executable} '{script}'")

    told.tell([RAISED])
    _ended(told)

    assert told.problem == ""
    found = eval(script.with_suffix(".txt").read_text())
    assert found["GNSSMON_EVENT"] == "raised"
    assert found["GNSSMON_QUANTITY"] == "fix.share_none"
    assert found["GNSSMON_NOTE"].startswith("No \\u202eposition; $(touch x)")
    assert not (tmp_path / "x").exists()
    assert found == notices.environment(RAISED)


def test_command_that_hangs_is_ended():
    """After the time limit the command and what it started are gone, and it is said."""
    clock = _Hands()
    told = Notices(clock, command=f"{sys.executable} -c 'import time; time.sleep(1000)'")
    told.tell([RAISED])
    ((process, _),) = told._running

    clock.steady_s = COMMAND_S - 1.0
    told.tick()
    assert process.poll() is None
    clock.steady_s = COMMAND_S
    told.tick()

    assert process.poll() is not None
    assert "ended after 30 s" in told.problem


def test_storm_of_alarms_does_not_start_a_storm_of_commands():
    """Beyond the limit events are only logged."""
    clock = _Hands()
    told = Notices(clock, command=f"{sys.executable} -c 'import time; time.sleep(1000)'")

    told.tell([RAISED] * (MOST_RUNNING + 3))

    assert len(told._running) == MOST_RUNNING
    assert "run already" in told.problem
    clock.steady_s = COMMAND_S
    told.tick()
    assert told._running == []


@pytest.mark.parametrize(
    ("command", "problem"),
    [(f"{sys.executable} -c 'raise SystemExit(3)'", "code 3"), ("/no/such/command", "could not be started")],
)
def test_failing_command_is_said_and_stops_nothing(command, problem):
    """A command that fails, or is not there, is a problem in one line."""
    told = Notices(_Hands(), command=command)

    told.tell([RAISED])
    _ended(told)

    assert problem in told.problem


def test_bad_command_and_bad_log_are_known_before_the_run(tmp_path: Path):
    """An unbalanced quote, an empty command, a folder as log: refused at the start."""
    for command in ("echo 'x", "  "):
        with pytest.raises(ConfigurationError):
            Notices(_Hands(), command=command)
    with pytest.raises(OutputError, match="event log"):
        Notices(_Hands(), log=tmp_path)


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no device here that is always full")
def test_full_disk_stops_nothing():
    """The event log cannot be written: it is said, and the next event is taken all the same."""
    told = Notices(_Hands(), log=Path("/dev/full"))

    told.tell([RAISED])
    told.tell([CLEARED])

    assert "could not be written" in told.problem
    assert os.strerror(28) in told.problem
    told.close()
