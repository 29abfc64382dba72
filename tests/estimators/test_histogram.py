"""Quantiles, means and spreads from counts, against NumPy on the values written out."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.estimators.histogram import deviations, means, quantile, quantiles

counts = st.lists(st.integers(0, 9), min_size=1, max_size=40)
shares = st.sampled_from([0.0, 0.05, 0.25, 0.5, 0.68, 0.95, 1.0])


@given(counts, shares)
def test_quantile_of_whole_numbers(numbers, share):
    """As numpy.quantile (linear) of the numbers written out; NaN of none."""
    values = np.repeat(np.arange(len(numbers)), numbers)
    found = quantiles(np.array([numbers, numbers]), share)

    expected = np.quantile(values, share) if len(values) else np.nan
    np.testing.assert_allclose(found, [expected, expected], rtol=1e-12, atol=1e-9)


@given(st.dictionaries(st.integers(0, 9999), st.integers(0, 9), max_size=30), shares)
def test_quantile_of_any_values(table, share):
    """The same for values with gaps between them."""
    values = np.array(sorted(table), dtype=float)
    numbers = np.array([table[int(value)] for value in values], dtype=int)
    written_out = np.repeat(values, numbers)

    expected = np.quantile(written_out, share) if len(written_out) else np.nan
    np.testing.assert_allclose(quantile(values, numbers, share), expected, rtol=1e-12, atol=1e-9)


@given(counts)
def test_mean_and_deviation(numbers):
    """As numpy.mean and numpy.std (n - 1)."""
    values = np.repeat(np.arange(len(numbers)), numbers).astype(float)
    table = np.array(numbers)

    expected = values.mean() if len(values) else np.nan
    np.testing.assert_allclose(means(table), expected, rtol=1e-12, atol=1e-12)
    expected = values.std(ddof=1) if len(values) > 1 else np.nan
    np.testing.assert_allclose(deviations(table), expected, rtol=1e-9, atol=1e-9)
