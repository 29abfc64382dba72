"""Benchmark: a day's log through ``gnssmon check``, against a bare loop of ``pynmea2.parse`` over the same sentences.

usage: python tests/benchmarks/check_day.py [--hours 24] [--slice 60000] [--log FILE] [--jobs N]

Makes a 24 h, 1 Hz, dual-band, four-system log with the simulator (about 200 MB, 3 million sentences) unless one is
given, runs the whole program on it in a process of its own, then times pynmea2 over an evenly spread slice of its
sentences and scales that to all of them. Everything is measured in one run, so the ratio means something on any
machine; nothing here is asserted.
"""

from __future__ import annotations

import argparse
import json
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

GOAL_RATIO = 8.0
GOAL_PEAK_MB = 400.0


def make_log(path: Path, hours: float) -> float:
    """Write the log; returns the seconds it took."""
    began = time.perf_counter()
    what = ["simulate", "open_roof", "--to", str(path), "--duration", f"{hours:g}h", "--seed", "1", "--pace", "max"]
    subprocess.run([sys.executable, "-m", "gnssmon", *what], check=True)
    return time.perf_counter() - began


def check(path: Path, jobs: int | None) -> tuple[float, float, float, dict[str, object]]:
    """Wall seconds, CPU seconds, peak MB and the JSON result of ``gnssmon check``, run as a user would."""
    command = [sys.executable, "-m", "gnssmon", "check", str(path), "--json", "-"]
    if jobs is not None:
        command += ["--jobs", str(jobs)]
    began = time.perf_counter()
    with tempfile.TemporaryFile() as out:
        process = subprocess.Popen(command, stdout=out)
        _, _, usage = os.wait4(process.pid, 0)
        wall_s = time.perf_counter() - began
        out.seek(0)
        result = json.load(out)
    # The kernel counts the peak in kB and takes the largest single process.
    return wall_s, usage.ru_utime + usage.ru_stime, usage.ru_maxrss / 1024.0, result


def bare_pynmea2(path: Path, most: int) -> tuple[float, int, int]:
    """Seconds for a slice of sentences, how many it held, and how many the log holds."""
    import pynmea2

    with path.open("rb") as log:
        lines = [line.decode("ascii").rstrip() for line in log if line.startswith(b"$")]
    total = len(lines)
    # Whole runs of 200 sentences, spread over the day: every kind of sentence in its true share.
    runs = max(1, most // 200)
    taken = [line for i in range(runs) for line in lines[i * total // runs :][:200]]
    del lines
    parse = pynmea2.parse
    began = time.perf_counter()
    for line in taken:
        parse(line)
    return time.perf_counter() - began, len(taken), total


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--hours", type=float, default=24.0)
    parser.add_argument("--slice", type=int, default=60_000)
    parser.add_argument("--log", type=Path)
    parser.add_argument("--jobs", type=int)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as room:
        path = options.log
        if path is None:
            path = Path(room) / "day.nmea"
            print(f"log made in {make_log(path, options.hours):.1f} s")
        print(f"log: {path.stat().st_size / 1e6:.1f} MB")
        wall_s, cpu_s, peak_mb, result = check(path, options.jobs)
        slice_s, count, total = bare_pynmea2(path, options.slice)
    bare_s = slice_s * total / count
    stream = result["stream"]
    assert isinstance(stream, dict)
    print(f"sentences: {total} in the file, {stream['sentences']} counted by check")
    print(
        f"gnssmon check: {wall_s:.2f} s wall, {cpu_s:.2f} s CPU, peak {peak_mb:.0f} MB (goal: under {GOAL_PEAK_MB:.0f})"
    )
    print(f"bare pynmea2.parse: {slice_s:.2f} s for {count} sentences, {bare_s:.1f} s for all")
    print(
        f"ratio: {bare_s / wall_s:.1f} times faster by wall clock, {bare_s / cpu_s:.1f} by CPU (goal: {GOAL_RATIO:g})"
    )


if __name__ == "__main__":
    main()
