"""gnssmon criteria: the presets, to read, copy and edit."""

from __future__ import annotations

import click

from gnssmon.acceptance.criteria import load_criteria, preset_names, preset_text


@click.command(epilog="Example: gnssmon criteria rtk-rover > mine.toml")
@click.argument("preset", required=False)
def command(preset: str | None) -> None:
    """Print PRESET as TOML; without a name, list the presets.

    An edited copy is used with: gnssmon check SOURCE --criteria mine.toml
    """
    if preset is not None:
        click.echo(preset_text(preset), nl=False)
        return
    for name in preset_names():
        click.echo(f"{name:18}{load_criteria(name).title}")
