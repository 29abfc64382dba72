"""``gnssmon simulate`` as people and scripts use it: outputs, pace, exit codes."""

from __future__ import annotations

import json
import os
import signal
import socket
import subprocess
import sys
from pathlib import Path

import pytest

from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario, scenario_names, scenario_text

ROOT = Path(__file__).parents[2]


def start(*words: str) -> subprocess.Popen[bytes]:
    return subprocess.Popen(
        [sys.executable, "-m", "gnssmon", "simulate", *words], stdout=subprocess.PIPE, stderr=subprocess.PIPE, cwd=ROOT
    )


def run(*words: str) -> tuple[int, bytes, str]:
    """Exit code, standard output, standard error."""
    with start(*words) as process:
        out, err = process.communicate(timeout=60)
    return process.returncode, out, err.decode()


def expected(name: str, duration_s: float, seed: int = 1) -> bytes:
    return b"".join(data for _, data in generate(load_scenario(name), duration_s=duration_s, seed=seed))


def test_list():
    """Every scenario, a line each, none wider than a narrow terminal."""
    code, out, _ = run("--list")
    listed = out.decode().splitlines()

    assert code == 0
    assert [line.split()[0] for line in listed] == list(scenario_names())
    assert max(map(len, listed)) <= 80


def test_show():
    """A scenario's file is printed as it stands, comments and all: to copy, edit and run."""
    code, out, _ = run("--show", "bad_connector")

    assert code == 0
    assert out.decode() == scenario_text("bad_connector")
    assert out.startswith(b"# ")


def test_file_and_truth(tmp_path):
    """The bytes of the generator, and the truth beside them."""
    log, truth = tmp_path / "a.nmea", tmp_path / "truth.json"
    code, out, _ = run("open_roof", "--duration", "2m", "--seed", "5", "--to", str(log), "--truth", str(truth))

    assert (code, out) == (0, b"")
    assert log.read_bytes() == expected("open_roof", 120.0, seed=5)
    facts = json.loads(truth.read_text())
    assert facts["schema"] == "gnssmon.truth/1"
    assert (facts["scenario"], facts["seed"], facts["epochs"]["sent"]) == ("open_roof", 5, 120)


def test_standard_output():
    """Without a target, and with -, all of it comes on standard output, and nothing else."""
    for words in ((), ("--to", "-")):
        code, out, err = run("old_receiver", "--duration", "30s", *words)

        assert (code, err) == (0, "")
        assert out == expected("old_receiver", 30.0)


def test_a_reader_that_goes_is_no_fault():
    """``gnssmon simulate open_roof | head`` ends quietly."""
    process = start("open_roof", "--duration", "20m")
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.read(100)
    process.stdout.close()

    assert process.wait(timeout=60) == 0
    assert process.stderr.read() == b""
    process.stderr.close()


def test_interrupted_run_keeps_its_truth(tmp_path):
    """SIGINT: exit code 130, the truth of what was made so far is written."""
    truth = tmp_path / "truth.json"
    process = start("open_roof", "--pace", "1", "--truth", str(truth))
    assert process.stdout is not None
    process.stdout.read(100)
    process.send_signal(signal.SIGINT)
    process.communicate(timeout=60)

    assert process.returncode == 130
    assert json.loads(truth.read_text())["epochs"]["sent"] >= 1


@pytest.mark.parametrize(
    ("words", "code", "told"),
    [
        ((), 2, "--list"),
        (("open_rof",), 2, "open_roof"),
        (("open_roof", "--to", "x", "--pty"), 2, "exclude"),
        (("open_roof", "--pace", "fast"), 2, "max"),
        (("open_roof", "--duration", "soon"), 2, "not a duration"),
        (("open_roof", "--to", "no/such/folder/a.nmea"), 4, "cannot be written"),
        (("open_roof", "--truth", "no/such/folder/a.json"), 4, "cannot be written"),
    ],
)
def test_exit_codes(words, code, told):
    """2 for wrong usage, 4 for what cannot be opened, with words on standard error."""
    found, out, err = run(*words)

    assert (found, out) == (code, b"")
    assert told in err


def test_tcp_port():
    """The run waits for the first reader, who gets it from the first byte; a port that is taken is named."""
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = taken.getsockname()[1]
        code, _, err = run("open_roof", "--listen", str(port))
    assert code == 4
    assert str(port) in err

    process = start("open_roof", "--listen", str(port), "--pace", "max", "--duration", "10s")
    assert process.stderr is not None
    assert process.stderr.readline() == f"tcp://127.0.0.1:{port}\n".encode()
    with socket.create_connection(("127.0.0.1", port), timeout=30) as reader:
        data = b""
        while part := reader.recv(65536):
            data += part
    process.communicate(timeout=60)

    assert process.returncode == 0
    assert data == expected("open_roof", 10.0)


@pytest.mark.skipif(not hasattr(os, "openpty"), reason="no pseudo-terminals on this system")
def test_pseudo_terminal():
    """The name printed is a device that can be read as a serial port is, at the pace of the simulated line."""
    import serial

    process = start("old_receiver", "--pty", "--duration", "3s")
    assert process.stdout is not None
    device = process.stdout.readline().decode().strip()
    with serial.Serial(device, 4800, timeout=20) as port:
        data = port.read(200)
    process.communicate(timeout=60)

    assert process.returncode == 0
    assert data == expected("old_receiver", 3.0)[:200]
