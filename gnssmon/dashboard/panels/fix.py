"""The fix: where we are, how good the receiver says it is, and how good it was over the window."""

from __future__ import annotations

from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels.panel import (
    QUALITIES,
    Panel,
    angle,
    metres,
    nothing,
    number,
    percent,
    quality_tone,
    quality_words,
    value,
)
from gnssmon.snapshot import Snapshot

LABEL = 12
"""Cells for the names at the left."""

SHARES = (
    "none",
    "autonomous",
    "differential",
    "precise",
    "rtk_fixed",
    "rtk_float",
    "estimated",
    "manual",
    "simulated",
)
"""Last part of the quantity's name ``fix.share_…`` by GGA quality."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the latest position sentence, then the window's spread and shares."""
    now = snapshot.receiver
    if now.quality is None and now.latitude_deg is None and not snapshot.stream.by_type:
        return nothing(size, "no sentences yet: nothing is known of the fix")
    grid = Grid(size)
    rows: list[tuple[str, str, str]] = [("Fix", quality_words(now.quality), quality_tone(now.quality))]
    in_view = len(now.satellites)
    used = "–" if now.satellites_used is None else str(now.satellites_used)
    rows.append(("Satellites", f"{used} used" + (f", {in_view} in view" if in_view else ""), ""))
    if now.latitude_deg is None or now.longitude_deg is None:
        rows.append(("Position", "none in the latest sentence", "doubt"))
    else:
        rows.append(("Latitude", angle(now.latitude_deg, "NS").rjust(14), "strong"))
        rows.append(("Longitude", angle(now.longitude_deg, "EW").rjust(14), "strong"))
    rows.append(("Height", *_height(snapshot)))
    rows.append(("DOP", f"P {number(now.pdop, 2)}  H {number(now.hdop, 2)}  V {number(now.vdop, 2)}", ""))
    rows.append(("Corrections", *_corrections(snapshot)))
    r95, cep50 = value(snapshot, "scatter.r95_m"), value(snapshot, "scatter.cep50_m")
    if r95 is not None:
        rows.append(("Spread", f"R95 {metres(r95)}  CEP50 {metres(cep50)}", "strong"))
        vertical = value(snapshot, "scatter.vertical_95_m")
        rows.append(("Vertical", f"95 % within ±{metres(vertical)}" if vertical is not None else "–", ""))
    if snapshot.site.reference is not None:
        off = value(snapshot, "reference.horizontal_m")
        up = value(snapshot, "reference.up_m")
        rows.append(("Off mark", f"{metres(off)} flat, {metres(up)} up", "strong"))
    rows += [("Quality" if i == 0 else "", text, tone) for i, (text, tone) in enumerate(_shares(snapshot))]
    losses = value(snapshot, "fix.losses")
    if losses:
        rows.append(
            ("Fix lost", f"{losses:.0f} times, longest {number(value(snapshot, 'fix.longest_outage_s'))} s", "")
        )
    if now.speed_mps is not None:
        rows.append(("Speed", f"{now.speed_mps:.2f} m/s" + _course(now.course_deg), ""))
    if now.heading_deg is not None:
        rows.append(("Heading", f"{now.heading_deg:.1f}° true", ""))
    for y, (label, text, tone) in enumerate(rows):
        grid.put(0, y, label, "quiet", LABEL - 1)
        grid.put(LABEL, y, text, tone, size.width - LABEL)
    return grid


def _height(snapshot: Snapshot) -> tuple[str, str]:
    altitude, separation = snapshot.receiver.altitude_m, snapshot.receiver.separation_m
    if altitude is None:
        return "–", ""
    if separation is None:
        return f"{altitude:.3f} m above geoid", ""
    return f"{altitude + separation:.2f} m  geoid {separation:+.2f} m", "strong"


def _corrections(snapshot: Snapshot) -> tuple[str, str]:
    age, station = snapshot.receiver.correction_age_s, snapshot.receiver.station
    if age is None:
        return "none", ""
    behind = "" if station is None else f" from station {station}"
    return f"{age:.1f} s old{behind}", ""


def _shares(snapshot: Snapshot) -> list[tuple[str, str]]:
    """Each quality seen in the window with its share, most frequent first."""
    shares = [(value(snapshot, f"fix.share_{name}") or 0.0, quality) for quality, name in enumerate(SHARES)]
    seen = sorted((pair for pair in shares if pair[0] > 0.0), reverse=True)
    return [(f"{percent(share)} {QUALITIES[quality]}", "") for share, quality in seen]


def _course(course_deg: float | None) -> str:
    return "" if course_deg is None else f" towards {course_deg:.0f}°"


PANEL = Panel(
    key="fix",
    title="Fix",
    help="""\
What the receiver said last: the kind of fix (GGA quality, or the mode letters of GNS and RMC), the satellites it \
used, the position, the height above the ellipsoid (altitude plus geoid separation) and its dilution of precision.

Below it, over the chosen window: R95 and CEP50, the radii about the mean that hold 95 % and 50 % of the positions; \
and the share of each kind of fix.

Usual (common practice, no source): PDOP below 2 with several systems and an open sky; R95 of 1 to 3 m autonomous, \
below 1 m differential, 1 to 3 cm with RTK fixed.

If it is not: look at the sky view for blocked directions and at the signals view for low levels.""",
    render=render,
)
