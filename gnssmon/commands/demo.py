"""gnssmon demo: the dashboard on a built-in simulated site."""

from __future__ import annotations

import click

from gnssmon.clocks import SystemClock
from gnssmon.commands.screen import need_terminal, screen_options, show
from gnssmon.commands.site import settings_from
from gnssmon.replay.player import Player
from gnssmon.sources import open_source

SCENE = "sim:demo"

SPEED = 10.0
"""Times real time: within a minute there is something to see."""


@click.command(epilog="Example: gnssmon demo --speed 60")
@click.option("--speed", type=click.FloatRange(0.1, 1000.0), default=SPEED, show_default=True, help="Times real time.")
@screen_options
def command(speed: float, plain: bool, thin: bool) -> int:
    """Show the dashboard on a simulated receiver: no hardware, no file, no network."""
    clock = SystemClock()
    settings = settings_from(criteria=None, reference=None, frame=None, epoch=None, antenna_height=None, mask=None)
    player = Player(lambda: open_source(SCENE, clock=clock), clock, rate=speed)
    need_terminal()
    return show((player,), settings, clock, plain=plain, thin=thin)
