"""A surveyed mark, in the frame it was surveyed in → where the receiver should say it is.

Strategy. A receiver without corrections reports WGS 84, which follows the ITRF to a few centimetres; so a mark in
another frame is taken to ITRF2014 at a stated epoch. PROJ is asked for that, never for "WGS 84" itself: the code of
WGS 84 stands for all its realisations at once, and PROJ then answers with no shift at all and an accuracy of metres.
What PROJ would do by guessing (a ballpark step, a missing grid, a missing epoch) is refused or said.
"""

from __future__ import annotations

import math
import re
import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from gnssmon.errors import ConfigurationError
from gnssmon.geodesy import local_frame
from gnssmon.geodesy.local_frame import Geographic

if TYPE_CHECKING:
    from pyproj import CRS, Transformer

WGS84_3D = "EPSG:4979"
ITRF2014_3D = "EPSG:7912"

GOOD_ACCURACY_M = 0.05
"""A shift known better than this is not worth a remark."""
MOVING_M = 0.005
"""A shift that changes by more than this in twenty years needs an epoch."""
OUTSIDE_DEG = 3.0
"""A mark this far outside the area that a frame is meant for was probably written in another order."""
TALLEST_ANTENNA_M = 1000.0
EQUATOR_M = 6_378_137.0
"""Semi-major axis of WGS 84 and of GRS 80."""


@dataclass(frozen=True, slots=True)
class Reference:
    """Where the receiver should say it is, and how sure that is."""

    position: Geographic
    """Latitude, longitude (deg, WGS 84 as ITRF2014), ellipsoidal height (m) with the antenna height added."""
    text: str
    """The mark as given, with frame, epoch and antenna height."""
    note: str
    """What is doubtful; empty: nothing known to be."""


def resolve(
    text: str, *, frame: str = WGS84_3D, antenna_height_m: float = 0.0, epoch: float | None = None
) -> Reference:
    """Turn a mark into the position that the receiver should report.

    ``text``: three numbers, ``LATITUDE LONGITUDE HEIGHT`` in degrees and metres for a geographic frame,
    ``EASTING NORTHING HEIGHT`` in metres for a projected one (in this order whatever the frame's own is), ``X Y Z``
    for a geocentric one; a file's content may have comment lines that begin with ``#``.
    ``frame``: anything that PROJ can look up, such as ``EPSG:7931``. Heights are ellipsoidal, unless the frame itself
    names another height.
    ``antenna_height_m``: mark to antenna reference point, vertical; see ``vertical_height_m`` for a slant one.
    ``epoch``: decimal year for which the coordinates hold; for a frame fixed to a plate the year of the observations.

    Raises ConfigurationError where the text, the frame or the way from it to WGS 84 is not good enough for a number.
    """
    numbers = _three_numbers(text)
    if not math.isfinite(antenna_height_m) or abs(antenna_height_m) > TALLEST_ANTENNA_M:
        raise ConfigurationError(f"antenna height {antenna_height_m} m cannot be meant: give metres, such as 1.50")
    if epoch is not None and not 1980.0 <= epoch <= 2100.0:
        raise ConfigurationError(f"epoch {epoch} is no year: give a decimal year, such as 2025.4")
    crs = _frame(frame)
    mark, notes = _to_wgs84(numbers, crs, frame, epoch)
    words = f"{' '.join(text.split())} in {frame}"
    if epoch is not None:
        words += f" at {epoch:g}"
    if antenna_height_m:
        words += f", antenna {antenna_height_m:g} m above"
    latitude_deg, longitude_deg, height_m = mark
    return Reference((latitude_deg, longitude_deg, height_m + antenna_height_m), words, " ".join(notes))


def vertical_height_m(slant_m: float, radius_m: float, offset_m: float = 0.0) -> float:
    """Vertical antenna height from a slant one, measured from the mark to the antenna's rim.

    ``radius_m``: rim's distance from the antenna's axis. ``offset_m``: rim above the antenna reference point
    (positive up). Pythagoras: sqrt(slant² - radius²) - offset. Raises ConfigurationError if the slant is shorter than
    the radius.
    """
    if not 0.0 <= radius_m < slant_m:
        raise ConfigurationError(f"a slant height of {slant_m} m cannot reach a rim of radius {radius_m} m")
    return math.sqrt(slant_m**2 - radius_m**2) - offset_m


