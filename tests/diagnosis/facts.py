"""Facts of a healthy site, to be spoilt one by one."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from gnssmon.diagnosis.finding import Facts
from gnssmon.quantities import Estimate, exact
from gnssmon.receiver import ReceiverState
from gnssmon.statistics.pictures import (
    FixPicture,
    LevelPicture,
    Pictures,
    ScatterPicture,
    SkyPicture,
    StreamPicture,
    TimingPicture,
)
from gnssmon.statistics.subject import Site

NONE = np.empty(0)
NO_MINUTES = np.empty(0, dtype=np.int64)


def pictures(**changed: Any) -> Pictures:
    """Pictures of a healthy hour: 48 dB-Hz high up, a free horizon, every epoch autonomous."""
    quality = np.zeros((60, 9), dtype=np.int64)
    quality[:, 1] = 60
    minute = np.arange(60)
    whole = Pictures(
        scatter=ScatterPicture(
            NO_MINUTES, NONE, NONE, NONE, np.empty(0, dtype=np.int8), None, "mean", None, None, 1.0, 2.1, NO_MINUTES,
            np.empty((0, 3)),
        ),
        sky=SkyPicture(
            NONE, NONE, NONE, NONE, np.empty(0, dtype=np.uint8), NONE,
            np.full(36, 3.0), np.full(36, 2.0), np.full(36, 5.0), (), 10.0,
        ),
        level=LevelPicture(
            ("G1",), np.arange(2.5, 90.0, 5.0), np.full((1, 18), 48.0), np.full((1, 18), 45.0), np.full((1, 18), 51.0),
            np.full((1, 18), 1000), minute, np.full((1, 60), 48.0),
        ),
        fix=FixPicture(minute, quality, np.full(60, 12.0), np.full(60, 0.8), np.full(60, np.nan)),
        stream=StreamPicture(minute, np.full(60, 60), np.full(60, 60_000), np.zeros(60, dtype=np.int64), ()),
        timing=TimingPicture(NO_MINUTES, NONE, NONE),
    )  # fmt: skip
    return replace(whole, **changed)


HEALTHY = {
    "stream.completeness": 1.0,
    "stream.epochs": 3600.0,
    "stream.gaps": 0.0,
    "stream.longest_gap_s": 0.0,
    "stream.interval_s": 1.0,
    "stream.duration_s": 3599.0,
    "stream.checksum_failure_share": 0.0,
    "stream.non_nmea_share": 0.0,
    "stream.link_load": 0.2,
    "fix.losses": 0.0,
    "fix.longest_outage_s": 0.0,
    "fix.share_none": 0.0,
    "satellites.used_mean": 30.0,
    "satellites.used_listed_mean": 30.0,
    "satellites.systems": 4.0,
    "scatter.east_std_m": 0.4,
    "scatter.north_std_m": 0.5,
    "scatter.cep50_m": 1.0,
    "scatter.r95_m": 2.1,
    "scatter.effective_samples": 40.0,
    "corrections.age_median_s": 1.0,
    "corrections.age_max_s": 2.0,
}


def facts(
    estimates: dict[str, float | Estimate] | None = None,
    *,
    by_type: dict[str, int] | None = None,
    receiver: ReceiverState | None = None,
    site: Site | None = None,
    drawn: Pictures | None = None,
) -> Facts:
    """A healthy site, with what is given put over it."""
    values = {**HEALTHY, **(estimates or {})}
    return Facts(
        estimates={name: v if isinstance(v, Estimate) else exact(v) for name, v in values.items()},
        by_type=by_type or {"GGA": 3600, "RMC": 3600, "GSA": 3600, "GSV": 3600},
        talkers={"GN": 10_000},
        pictures=drawn or pictures(),
        receiver=receiver or ReceiverState(axis_ms=1, dated=True, altitude_m=310.0, separation_m=20.0),
        site=site or Site(),
    )
