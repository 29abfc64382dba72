"""Share of one core that a live stream costs, headless: a pseudo-terminal at 10 Hz with 35 sentences an epoch.

usage: python -m tests.benchmarks.live_load [--seconds 20] [--rate 10] [--sentences 35] [--record]
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
import tty
from functools import reduce
from operator import xor

from tests.sources.sentences import burst

CHILD = """
import sys, threading, time
from pathlib import Path
from gnssmon.clocks import SystemClock
from gnssmon.monitor import Monitor, Settings
from gnssmon.recording.recorder import Recorder
from gnssmon.session import run
from gnssmon.snapshot import SourceFacts
from gnssmon.sources import open_source

clock = SystemClock()
source = open_source(sys.argv[1] + "@460800", clock=clock)
monitor = Monitor(Settings(), SourceFacts(label="x", kind="live"))
watchers = [Recorder(Path(sys.argv[3]), clock, source="x")] if len(sys.argv) > 3 else []
before = time.process_time()
run(source, monitor, watchers, clock, stop=threading.Event(), for_s=float(sys.argv[2]))
used = time.process_time() - before
print(used, monitor.estimates()["stream.epochs"].value)
"""


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--seconds", type=float, default=20.0)
    parser.add_argument("--rate", type=float, default=10.0)
    parser.add_argument("--sentences", type=int, default=35)
    parser.add_argument("--record", action="store_true")
    arguments = parser.parse_args()
    near, far = os.openpty()
    tty.setraw(far)
    with tempfile.TemporaryDirectory() as room:
        command = [sys.executable, "-c", CHILD, os.ttyname(far), str(arguments.seconds)]
        child = subprocess.Popen([*command, room] if arguments.record else command, stdout=subprocess.PIPE, text=True)
        sent = 0
        number = 0
        began = time.monotonic()
        while child.poll() is None:
            data = _epoch(number / arguments.rate, arguments.sentences)
            # As a line at 460 800 baud brings it: 46 bytes a millisecond.
            for at in range(0, len(data), 460):
                os.write(near, data[at : at + 460])
                time.sleep(0.01)
            sent += len(data)
            number += 1
            time.sleep(max(0.0, began + number / arguments.rate - time.monotonic()))
        assert child.stdout is not None
        used_s, epochs = (float(word) for word in child.stdout.read().split())
    print(f"{arguments.rate:g} Hz, {arguments.sentences} sentences an epoch, {sent / number:.0f} bytes each")
    print(f"{epochs:.0f} epochs in {arguments.seconds:.0f} s; {used_s / arguments.seconds:.1%} of one core")


def _epoch(at_s: float, sentences: int) -> bytes:
    """A burst whose times have a hundredth of a second."""
    whole = int(at_s)
    lines = []
    for line in burst(whole, sentences=sentences).split(b"\r\n")[:-1]:
        body = (
            line[1:-3].replace(b".00,", b".%02d," % round((at_s - whole) * 100), 1)
            if b"GSV" not in line
            else line[1:-3]
        )
        lines.append(b"$%b*%02X" % (body, reduce(xor, body)))
    return b"\r\n".join(lines) + b"\r\n"


if __name__ == "__main__":
    main()
