"""Talker, system id, satellite number and signal id → a satellite and a signal, or unknown.

Strategy. Every question is a look-up in a small table built once from the rows in ``systems``, so that millions of
rows cost one gather each. Order of resolution: system id, then talker, then the number's range. A number that the
named system does not use is not bent to fit: the satellite is kept under ``?`` with the number as received.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.systems import LETTERS, NUMBERINGS, PLAIN_GPS, SIGNALS, SYSTEMS, UNKNOWN, Numbering

SYSTEM_STEP = 1024
"""Satellite code = system index * SYSTEM_STEP + number within the system."""

HIGHEST_NUMBER = SYSTEM_STEP - 1
"""Larger numbers are used by no system and are all kept as this one, so that codes cannot run into each other."""

NOT_STATED = -1
"""Signal of a row whose sentence names none (before NMEA 4.10, or id 0: all signals)."""

Codes = npt.NDArray[np.int32]


def _talker_table() -> npt.NDArray[np.uint8]:
    table = np.full(1 << 16, UNKNOWN, dtype=np.uint8)
    for index, system in enumerate(SYSTEMS):
        for talker in system.talkers:
            table[_as_numbers(np.array([talker], dtype="S2"))] = index
    return table


def _as_numbers(talker: npt.NDArray[np.bytes_]) -> npt.NDArray[np.uint16]:
    return np.ascontiguousarray(talker, dtype="S2").view(np.uint16)


def _identifier_table() -> npt.NDArray[np.uint8]:
    table = np.full(256, UNKNOWN, dtype=np.uint8)
    for index, system in enumerate(SYSTEMS):
        if system.nmea_id:
            table[ord(system.nmea_id)] = index
    return table


def _number_table(rows: tuple[Numbering, ...]) -> Codes:
    table = np.empty((len(SYSTEMS), SYSTEM_STEP), dtype=np.int32)
    table[:] = UNKNOWN * SYSTEM_STEP + np.arange(SYSTEM_STEP)
    for row in rows:
        number = np.arange(row.first, row.last + 1)
        table[LETTERS.index(row.named), number] = LETTERS.index(row.letter) * SYSTEM_STEP + number + row.offset
    return table.ravel()


def _signal_table() -> npt.NDArray[np.int16]:
    table = np.full((len(SYSTEMS), 256), NOT_STATED, dtype=np.int16)
    for row, signal in enumerate(SIGNALS):
        for digit in {signal.nmea_id, signal.nmea_id.lower()}:
            table[LETTERS.index(signal.letter), ord(digit)] = row
    return table.ravel()


_BY_TALKER = _talker_table()
_BY_IDENTIFIER = _identifier_table()
_BY_NUMBER = _number_table(NUMBERINGS)
_BY_PLAIN_NUMBER = _number_table((*NUMBERINGS, PLAIN_GPS))
_BY_SIGNAL = _signal_table()


def named_system(
    talker: npt.NDArray[np.bytes_], system_id: npt.NDArray[np.uint8] | None = None
) -> npt.NDArray[np.uint8]:
    """Return the index of the system that a sentence names: by its system id, else by its talker, else UNKNOWN.

    ``talker`` is (n,) of two bytes; ``system_id`` is (n,) ASCII codes of hex digits, 0 where empty, or None for a
    sentence type that has none. A reserved id (0, 7 to F) names nothing.
    """
    by_talker = _BY_TALKER[_as_numbers(talker)]
    if system_id is None:
        return by_talker
    by_identifier = _BY_IDENTIFIER[system_id]
    return np.where(by_identifier == UNKNOWN, by_talker, by_identifier)


def satellite_codes(
    named: npt.NDArray[np.uint8], number: npt.NDArray[np.integer], *, plain_is_gps: bool | npt.NDArray[np.bool_] = False
) -> Codes:
    """Return the satellite code of every row, shape (n,); ``number`` must not be negative.

    ``named`` is the system index from ``named_system``. A bare number below 33 under talker GN without a system id is
    kept unknown: since 4.10 every system counts from 1. ``plain_is_gps`` lifts that, as a whole or row by row, where
    the caller knows the stream to be older: NMEA up to 4.0 gave 1-32 to GPS, 33-64 to SBAS, 65-96 to GLONASS and
    nothing to other systems, and system ids came with 4.10 (IEC 61162-1 notes a to c, as reprinted by makers).
    """
    cell: Codes = named.astype(np.int32) * SYSTEM_STEP + np.minimum(number, HIGHEST_NUMBER).astype(np.int32)
    if plain_is_gps is True:
        return _BY_PLAIN_NUMBER[cell]
    if plain_is_gps is False:
        return _BY_NUMBER[cell]
    return np.where(plain_is_gps, _BY_PLAIN_NUMBER[cell], _BY_NUMBER[cell])


def identify(
    talker: npt.NDArray[np.bytes_],
    system_id: npt.NDArray[np.uint8] | None,
    number: npt.NDArray[np.integer],
    *,
    plain_is_gps: bool = False,
) -> Codes:
    """Return satellite codes for rows that each have their own talker and system id; see the two functions above."""
    return satellite_codes(named_system(talker, system_id), number, plain_is_gps=plain_is_gps)


def signal_rows(satellite: Codes, signal_id: npt.NDArray[np.uint8]) -> npt.NDArray[np.int16]:
    """Return the row of ``SIGNALS`` for every satellite code and signal id (ASCII code, 0 empty), else NOT_STATED.

    The satellite's own system decides what an id means, so that SBAS and QZSS under a GP talker are told apart.
    """
    cell: Codes = (satellite // SYSTEM_STEP) * 256 + signal_id
    return _BY_SIGNAL[cell]


def system_of(satellite: Codes) -> Codes:
    """Return the system index of satellite codes."""
    return satellite // SYSTEM_STEP


def label(satellite: int) -> str:
    """Return ``G07``, or ``?58`` for a number whose system is not known."""
    system, number = divmod(int(satellite), SYSTEM_STEP)
    return f"{LETTERS[system]}{number:02d}"


def signal_label(system: int, signal: int) -> str:
    """Return ``G1``, ``E5a``; the bare system letter where the stream does not say which signal.

    ``system`` is a system index (``system_of``), ``signal`` a row of ``SIGNALS`` or NOT_STATED.
    """
    return LETTERS[system] if signal == NOT_STATED else SIGNALS[signal].label
