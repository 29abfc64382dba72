"""Quantiles, means and spreads from counts: histograms merge exactly, by adding."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Counts = npt.NDArray[np.integer]


def quantiles(counts: Counts, share: float) -> Floats:
    """The quantile of values that are whole numbers 0, 1, 2, …, counted along the last axis; NaN where none.

    Between neighbours in proportion (Hyndman & Fan type 7, NumPy's ``linear``), as if every value were written out.
    """
    total = counts.sum(axis=-1)
    heap = np.cumsum(counts, axis=-1)
    rank = np.maximum(total - 1, 0) * share
    low, high = np.floor(rank), np.ceil(rank)
    below, above = ((heap <= place[..., None]).sum(axis=-1) for place in (low, high))
    return np.where(total > 0, below + (above - below) * (rank - low), np.nan)


def quantile(values: Floats, counts: Counts, share: float) -> float:
    """The quantile of rising ``values`` that were each seen ``counts`` times (type 7); NaN where none was."""
    heap = np.cumsum(counts)
    if not len(heap) or not heap[-1]:
        return float("nan")
    rank = (int(heap[-1]) - 1) * share
    low, high = np.searchsorted(heap, [np.floor(rank), np.ceil(rank)], side="right")
    return float(values[low] + (values[high] - values[low]) * (rank - np.floor(rank)))


def means(counts: Counts) -> Floats:
    """Mean of the whole numbers counted along the last axis; NaN where none."""
    total = counts.sum(axis=-1)
    result = np.full(total.shape, np.nan)
    np.divide(counts @ np.arange(counts.shape[-1]), total, out=result, where=total > 0)
    return result


def deviations(counts: Counts) -> Floats:
    """Standard deviation (n - 1) of the whole numbers counted along the last axis; NaN with fewer than two."""
    total = counts.sum(axis=-1)
    offset = np.arange(counts.shape[-1]) - np.nan_to_num(means(counts))[..., None]
    result = np.full(total.shape, np.nan)
    np.divide((counts * offset**2).sum(axis=-1), total - 1, out=result, where=total > 1)
    return np.sqrt(result)
