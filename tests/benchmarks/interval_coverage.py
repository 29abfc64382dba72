"""How often 95 % intervals of mean, CEP50, R95 and sigma hold the truth, for noise of known making.

usage: python -m tests.benchmarks.interval_coverage [runs] [seed]

Every run goes the way that positions go in the program: a batch of epochs into ``Scatter``, its summary out. The truth
of a mean is the true position. The truth of a spread is that of a window of this length about its own mean, averaged
over the runs: slower errors are not in it, because no window shows them. ``refused`` is the share of runs without an
interval; ``width`` the median full width, for spreads in units of the value.
"""

from __future__ import annotations

import sys
from collections.abc import Callable

import numpy as np

from gnssmon.estimators import long_run
from gnssmon.statistics.scatter import Scatter
from gnssmon.statistics.subject import Site
from tests.estimators.noise import Floats, autonomous_like, rtk_like, slow
from tests.statistics.batches import make_batch

LATITUDE_DEG, LONGITUDE_DEG = 48.0, 11.0
M_PER_DEGREE = 111_200.035, 74_625.0
"""Metres per degree of latitude and longitude there, near enough: the factor stands in truth and answer alike."""

DURATIONS_S = {"12 min": 720, "1 h": 3600, "6 h": 21_600, "24 h": 86_400}
NAMES = ("mean", "cep50", "r95", "sigma")

Noise = Callable[[np.random.Generator, int, int, float], Floats]


def one_window(east_m: Floats, north_m: Floats, step_s: float, quality: int) -> dict[str, tuple[float, object]]:
    """Value and interval of a simulated window; the mean is that of the north component, in metres."""
    subject = Scatter(Site(reference=(LATITUDE_DEG, LONGITUDE_DEG, 500.0)))
    subject.update(
        make_batch(
            np.arange(len(east_m)) * round(step_s * 1000),
            latitude_deg=LATITUDE_DEG + north_m / M_PER_DEGREE[0],
            longitude_deg=LONGITUDE_DEG + east_m / M_PER_DEGREE[1],
            altitude_m=np.full(len(east_m), 500.0),
            quality=np.full(len(east_m), quality),
        )
    )
    answers = subject.summary()
    keys = ("reference.north_m", "scatter.cep50_m", "scatter.r95_m", "scatter.north_std_m")
    return {name: (answers[key].value, answers[key].interval) for name, key in zip(NAMES, keys, strict=True)}  # type: ignore[misc]


def table_row(label: str, noise: Noise, quality: int, duration_s: int, runs: int, seed: int) -> None:
    """Simulate and print one row."""
    step_s = max(1.0, duration_s / 21_600)
    rng = np.random.default_rng(seed)
    count = round(duration_s / step_s)
    windows = [
        one_window(noise(rng, 1, count, step_s)[0], noise(rng, 1, count, step_s)[0], step_s, quality)
        for _ in range(runs)
    ]
    cells = []
    for name in NAMES:
        values = [window[name][0] for window in windows]
        intervals = [window[name][1] for window in windows]
        truth = 0.0 if name == "mean" else float(np.mean(values))
        told = [interval for interval in intervals if interval is not None]
        held = sum(low <= truth <= high for low, high in told)  # type: ignore[misc]
        width = float(np.median([high - low for low, high in told])) if told else float("nan")  # type: ignore[misc]
        shown = f"{width:9.4f} m" if name == "mean" else f"{width / truth:9.2f}  "
        cells.append(f"{held / max(len(told), 1):6.3f} {1 - len(told) / runs:7.2f} {shown}")
    print(f"{label:22s} | " + " | ".join(cells), flush=True)


def without_prior(time_constant_s: float, runs: int, seed: int) -> None:
    """Print the coverage of the mean from the record alone, six hours of AR(1)."""
    records = slow(np.random.default_rng(seed), time_constant_s, runs, 21_600, 1.0)
    errors = [long_run.mean_error(record) for record in records]
    widths = [error.half_width(0.95) for error in errors if error is not None]
    held = sum(abs(record.mean()) <= width for record, width in zip(records, widths, strict=True))
    best = 1.96 * float(np.sqrt(long_run.mean_variance(np.array(21_600 / time_constant_s))))
    print(
        f"AR(1) {time_constant_s:4.0f} s, 6 h       | {held / runs:6.3f}    0.00 {2 * np.median(widths):9.4f} σ"
        f"   (known variance: {2 * best:.4f} σ)",
        flush=True,
    )


def main() -> None:
    """Print the tables."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 400
    seed = int(sys.argv[2]) if len(sys.argv) > 2 else 1
    print(f"{runs} runs each, seed {seed}, 95 % intervals\n\nmean, from the record alone (no prior for slow errors)")
    print(f"{'noise':22s} |  held refused     width")
    for time_constant_s in (10.0, 30.0, 60.0, 120.0, 300.0, 600.0):
        without_prior(time_constant_s, runs, seed)
    print("\nas the program reports them (prior for slow errors by fix quality in the mean)")
    print(f"{'noise':22s} | " + " | ".join(f"{name:>6s} refused     width  " for name in NAMES))
    for label, duration_s in DURATIONS_S.items():
        table_row(f"RTK-like, {label}", rtk_like, 4, duration_s, runs, seed)
    for label, duration_s in DURATIONS_S.items():
        table_row(f"autonomous-like, {label}", autonomous_like, 1, duration_s, runs, seed)
    for time_constant_s in (10.0, 60.0, 600.0):

        def noise(rng: np.random.Generator, runs: int, count: int, step_s: float, t: float = time_constant_s) -> Floats:
            return np.asarray(0.02 * slow(rng, t, runs, count, step_s))

        table_row(f"2 cm AR(1) {time_constant_s:.0f} s, 6 h", noise, 4, 21_600, runs, seed)


if __name__ == "__main__":
    main()
