"""Columns of ASCII to numbers: as Python's own float reads them, and nothing else."""

from __future__ import annotations

import math
import re

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.nmea import numbers

PLAIN = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)\Z")


def fields(texts):
    """The texts as a buffer with starts and ends, commas between."""
    data = ",".join(["", *texts, ""]).encode("ascii")
    length = np.array([len(text) for text in texts], dtype=np.int64)
    start = np.cumsum(length + 1) - length
    return np.frombuffer(data, dtype=np.uint8), start, start + length


FIGURES = st.from_regex(r"[+-]?[0-9]{0,9}(\.[0-9]{0,6})?", fullmatch=True)


def expected(text: str) -> float:
    return float(text) if PLAIN.match(text) else math.nan


@settings(max_examples=200)
@given(st.lists(FIGURES, min_size=1, max_size=8))
def test_as_python_reads_them(texts):
    """Up to 15 significant digits come out as float() has them, to the last bit; what float refuses is unknown."""
    assert np.array_equal(numbers.decimals(*fields(texts)), [expected(t) for t in texts], equal_nan=True)


@settings(max_examples=200)
@given(
    st.lists(st.builds(lambda w, f: f"{w}.{f:03d}", st.integers(0, 99999), st.integers(0, 999)), min_size=1, max_size=8)
)
def test_columns_of_equal_decimals(texts):
    """A receiver's column, all with three decimals, goes a shorter way to the same numbers."""
    assert numbers.decimals(*fields(texts)).tolist() == [float(t) for t in texts]


@settings(max_examples=200)
@given(st.lists(st.text("0123456789.-+aE ", max_size=26), min_size=1, max_size=6))
def test_anything_else_is_unknown(texts):
    """Letters, blanks, two points, signs inside, more digits than fit: unknown."""
    found = numbers.decimals(*fields(texts))
    for text, value in zip(texts, found.tolist(), strict=True):
        digits = sum(c.isdigit() for c in text)
        if PLAIN.match(text) and digits <= 15:
            assert value == float(text)
        elif not PLAIN.match(text):
            assert math.isnan(value)


@settings(max_examples=200)
@given(st.lists(st.one_of(st.integers(-9, 999).map(str), st.sampled_from(["", "07", "26.9", "x", "1234"])), min_size=1))
def test_small_numbers_are_the_same_numbers(texts):
    """The quick way for satellite numbers, angles and levels agrees with the general one."""
    quick = numbers.small_numbers(*fields(texts))
    slow = numbers.decimals(*fields(texts)).astype(np.float32)

    assert np.array_equal(quick, slow, equal_nan=True)


def test_more_digits_than_are_exact_are_not_invented():
    """A number too long for 63 bits is unknown rather than wrong."""
    assert math.isnan(numbers.decimals(*fields(["1" * 23]))[0])
