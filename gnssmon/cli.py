"""The program: its verbs, and the only place that turns errors into words on stderr and an exit code."""

from __future__ import annotations

import importlib
import os
import sys
import traceback

import click

from gnssmon import __version__
from gnssmon.errors import ACCEPTED, INTERRUPTED, OWN_FAULT, SOURCE_FAILED, WRONG_USAGE, GnssmonError
from gnssmon.printable import printable

VERBS = {
    "demo": "the dashboard on a built-in simulated site",
    "watch": "live dashboard of one or more receivers",
    "replay": "the dashboard over a recorded log, with time control",
    "check": "headless acceptance run: criteria, verdict, report, exit code",
    "compare": "before against after: two logs or two JSON results",
    "record": "headless recording of the received bytes",
    "ports": "serial ports, what speaks on them, at which rate",
    "simulate": "a synthetic receiver with known truth",
    "export": "per-epoch or per-signal tables: CSV, Parquet, GeoJSON",
    "quantities": "every quantity: unit, meaning, source",
    "criteria": "print a preset of acceptance criteria as TOML, to copy and edit",
}
"""One file in ``gnssmon/commands`` a verb, which holds ``command``; loaded only when it is called."""


class Verbs(click.Group):
    """Loads a verb's module when it is asked for: ``check`` must not wait for the dashboard's imports."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(VERBS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in VERBS:
            return None
        module = importlib.import_module(f"gnssmon.commands.{cmd_name}")
        command: click.Command = module.command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(VERBS.items()))


@click.command(cls=Verbs, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="gnssmon")
def program() -> None:
    """Tell from a receiver's NMEA 0183 stream whether a GNSS antenna is well installed, and keep the evidence.

    Not a navigation or safety-of-life device.

    Example: gnssmon check replay_logs/open_roof.nmea.gz
    """


def main(arguments: list[str] | None = None) -> None:
    """Run the program and leave with the contract's exit code."""
    sys.exit(_run(sys.argv[1:] if arguments is None else arguments))


def _run(arguments: list[str]) -> int:
    # Not ``program.main``: it leaves with 1 when the reader of our output has gone, and 1 is a rejection.
    try:
        with program.make_context("gnssmon", list(arguments)) as context:
            code = program.invoke(context)
        sys.stdout.flush()
    except click.exceptions.Exit as leaving:
        return leaving.exit_code
    except (click.exceptions.Abort, KeyboardInterrupt):
        return INTERRUPTED
    except click.ClickException as error:
        error.show()
        return WRONG_USAGE
    except GnssmonError as error:
        click.echo(f"gnssmon: {printable(str(error))}", err=True)
        return error.exit_code
    except BrokenPipeError:
        # The reader of our standard output went away (``| head``): what is left unsaid goes nowhere.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return SOURCE_FAILED
    except Exception:
        traceback.print_exc()
        click.echo("gnssmon: this is a fault of gnssmon itself; nothing was judged", err=True)
        return OWN_FAULT
    return code if isinstance(code, int) else ACCEPTED
