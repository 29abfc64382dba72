"""Moments against NumPy, and the merge law."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from gnssmon.estimators.moments import Moments

VALUES = hnp.arrays(np.float64, st.tuples(st.integers(0, 30), st.just(2)), elements=st.floats(-1e3, 1e3))


def _of(values: np.ndarray) -> Moments:
    moments = Moments(2)
    moments.update(values)
    return moments


@given(VALUES)
@settings(max_examples=60)
def test_mean_and_covariance_are_numpys(values):
    """Mean and covariance (n - 1) are those that NumPy computes from all values at once."""
    moments = _of(values)

    assert moments.count == len(values)
    if len(values):
        assert moments.mean == pytest.approx(values.mean(axis=0), abs=1e-9)
    if len(values) > 1:
        assert moments.covariance == pytest.approx(np.cov(values.T), rel=1e-9, abs=1e-6)
    else:
        assert np.isnan(moments.covariance).all()


@given(VALUES, st.lists(st.integers(0, 30), max_size=3))
@settings(max_examples=60)
def test_any_cut_gives_the_same(values, cuts):
    """Merging the parts of any cut, empty and one-sample parts included, gives what one pass gives."""
    edges = [0, *sorted(min(cut, len(values)) for cut in cuts), len(values)]
    merged = Moments(2)
    for start, stop in itertools.pairwise(edges):
        merged.merge(_of(values[start:stop]))
    whole = _of(values)

    assert merged.count == whole.count
    assert merged.mean == pytest.approx(whole.mean, abs=1e-9)
    assert merged.comoment == pytest.approx(whole.comoment, rel=1e-9, abs=1e-6)
