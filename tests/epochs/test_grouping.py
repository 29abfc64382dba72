"""Which sentences make one epoch: the rules one sentence at a time, and real receivers' habits."""

from __future__ import annotations

from unittest.mock import patch

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.epochs import grouping
from gnssmon.epochs.grouping import Grouping, apart_ms
from gnssmon.utc import DAY_MS

UNTIMED = -1
Sentence = tuple[int, bool]


def own(times: list[int], clocks: set[int] = frozenset()) -> list[int]:  # type: ignore[assignment]
    clock = np.array([row in clocks for row in range(len(times))], dtype=bool)
    return Grouping().assign(0, np.array(times, dtype=np.int64), clock).own.tolist()


def test_untimed_sentences_belong_to_the_open_epoch() -> None:
    """GSA and GSV go with the last time before them; those before any time with the first."""
    assert own([UNTIMED, 0, UNTIMED, 0, 1000, UNTIMED, 1000]) == [0, 0, 0, 0, 1, 1, 1]


def test_late_sentence_joins_the_epoch_before() -> None:
    """One that comes after the next epoch has opened belongs to its own; what is untimed belongs to the open one."""
    assert own([0, 1000, 0, UNTIMED, 2000, 1000, 2000]) == [0, 1, 0, 1, 2, 1, 2]


def test_two_epochs_late_is_an_epoch_of_its_own() -> None:
    """An epoch is complete once the second next has opened."""
    assert own([0, 1000, 2000, 0]) == [0, 1, 2, 3]


@pytest.mark.parametrize("hertz", [1, 5, 10, 20, 25, 50])
def test_every_rate_is_told_apart_from_the_first_epoch_on(hertz: int) -> None:
    """Up to 50 Hz two epochs are never taken for one, even before the period is known."""
    times = [round(k * 1000 / hertz) for k in range(20) for _ in range(3)]
    assert own(times) == [k for k in range(20) for _ in range(3)]


def test_clock_sentence_a_hundredth_early() -> None:
    """A public 10 Hz log has ZDA at .990 for the epoch at .000: one epoch all the same."""
    times = [time for k in range(6) for time in (100 * k + 990, 100 * k + 1000, UNTIMED)]
    assert own(times, set(range(0, 18, 3))) == [k for k in range(6) for _ in range(3)]


def test_clock_sentence_thirty_milliseconds_late() -> None:
    """A survey receiver of 2016 has ZDA up to .03 behind its 1 Hz epoch, with GSA behind that."""
    times = [time for k in range(5) for time in (1000 * k, 1000 * k + (30 if k > 1 else 10), UNTIMED, 1000 * k)]
    assert own(times, set(range(1, 20, 4))) == [k for k in range(5) for _ in range(4)]


def test_receivers_round_the_times_of_one_epoch_differently() -> None:
    """RMC .01 and GGA .02 are one epoch; at 50 Hz times 5 ms apart are not."""
    assert own([1010, 1020, 2010, 2020]) == [0, 0, 1, 1]
    assert own([0, 20, 40, 45]) == [0, 1, 2, 3]


def test_distance_on_the_clock() -> None:
    """Midnight joins the ends of the day; in a leap second the day is one second longer."""
    assert apart_ms(DAY_MS - 10, 0) == 10
    assert apart_ms(5, DAY_MS - 5) == 10
    assert apart_ms(DAY_MS, 0) == 1000  # 23:59:60 and 00:00:00
    assert apart_ms(DAY_MS + 990, 0) == 10
    assert apart_ms(1000, 3000) == 2000


def test_leap_second_is_an_epoch_of_its_own() -> None:
    """23:59:59, 23:59:60 and 00:00:00 are three epochs."""
    assert own([DAY_MS - 1000, DAY_MS, 0, 1000]) == [0, 1, 2, 3]


def test_endless_epoch_is_cut() -> None:
    """A clock that stands still, or none, opens a new number after every MOST_SENTENCES sentences."""
    groups = Grouping()
    count = 3 * grouping.MOST_SENTENCES + 5
    numbers = groups.assign(0, np.full(count, 5000), np.zeros(count, dtype=bool)).own
    assert np.bincount(numbers).tolist() == [grouping.MOST_SENTENCES] * 3 + [5]
    assert groups.continued == {1, 2, 3}


def one_at_a_time(sentences: list[Sentence], most: int) -> tuple[list[int], list[int]]:
    """The rules, one sentence after the other: own and current epoch of each."""
    number, opened = 0, 0
    here: Sentence | None = None
    before: Sentence | None = None
    shortest: int | None = None
    owns, currents = [], []

    def same(mark: Sentence | None, time: int, clock: bool) -> bool:
        quarter = 20.0 if shortest is None else shortest / 4
        limit = min(250 if shortest and (clock or (mark and mark[1])) else 20, quarter)
        return mark is not None and apart_ms(mark[0], time) < limit

    for place, (time, clock) in enumerate(sentences):
        opens, late, told = False, False, False
        if time >= 0:
            if here is None:
                here = (time, clock)
            elif same(here, time, clock):
                told = here[1] and not clock
                here = (time, False) if told else here
            elif same(before, time, clock):
                late = True
            else:
                before, here, opens, told = here, (time, clock), True, True
                number, opened = number + 1, place
            if told and before and not before[1] and not here[1] and here[0] > before[0]:
                shortest = min(shortest or DAY_MS, here[0] - before[0])
        owner = number - 1 if late else number
        if not opens and place - opened == most:
            number, opened, before = number + 1, place, None
            owner = owner if late else number
        owns.append(owner)
        currents.append(number)
    return owns, currents


TIMES = st.one_of(
    st.just(UNTIMED),
    st.integers(0, 12).map(lambda k: 1000 * k),
    st.integers(0, 30).map(lambda k: 10 * k),
    st.sampled_from([DAY_MS - 1000, DAY_MS - 10, DAY_MS, DAY_MS + 500, 0, 5, 990, 1240]),
)


@given(st.lists(st.tuples(TIMES, st.booleans()), max_size=40), st.integers(2, 9), st.data())
def test_any_division_gives_the_same_numbers(sentences: list[Sentence], most: int, data: st.DataObject) -> None:
    """Blocks of any size, taken in runs, give what the rules give one sentence at a time."""
    with patch.object(grouping, "MOST_SENTENCES", most):
        groups, owns, currents, start = Grouping(), [], [], 0
        while start < len(sentences):
            stop = data.draw(st.integers(start + 1, len(sentences)))
            part = sentences[start:stop]
            time, clock = np.array([s[0] for s in part], dtype=np.int64), np.array([s[1] for s in part], dtype=bool)
            grouped = groups.assign(start, time, clock & (time >= 0))
            groups.check()
            owns += grouped.own.tolist()
            currents += grouped.current.tolist()
            start = stop
    assert (owns, currents) == one_at_a_time([(t, c and t >= 0) for t, c in sentences], most)