def _three_numbers(text: str) -> tuple[float, float, float]:
    lines = [line.split("#", 1)[0] for line in text.splitlines()]
    words = [word for word in re.split(r"[\s,;]+", " ".join(lines)) if word]
    try:
        first, second, third = (float(word) for word in words)
    except ValueError:
        shown = " ".join(words)[:80]
        raise ConfigurationError(
            f"reference '{shown}' is not three numbers: write LATITUDE LONGITUDE HEIGHT, as in '-33.41 148.25 312.4'"
        ) from None
    if not all(map(math.isfinite, (first, second, third))):
        raise ConfigurationError(f"reference '{' '.join(words)[:80]}' holds a number that is not finite")
    return first, second, third


def _frame(name: str) -> CRS:
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    try:
        crs = CRS.from_user_input(name)
    except CRSError:
        raise ConfigurationError(f"frame '{name[:80]}' is not known: give an EPSG code, such as EPSG:4979") from None
    if crs.is_vertical and not crs.is_compound:
        raise ConfigurationError(f"frame '{name[:80]}' ({crs.name}) is a height alone: name one with a position")
    if not (crs.is_geographic or crs.is_projected or crs.is_geocentric or crs.is_compound):
        raise ConfigurationError(f"frame '{name[:80]}' ({crs.name}) is no frame on the Earth")
    return crs


def _to_wgs84(
    numbers: tuple[float, float, float], crs: CRS, frame: str, epoch: float | None
) -> tuple[Geographic, list[str]]:
    surveyed, base = _unmapped(numbers, crs, frame)
    route, target = _route(base, frame)
    if route is None:
        position = surveyed[1], surveyed[0], surveyed[2]
        notes: list[str] = []
    else:
        position = _apply(route, surveyed, 2020.0)
        if _distance_m(_apply(route, surveyed, 2000.0), position) > MOVING_M:
            if epoch is None:
                raise ConfigurationError(
                    f"{base.name} moves against WGS 84 by centimetres a year: "
                    "give the epoch, the decimal year of the observations"
                )
            position = _apply(route, surveyed, epoch)
        notes = _shift_notes(surveyed, base, route, target, position, epoch)
    latitude_deg, longitude_deg, height_m = position
    if not -180.0 <= longitude_deg <= 180.0:
        longitude_deg -= math.copysign(360.0, longitude_deg)
    _expect_inside(crs, latitude_deg, longitude_deg, frame)
    if base.datum is not None and "Dynamic" in base.datum.type_name:
        when = f"were taken as at {epoch:g}" if epoch is not None else "came without an epoch"
        notes.append(
            f"Coordinates in {base.name} change by up to 0.1 m a year with the ground; these {when} "
            "and hold for observations near that time."
        )
    return (latitude_deg, longitude_deg, height_m), notes


def _unmapped(numbers: tuple[float, float, float], crs: CRS, frame: str) -> tuple[Geographic, CRS]:
    """The numbers as PROJ wants them (longitude, latitude, height, or X, Y, Z) and the frame that they are then in."""
    from pyproj import Transformer

    first, second, third = numbers
    base = crs
    if crs.is_projected and not crs.is_compound and crs.geodetic_crs is not None:
        base = crs.geodetic_crs
        back = Transformer.from_crs(crs, base, always_xy=True, allow_ballpark=False)
        first, second = map(float, back.transform(first, second))
        if not (math.isfinite(first) and math.isfinite(second)):
            raise ConfigurationError(f"reference {numbers[0]} {numbers[1]} lies outside what {frame[:80]} can map")
    flat = base.sub_crs_list[0] if base.is_compound else base
    if flat.is_geographic and not crs.is_projected:
        first, second = second, first
        if not (-90.0 <= second <= 90.0 and -180.0 <= first <= 360.0):
            raise ConfigurationError(
                f"reference {numbers[0]} {numbers[1]} is not a latitude and a longitude in degrees"
            )
    # Without a third axis PROJ drops the height on its way through a datum shift.
    return (first, second, third), base if len(base.axis_info) == 3 else base.to_3d()


