"""What the world is told of alarms: a line in the event log, a command that is run.

The command is started without a shell, so that nothing in a stream or a settings file can become part of a command
line; what it should know stands in its environment. It has a time limit, and so has the number of them at once.
"""

from __future__ import annotations

import json
import os
import shlex
import signal
import subprocess
from collections.abc import Iterable
from pathlib import Path

from gnssmon.alarms.states import AlarmEvent
from gnssmon.clocks import Clock
from gnssmon.errors import ConfigurationError, OutputError
from gnssmon.printable import printable

COMMAND_S = 30.0
"""A command that runs longer hangs: it is killed."""

MOST_RUNNING = 8
"""Commands at once; when alarms come faster than commands end, the later ones are only logged."""


class Notices:
    """Tells each event once. Trouble after the start is kept in ``problem`` and never stops a run."""

    def __init__(self, clock: Clock, *, log: Path | None = None, command: str | None = None) -> None:
        """``log``: JSON lines are added to it. ``command``: run when an alarm is raised and when it is cleared.

        Raises OutputError for a log that cannot be written, ConfigurationError for a command that cannot be one.
        """
        self._clock = clock
        self._running: list[tuple[subprocess.Popen[bytes], float]] = []
        self.problem = ""
        """The latest trouble in one line; empty: none."""
        try:
            self._words = [] if command is None else shlex.split(command, posix=os.name == "posix")
        except ValueError as error:
            raise ConfigurationError(f"the alarm command cannot be read: {printable(str(error))}") from None
        if command is not None and not self._words:
            raise ConfigurationError("the alarm command is empty")
        try:
            # Without a buffer: what a full disk has refused is not tried again behind our back.
            self._log = None if log is None else log.open("ab", buffering=0)
        except OSError as error:
            raise OutputError(f"the event log '{log}' cannot be written: {error.strerror}") from None

    def tell(self, events: Iterable[AlarmEvent]) -> None:
        """Log each event and run the command for it."""
        for event in events:
            self._write(event)
            self._start(event)
        self.tick()

    def tick(self) -> None:
        """Forget commands that have ended, end those that are overdue; call it every second or so."""
        now_s = self._clock.steady()
        running = []
        for process, until_s in self._running:
            if process.poll() is not None:
                if process.returncode != 0:
                    self.problem = f"the alarm command ended with code {process.returncode}"
            elif now_s >= until_s:
                _kill(process)
                self.problem = f"the alarm command was ended after {COMMAND_S:.0f} s"
            else:
                running.append((process, until_s))
        self._running = running

    def close(self) -> None:
        """Close the log; commands that still run may run to their end."""
        if self._log is not None:
            self._log.close()
            self._log = None

    def _write(self, event: AlarmEvent) -> None:
        if self._log is None:
            return
        try:
            self._log.write(line(event).encode())
        except OSError as error:
            self.problem = f"the event log could not be written: {error.strerror}"

    def _start(self, event: AlarmEvent) -> None:
        if not self._words:
            return
        if len(self._running) >= MOST_RUNNING:
            self.problem = f"{MOST_RUNNING} alarm commands run already: one was not started"
            return
        try:
            process = subprocess.Popen(
                self._words,
                env=os.environ | environment(event),
                stdin=subprocess.DEVNULL,
                stdout=subprocess.DEVNULL,
                stderr=subprocess.DEVNULL,
                start_new_session=True,
            )
        except OSError as error:
            self.problem = f"the alarm command could not be started: {error.strerror}"
            return
        self._running.append((process, self._clock.steady() + COMMAND_S))


def line(event: AlarmEvent) -> str:
    """One line of the event log: a JSON object, ASCII."""
    told = {
        "event": _what(event),
        "utc": event.cleared_utc or event.raised_utc,
        "quantity": event.quantity,
        "severity": event.severity,
        "limit": event.limit,
        "worst": event.worst,
        "raised_utc": event.raised_utc,
        "cleared_utc": event.cleared_utc,
        "note": event.note,
    }
    return json.dumps(told, allow_nan=False) + "\n"


def environment(event: AlarmEvent) -> dict[str, str]:
    """What a command finds in its environment."""
    told = {
        "EVENT": _what(event),
        "UTC": event.cleared_utc or event.raised_utc,
        "QUANTITY": event.quantity,
        "SEVERITY": event.severity,
        "LIMIT": f"{event.limit:g}",
        "WORST": f"{event.worst:g}",
        "NOTE": event.note,
    }
    return {f"GNSSMON_{key}": printable(value) for key, value in told.items()}


def _what(event: AlarmEvent) -> str:
    return "raised" if event.cleared_ms is None else "cleared"


def _kill(process: subprocess.Popen[bytes]) -> None:
    """End a command with all that it has started."""
    try:
        if os.name == "posix":
            os.killpg(process.pid, signal.SIGKILL)
        else:
            process.kill()
    except OSError:
        return  # it ended in this moment
    process.wait()
