"""gnssmon ports: serial ports, what speaks on them, at which rate."""

from __future__ import annotations

import json
import sys

import click

from gnssmon.clocks import SystemClock
from gnssmon.errors import SourceError
from gnssmon.printable import printable
from gnssmon.sources.finding import SEARCH_S, Found, Port, find_ports, serial_ports, told


@click.command(epilog="Example: gnssmon ports && gnssmon watch /dev/ttyUSB0@115200")
@click.option("--list", "only_list", is_flag=True, help="List the ports without listening to them.")
@click.option("--json", "as_json", is_flag=True, help="One JSON list on standard output.")
def command(only_list: bool, as_json: bool) -> int:
    """List this computer's serial ports and listen what each sends, at the rates from 4800 to 921600 baud.

    Takes at most 15 s for all of them together. Nothing is ever written to a port.
    """
    ports = serial_ports()
    rows: list[tuple[Port, Found | SourceError | None]] = [(port, None) for port in ports]
    if ports and not only_list:
        if not as_json and sys.stderr.isatty():
            click.echo(f"listening to {len(ports)} ports, at most {SEARCH_S + 0.5:.0f} s …", err=True)
        rows = [*find_ports(SystemClock(), ports=ports)]
    if as_json:
        click.echo(json.dumps([_row(port.device, port.description, found) for port, found in rows], indent=1))
    elif not rows:
        click.echo("this computer has no serial port; is the receiver plugged in?", err=True)
    for port, found in [] if as_json else rows:
        name = f"{port.device}  {port.description}" if port.description else port.device
        click.echo(printable(name if found is None else f"{name}: {told(found)}"))
    return 0


def _row(device: str, description: str, found: Found | SourceError | None) -> dict[str, object]:
    heard = found if isinstance(found, Found) else None
    return {
        "port": device,
        "description": description,
        "content": None if heard is None else heard.hearing.content,
        "baud": None if heard is None else heard.baud,
        "framing": heard.hearing.framing if heard is not None and heard.baud is not None else None,
        "seconds": None if heard is None else round(heard.seconds, 2),
        "told": None if found is None else told(found),
    }
