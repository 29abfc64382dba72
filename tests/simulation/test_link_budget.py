"""From power to C/N0: the printed results of the reference sheets."""

from __future__ import annotations

import math

import pytest

from gnssmon.simulation.link_budget import Stage, cn0_dbhz, loss, noise_figure_db

RECEIVER = Stage(0.0, 6.0)


@pytest.mark.parametrize(
    ("power_dbw", "figure_db", "antenna_k", "expected"),
    [
        (-158.5, 1.0, 130.0, 46.98),
        (-158.5, 2.0, 130.0, 45.33),
        (-158.5, 3.0, 130.0, 43.88),
        (-158.5, 4.0, 130.0, 42.55),
        (-153.0, 2.0, 130.0, 50.8),
        (-157.25, 2.0, 130.0, 46.6),
        (-155.25, 2.0, 130.0, 48.6),
        (-157.9, 2.0, 130.0, 45.9),
        (-158.5, 2.0, 290.0, 43.5),
        (-155.0, 3.1447, 130.0, 47.18),
    ],
)
def test_minimum_powers(power_dbw, figure_db, antenna_k, expected):
    """C/N0 of the systems' minimum powers (performance sheet, sections 3 and 9; formula of a receiver's handbook)."""
    level = cn0_dbhz(power_dbw, (Stage(0.0, figure_db),), antenna_k=antenna_k)

    assert level == pytest.approx(expected, abs=0.051 if round(expected, 1) == expected else 0.0051)


def test_cascade():
    """Amplifier 2.5 dB, 15 dB of gain, receiver 10 dB: 3.1447 dB (performance sheet, section 9, number 3)."""
    assert noise_figure_db((Stage(15.0, 2.5), Stage(0.0, 10.0))) == pytest.approx(3.1447, abs=5e-5)


@pytest.mark.parametrize(("cable_db", "lost_db"), [(5, 0.083), (15, 0.788), (25, 4.763), (35, 13.212)])
def test_cable_behind_an_amplifier_hardly_matters(cable_db, lost_db):
    """Amplifier 2 dB, 30 dB of gain, receiver 10 dB: noise figure against the amplifier's (diagnosis sheet, 6, 1)."""
    chain = (Stage(30.0, 2.0), loss(cable_db), Stage(0.0, 10.0))

    assert noise_figure_db(chain) - 2.0 == pytest.approx(lost_db, abs=5e-4)


def test_cable_without_an_amplifier_costs_all_of_its_loss():
    """6 dB of cable before a receiver of 3 dB: 9 dB (diagnosis sheet, section 6, number 2)."""
    assert noise_figure_db((loss(6.0), Stage(0.0, 3.0))) == pytest.approx(9.0)


@pytest.mark.parametrize(
    ("cable_db", "expected"), [(0, 51.2), (6, 51.1), (10, 50.8), (15, 50.2), (20, 48.6), (25, 45.6), (30, 41.5)]
)
def test_levels_of_the_methods_sheet(cable_db, expected):
    """Amplifier 28 dB, 1.5 dB; -157 dBW, 4 dBic, 100 K, 1 dB in the receiver (methods sheet, section 15).

    The sheet prints levels, not its receiver's noise figure; with 6 dB all of them come out.
    """
    chain = (Stage(28.0, 1.5), loss(cable_db), RECEIVER)

    assert cn0_dbhz(-153.0, chain, antenna_k=100.0, receiver_loss_db=1.0) == pytest.approx(expected, abs=0.06)


@pytest.mark.parametrize(("before_db", "expected"), [(0.5, 50.2), (1, 49.4), (2, 47.9), (3, 46.6), (6, 43.0)])
def test_loss_before_the_amplifier_costs_more_than_itself(before_db, expected):
    """Same chain with 3 dB of cable (methods sheet, section 15)."""
    chain = (loss(before_db), Stage(28.0, 1.5), loss(3.0), RECEIVER)

    assert cn0_dbhz(-153.0, chain, antenna_k=100.0, receiver_loss_db=1.0) == pytest.approx(expected, abs=0.06)


def test_boltzmann():
    """k 290 K = -203.975 dBW/Hz (performance sheet, section 9, number 4)."""
    noise_dbw = -cn0_dbhz(0.0, (Stage(0.0, 0.0),), antenna_k=290.0)

    assert noise_dbw == pytest.approx(-203.975, abs=5e-4)
    assert noise_dbw == pytest.approx(10 * math.log10(1.380649e-23 * 290.0), abs=1e-5)
