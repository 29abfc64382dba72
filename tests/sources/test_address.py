"""What a user types names the right kind of source, or gets an answer that helps."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.errors import SourceError
from gnssmon.sources import SCHEMES, scheme_of
from gnssmon.sources.address import Address, parse_address


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("/dev/ttyUSB77", Address("/dev/ttyUSB77", "serial", "/dev/ttyUSB77")),
        ("/dev/ttyUSB77@4800", Address("/dev/ttyUSB77@4800", "serial", "/dev/ttyUSB77", 4800)),
        ("COM3", Address("COM3", "serial", "COM3")),
        ("com12@115200", Address("com12@115200", "serial", "com12", 115200)),
        ("rfc2217://box:4000", Address("rfc2217://box:4000", "url", "rfc2217://box:4000")),
        ("spy:///dev/ttyUSB77@9600", Address("spy:///dev/ttyUSB77@9600", "url", "spy:///dev/ttyUSB77", 9600)),
        ("loop://", Address("loop://", "url", "loop://")),
        ("tcp://box:10110", Address("tcp://box:10110", "tcp", "tcp://box:10110", None, "box", 10110)),
        ("tcp://[::1]:10110", Address("tcp://[::1]:10110", "tcp", "tcp://[::1]:10110", None, "::1", 10110)),
        ("udp://:10110", Address("udp://:10110", "udp", "udp://:10110", None, "", 10110)),
        ("udp://239.1.2.3:99", Address("udp://239.1.2.3:99", "udp", "udp://239.1.2.3:99", None, "239.1.2.3", 99)),
        ("-", Address("-", "stdin", "-")),
        ("sim:open_roof", Address("sim:open_roof", "sim", "open_roof")),
    ],
)
def test_grammar(text: str, expected: Address) -> None:
    """The forms of the interface contract, one by one."""
    assert parse_address(text) == expected


def test_existing_paths_win(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A file or folder that exists is read as what it is, whatever its name looks like."""
    monkeypatch.chdir(tmp_path)
    for name in ("COM3", "sim:roof", "log@9600", "tcp:"):
        Path(name).write_bytes(b"")
    os.mkfifo("pipe")

    found = {name: parse_address(name).scheme for name in ("COM3", "sim:roof", "log@9600", "tcp:", ".", "pipe")}

    assert found == {
        "COM3": "log",
        "sim:roof": "log",
        "log@9600": "log",
        "tcp:": "log",
        ".": "recording",
        "pipe": "pipe",
    }


def test_every_kind_is_in_the_list() -> None:
    """Each kind of address has its row in SCHEMES, with an example that names this kind."""
    for scheme in SCHEMES:
        assert scheme_of(Address("x", scheme.key, "x")) is scheme  # type: ignore[arg-type]
        if scheme.key not in ("log", "recording", "pipe"):
            assert parse_address(scheme.example).scheme == scheme.key


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "empty"),
        ("  ", "empty"),
        ("/dev/ttyUSB77@fast", "'fast'.*no baud rate"),
        ("/dev/ttyUSB77@", "no baud rate"),
        ("/dev/ttyUSB77@99999999999999999999", "no baud rate"),
        ("COM3@0", "no baud rate"),
        ("tcpp://box:1", "did you mean 'tcp://'"),
        ("gopher://box:1", "known are tcp, udp, socket"),
        ("tcp://box", "no port number"),
        ("tcp://:99", "names no host"),
        ("tcp://box:99999", "1 to 65535"),
        ("udp://box:x", "1 to 65535"),
        ("box:10110", "'tcp://box:10110'"),
        ("no/such/folder/x.nmea", "folder 'no/such/folder' cannot be read"),
        ("nothing_like_it", "gnssmon ports"),
        ("a\0b", "no such file"),
    ],
)
def test_errors_say_what_to_do(text: str, words: str) -> None:
    """One line: what is wrong with which part, and what to write instead."""
    with pytest.raises(SourceError, match=words) as raised:
        parse_address(text)

    assert "\n" not in str(raised.value)


def test_nearest_file_is_proposed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A slip in a file's name gets the file's name as an answer."""
    monkeypatch.chdir(tmp_path)
    Path("roof_2031.nmea.gz").write_bytes(b"")

    with pytest.raises(SourceError, match=r"did you mean 'roof_2031\.nmea\.gz'"):
        parse_address("rof_2031.nmea.gz")


@settings(max_examples=100, deadline=None)
@given(st.text(max_size=40))
def test_any_text_is_an_address_or_a_source_error(text: str) -> None:
    """Nothing that can be typed raises anything else."""
    try:
        address = parse_address(text)
    except SourceError:
        return

    assert address.text == text
