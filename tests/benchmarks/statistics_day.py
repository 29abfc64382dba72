"""Benchmark: what the subjects of statistics cost over a day of four systems and three signals, and live.

usage: python tests/benchmarks/statistics_day.py [--hours 24] [--subjects stream,sky,...]

Prints, per subject: seconds to take in the day in blocks, milliseconds for one live epoch, milliseconds for a summary
and a picture of the whole day, of the last hour and of the last minute, and what it holds in memory. Nothing is
asserted. Making the day takes most of the time.
"""

from __future__ import annotations

import argparse
import sys
import time
import tracemalloc
from functools import partial
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[2]))

import numpy as np

from gnssmon.statistics import SUBJECTS
from gnssmon.statistics.grid import grid_of
from gnssmon.statistics.subject import EVERYTHING, Site, Span
from tests.statistics.skies import blocks, sky_batch

MINE = "stream,satellites,signal_level,sky,dop,timing"


def best(function, times: int = 3) -> float:
    """Milliseconds of the quickest of several calls."""
    found = np.inf
    for _ in range(times):
        began = time.perf_counter()
        function()
        found = min(found, time.perf_counter() - began)
    return found * 1000.0


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--hours", type=float, default=24.0)
    parser.add_argument("--subjects", default=MINE)
    options = parser.parse_args()
    names = options.subjects.split(",")
    subjects = {name: SUBJECTS[name](Site()) for name in names}
    spent = dict.fromkeys(["grid", *names], 0.0)
    rows = 0
    for batch in blocks(options.hours):
        rows += len(batch.signals.epoch)
        began = time.perf_counter()
        grid_of(batch)
        spent["grid"] += time.perf_counter() - began
        for name, subject in subjects.items():
            began = time.perf_counter()
            subject.update(batch)
            spent[name] += time.perf_counter() - began
    end_ms = int(options.hours * 3_600_000)
    spans = {
        "all": EVERYTHING,
        "hour": Span(end_ms - 3_600_000, None),
        "minute": Span(end_ms - 60_000, None),
    }
    print(f"{rows} signal rows; block seconds in all {sum(spent.values()):.2f} (satellite matrix {spent['grid']:.2f})")
    live = [sky_batch([end_ms + 1000 * i], seed=i) for i in range(300)]
    begin = time.perf_counter()
    for batch in live:
        grid_of(batch)
    total = time.perf_counter() - begin
    print(f"live: satellite matrix {total / len(live) * 1000:.3f} ms an epoch")
    for name, subject in subjects.items():
        live = [sky_batch([end_ms + 1000 * i], seed=i) for i in range(300)]
        for batch in live:
            grid_of(batch)
        began = time.perf_counter()
        for batch in live:
            subject.update(batch)
        each = (time.perf_counter() - began) / len(live) * 1000
        line = f"{name:13} day {spent[name]:6.2f} s  live {each:6.3f} ms (grid again in it)"
        for word, span in spans.items():
            line += f"  {word} {best(partial(subject.summary, span)):6.1f}"
            line += f"+{best(partial(subject.picture, span)):.1f} ms"
        print(line)
    tracemalloc.start()
    for name in names:
        before = tracemalloc.get_traced_memory()[0]
        subject = SUBJECTS[name](Site())
        for batch in blocks(min(options.hours, 2.0)):
            subject.update(batch)
        del batch
        grid_of.cache_clear()
        print(f"{name:13} {(tracemalloc.get_traced_memory()[0] - before) / 1e6:7.2f} MB after 2 h")


if __name__ == "__main__":
    main()
