"""Criteria: what an installation must reach, as TOML; the presets that come with the program."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from dataclasses import dataclass, field, fields, replace
from importlib import resources
from pathlib import Path
from typing import Annotated, Literal

from gnssmon.alarms.rules import AlarmRule, default_alarms
from gnssmon.configuration import Duration, contents, load, nearest
from gnssmon.errors import ConfigurationError
from gnssmon.printable import printable
from gnssmon.quantities import DEFAULT_CONFIDENCE, Quantity
from gnssmon.statistics import catalogue

Comparison = Literal["at_most", "at_least", "equals"]

DEFAULT = "default"
"""The small set that is judged when none is named."""

WEAKEST_CONFIDENCE = 0.5
SURE = 0.9999
"""Confidences beyond this are a slip of the pen: no interval from hours of data can bear them."""

SITE_OPTIONS = {
    "reference": 'the surveyed reference: --reference "LAT LON HEIGHT", or reference = … under [site]',
    "antenna_height_m": "the antenna height above the mark: --antenna-height M, or antenna_height_m = … under [site]",
    "mask_deg": "the elevation mask: mask_deg = … under [site]",
}
"""What a set may need, and how it is given."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteSettings:
    """What is said of the site; None: not said."""

    reference: str | None = None
    """Latitude, longitude, height in ``frame``."""
    frame: str | None = None
    """``EPSG:4979`` where not said."""
    epoch: float | None = None
    """Coordinate epoch of the reference, a decimal year."""
    antenna_height_m: float | None = None
    """Mark to antenna reference point, vertical."""
    mask_deg: float | None = None
    """Elevation above which the sky is judged."""

    def __post_init__(self) -> None:
        if self.mask_deg is not None and not 0.0 <= self.mask_deg < 90.0:
            raise ConfigurationError(f"mask_deg = {self.mask_deg:g}: an elevation mask lies between 0 and 90 degrees")


def known_quantity(value: object) -> str:
    """A quantity's name as criteria may use it; raises ConfigurationError with the nearest known names."""
    if not isinstance(value, str):
        raise ConfigurationError("wanted the name of a quantity in quotes")
    quantity = catalogue.find(value)
    if quantity is None:
        offers = nearest(value, (quantity.name for quantity in catalogue.QUANTITIES), 3)
        raise ConfigurationError(
            f"unknown quantity '{printable(value, 60)}'; nearest known: {offers}; all: gnssmon quantities"
        )
    if value.endswith("*") or value in LISTS:
        raise ConfigurationError(f"'{value}' is no single number and cannot be held against a limit")
    return value


