"""The satellite systems and their signals: published facts as rows.

Sources. Letters, satellite numbers and carriers: RINEX 3.04 (IGS/RTCM, 2018-11-23), section 3.5 and tables 4 to 10.
System and signal identifiers: NMEA 0183 v4.11 as reprinted in receiver manuals and open parsers (the standard itself
is not free). One caveat: receivers of 2018 sent BeiDou B2I as id 3, which 4.11 gave to B1C, B2I being B there. The
stream does not tell which edition it follows; the table follows 4.11.
"""

from __future__ import annotations

from dataclasses import dataclass

LETTERS = "GRECJIS?"
"""System letters of RINEX in the order of the system index; ``?`` for a satellite whose system is not known."""

GPS, GLONASS, GALILEO, BEIDOU, QZSS, NAVIC, SBAS, UNKNOWN = range(len(LETTERS))


@dataclass(frozen=True, slots=True)
class System:
    """One satellite system, or the satellite-based augmentations together."""

    letter: str
    name: str
    nmea_id: str
    """System identifier of GSA, GBS and GRS, one hex digit; empty: none of its own."""
    talkers: tuple[str, ...]
    """Talkers that name this system; the standard's own first, then older and makers' ones."""


SYSTEMS = (
    System("G", "GPS", "1", ("GP",)),
    System("R", "GLONASS", "2", ("GL",)),
    System("E", "Galileo", "3", ("GA",)),
    System("C", "BeiDou", "4", ("GB", "BD")),
    System("J", "QZSS", "5", ("GQ", "QZ", "PQ")),
    System("I", "NavIC", "6", ("GI",)),
    System("S", "SBAS", "", ()),
    System("?", "unknown", "", ()),
)


@dataclass(frozen=True, slots=True)
class Numbering:
    """A range of satellite numbers: number in the sentence + ``offset`` = number within the system (RINEX)."""

    named: str
    """Which system the system id or the talker names; ``?``: neither does (talker GN without a system id)."""
    first: int
    last: int
    letter: str
    offset: int


# Where two makers use one range for different systems, the range stands only under the system that the talker names:
# 97-128 and 129-160 (one maker's Galileo and BeiDou) against SBAS by its own PRN (152-158), 201-202 (QZSS or BeiDou).
NUMBERINGS = (
    Numbering("G", 1, 32, "G", 0),
    Numbering("G", 33, 64, "S", -13),  # 33 is PRN 120, and RINEX takes 100 off the PRN: S20
    Numbering("G", 65, 96, "R", -64),  # before 4.10 one talker could carry all three ranges
    Numbering("G", 152, 158, "S", -100),  # an extended range: the PRN itself
    Numbering("G", 193, 202, "J", -192),  # also under system id 1 of 4.10
    Numbering("G", 203, 263, "C", -200),
    Numbering("G", 301, 336, "E", -300),
    Numbering("G", 401, 463, "C", -400),  # printed up to 437 in 2018, when BeiDou had fewer satellites
    Numbering("R", 33, 64, "S", -13),
    Numbering("R", 65, 99, "R", -64),
    Numbering("E", 1, 36, "E", 0),
    Numbering("E", 97, 128, "E", -96),
    Numbering("E", 301, 336, "E", -300),
    Numbering("C", 1, 64, "C", 0),
    Numbering("C", 129, 160, "C", -128),
    Numbering("C", 201, 263, "C", -200),
    Numbering("C", 401, 463, "C", -400),
    Numbering("J", 1, 10, "J", 0),
    Numbering("J", 193, 202, "J", -192),
    Numbering("I", 1, 15, "I", 0),
    Numbering("?", 33, 64, "S", -13),
    Numbering("?", 65, 96, "R", -64),
    Numbering("?", 193, 200, "J", -192),
    Numbering("?", 203, 263, "C", -200),
    Numbering("?", 301, 336, "E", -300),
    Numbering("?", 401, 463, "C", -400),
)

PLAIN_GPS = Numbering("?", 1, 32, "G", 0)
"""Holds in a stream from before NMEA 4.10 only: see ``identity.satellite_codes``."""


