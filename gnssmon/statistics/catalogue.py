"""Every quantity there is, by name: what criteria, alarms, JSON, exports and help may speak of."""

from __future__ import annotations

from gnssmon.quantities import Quantity
from gnssmon.statistics import SUBJECTS

QUANTITIES: tuple[Quantity, ...] = tuple(quantity for subject in SUBJECTS.values() for quantity in subject.QUANTITIES)

_BY_NAME = {quantity.name: quantity for quantity in QUANTITIES}
_FAMILIES = tuple(quantity for quantity in QUANTITIES if quantity.name.endswith(".*"))


def find(name: str) -> Quantity | None:
    """The quantity of that name; for a member of a family (``cn0.mean_dbhz.E5a``) the family's; None: unknown."""
    if name in _BY_NAME:
        return _BY_NAME[name]
    for family in _FAMILIES:
        stem = family.name.removesuffix("*")
        if name.startswith(stem) and len(name) > len(stem):
            return family
    return None
