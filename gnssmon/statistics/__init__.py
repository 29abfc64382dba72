"""Subjects: everything that is counted. SUBJECTS is the list.                         ← a new subject's line"""

from __future__ import annotations

from gnssmon.statistics.corrections import Corrections
from gnssmon.statistics.dop import Dop
from gnssmon.statistics.fix import Fix
from gnssmon.statistics.satellites import Satellites
from gnssmon.statistics.scatter import Scatter
from gnssmon.statistics.signal_level import SignalLevel
from gnssmon.statistics.sky import Sky
from gnssmon.statistics.stream import Stream
from gnssmon.statistics.subject import Subject
from gnssmon.statistics.timing import Timing

SUBJECTS: dict[str, type[Subject]] = {
    "stream": Stream,
    "fix": Fix,
    "satellites": Satellites,
    "signal_level": SignalLevel,
    "sky": Sky,
    "scatter": Scatter,
    "dop": Dop,
    "timing": Timing,
    "corrections": Corrections,
}
