"""What the receiver's own settings hide or distort; to be ruled out before hardware is blamed."""

from __future__ import annotations

from gnssmon.diagnosis.finding import FINE, Answer, CannotSay, Check, Facts, Found

PRACTICE = "common practice, no source"
ENOUGH_SENTENCES = 50
"""Before that many sentences a kind may simply not have had its turn."""


def _sentences(facts: Facts) -> int:
    return sum(facts.by_type.values())


class NoPositionSentence(Check):
    """No sentence that carries a position"""

    code = "no-position-sentence"
    severity = "serious"
    advice = "Switch on GGA (or GNS) in the receiver's output; RMC alone gives no height."
    source = "IEC 61162-1 sentence contents"

    @staticmethod
    def check(facts: Facts) -> Answer:
        if _sentences(facts) < ENOUGH_SENTENCES:
            return CannotSay("too few sentences")
        if any(facts.by_type.get(kind) for kind in ("GGA", "GNS")):
            return FINE
        plain = [kind for kind in ("RMC", "GLL") if facts.by_type.get(kind)]
        if plain:
            return Found(
                f"Positions come in {' and '.join(plain)} only: no height, no satellite count, no fix quality in full.",
                {"kinds": " ".join(plain)},
                "warning",
            )
        return Found("No GGA, GNS, RMC or GLL among the sentences: there is no position to judge.", {})


class NoSatelliteSentences(Check):
    """Satellites and signal levels are not sent"""

    code = "no-satellite-sentences"
    severity = "warning"
    advice = (
        "Switch on GSV (satellites in view with C/N0) and GSA (satellites used, DOP), once a second or once in five."
    )
    source = "IEC 61162-1 sentence contents"

    @staticmethod
    def check(facts: Facts) -> Answer:
        if _sentences(facts) < ENOUGH_SENTENCES:
            return CannotSay("too few sentences")
        missing = [kind for kind in ("GSV", "GSA") if not facts.by_type.get(kind)]
        if not missing:
            return FINE
        lost = {"GSV": "sky and signal levels", "GSA": "satellites used and DOP"}
        return Found(
            f"No {' and no '.join(missing)}: {', '.join(lost[kind] for kind in missing)} cannot be judged.",
            {"missing": " ".join(missing)},
        )


class SignalsNotNamed(Check):
    """Levels come without a signal identifier"""

    code = "signals-not-named"
    severity = "info"
    advice = "Set the NMEA version to 4.10 or later, so that each level says which signal it belongs to."
    source = "GSV signal identifier since NMEA 0183 4.10"

    @staticmethod
    def check(facts: Facts) -> Answer:
        if not facts.by_type.get("GSV"):
            return CannotSay("no GSV")
        named = facts.pictures.level.signals
        if not named or any(len(label) > 1 for label in named):
            return FINE
        return Found("The satellite sentences name no signal: bands cannot be told apart.", {"labels": " ".join(named)})


class NoDate(Check):
    """No date in the stream"""

    code = "no-date"
    severity = "info"
    advice = "Switch on RMC or ZDA; without a date only the time of day can be shown and kept."
    source = "IEC 61162-1 sentence contents"

    @staticmethod
    def check(facts: Facts) -> Answer:
        if _sentences(facts) < ENOUGH_SENTENCES:
            return CannotSay("too few sentences")
        if facts.receiver.dated or facts.receiver.axis_ms is None:
            return FINE
        return Found("No RMC or ZDA has given a date so far: times are times of day.", {})


class SatelliteCountCapped(Check):
    """GGA stops counting at twelve satellites"""

    code = "satellite-count-capped"
    severity = "info"
    advice = "Read the number used from GSA, or switch the receiver to an extended satellite count if it has one."
    source = "GGA satellites in use 00-12: IEC 61162-1"

    @staticmethod
    def check(facts: Facts) -> Answer:
        stated, listed = facts.value("satellites.used_mean"), facts.value("satellites.used_listed_mean")
        if stated is None or listed is None:
            return CannotSay("no GSA")
        if stated > 12.01 or listed < stated + 1.0 or stated < 11.5:
            return FINE
        return Found(
            f"The position sentence states {stated:.1f} satellites on average, GSA lists {listed:.1f}.",
            {"stated_mean": stated, "listed_mean": listed},
        )


class SeparationMissing(Check):
    """Heights have no geoid separation"""

    code = "separation-missing"
    severity = "warning"
    advice = (
        "Set the receiver to output the geoid separation; until then the ellipsoidal height shown is the altitude "
        "as it stands and may be off by tens of metres."
    )
    source = "h = altitude + separation: IEC 61162-1 GGA"

    @staticmethod
    def check(facts: Facts) -> Answer:
        if facts.receiver.altitude_m is None:
            return CannotSay("no altitude")
        if facts.receiver.separation_m is None:
            return Found("The altitude comes without a geoid separation.", {"altitude_m": facts.receiver.altitude_m})
        return FINE


class AntennaSupervisor(Check):
    """The receiver reports its antenna line"""

    code = "antenna-line"
    severity = "serious"
    advice = (
        "Possible with OPEN: cable off, a passive antenna, or a splitter that hides the antenna's current. "
        "Possible with SHORT: water in a connector or arrestor, a crushed cable. Have the supply switched off "
        "before anything is disconnected or measured, by someone authorised for the site."
    )
    source = "receiver makers' TXT messages (wording differs by maker)"

    @staticmethod
    def check(facts: Facts) -> Answer:
        for text in reversed(facts.receiver.texts):
            words = text.upper()
            if "ANT" not in words:
                continue
            for state in ("OPEN", "SHORT"):
                if state in words:
                    return Found(f"The receiver's latest antenna message reads “{text}”.", {"text": text})
            if "OK" in words:
                return FINE
        return CannotSay("no antenna message")


class NotRealPositions(Check):
    """Positions are estimated, entered by hand or simulated"""

    code = "not-measured"
    severity = "warning"
    advice = "Epochs of quality 6, 7 and 8 say nothing about the antenna; find out why the receiver sends them."
    source = "GGA quality 6, 7, 8: IEC 61162-1"

    @staticmethod
    def check(facts: Facts) -> Answer:
        counts = facts.pictures.fix.by_quality.sum(axis=0) if len(facts.pictures.fix.by_quality) else None
        if counts is None or not counts.sum():
            return CannotSay("no epochs")
        share = float(counts[6:9].sum() / counts.sum())
        if not share:
            return FINE
        names = {6: "estimated", 7: "manual", 8: "simulated"}
        which = ", ".join(name for code, name in names.items() if counts[code])
        return Found(f"{share:.1%} of the epochs are {which}, not measured.", {"share": share, "kinds": which})
