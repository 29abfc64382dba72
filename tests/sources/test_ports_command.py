"""gnssmon ports, as a user runs it."""

from __future__ import annotations

import json

import pytest
from click.testing import CliRunner

from gnssmon.commands import ports as ports_command
from gnssmon.errors import SourceError
from gnssmon.sources.finding import Found, Port
from gnssmon.sources.hearing import Hearing

PORTS = [Port("/dev/ttyA", "A \x1b[31mred\x1b[0m adapter"), Port("/dev/ttyB"), Port("/dev/ttyC")]
FOUND = [
    Found(Hearing("nmea", 500, 8, "7E1"), 4800, 2.5),
    Found(Hearing("silent", what="nothing"), None, 6.0),
    SourceError("cannot open '/dev/ttyC': another program is using it; close that one first"),
]


@pytest.fixture
def three_ports(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(ports_command, "serial_ports", lambda: PORTS)
    monkeypatch.setattr(ports_command, "find_ports", lambda clock, *, ports: list(zip(ports, FOUND, strict=True)))


def test_one_line_a_port(three_ports: None) -> None:
    """Each port with what was heard on it; a device's own description cannot reach the terminal as control codes."""
    told = CliRunner().invoke(ports_command.command, [], standalone_mode=False)

    assert told.output.splitlines() == [
        "/dev/ttyA  A \\x1b[31mred\\x1b[0m adapter: speaks NMEA at 4800 baud, 7E1",
        "/dev/ttyB: is silent (heard nothing for 6 s): is the receiver powered, is its output on?",
        "/dev/ttyC: cannot open '/dev/ttyC': another program is using it; close that one first",
    ]


def test_json(three_ports: None) -> None:
    """The same as one JSON list, and nothing else on standard output."""
    rows = json.loads(CliRunner().invoke(ports_command.command, ["--json"], standalone_mode=False).stdout)

    assert [row["port"] for row in rows] == ["/dev/ttyA", "/dev/ttyB", "/dev/ttyC"]
    assert [row["baud"] for row in rows] == [4800, None, None]
    assert [row["framing"] for row in rows] == ["7E1", None, None]
    assert [row["content"] for row in rows] == ["nmea", "silent", None]


def test_list_without_listening(three_ports: None, monkeypatch: pytest.MonkeyPatch) -> None:
    """``--list`` opens no port."""
    monkeypatch.setattr(ports_command, "find_ports", None)

    told = CliRunner().invoke(ports_command.command, ["--list"], standalone_mode=False)

    assert told.output.splitlines()[1:] == ["/dev/ttyB", "/dev/ttyC"]


def test_no_ports(monkeypatch: pytest.MonkeyPatch) -> None:
    """A computer without ports is told so, with exit code 0: nothing failed."""
    monkeypatch.setattr(ports_command, "serial_ports", list)

    told = CliRunner().invoke(ports_command.command, [], standalone_mode=False)

    assert told.return_value == 0
    assert "no serial port" in told.stderr
