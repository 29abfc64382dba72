"""How often a comparison of levels accuses an unchanged site, and how often it finds a loss.

usage: python -m tests.benchmarks.level_comparison [pairs] [seed]

A made-up sky of 90 satellites and two signals; two logs of the same length, so many hours apart; a loss of 1 dB.
"""

from __future__ import annotations

import sys

import numpy as np

from gnssmon.acceptance.comparison import Difference, compare
from gnssmon.report import result as results
from tests.acceptance.made_levels import Sky
from tests.report.hand_made import snapshot


def main() -> None:
    """Print a row for each length and distance."""
    pairs = int(sys.argv[1]) if len(sys.argv) > 1 else 100
    seed = int(sys.argv[2]) if len(sys.argv) > 2 else 1
    generator = np.random.default_rng(seed)
    rest = results.result(snapshot())

    def level(first: dict[str, object], second: dict[str, object]) -> Difference:
        return next(row for row in compare(rest | first, rest | second).differences if row.name == "level")

    print(f"{pairs} pairs, seed {seed}")
    print("length   apart   false alarms   half width   1 dB found")
    for hours in (5 / 60, 0.25, 1.0, 3.0):
        for apart_h in (0.2, 3.0, 8.0):
            alarms = found = 0
            halves = []
            for _ in range(pairs):
                sky, start_h = Sky(generator), generator.uniform(0.0, 12.0)
                before = sky.log(start_h, hours)
                same = level(before, sky.log(start_h + hours + apart_h, hours))
                lost = level(before, sky.log(start_h + hours + apart_h, hours, offset_db=-1.0))
                alarms += same.outcome in ("better", "worse")
                found += lost.outcome == "worse"
                if same.interval is not None:
                    halves.append((same.interval[1] - same.interval[0]) / 2)
            print(
                f"{hours * 60:4.0f} min {apart_h:5.1f} h {alarms / pairs:13.1%} {np.median(halves):10.2f} dB "
                f"{found / pairs:11.0%}",
                flush=True,
            )


if __name__ == "__main__":
    main()
