"""The geoid separation that a stream states, held against the EGM96 model where a grid of it can be had offline.

Two places are asked, in this order: the optional package ``egm96`` (Python 3.12 and later; its grid comes along), and
PROJ's own grid, if its data are installed. Neither reaches for the network.
"""

from __future__ import annotations

import functools
import importlib
import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

AGREES_M = 1.0
"""EGM96 and newer models agree within about a metre; a coarse built-in table is off by several. Common practice."""
ZERO_M = 0.005
"""A separation printed as 0.0 is none."""

State = Literal["agrees", "differs", "missing", "unchecked"]
Undulation = Callable[[float, float], float]


@dataclass(frozen=True, slots=True)
class GeoidCheck:
    """What the stated separation is worth."""

    state: State
    """``missing``: none stated, or zero where the geoid is not: the altitude may then be an ellipsoidal height.
    ``unchecked``: no grid here."""
    stated_m: float | None
    expected_m: float | None
    """By EGM96, m; None: no grid."""

    @property
    def difference_m(self) -> float | None:
        """Stated minus expected."""
        if self.stated_m is None or self.expected_m is None:
            return None
        return self.stated_m - self.expected_m


def check(latitude_deg: float, longitude_deg: float, separation_m: float | None) -> GeoidCheck:
    """Hold a stated separation (None: not stated) against EGM96."""
    expected_m = undulation_m(latitude_deg, longitude_deg)
    if separation_m is None:
        return GeoidCheck("missing", None, expected_m)
    if abs(separation_m) < ZERO_M and (expected_m is None or abs(expected_m) > AGREES_M):
        # Zero by the model itself is met only along a few lines on the Earth.
        return GeoidCheck("missing", separation_m, expected_m)
    if expected_m is None:
        return GeoidCheck("unchecked", separation_m, None)
    return GeoidCheck("agrees" if abs(separation_m - expected_m) <= AGREES_M else "differs", separation_m, expected_m)


def altitude_is_ellipsoidal(up_offset_m: float, separation_m: float) -> bool:
    """Whether a height above a known mark looks as if the receiver called its ellipsoidal height an altitude.

    ``up_offset_m``: altitude + separation, minus the mark's ellipsoidal height. It is the separation itself then. A
    separation of less than 5 m cannot tell.
    """
    return abs(separation_m) >= 5.0 and abs(up_offset_m - separation_m) < 0.2 * abs(separation_m)


def undulation_m(latitude_deg: float, longitude_deg: float) -> float | None:
    """Height of the EGM96 geoid above WGS 84, m; None where no grid is installed."""
    source = _source()
    if source is None:
        return None
    value = source(latitude_deg, longitude_deg)
    return value if math.isfinite(value) else None


@functools.lru_cache(maxsize=1)
def _source() -> Undulation | None:
    return _from_package() or _from_proj()


def _from_package() -> Undulation | None:
    try:
        package = importlib.import_module("egm96")
    except ImportError:
        return None
    # Version 0.1.0, which older Pythons get, is empty.
    undulation = getattr(package, "undulation", None)
    if undulation is None:
        return None
    return lambda latitude_deg, longitude_deg: float(undulation(latitude_deg, longitude_deg))


def _from_proj() -> Undulation | None:
    from pyproj import Transformer
    from pyproj.exceptions import ProjError

    try:
        # Without "allow_ballpark=False" PROJ returns the height unchanged where the grid is missing.
        down = Transformer.from_crs("EPSG:4979", "EPSG:4326+5773", always_xy=True, allow_ballpark=False)
    except ProjError:
        return None
    return lambda latitude_deg, longitude_deg: -float(down.transform(longitude_deg, latitude_deg, 0.0)[2])