LISTS = ("sky.mask_deg",)
"""Quantities that are lists of numbers."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Criterion:
    """One limit on one quantity; exactly one of ``at_most``, ``at_least``, ``equals``."""

    quantity: Annotated[str, known_quantity]
    at_most: float | None = None
    at_least: float | None = None
    equals: float | None = None
    within: float | None = None
    """Half width of what still counts as equal."""
    confidence: float = DEFAULT_CONFIDENCE
    minimum_duration_s: Duration = field(default=0.0, metadata={"key": "minimum_duration"})
    note: str = ""
    source: str = ""
    """Where the limit comes from."""

    def __post_init__(self) -> None:
        given = [name for name in ("at_most", "at_least", "equals") if getattr(self, name) is not None]
        if len(given) != 1:
            told = f"{' and '.join(given)} stand together" if given else "none stands"
            raise ConfigurationError(f"'{self.quantity}' needs exactly one of at_most, at_least, equals; {told} here")
        if self.within is not None and (self.equals is None or self.within < 0.0):
            raise ConfigurationError("within = … is a positive half width beside equals = …, and nothing else")
        if not WEAKEST_CONFIDENCE <= self.confidence <= SURE:
            hint = f"; 0.{self.confidence:g} was probably meant" if 50 <= self.confidence < 100 else ""
            raise ConfigurationError(
                f"confidence = {self.confidence:g} must lie between {WEAKEST_CONFIDENCE} and {SURE}{hint}"
            )
        if self.unit == "share" and not 0.0 <= self.limit <= 1.0:
            raise ConfigurationError(
                f"{self.comparison} = {self.limit:g}: '{self.quantity}' is a share and lies between 0 and 1"
            )

    @property
    def comparison(self) -> Comparison:
        return "at_most" if self.at_most is not None else "at_least" if self.at_least is not None else "equals"

    @property
    def limit(self) -> float:
        for value in (self.at_most, self.at_least, self.equals):
            if value is not None:
                return value
        raise AssertionError("a criterion without limit cannot be made")

    @property
    def unit(self) -> str:
        quantity = catalogue.find(self.quantity)
        return quantity.unit if isinstance(quantity, Quantity) else ""


@dataclass(frozen=True, slots=True, kw_only=True)
class CriteriaSet:
    """What a run is judged by, as one file says it."""

    name: str
    """File or preset, or ``default``."""
    title: str = ""
    needs: tuple[str, ...] = ()
    """Fields of ``SiteSettings`` without which this set cannot judge."""
    site: SiteSettings = field(default_factory=SiteSettings)
    criteria: tuple[Criterion, ...] = ()
    alarms: tuple[AlarmRule, ...] = ()
    sha256: str = ""
    """Of the file or preset."""

    @property
    def confidences(self) -> tuple[float, ...]:
        """Every confidence that some criterion asks for, rising."""
        return tuple(sorted({criterion.confidence for criterion in self.criteria}))

    @property
    def minimum_duration_s(self) -> float:
        """The longest least duration of any criterion."""
        return max((criterion.minimum_duration_s for criterion in self.criteria), default=0.0)

    def at(self, site: SiteSettings) -> CriteriaSet:
        """The same set with what ``site`` says put over what the file says.

        Raises ConfigurationError when something that the set needs is still not known.
        """
        said = {f.name: getattr(site, f.name) for f in fields(site) if getattr(site, f.name) is not None}
        known = replace(self.site, **said)
        missing = [SITE_OPTIONS[name] for name in self.needs if getattr(known, name) is None]
        if missing:
            raise ConfigurationError(f"criteria '{self.name}' cannot judge without {'; and '.join(missing)}")
        return replace(self, site=known)


@dataclass(frozen=True, slots=True, kw_only=True)
class _File:
    title: str = ""
    needs: tuple[Literal["reference", "antenna_height_m", "mask_deg"], ...] = ()
    site: SiteSettings = field(default_factory=SiteSettings)
    criterion: tuple[Criterion, ...] = ()
    alarm: tuple[AlarmRule, ...] = ()


def load_criteria(text: str | None) -> CriteriaSet:
    """Load a preset by name or a file by path; None: the default set. A file without alarms gets the default ones.

    Raises ConfigurationError.
    """
    name = text or DEFAULT
    if name in preset_names():
        text, called = preset_text(name), f"preset '{name}'"
    else:
        path = Path(name)
        if not path.exists():
            raise ConfigurationError(
                f"criteria '{printable(name, 200)}': there is no such file and no preset of that name; "
                f"nearest preset: {nearest(name, preset_names())}; presets: {', '.join(preset_names())}"
            )
        text, called = contents(path), name
    file = load(_File, text, name=called)
    return CriteriaSet(
        name=name,
        title=file.title,
        needs=file.needs,
        site=file.site,
        criteria=file.criterion,
        alarms=file.alarm or default_alarms(),
        sha256=hashlib.sha256(text.encode()).hexdigest(),
    )


def preset_names() -> tuple[str, ...]:
    """Every preset that comes with the program, the default first."""
    found = (entry.name for entry in (resources.files("gnssmon.acceptance") / "presets").iterdir())
    names = sorted(name.removesuffix(".toml") for name in found if name.endswith(".toml"))
    return tuple(_default_first(names))


def _default_first(names: Iterable[str]) -> list[str]:
    return sorted(names, key=lambda name: (name != DEFAULT, name))


def preset_text(name: str) -> str:
    """The TOML of a preset, with its comments; raises ConfigurationError for an unknown name."""
    if name not in preset_names():
        raise ConfigurationError(
            f"there is no preset '{printable(name, 60)}'; nearest: {nearest(name, preset_names())}; "
            f"presets: {', '.join(preset_names())}"
        )
    return (resources.files("gnssmon.acceptance") / "presets" / f"{name}.toml").read_text(encoding="utf-8")
