"""gnssmon simulate: a synthetic receiver with known truth."""

from __future__ import annotations

import json
import math
import os
import socket
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

import click

from gnssmon import errors, session, utc
from gnssmon.clocks import SystemClock
from gnssmon.errors import ConfigurationError, OutputError
from gnssmon.printable import printable
from gnssmon.simulation.generator import Generator
from gnssmon.simulation.scenario import load_scenario, scenario_names, scenario_text

Write = Callable[[bytes], None]


class _EnoughError(Exception):
    """The reader of standard output has gone."""


LOOPBACK = "127.0.0.1"
ACCEPT_S = 0.2


@click.command(epilog="Example: gnssmon simulate bad_connector --to practice.nmea --duration 2h --truth truth.json")
@click.argument("scenario", required=False)
@click.option("--list", "list_", is_flag=True, help="Print the scenarios, a line each.")
@click.option("--show", is_flag=True, help="Print the scenario's file, to copy and edit.")
@click.option("--to", metavar="FILE|-", help="Write to a file, or - for standard output (the default).")
@click.option("--listen", type=click.IntRange(1, 65535), metavar="PORT", help="Serve over TCP on this computer only.")
@click.option("--pty", is_flag=True, help="Open a pseudo-terminal and print its name: a serial port to practise with.")
@click.option("--duration", metavar="DURATION", help="Length of the run: 10m, 24h; without: the scenario's own.")
@click.option(
    "--seed", type=click.IntRange(0), default=1, show_default=True, metavar="N", help="Same seed, same bytes."
)
@click.option("--truth", type=click.Path(dir_okay=False, path_type=Path), metavar="FILE.json", help="Write the truth.")
@click.option("--pace", metavar="RATE|max", help="Times real time; 1 for --listen and --pty, max otherwise.")
def command(
    scenario: str | None,
    list_: bool,
    show: bool,
    to: str | None,
    listen: int | None,
    pty: bool,
    duration: str | None,
    seed: int,
    truth: Path | None,
    pace: str | None,
) -> int:
    """Make the NMEA stream of a simulated receiver from SCENARIO (a name or a TOML file), by physics and a seed."""
    if list_:
        for name in scenario_names():
            click.echo(f"{name:20} {load_scenario(name).title}"[:80])
        return 0
    if scenario is None:
        raise click.UsageError("name a scenario, or see them all: gnssmon simulate --list")
    if show:
        click.echo(scenario_text(scenario), nl=False)
        return 0
    if sum((to is not None, listen is not None, pty)) > 1:
        raise click.UsageError("--to, --listen and --pty exclude each other")
    rate = _rate(pace, live=listen is not None or pty)
    duration_s = None if duration is None else utc.parse_duration_s(duration)
    chosen = load_scenario(scenario)
    run = Generator(chosen, duration_s=duration_s, seed=seed)
    if truth is not None:
        _keep(truth, {})  # a path that cannot be written is better known before the run than behind it
    with session.stop_on_signals() as stop, _output(to, listen, pty, chosen.stream.baud, stop.is_set) as write:
        with suppress(_EnoughError):
            _send(run, write, rate, stop.is_set)
        stopped = stop.is_set()
    if truth is not None:
        _keep(truth, run.truth())
    return errors.INTERRUPTED if stopped else 0


def _rate(pace: str | None, *, live: bool) -> float:
    if pace is None:
        return 1.0 if live else math.inf
    if pace == "max":
        return math.inf
    try:
        rate = float(pace)
    except ValueError:
        rate = math.nan
    if not 0.0 < rate < math.inf:
        raise ConfigurationError(f"--pace {printable(pace, 20)}: wanted a number above 0, or max")
    return rate


