"""What is wrong, where, and what to do: FINDINGS, the list of checks.                     ← a new finding's line"""

from gnssmon.diagnosis import position, receiver_setup, sky, stream
from gnssmon.diagnosis.finding import Check, Facts, Finding, Found

FINDINGS: tuple[type[Check], ...] = (
    stream.EpochsMissing,
    stream.ChecksumFailures,
    stream.LineSaturated,
    stream.ForeignBytes,
    stream.OutputTooSlow,
    receiver_setup.NoPositionSentence,
    receiver_setup.NoSatelliteSentences,
    receiver_setup.SignalsNotNamed,
    receiver_setup.NoDate,
    receiver_setup.SatelliteCountCapped,
    receiver_setup.SeparationMissing,
    receiver_setup.AntennaSupervisor,
    receiver_setup.NotRealPositions,
    sky.SkyBlocked,
    sky.LevelsLow,
    sky.SystemMissing,
    position.FixLost,
    position.NeverFixed,
    position.Frozen,
    position.HeavyTails,
    position.OffsetFromReference,
    position.OldCorrections,
)

SEVEREST_FIRST = {"serious": 0, "warning": 1, "info": 2}


def diagnose(facts: Facts) -> tuple[Finding, ...]:
    """Every check that answers yes, the most serious first."""
    found: list[Finding] = []
    for check in FINDINGS:
        answer = check.check(facts)
        if isinstance(answer, Found):
            found.append(
                Finding(
                    code=check.code,
                    severity=answer.severity or check.severity,
                    summary=answer.summary,
                    evidence=answer.evidence,
                    advice=check.advice,
                    source=check.source,
                )
            )
    return tuple(sorted(found, key=lambda finding: SEVEREST_FIRST[finding.severity]))
