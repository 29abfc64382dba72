"""Kinds of field: how each is read and how absence looks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import Enum

import numpy as np
import numpy.typing as npt

from gnssmon.nmea import numbers

Column = npt.NDArray[np.generic]
Bounds = tuple[npt.NDArray[np.int64], npt.NDArray[np.int64]]


class Kind(Enum):
    """How a field is written."""

    NUMBER = "decimal number; NaN absent"
    TIME = "hhmmss.sss; ms of the day, -1 absent"
    DATE = "ddmmyy; days since 1970, -1 absent"
    LATITUDE = "ddmm.mmmm and the next field N or S; degrees, NaN absent"
    LONGITUDE = "dddmm.mmmm and the next field E or W; degrees, NaN absent"
    LETTER = "one letter or one digit as a code; ASCII, 0 absent"
    TEXT = "free text; bytes"


@dataclass(frozen=True, slots=True)
class Field:
    """One field of a sentence, in its place; LATITUDE and LONGITUDE take the place of two."""

    name: str
    kind: Kind
    unit: str = ""

    @property
    def places(self) -> int:
        """How many fields of the sentence it takes."""
        return 2 if self.kind in (Kind.LATITUDE, Kind.LONGITUDE) else 1


SIMPLE: dict[Kind, Callable[..., Column]] = {
    Kind.NUMBER: numbers.decimals,
    Kind.TIME: numbers.times_of_day,
    Kind.DATE: numbers.dates,
    Kind.LETTER: numbers.letters,
    Kind.TEXT: numbers.texts,
}


def read(field: Field, buffer: npt.NDArray[np.uint8], bounds: Callable[[int], Bounds]) -> dict[str, Column]:
    """The columns that a field gives; ``bounds(i)`` are starts and ends of its ``i``-th place."""
    start, end = bounds(0)
    if field.kind in SIMPLE:
        return {field.name: SIMPLE[field.kind](buffer, start, end)}
    hemisphere = numbers.letters(buffer, *bounds(1))
    if field.kind is Kind.LATITUDE:
        value, places = numbers.angles(buffer, start, end, hemisphere, positive="N", negative="S", most_deg=90)
        return {field.name: value, "minute_decimals": places}
    value, _ = numbers.angles(buffer, start, end, hemisphere, positive="E", negative="W", most_deg=180)
    return {field.name: value}
