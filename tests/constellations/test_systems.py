"""The tables of systems and signals against published numbers."""

from __future__ import annotations

import pytest

from gnssmon.constellations.systems import LETTERS, NUMBERINGS, SIGNALS, SYSTEMS

F0_MHZ = 10.23
"""The common base frequency: carriers are printed as its multiples in IS-GPS-200 and the Galileo OS SIS ICD."""

MULTIPLES = {  # RINEX 3.04 tables 4 to 10 give the frequencies; multiples recomputed from them
    "G1": 154, "G2": 120, "G5": 115,
    "E1": 154, "E5a": 115, "E5b": 118, "E5": 116.5, "E6": 125,
    "C1": 152.6, "C1C": 154, "C2a": 115, "C2b": 118, "C2": 116.5, "C3": 124,
    "J1": 154, "J2": 120, "J5": 115, "J6": 125,
    "I1": 154, "I5": 115, "IS": 243.6,
    "S1": 154, "S5": 115,
}  # fmt: skip

WAVELENGTHS_CM = {
    "G1": 19.029, "C1": 19.204, "G2": 24.421, "E5a": 25.483, "E6": 23.444, "C3": 23.633,
}  # fmt: skip
"""From c = 299 792 458 m/s and the RINEX carriers, to the last digit printed."""

PUBLISHED_IDS = {  # the 4.11 signal table as makers reprint it; "-" stands for a reserved id, ids from 1 on
    "G": "1 1 1 2 2 2 5 5 - - - - - - -",
    "R": "1 1 2 2 - - - - - - - - - - -",
    "E": "5a 5b 5 6 6 1 1 - - - - - - - -",
    "C": "1 1 1C 1C 2a 2b 2 3 3 3 2b 2b - - -",
    "J": "1 1 1 1 2 2 5 5 6 6 - - - - -",
    "I": "5 S 5 S 1 - - - - - - - - - -",
}


def test_systems_are_in_the_order_of_the_letters() -> None:
    """The index of a system is the place of its letter, and ids run 1 to 6 as in NMEA 4.11."""
    assert "".join(system.letter for system in SYSTEMS) == LETTERS
    assert [system.nmea_id for system in SYSTEMS] == ["1", "2", "3", "4", "5", "6", "", ""]


@pytest.mark.parametrize("signal", SIGNALS, ids=lambda signal: f"{signal.letter}{signal.nmea_id}")
def test_carrier_is_the_published_multiple(signal) -> None:  # type: ignore[no-untyped-def]
    """Every code-division carrier is its published multiple of 10.23 MHz; GLONASS is 1602 and 1246 MHz at channel 0."""
    if signal.letter == "R":
        assert (signal.carrier_mhz, signal.spacing_mhz) == {"1": (1602.0, 0.5625), "2": (1246.0, 0.4375)}[signal.band]
    else:
        assert signal.carrier_mhz == pytest.approx(MULTIPLES[signal.label] * F0_MHZ, abs=1e-9)
        assert signal.spacing_mhz == 0.0


def test_glonass_band_edges() -> None:
    """Channels -7 to +6 span 1598.0625-1605.375 and 1242.9375-1248.625 MHz (GLONASS ICD 5.1, table 3.1; RINEX 3.04)."""
    edges = {
        s.band: (s.carrier_mhz - 7 * s.spacing_mhz, s.carrier_mhz + 6 * s.spacing_mhz)
        for s in SIGNALS
        if s.letter == "R"
    }
    assert edges == {"1": (1598.0625, 1605.375), "2": (1242.9375, 1248.625)}


def test_wavelengths() -> None:
    """c / f gives the wavelengths in print."""
    for signal in SIGNALS:
        if signal.label in WAVELENGTHS_CM:
            assert 29_979.2458 / signal.carrier_mhz == pytest.approx(WAVELENGTHS_CM[signal.label], abs=0.0005)


def test_signal_ids_are_the_published_ones() -> None:
    """Each system's ids 1 to F name the bands of the published table, and reserved ids have no row."""
    for letter, bands in PUBLISHED_IDS.items():
        ours = {signal.nmea_id: signal.band for signal in SIGNALS if signal.letter == letter}
        theirs = {f"{n:X}": band for n, band in enumerate(bands.split(), 1) if band != "-"}
        assert ours == theirs


def test_number_ranges_do_not_overlap() -> None:
    """Under one named system a number means one satellite at most."""
    for letter in LETTERS:
        numbers = [n for row in NUMBERINGS if row.named == letter for n in range(row.first, row.last + 1)]
        assert len(numbers) == len(set(numbers))
