"""Table: how long the search of a port takes at each rate and framing, and whether its answer is right.

usage: python -m tests.benchmarks.find_rates [--phases 8]

The line is a model, bit by bit (``tests/sources/line_model.py``), on a clock that moves by itself; so the times are
those of a real search, and the run is quick.
"""

from __future__ import annotations

import argparse
import random

from gnssmon.clocks import ManualClock
from gnssmon.sources.finding import RATES, run_searches, search
from tests.sources.line_model import ModelWire
from tests.sources.sentences import burst


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--phases", type=int, default=8)
    phases = parser.parse_args().phases
    chance = random.Random(1)
    print("baud     framing   right   seconds: mean  longest")
    for baud in sorted(RATES):
        for framing in ("8N1", "8N2", "7E1"):
            right, seconds = 0, []
            for _ in range(phases):
                clock = ManualClock()
                bursts = [burst(k, sentences=chance.choice((4, 8, 16))) for k in range(4)]
                wire = ModelWire(clock, baud, bursts, framing=framing, first_s=chance.random())
                found = run_searches({"port": search(wire, clock)}, clock)["port"]
                expected = "7E1" if framing == "7E1" else "8N1"
                right += found.baud == baud and found.hearing.framing == expected
                seconds.append(found.seconds)
            mean = sum(seconds) / len(seconds)
            print(f"{baud:6d}   {framing}   {right:3d}/{phases}   {mean:13.1f}  {max(seconds):7.1f}")


if __name__ == "__main__":
    main()
