"""Which satellite and which signal a row is, against published numbers and sample sentences."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.constellations import identity
from gnssmon.constellations.systems import LETTERS, SIGNALS


def name(talker: str, system_id: str, number: int, *, plain_is_gps: bool = False) -> str:
    code = identity.identify(
        np.array([talker], dtype="S2"),
        np.array([ord(system_id) if system_id else 0], dtype=np.uint8),
        np.array([number], dtype=np.int16),
        plain_is_gps=plain_is_gps,
    )
    return identity.label(code[0])


@pytest.mark.parametrize(
    ("talker", "system_id", "number", "expected"),
    [
        # IEC 61162-1 notes a to c as makers reprint them: 1-32, 33-64 offset 87 to the PRN, 65-96 offset 64 to the slot
        ("GP", "", 7, "G07"),
        ("GP", "", 33, "S20"),  # PRN 120
        ("GP", "", 51, "S38"),  # PRN 138
        ("GL", "", 65, "R01"),
        ("GL", "", 88, "R24"),
        ("GP", "", 88, "R24"),
        # 4.11: every system counts from 1 under its own talker
        ("GA", "", 7, "E07"),
        ("GB", "", 63, "C63"),
        ("BD", "", 5, "C05"),
        ("GQ", "", 3, "J03"),  # $GQGSV,1,1,03,01,36,159,28,02,73,090,30,03,15,143,,8*51, a public sample
        ("PQ", "", 2, "J02"),
        ("QZ", "", 193, "J01"),  # $QZGSV,1,1,01,193,09,300,26,,,,,,,,,,,,*61, a public sample
        ("GI", "", 5, "I05"),
        # extended ranges
        ("GA", "", 301, "E01"),
        ("GN", "", 301, "E01"),
        ("GN", "", 437, "C37"),
        ("GB", "", 201, "C01"),
        ("GN", "", 193, "J01"),
        ("GP", "", 152, "S52"),
        ("GA", "", 97, "E01"),
        ("BD", "", 129, "C01"),
        # the system id decides over the talker
        ("GN", "1", 7, "G07"),
        ("GN", "2", 65, "R01"),
        ("GN", "3", 7, "E07"),
        ("GN", "4", 7, "C07"),
        ("GN", "5", 7, "J07"),
        ("GN", "6", 7, "I07"),
        ("GP", "3", 7, "E07"),
        ("GN", "1", 195, "J03"),  # $GNGSA,...,195,199,...,1*0A, a public sample: system 1 yet QZSS by number
        ("GN", "1", 199, "J07"),
        # what cannot be known
        ("GN", "", 7, "?07"),
        ("GN", "0", 7, "?07"),
        ("GN", "F", 7, "?07"),
        ("GN", "", 201, "?201"),  # QZSS of one maker, BeiDou of another
        ("GN", "", 130, "?130"),
        ("GN", "", 155, "?155"),
        ("GA", "", 44, "?44"),  # makers disagree which SBAS this is
        ("GB", "", 70, "?70"),
        ("GQ", "", 28, "?28"),
        ("GP", "", 0, "?00"),
        ("HE", "", 5, "?05"),
        ("GP", "", 30_000, "?1023"),
    ],
)
def test_satellite(talker: str, system_id: str, number: int, expected: str) -> None:
    """System id, then talker, then range; else the number is kept under ``?``."""
    assert name(talker, system_id, number) == expected


def test_plain_numbers_of_an_old_stream() -> None:
    """Up to NMEA 4.0 a GN sentence's 1-32 are GPS; where a system is named nothing changes."""
    assert name("GN", "", 7, plain_is_gps=True) == "G07"
    assert name("GN", "", 40, plain_is_gps=True) == "S27"
    assert name("GN", "", 70, plain_is_gps=True) == "R06"
    assert name("GA", "", 7, plain_is_gps=True) == "E07"
    codes = identity.satellite_codes(
        identity.named_system(np.array([b"GN", b"GN"])), np.array([7, 7]), plain_is_gps=np.array([True, False])
    )
    assert [identity.label(code) for code in codes] == ["G07", "?07"]


@pytest.mark.parametrize(
    ("satellite", "signal_id", "expected"),
    [
        ("G", "1", "G1"), ("G", "6", "G2"), ("G", "8", "G5"), ("R", "3", "R2"),
        ("E", "7", "E1"), ("E", "1", "E5a"), ("E", "2", "E5b"), ("E", "3", "E5"), ("E", "5", "E6"),
        ("C", "1", "C1"), ("C", "3", "C1C"), ("C", "5", "C2a"), ("C", "6", "C2b"), ("C", "7", "C2"),
        ("C", "8", "C3"), ("C", "B", "C2b"), ("C", "b", "C2b"),
        ("J", "1", "J1"), ("J", "5", "J2"), ("J", "8", "J5"), ("J", "A", "J6"),
        ("I", "1", "I5"), ("I", "2", "IS"), ("I", "5", "I1"), ("S", "1", "S1"), ("S", "8", "S5"),
        ("G", "0", "G"), ("G", "", "G"), ("G", "9", "G"), ("?", "1", "?"), ("S", "2", "S"),
    ],
)  # fmt: skip
def test_signal(satellite: str, signal_id: str, expected: str) -> None:
    """The satellite's system gives the id its meaning; without one the label is the bare letter."""
    system = LETTERS.index(satellite)
    code = np.array([system * identity.SYSTEM_STEP + 5], dtype=np.int32)
    row = identity.signal_rows(code, np.array([ord(signal_id) if signal_id else 0], dtype=np.uint8))[0]
    assert identity.signal_label(system, row) == expected


@given(
    st.sampled_from(["GP", "GL", "GA", "GB", "BD", "GQ", "QZ", "PQ", "GI", "GN", "P\x00", "\xff\xff"]),
    st.integers(0, 255),
    st.integers(0, 32_767),
    st.booleans(),
)
def test_any_input_has_an_answer(talker: str, system_id: int, number: int, plain: bool) -> None:
    """Every talker, id and number gives a code with a label and a signal row or none; a known one counts from 1."""
    code = identity.identify(
        np.array([talker.encode("latin-1")], dtype="S2"),
        np.array([system_id], dtype=np.uint8),
        np.array([number], dtype=np.int16),
        plain_is_gps=plain,
    )
    label = identity.label(code[0])
    assert label[0] in LETTERS
    assert label[0] == "?" or 1 <= int(label[1:]) <= 64
    assert label[0] != "?" or int(label[1:]) == min(number, 1023)
    assert -1 <= identity.signal_rows(code, np.array([system_id], dtype=np.uint8))[0] < len(SIGNALS)
