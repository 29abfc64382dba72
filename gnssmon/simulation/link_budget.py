"""From received power to C/N0: a chain of lossy and amplifying stages adds noise to what the antenna hears.

C/N0 = P + G - 10 log10(T) - L + 228.6 (P in dBW, Boltzmann's constant in dB), with the noise temperature T of the
whole chain referred to the antenna, T = T_antenna + 290 (F - 1), F by Friis (1944): F1 + (F2 - 1)/G1 + ... A passive
part of loss A dB is a stage of gain -A and noise figure A.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

BOLTZMANN_DB = -228.599_167
"""10 log10(1.380649e-23)."""
REFERENCE_K = 290.0


@dataclass(frozen=True, slots=True)
class Stage:
    """One part of the chain from the antenna to the receiver."""

    gain_db: float
    noise_figure_db: float


def loss(loss_db: float) -> Stage:
    """A cable, connector or splitter at 290 K."""
    return Stage(-loss_db, loss_db)


def noise_figure_db(stages: tuple[Stage, ...]) -> float:
    """Noise figure of stages in a row, the antenna's side first."""
    factor, gain = 1.0, 1.0
    for stage in stages:
        factor += (10.0 ** (stage.noise_figure_db / 10.0) - 1.0) / gain
        gain *= 10.0 ** (stage.gain_db / 10.0)
    return 10.0 * math.log10(factor)


def cn0_dbhz(power_dbw: float, stages: tuple[Stage, ...], *, antenna_k: float, receiver_loss_db: float = 0.0) -> float:
    """C/N0 of a signal of ``power_dbw`` at the antenna's output, its gain included.

    ``receiver_loss_db`` is what digitising and correlating cost.
    """
    system_k = antenna_k + REFERENCE_K * (10.0 ** (noise_figure_db(stages) / 10.0) - 1.0)
    return power_dbw - 10.0 * math.log10(system_k) - BOLTZMANN_DB - receiver_loss_db