@dataclass(frozen=True, slots=True)
class Signal:
    """One signal that NMEA can name."""

    letter: str
    """Of the system whose satellites send it."""
    nmea_id: str
    """Signal identifier of GSV, GBS and GRS, one hex digit; 0 means all signals and has no row."""
    name: str
    band: str
    """Behind the system letter it labels quantities: ``G1``, ``E5a``. Signals on one band are one for statistics."""
    carrier_mhz: float
    """Centre frequency; for GLONASS that of frequency channel 0."""
    spacing_mhz: float = 0.0
    """Per frequency channel k: carrier = ``carrier_mhz`` + k * ``spacing_mhz``. NMEA does not tell k (-7 to +6)."""

    @property
    def label(self) -> str:
        return self.letter + self.band


SIGNALS = (
    Signal("G", "1", "L1 C/A", "1", 1575.42),
    Signal("G", "2", "L1 P(Y)", "1", 1575.42),
    Signal("G", "3", "L1 M", "1", 1575.42),
    Signal("G", "4", "L2 P(Y)", "2", 1227.60),
    Signal("G", "5", "L2C-M", "2", 1227.60),
    Signal("G", "6", "L2C-L", "2", 1227.60),
    Signal("G", "7", "L5-I", "5", 1176.45),
    Signal("G", "8", "L5-Q", "5", 1176.45),
    Signal("R", "1", "G1 C/A", "1", 1602.0, 9 / 16),
    Signal("R", "2", "G1 P", "1", 1602.0, 9 / 16),
    Signal("R", "3", "G2 C/A", "2", 1246.0, 7 / 16),
    Signal("R", "4", "G2 P", "2", 1246.0, 7 / 16),
    Signal("E", "1", "E5a", "5a", 1176.45),
    Signal("E", "2", "E5b", "5b", 1207.14),
    Signal("E", "3", "E5a+b", "5", 1191.795),
    Signal("E", "4", "E6-A", "6", 1278.75),
    Signal("E", "5", "E6-BC", "6", 1278.75),
    Signal("E", "6", "L1-A", "1", 1575.42),
    Signal("E", "7", "L1-BC", "1", 1575.42),
    Signal("C", "1", "B1I", "1", 1561.098),
    Signal("C", "2", "B1Q", "1", 1561.098),
    Signal("C", "3", "B1C", "1C", 1575.42),
    Signal("C", "4", "B1A", "1C", 1575.42),
    Signal("C", "5", "B2a", "2a", 1176.45),
    Signal("C", "6", "B2b", "2b", 1207.14),
    Signal("C", "7", "B2a+b", "2", 1191.795),
    Signal("C", "8", "B3I", "3", 1268.52),
    Signal("C", "9", "B3Q", "3", 1268.52),
    Signal("C", "A", "B3A", "3", 1268.52),
    Signal("C", "B", "B2I", "2b", 1207.14),
    Signal("C", "C", "B2Q", "2b", 1207.14),
    Signal("J", "1", "L1 C/A", "1", 1575.42),
    Signal("J", "2", "L1C(D)", "1", 1575.42),
    Signal("J", "3", "L1C(P)", "1", 1575.42),
    Signal("J", "4", "L1S", "1", 1575.42),
    Signal("J", "5", "L2C-M", "2", 1227.60),
    Signal("J", "6", "L2C-L", "2", 1227.60),
    Signal("J", "7", "L5-I", "5", 1176.45),
    Signal("J", "8", "L5-Q", "5", 1176.45),
    Signal("J", "9", "L6D", "6", 1278.75),
    Signal("J", "A", "L6E", "6", 1278.75),
    Signal("I", "1", "L5-SPS", "5", 1176.45),
    Signal("I", "2", "S-SPS", "S", 2492.028),
    Signal("I", "3", "L5-RS", "5", 1176.45),
    Signal("I", "4", "S-RS", "S", 2492.028),
    Signal("I", "5", "L1-SPS", "1", 1575.42),
    Signal("S", "1", "L1 C/A", "1", 1575.42),  # SBAS stands in the GPS sentences, with the ids of GPS
    Signal("S", "7", "L5-I", "5", 1176.45),
    Signal("S", "8", "L5-Q", "5", 1176.45),
)
