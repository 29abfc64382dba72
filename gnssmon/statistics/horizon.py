"""How high the horizon stands around an antenna, from which satellites were heard and which were listed in silence.

Per sector of azimuth the horizon is taken as a step: below it a satellite is heard during ``HEARD_BELOW`` of the time,
above it during ``HEARD_ABOVE``. A witness is one pass of a satellite through one whole degree of elevation, with the
share of the time in which it was heard; every horizon in question is weighed by how well it explains all witnesses
(equal weight before). Median and 5 % to 95 % of that are the answer. A receiver that lists only what it hears gives no
witness of silence: then the answer lies between the ground and the lowest satellite heard.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from gnssmon.statistics.looks import Rows

Floats = npt.NDArray[np.float64]

SECTORS = 36
HIGHEST_DEG = 80
HEARD_BELOW, HEARD_ABOVE = 0.05, 0.90
"""Common practice, no source: start values that gave intervals of the right coverage in simulation."""
WEIGHT = 0.5
"""Of a witness: neighbouring degrees tell much the same."""
PASS_MINUTES = 15
"""Rows of one satellite further apart than this belong to different passes."""
WIDEST_DEG = 25.0
"""An interval wider than this is no estimate: the horizon counts as unseen."""


class Horizon(NamedTuple):
    """Degrees per sector of azimuth from north, shapes (SECTORS,); NaN where nothing was seen."""

    median: Floats
    """NaN also where the interval is too wide."""
    low: Floats
    high: Floats


def horizon(rows: Rows) -> Horizon:
    """The horizon that the rows bear witness to."""
    low, median, high = np.full((3, SECTORS), np.nan)
    if len(rows):
        degree = np.clip(np.floor(rows.elevation_deg), 0, 90).astype(np.int64)
        sector = np.minimum(rows.azimuth_deg // (360 // SECTORS), SECTORS - 1).astype(np.int64)
        witness = (passes(rows) * SECTORS + sector) * 91 + degree
        keys, which = np.unique(witness, return_inverse=True)
        listed = np.bincount(which, weights=rows.listed)
        share = np.bincount(which, weights=rows.tracked) / listed
        place = keys // 91 % SECTORS * 91 + keys % 91
        heard = np.bincount(place, weights=share, minlength=SECTORS * 91).reshape(SECTORS, 91)
        silent = np.bincount(place, weights=1.0 - share, minlength=SECTORS * 91).reshape(SECTORS, 91)
        below = heard * np.log(HEARD_BELOW) + silent * np.log(1.0 - HEARD_BELOW)
        above = heard * np.log(HEARD_ABOVE) + silent * np.log(1.0 - HEARD_ABOVE)
        # A horizon at h explains the degrees under h by ``below``, those from h on by ``above``.
        fit = np.cumsum(below, axis=1) - below + np.cumsum(above[:, ::-1], axis=1)[:, ::-1]
        fit = WEIGHT * fit[:, : HIGHEST_DEG + 1]
        weight = np.exp(fit - fit.max(axis=1, keepdims=True))
        heap = np.cumsum(weight, axis=1) / weight.sum(axis=1, keepdims=True)
        seen = (heard + silent).sum(axis=1) > 0
        for result, share_below in ((low, 0.05), (median, 0.5), (high, 0.95)):
            result[seen] = (heap[seen] >= share_below).argmax(axis=1)
        median[high - low > WIDEST_DEG] = np.nan
    return Horizon(median, low, high)


def passes(rows: Rows) -> npt.NDArray[np.int64]:
    """Number of the pass that each row belongs to, shape (k,): one satellite without a longer break."""
    order = np.lexsort((rows.minute, rows.satellite))
    satellite, minute = rows.satellite[order], rows.minute[order]
    begins = np.ones(len(order), dtype=bool)
    begins[1:] = (satellite[1:] != satellite[:-1]) | (minute[1:] - minute[:-1] > PASS_MINUTES)
    number = np.empty(len(order), dtype=np.int64)
    number[order] = np.cumsum(begins) - 1
    return number
