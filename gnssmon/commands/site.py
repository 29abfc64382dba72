"""The options that say what a run is judged by, alike for every command that judges."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

from gnssmon.acceptance.criteria import SiteSettings, load_criteria
from gnssmon.errors import ConfigurationError
from gnssmon.monitor import Settings
from gnssmon.printable import printable
from gnssmon.statistics.subject import Site

LONGEST_REFERENCE_FILE = 10_000
"""Bytes: three numbers and some comment."""

WGS84 = "EPSG:4979"


def site_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add ``--criteria``, ``--reference``, ``--frame``, ``--epoch``, ``--antenna-height``, ``--mask`` to a command."""
    options = (
        click.option("--criteria", metavar="FILE|PRESET", help="Criteria as TOML, or a preset; without: a small set."),
        click.option("--reference", metavar='"LAT LON HEIGHT"|FILE', help="Surveyed coordinates of the mark."),
        click.option("--frame", metavar="EPSG:CODE", help="Frame of the reference; without: EPSG:4979 (WGS 84)."),
        click.option("--epoch", type=float, metavar="YEAR", help="Coordinate epoch of the reference: 2020.0."),
        click.option("--antenna-height", type=float, metavar="M", help="Mark to antenna reference point, vertical."),
        click.option("--mask", type=float, metavar="DEG", help="Elevation above which the sky is judged."),
    )
    for option in reversed(options):
        command = option(command)
    return command


def settings_from(
    *,
    criteria: str | None,
    reference: str | None,
    frame: str | None,
    epoch: float | None,
    antenna_height: float | None,
    mask: float | None,
    baud: int | None = None,
) -> Settings:
    """What a run is judged by: the criteria file's site, with the command line put over it.

    Raises ConfigurationError.
    """
    said = SiteSettings(
        reference=_reference_text(reference), frame=frame, epoch=epoch, antenna_height_m=antenna_height, mask_deg=mask
    )
    chosen = load_criteria(criteria).at(said)
    site = chosen.site
    mask_deg = Site().mask_deg if site.mask_deg is None else site.mask_deg
    if site.reference is None:
        for name, value in (("--frame", frame), ("--epoch", epoch), ("--antenna-height", antenna_height)):
            if value is not None:
                raise ConfigurationError(f'{name} means nothing without --reference "LAT LON HEIGHT"')
        return Settings(site=Site(mask_deg=mask_deg, baud=baud), criteria=chosen)
    from gnssmon.geodesy.reference import resolve

    resolved = resolve(
        site.reference,
        frame=site.frame or WGS84,
        antenna_height_m=site.antenna_height_m or 0.0,
        epoch=site.epoch,
    )
    return Settings(
        site=Site(
            reference=resolved.position,
            reference_text=resolved.text,
            reference_note=resolved.note,
            mask_deg=mask_deg,
            baud=baud,
        ),
        criteria=chosen,
    )


def _reference_text(given: str | None) -> str | None:
    """Three numbers as they stand, or the content of a file that holds them."""
    if given is None:
        return None
    try:
        path = Path(given)
        if not path.is_file():
            return given
        with path.open("rb") as file:
            content = file.read(LONGEST_REFERENCE_FILE + 1)
    except OSError as error:
        raise ConfigurationError(
            f"reference file '{printable(given, 200)}' cannot be read: {error.strerror}"
        ) from error
    except ValueError:  # a NUL in a path
        return given
    if len(content) > LONGEST_REFERENCE_FILE:
        raise ConfigurationError(
            f"reference file '{printable(given, 200)}' is too long: three numbers are wanted, LAT LON HEIGHT"
        )
    return content.decode("utf-8", errors="replace")
