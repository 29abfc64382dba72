"""What the positions tell: losses, freezing, heavy tails, an offset from the mark, old corrections."""

from __future__ import annotations

import math

from gnssmon.diagnosis.finding import FINE, Answer, CannotSay, Check, Facts, Found

PRACTICE = "common practice, no source"


class FixLost(Check):
    """The fix is lost now and then"""

    code = "fix-lost"
    severity = "warning"
    advice = (
        "Possible: a blocked sky, interference, a loose antenna connector, a supply that dips. Compare the times "
        "of the losses with the levels: all down together points to cable, supply or interference."
    )
    source = "warning after 7 s without position: IMO MSC.401(95) 3.13 (ships; a yardstick elsewhere)"
    SERIOUS_S = 7.0

    @staticmethod
    def check(facts: Facts) -> Answer:
        losses, outage_s = facts.value("fix.losses"), facts.value("fix.longest_outage_s")
        if losses is None:
            return CannotSay("no epochs")
        if losses < 1:
            return FINE
        return Found(
            f"The fix was lost {losses:.0f} times; the longest outage lasted {outage_s or 0:.1f} s.",
            {"losses": losses, "longest_outage_s": outage_s, "share_none": facts.value("fix.share_none")},
            "serious" if outage_s is not None and outage_s >= FixLost.SERIOUS_S else None,
        )


class NeverFixed(Check):
    """There is no fix at all"""

    code = "no-fix"
    severity = "serious"
    advice = (
        "After power-up wait five minutes under open sky. If nothing comes: antenna not connected or without "
        "supply, wrong input, indoors, or jammed. Look at the levels in the satellite sentences."
    )
    source = "cold start within 5 min: IMO MSC.401(95) 3.7 (ships; a yardstick elsewhere)"

    @staticmethod
    def check(facts: Facts) -> Answer:
        none, duration_s = facts.value("fix.share_none"), facts.value("stream.duration_s")
        if none is None:
            return CannotSay("no epochs")
        if none < 1.0:
            return FINE
        return Found(
            f"No position in {duration_s or 0:.0f} s of stream.",
            {"duration_s": duration_s},
            "warning" if (duration_s or 0) < 300 else None,
        )


class Frozen(Check):
    """The position stands still"""

    code = "position-frozen"
    severity = "warning"
    advice = (
        "A receiver that holds its position while it believes to stand still (static hold, pinning), or too few "
        "decimals, hides the real scatter. Switch the hold off, and more decimals on, before judging."
    )
    source = PRACTICE

    @staticmethod
    def check(facts: Facts) -> Answer:
        east, north = facts.value("scatter.east_std_m"), facts.value("scatter.north_std_m")
        duration_s = facts.value("stream.duration_s")
        if east is None or north is None or (duration_s or 0) < 120:
            return CannotSay("less than two minutes of positions")
        if math.hypot(east, north) > 1e-6:
            return FINE
        return Found(
            f"Not a millimetre of movement in {duration_s:.0f} s: zero scatter is a setting, not a result.",
            {"duration_s": duration_s},
        )


class HeavyTails(Check):
    """Few large errors rule the scatter"""

    code = "heavy-tails"
    severity = "info"
    advice = "Possible: multipath, changes of fix mode, jumps. Look at the scatter plot's outliers and their times."
    source = "R95 = 2.0789 CEP50 for a circular normal distribution"
    RATIO = 3.2
    """A line-shaped normal scatter reaches 2.906 (1.95996 / 0.67449): more is no normal distribution of any shape."""

    @staticmethod
    def check(facts: Facts) -> Answer:
        cep50_m, r95_m = facts.value("scatter.cep50_m"), facts.value("scatter.r95_m")
        samples = facts.value("scatter.effective_samples")
        if not cep50_m or r95_m is None or samples is None or samples < 30:
            return CannotSay("fewer than 30 independent positions")
        if r95_m / cep50_m <= HeavyTails.RATIO:
            return FINE
        return Found(
            f"R95 is {r95_m / cep50_m:.1f} times CEP50 (2.1 to 2.9 for normal errors).",
            {"cep50_m": cep50_m, "r95_m": r95_m},
        )


class OffsetFromReference(Check):
    """The mean position is not where the mark says"""

    code = "offset-from-reference"
    severity = "warning"
    advice = (
        "Horizontal 0.5-2.5 m with little scatter: compare the frames and epochs of mark and positions, and the "
        "base station's coordinates. Vertical: antenna height, reference point against phase centre (decimetres), "
        "altitude against ellipsoidal height (tens of metres)."
    )
    source = "ITRF against plate-fixed frames 0.8-2.2 m: EPSG transformations"

    @staticmethod
    def check(facts: Facts) -> Answer:
        if facts.site.reference is None:
            return CannotSay("no reference given")
        shifted: dict[str, float] = {}
        for axis in ("east", "north", "up"):
            interval = facts.interval(f"reference.{axis}_m")
            value = facts.value(f"reference.{axis}_m")
            if interval is not None and value is not None and not interval[0] <= 0.0 <= interval[1]:
                shifted[axis] = value
        if not shifted:
            return FINE
        words = ", ".join(f"{value:+.3f} m {axis}" for axis, value in shifted.items())
        separation_m = facts.receiver.separation_m
        evidence: dict[str, float | int | str | None] = {f"{axis}_m": value for axis, value in shifted.items()}
        hint = ""
        if separation_m and "up" in shifted and abs(abs(shifted["up"]) - abs(separation_m)) < 2.0 < abs(separation_m):
            hint = " The vertical offset is about the geoid separation: an altitude may have been taken for a height."
            evidence["separation_m"] = separation_m
        return Found(f"The mean lies {words} from the reference, more than chance allows.{hint}", evidence)


class OldCorrections(Check):
    """Corrections arrive late"""

    code = "corrections-old"
    severity = "warning"
    advice = (
        "Check the correction link: radio, modem, caster, credentials, base station; then the receiver's own input."
    )
    source = "at most 2 s recommended, up to 5 s seen: NGS guidelines for single-base real-time positioning, p. 44, 47"
    LATE_S = 10.0

    @staticmethod
    def check(facts: Facts) -> Answer:
        median_s, worst_s = facts.value("corrections.age_median_s"), facts.value("corrections.age_max_s")
        if median_s is None or worst_s is None:
            return CannotSay("no corrections in use")
        if worst_s <= OldCorrections.LATE_S:
            return FINE
        return Found(
            f"Corrections are {median_s:.1f} s old in the median and {worst_s:.0f} s at worst (2 s is recommended).",
            {"age_median_s": median_s, "age_max_s": worst_s},
        )