def _send(run: Generator, write: Write, rate: float, stopped: Callable[[], bool]) -> None:
    clock = SystemClock()
    begun = clock.steady()
    first_s: float | None = None
    for arrival_s, data in run.chunks():
        first_s = arrival_s if first_s is None else first_s
        while math.isfinite(rate) and (left := begun + (arrival_s - first_s) / rate - clock.steady()) > 0.0:
            if stopped():
                return
            clock.sleep(min(left, ACCEPT_S))
        if stopped():
            return
        write(data)


@contextmanager
def _output(to: str | None, listen: int | None, pty: bool, baud: int, stopped: Callable[[], bool]) -> Iterator[Write]:
    if listen is not None:
        with _served(listen, stopped) as write:
            yield write
    elif pty:
        with _pseudo_terminal(baud) as write:
            yield write
    elif to is None or to == "-":
        yield _to_standard_output
    else:
        with _to_file(Path(to)) as write:
            yield write


def _to_standard_output(data: bytes) -> None:
    try:
        sys.stdout.buffer.write(data)
        sys.stdout.buffer.flush()
    except BrokenPipeError:
        # The reader has had enough (``| head``): a proper end. What Python still holds must not fail again at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise _EnoughError from None


@contextmanager
def _to_file(path: Path) -> Iterator[Write]:
    try:
        with path.open("wb") as file:

            def write(data: bytes) -> None:
                file.write(data)

            yield write
    except OSError as error:
        raise OutputError(f"'{printable(str(path), 200)}' cannot be written: {error.strerror}") from error


@contextmanager
def _served(port: int, stopped: Callable[[], bool]) -> Iterator[Write]:
    """Every client that is connected gets what is sent from then on; without one the run waits for the first."""
    try:
        server = socket.create_server((LOOPBACK, port))
    except OSError as error:
        raise OutputError(f"port {port} on {LOOPBACK} cannot be opened: {error.strerror}; try another") from error
    clients: list[socket.socket] = []
    with server:
        server.settimeout(ACCEPT_S)
        click.echo(f"tcp://{LOOPBACK}:{port}", err=True)
        while not clients and not stopped():
            _accept(server, clients)
        server.setblocking(False)

        def write(data: bytes) -> None:
            _accept(server, clients)
            for client in list(clients):
                try:
                    client.sendall(data)
                except OSError:
                    client.close()
                    clients.remove(client)

        try:
            yield write
        finally:
            for client in clients:
                client.close()


def _accept(server: socket.socket, clients: list[socket.socket]) -> None:
    try:
        client, _ = server.accept()
    except (TimeoutError, BlockingIOError):
        return
    client.settimeout(5.0)
    clients.append(client)


@contextmanager
def _pseudo_terminal(baud: int) -> Iterator[Write]:
    """A serial port that another program can open; bytes wait in the kernel, and are lost when nobody reads.

    A pseudo-terminal has no line: its rate is only noted in its settings. The simulated line sets the pace.
    """
    if not hasattr(os, "openpty"):
        raise OutputError("this system has no pseudo-terminals; use --listen PORT")
    import termios
    import tty

    ours, theirs = os.openpty()
    tty.setraw(theirs)
    speed = getattr(termios, f"B{baud}", None)
    if speed is not None:
        settings = termios.tcgetattr(theirs)
        settings[4] = settings[5] = speed
        termios.tcsetattr(theirs, termios.TCSANOW, settings)
    os.set_blocking(ours, False)
    click.echo(os.ttyname(theirs))
    sys.stdout.flush()

    def write(data: bytes) -> None:
        # Nobody reads: a receiver does not wait either.
        with suppress(BlockingIOError):
            os.write(ours, data)

    try:
        yield write
    finally:
        os.close(ours)
        os.close(theirs)


def _keep(path: Path, facts: dict[str, Any]) -> None:
    try:
        path.write_text(json.dumps(facts, indent=2, allow_nan=False) + "\n", encoding="utf-8")
    except OSError as error:
        raise OutputError(f"'{printable(str(path), 200)}' cannot be written: {error.strerror}") from error
