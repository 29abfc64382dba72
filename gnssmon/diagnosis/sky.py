"""What satellites and their levels tell of the antenna's place."""

from __future__ import annotations

import numpy as np

from gnssmon.diagnosis.finding import FINE, Answer, CannotSay, Check, Facts, Found

COMPASS = ("north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west")


def compass(azimuth_deg: float) -> str:
    """The nearest of eight directions in words."""
    return COMPASS[round(azimuth_deg / 45.0) % 8]


class SkyBlocked(Check):
    """Part of the sky is hidden"""

    code = "sky-blocked"
    severity = "warning"
    advice = (
        "Look from the antenna's place in that direction: a building, a tree, a mast or metal nearby. A higher or "
        "freer place is worth more than any setting. First rule out an elevation mask in the receiver."
    )
    source = "no obstruction above 10 degrees: IGS CORS Guidelines 1.1.0"
    MARGIN_DEG = 5.0
    NARROWEST = 2
    """Sectors of 10 degrees side by side: one alone may be a single satellite's pass."""

    @staticmethod
    def check(facts: Facts) -> Answer:
        horizon = facts.pictures.sky.horizon_deg
        low = facts.pictures.sky.horizon_low_deg
        if not np.isfinite(horizon).sum() >= 6:
            return CannotSay("too little of the horizon has been probed")
        if isinstance(LevelsLow.check(facts), Found):
            return CannotSay("all signals are weak: what is lost low down is no horizon")
        limit = facts.pictures.sky.mask_deg + SkyBlocked.MARGIN_DEG
        # The interval's lower end counts: only what is surely hidden is held against the site.
        hidden = np.nan_to_num(low, nan=0.0) > limit
        runs = [run for run in _runs(hidden) if len(run) >= SkyBlocked.NARROWEST]
        if not runs:
            return FINE
        widest = max(runs, key=len)
        first, last = widest[0] * 10, (widest[-1] + 1) * 10
        middle = (first + len(widest) * 5) % 360
        height = float(np.median(horizon[list(widest)]))
        return Found(
            f"Satellites stay without signal below about {height:.0f} degrees between azimuth {first % 360} and "
            f"{last % 360} degrees ({compass(middle)}); at most {facts.pictures.sky.mask_deg:.0f} is asked for.",
            {
                "azimuth_from_deg": first % 360,
                "azimuth_to_deg": last % 360,
                "elevation_deg": height,
                "sectors_hidden": int(hidden.sum()),
            },
        )


def _runs(flags: np.ndarray) -> list[tuple[int, ...]]:
    """Runs of True around the circle, as tuples of indices in order."""
    count = len(flags)
    if flags.all():
        return [tuple(range(count))]
    starts = [i for i in range(count) if flags[i] and not flags[i - 1]]
    runs = []
    for start in starts:
        run = [start]
        while flags[(run[-1] + 1) % count]:
            run.append((run[-1] + 1) % count)
        runs.append(tuple(run))
    return runs


class LevelsLow(Check):
    """All signals are weak"""

    code = "levels-low"
    severity = "warning"
    advice = (
        "Possible: no supply at the antenna or a dead amplifier, loss before the amplifier (wet connector, wrong "
        "adaptor), a passive antenna on a long cable, wide-band noise nearby, snow or a wet cover, an indoor "
        "antenna. Compare with a known good antenna on a short cable; levels of different receiver makes differ "
        "by 2-3 dB."
    )
    source = "C/A levels by elevation 35/40/45/50 dB-Hz: one reference receiver's handbook; limits: common practice"
    WEAK_DBHZ = 42.0
    SERIOUS_DBHZ = 36.0
    FROM_DEG = 45.0

    @staticmethod
    def check(facts: Facts) -> Answer:
        level = facts.pictures.level
        high = level.elevation_deg > LevelsLow.FROM_DEG
        worst: tuple[float, str] | None = None
        best: tuple[float, str] | None = None
        for row, label in enumerate(level.signals):
            counts = level.count[row, high]
            if counts.sum() < 100:
                continue
            mean = float(np.average(np.nan_to_num(level.mean_dbhz[row, high]), weights=counts))
            worst = min(worst or (mean, label), (mean, label))
            best = max(best or (mean, label), (mean, label))
        if worst is None or best is None:
            return CannotSay("too few levels above 45 degrees of elevation")
        if best[0] >= LevelsLow.WEAK_DBHZ:
            return FINE
        return Found(
            f"Above 45 degrees of elevation the strongest signal, {best[1]}, averages {best[0]:.1f} dB-Hz "
            f"({LevelsLow.WEAK_DBHZ:.0f} or more is usual with an active antenna outdoors).",
            {"signal": best[1], "mean_dbhz": best[0], "weakest_signal": worst[1], "weakest_mean_dbhz": worst[0]},
            "serious" if best[0] < LevelsLow.SERIOUS_DBHZ else None,
        )


class SystemMissing(Check):
    """Only one satellite system is received"""

    code = "single-system"
    severity = "info"
    advice = (
        "Possible: other systems switched off, an NMEA version that cannot name them (before 4.10), or an antenna "
        "or filter too narrow for them. Check the receiver's settings first."
    )
    source = "new stations GPS, GLONASS, Galileo, BeiDou at least: IGS CORS Guidelines 1.1.0"

    @staticmethod
    def check(facts: Facts) -> Answer:
        systems = facts.value("satellites.systems")
        if systems is None:
            return CannotSay("no satellites listed")
        if systems != 1:
            return FINE
        return Found("Signals of one satellite system only.", {"systems": systems})
