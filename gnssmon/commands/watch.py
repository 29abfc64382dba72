"""gnssmon watch: live dashboard of one or more receivers."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import click

from gnssmon.clocks import Clock, SystemClock
from gnssmon.commands.screen import need_terminal, screen_options, show
from gnssmon.commands.site import settings_from, site_options
from gnssmon.errors import GnssmonError
from gnssmon.recording.recorder import Recorder
from gnssmon.replay.player import Player
from gnssmon.sources import hold_source, open_source
from gnssmon.sources.address import parse_address
from gnssmon.sources.source import Source


@click.command(epilog="Example: gnssmon watch /dev/ttyUSB0@115200 --record 2025-05-20_roof")
@click.argument("sources", nargs=-1, metavar="[SOURCE]...")
@click.option("--record", type=click.Path(file_okay=False, path_type=Path), metavar="DIR", help="Keep the bytes.")
@site_options
@screen_options
def command(sources: tuple[str, ...], record: Path | None, plain: bool, thin: bool, **site: Any) -> int:
    """Show what SOURCE (a port, an address, sim:SCENARIO) sends, until you leave with q.

    With several, n shows the next one. Without any, the ports of this computer are listened to, and the one that
    speaks NMEA is shown.
    """
    settings = settings_from(**site)
    clock = SystemClock()
    opened: list[Source] = []
    recorders: list[Recorder] = []
    try:
        opened.extend(_opened(text, clock) for text in sources or (_found(clock),))
        need_terminal()
        if record is not None:
            for i, source in enumerate(opened, 1):
                folder = record if len(opened) == 1 else record / f"source_{i}"
                recorders.append(Recorder(folder, clock, source=source.label))
    except GnssmonError:
        for source in opened:
            source.close()
        for recorder in recorders:
            recorder.close()
        raise
    return show(opened, settings, clock, recorders=recorders, plain=plain, thin=thin)


def _found(clock: Clock) -> str:
    """The port that speaks NMEA; raises SourceError with what was tried."""
    from gnssmon.sources.finding import SEARCH_S, find_ports, pick_port, serial_ports

    ports = serial_ports()
    if ports:
        click.echo(f"listening to {len(ports)} ports, at most {SEARCH_S + 0.5:.0f} s …", err=True)
    return pick_port(clock, find_ports(clock, ports=ports))


def _opened(text: str, clock: Clock) -> Source:
    """A live source is held on to; a simulated one runs in its own time; a log is read as fast as it goes."""
    scheme = parse_address(text).scheme
    if scheme in ("sim", "log", "recording"):
        return Player(lambda: open_source(text, clock=clock), clock, rate=1.0 if scheme == "sim" else math.inf)
    return hold_source(text, clock=clock)
