"""Runs the whole program as a user would: a process of its own, its standard output, its exit code."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[2]
REAL_LOGS = ROOT.parent / "shared" / "logs"
"""Real receiver logs that are not ours to keep; present beside the project on some machines only."""


def gnssmon(*words: str, stdin: bytes | None = None, timeout_s: float = 120) -> subprocess.CompletedProcess[bytes]:
    """Run ``gnssmon`` to its end."""
    return subprocess.run(
        [sys.executable, "-m", "gnssmon", *words], input=stdin, capture_output=True, timeout=timeout_s, cwd=ROOT
    )


def check_json(*words: str, stdin: bytes | None = None) -> dict[str, Any]:
    """The JSON object of ``gnssmon check … --json -``; fails when anything else stands on standard output."""
    done = gnssmon("check", *words, "--json", "-", stdin=stdin)
    assert done.returncode in (0, 1, 3), (done.returncode, done.stderr.decode())
    result: dict[str, Any] = json.loads(done.stdout, parse_constant=_refuse)
    return result


def _refuse(word: str) -> float:
    raise AssertionError(f"{word} is not JSON")