def _route(base: CRS, frame: str) -> tuple[Transformer | None, str]:
    """How to get to WGS 84: a transformation, or None where the numbers are WGS 84 already."""
    from pyproj.transformer import TransformerGroup

    flat = base.sub_crs_list[0] if base.is_compound else base
    own = flat.datum is not None and flat.datum.name.startswith("World Geodetic System 1984")
    if own and base.is_geographic and not base.is_compound:
        return None, "WGS 84"
    # Any other datum goes to the ITRF where a way is known, and only else through the ensemble "WGS 84".
    missing: set[str] = set()
    for target, name in ((WGS84_3D, "WGS 84"),) if own else ((ITRF2014_3D, "ITRF2014"), (WGS84_3D, "WGS 84")):
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", UserWarning)  # a missing grid is said by us, in words
            group = TransformerGroup(base, target, always_xy=True, allow_ballpark=False)
        for route in group.transformers:
            if own or route.accuracy >= 0.0:
                return route, name
        missing |= {grid.short_name for way in group.unavailable_operations for grid in way.grids if not grid.available}
    grids = f" without the grid {', '.join(sorted(missing)[:3])}" if missing else ""
    raise ConfigurationError(
        f"the way from {frame[:80]} ({base.name}) to WGS 84 is not known{grids}: "
        "give the mark in WGS 84 or an ITRF or ETRF frame with its ellipsoidal height"
    )


def _apply(route: Transformer, point: tuple[float, float, float], epoch: float) -> Geographic:
    longitude_deg, latitude_deg, height_m, _ = route.transform(*point, epoch)
    if not all(map(math.isfinite, (longitude_deg, latitude_deg, height_m))):
        raise ConfigurationError(f"reference {point} lies outside what its frame can describe")
    return float(latitude_deg), float(longitude_deg), float(height_m)


def _distance_m(one: Geographic, other: Geographic) -> float:
    latitude_deg, longitude_deg, height_m = (np.array([number]) for number in one)
    return float(np.linalg.norm(local_frame.to_enu(latitude_deg, longitude_deg, height_m, other)))


def _expect_inside(crs: CRS, latitude_deg: float, longitude_deg: float, frame: str) -> None:
    area = crs.area_of_use
    if area is None:
        return
    off_deg = (longitude_deg - area.west) % 360.0
    width_deg = (area.east - area.west) % 360.0 or 360.0
    beyond_deg = 0.0 if off_deg <= width_deg else min(off_deg - width_deg, 360.0 - off_deg)
    beyond_deg = max(beyond_deg, latitude_deg - area.north, area.south - latitude_deg)
    if beyond_deg > OUTSIDE_DEG:
        order = "easting, northing, height" if crs.is_projected else "latitude, longitude, height"
        raise ConfigurationError(
            f"the reference lies at {latitude_deg:.4f} {longitude_deg:.4f}, far outside the area of {frame[:80]} "
            f"({area.name[:80]}): check the order, {order}"
        )


def _shift_notes(
    surveyed: Geographic, base: CRS, route: Transformer, target: str, position: Geographic, epoch: float | None
) -> list[str]:
    if base.datum is not None and base.datum.name.startswith("World Geodetic System 1984"):
        return []
    moved = ""
    if base.is_geographic:
        # Some routes to "WGS 84" are no shift at all, for want of knowledge; the accuracy says so below.
        shift_m = _distance_m((surveyed[1], surveyed[0], surveyed[2]), position)
        if shift_m < MOVING_M and route.accuracy <= GOOD_ACCURACY_M:
            return []
        moved = f", moved by {shift_m:.3f} m"
    when = f" at {epoch:g}" if epoch is not None else ""
    notes = [
        f"Taken from {base.name} to {target}{when}{moved}: right for positions without corrections; "
        "positions from a base station are in the base's frame."
    ]
    if route.accuracy > GOOD_ACCURACY_M:
        notes.append(f"That step is known to {route.accuracy:g} m only: a smaller offset proves nothing.")
    if not base.is_compound and base.ellipsoid is not None and abs(base.ellipsoid.semi_major_metre - EQUATOR_M) > 1.0:
        notes.append(f"The height was taken above the ellipsoid {base.ellipsoid.name}, not above WGS 84's.")
    return notes
