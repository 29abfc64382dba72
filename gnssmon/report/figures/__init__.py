"""FIGURES: the list of what a report draws, in the order of the page.                      ← a new figure's line"""

from gnssmon.report.figures import scatter, signal_level, sky, timeline
from gnssmon.report.figures.drawing import Drawing

FIGURES: tuple[Drawing, ...] = (
    scatter.SCATTER,
    sky.TRACKS,
    signal_level.BY_ELEVATION,
    sky.COVERAGE,
    timeline.POSITION,
    signal_level.OVER_TIME,
    timeline.FIX,
)
