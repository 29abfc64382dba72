"""What the stream itself tells: missing epochs, damage on the line, a line too slow for what is sent."""

from __future__ import annotations

from gnssmon.diagnosis.finding import FINE, Answer, CannotSay, Check, Facts, Found

PRACTICE = "common practice, no source"


class EpochsMissing(Check):
    """Epochs are missing"""

    code = "epochs-missing"
    severity = "warning"
    advice = (
        "Possible: the receiver skips epochs, the line is too slow for what is sent, the logging program or radio "
        "link stalls. Look at the link load and at when the gaps lie; log at the receiver itself for comparison."
    )
    source = "99 % of epochs per day: IGS CORS Guidelines 1.1.0"
    EXPECTED = 0.99
    FEWEST_EPOCHS = 30

    @staticmethod
    def check(facts: Facts) -> Answer:
        share, epochs = facts.value("stream.completeness"), facts.value("stream.epochs")
        if share is None or epochs is None or epochs < EpochsMissing.FEWEST_EPOCHS:
            return CannotSay("fewer than 30 epochs")
        if share >= EpochsMissing.EXPECTED:
            return FINE
        gaps, longest = facts.value("stream.gaps"), facts.value("stream.longest_gap_s")
        return Found(
            f"{share:.2%} of the epochs due were received (99 % is usual at a reference station); "
            f"{gaps or 0:.0f} gaps, the longest {longest or 0:.1f} s.",
            {"completeness": share, "epochs": epochs, "gaps": gaps, "longest_gap_s": longest},
        )


class ChecksumFailures(Check):
    """Sentences arrive damaged"""

    code = "damaged-sentences"
    severity = "warning"
    advice = (
        "Possible: wrong signal level (RS-232 on a TTL input), a long or unshielded line, different earths at its "
        "two ends, a rate that is a step off, an overrun. Halve the rate, shorten the line, check the earth "
        "connection with the person responsible for the site."
    )
    source = PRACTICE
    USUAL = 0.001
    SERIOUS = 0.05

    @staticmethod
    def check(facts: Facts) -> Answer:
        share = facts.value("stream.checksum_failure_share")
        if share is None:
            return CannotSay("no sentence with a checksum")
        if share <= ChecksumFailures.USUAL:
            return FINE
        return Found(
            f"{share:.2%} of the sentences failed their checksum (a sound line shows none in a thousand).",
            {"checksum_failure_share": share},
            "serious" if share > ChecksumFailures.SERIOUS else None,
        )


class LineSaturated(Check):
    """The line carries more than it can bear"""

    code = "line-saturated"
    severity = "warning"
    advice = (
        "Raise the receiver's baud rate, or have it send satellite sentences less often. A line fuller than 80 % "
        "delays epochs and in the end loses sentences."
    )
    source = "10 bits a byte at 8N1; keeping below 80 %: common practice, no source"
    FULL = 0.8

    @staticmethod
    def check(facts: Facts) -> Answer:
        load = facts.value("stream.link_load")
        if load is None:
            return CannotSay("the line's rate is not known")
        if load <= LineSaturated.FULL:
            return FINE
        return Found(
            f"The stream fills {load:.0%} of what {facts.site.baud} Bd can carry (80 % is the usual limit).",
            {"link_load": load, "baud": facts.site.baud},
            "serious" if load > 0.98 else None,
        )


class ForeignBytes(Check):
    """Other data run on the same line"""

    code = "foreign-bytes"
    severity = "info"
    advice = (
        "Possible: a binary protocol switched on beside NMEA, corrections echoed, or noise from a wrong rate. "
        "Harmless while the line has room; switch off what nobody reads."
    )
    source = PRACTICE
    WORTH_TELLING = 0.02

    @staticmethod
    def check(facts: Facts) -> Answer:
        share = facts.value("stream.non_nmea_share")
        if share is None:
            return CannotSay("no bytes yet")
        if share <= ForeignBytes.WORTH_TELLING:
            return FINE
        return Found(f"{share:.1%} of the bytes are not NMEA sentences.", {"non_nmea_share": share})


class OutputTooSlow(Check):
    """Positions come less often than once a second"""

    code = "output-slow"
    severity = "info"
    advice = "Set the receiver's output to 1 Hz or faster where a monitor is to notice faults quickly."
    source = "a new position at least every 1 s: IMO MSC.401(95) 3.10 (ships; a yardstick elsewhere)"

    @staticmethod
    def check(facts: Facts) -> Answer:
        interval_s = facts.value("stream.interval_s")
        if interval_s is None:
            return CannotSay("no two epochs yet")
        if interval_s <= 1.05:
            return FINE
        return Found(f"One position every {interval_s:.3g} s.", {"interval_s": interval_s})
