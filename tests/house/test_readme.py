"""The README's commands are run as written, and the top level holds what was agreed."""

from __future__ import annotations

import re
import shlex
import subprocess
import sys
from pathlib import Path

from tests.journeys.program import ROOT, gnssmon


def test_main_command_runs():
    """The README's first gnssmon command does the main job with nothing attached, and decides."""
    commands = re.findall(r"^ +gnssmon (check .*)$", (ROOT / "README.md").read_text(), flags=re.MULTILINE)
    assert commands

    done = gnssmon(*shlex.split(commands[0]))

    assert done.returncode in (0, 1, 3), done.stderr.decode()
    assert b"accept" in done.stdout.lower() or b"reject" in done.stdout.lower() or b"undecided" in done.stdout.lower()


def test_every_verb_has_help_with_an_example():
    """`gnssmon VERB --help` works for each verb and shows a worked example."""
    from gnssmon.cli import VERBS

    for verb in VERBS:
        done = gnssmon(verb, "--help")
        assert done.returncode == 0, (verb, done.stderr.decode())
        assert b"Example" in done.stdout, verb


def test_top_level_holds_what_was_agreed():
    """README, DEVELOPERS, pyproject, the package, tests, replay logs and dot-files; nothing else is committed."""
    listed = subprocess.run(["git", "ls-files"], capture_output=True, text=True, cwd=ROOT)
    names = {Path(line).parts[0] for line in listed.stdout.splitlines()}
    allowed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "gnssmon", "tests", "replay_logs"}

    assert {name for name in names if not name.startswith(".")} <= allowed


def test_module_runs_as_a_program():
    """`python -m gnssmon --version` names the version and leaves with 0."""
    done = subprocess.run([sys.executable, "-m", "gnssmon", "--version"], capture_output=True, text=True)

    assert done.returncode == 0
    assert "gnssmon" in done.stdout
