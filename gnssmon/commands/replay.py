"""gnssmon replay: the dashboard over a recorded log, with time control."""

from __future__ import annotations

import math
from typing import Any

import click

from gnssmon import utc
from gnssmon.clocks import SystemClock
from gnssmon.commands.screen import need_terminal, screen_options, show
from gnssmon.commands.site import settings_from, site_options
from gnssmon.replay.index import build_index
from gnssmon.replay.player import Player
from gnssmon.sources import open_source
from gnssmon.sources.source import Source


def _speed(_ctx: click.Context, _param: click.Parameter, text: str) -> float:
    if text.strip().lower() == "max":
        return math.inf
    try:
        speed = float(text.strip().lower().removesuffix("x"))
    except ValueError:
        speed = math.nan
    if not 0.1 <= speed <= 1e6:
        raise click.BadParameter("a number from 0.1 on, or max")
    return speed


@click.command(epilog="Example: gnssmon replay night.nmea.gz --speed 10 --from 05:30")
@click.argument("log")
@click.option("--speed", default="1", show_default=True, callback=_speed, metavar="X|max", help="Times real time.")
@click.option("--from", "from_", metavar="T", help="Begin at this UTC: 2025-05-20T05:30:00Z or 05:30.")
@click.option("--to", metavar="T", help="End at this UTC.")
@site_options
@screen_options
def command(log: str, speed: float, from_: str | None, to: str | None, plain: bool, thin: bool, **site: Any) -> int:
    """Play LOG on the dashboard by its own time: pause, speed, jumps, steps."""
    settings = settings_from(**site)
    first = None if from_ is None else utc.parse_instant(from_)
    last = None if to is None else utc.parse_instant(to)
    clock = SystemClock()

    def opened() -> Source:
        source = open_source(log, clock=clock)
        if first is None and last is None:
            return source
        from gnssmon.replay.between import Between

        return Between(source, from_=first, to=last)

    player = Player(opened, clock, rate=speed)
    try:
        need_terminal()
        return show((player,), settings, clock, index=lambda: build_index(opened()), plain=plain, thin=thin)
    finally:
        player.close()
