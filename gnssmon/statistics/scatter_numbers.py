"""The numbers of one window of positions: mean, spread, rings, offset from a reference, movement."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from gnssmon.estimators import changes, long_run, uncertainty
from gnssmon.estimators.ellipse import ellipse, gaussian_radius
from gnssmon.estimators.long_run import Error, SlowError
from gnssmon.estimators.moments import Moments
from gnssmon.estimators.uncertainty import Scale
from gnssmon.geodesy import local_frame
from gnssmon.geodesy.local_frame import Geographic
from gnssmon.quantities import NOTHING, Estimate, exact
from gnssmon.statistics.positions import Cloud

Floats = npt.NDArray[np.float64]

AXES = ("east", "north", "up")
HORIZONTAL_SHARES = {"cep50": 0.50, "r68": 0.68, "r95": 0.95, "r99": 0.99}
VERTICAL_SHARES = {"vertical_68": 0.68, "vertical_95": 0.95}
SPATIAL_SHARES = {"sep50": 0.50}

SLOW_ERRORS = {
    4: SlowError(0.005, 1200.0),
    5: SlowError(0.15, 1800.0),
    2: SlowError(0.5, 3600.0),
    1: SlowError(0.7, 10800.0),
}
"""Prior for horizontal errors too slow to be seen, by GGA quality. Start values for a GUM type B evaluation: that
carrier-phase positions stay correlated for about 20 min is published (El-Rabbany & Kleusberg, J. Surv. Eng. 129, 2003);
the sizes are common practice, no source. Qualities that are not listed count as autonomous."""
UP_FACTOR = 2.0
"""Slow errors in height against horizontal ones; common practice, no source."""

CENTIMETRE = 0.01
LONGEST_FORECAST_S = 30 * 86_400.0
DRIFT_TIME_CONSTANTS = 6.0
"""A window must be this many times as long as the slowest error that is expected before a drift is spoken of."""


def numbers(cloud: Cloud, reference: Geographic | None, confidence: float) -> dict[str, Estimate]:
    """Every quantity of the window that can be told, by name."""
    window = Window(cloud, confidence)
    answers = {"scatter.positions": exact(float(len(cloud)), len(cloud))}
    answers |= window.means()
    if len(cloud) >= 2:
        answers |= window.spreads()
        answers |= window.rings()
        answers |= window.movement()
    if reference is not None:
        answers |= window.offsets(reference)
    return answers


class Window:
    """One window of positions and what is known of the errors of its means."""

    def __init__(self, cloud: Cloud, confidence: float) -> None:
        self._cloud, self._confidence, self._count = cloud, confidence, len(cloud)
        known = np.isfinite(cloud.enu_m[:, 2])
        self._all_up = bool(known.all())
        up = np.ascontiguousarray(cloud.enu_m[:, 2] if self._all_up else cloud.enu_m[known, 2])
        self._axis: list[Floats] = [*np.ascontiguousarray(cloud.enu_m[:, :2].T), up]
        self._duration_s = duration_s(cloud.axis_ms)
        self._slow = slow_error(cloud.quality, self._duration_s)
        self._errors: list[Error | None] = [
            long_run.mean_error(values, self._slow_of(axis), self._duration_s) for axis, values in enumerate(self._axis)
        ]
        self._halves = [None if error is None else error.half_width(confidence) for error in self._errors]
        variances = [float(values.var(ddof=1)) if len(values) > 1 else math.nan for values in self._axis]
        self._effective = [
            uncertainty.effective_samples(variance, error, len(values))
            for variance, error, values in zip(variances, self._errors, self._axis, strict=True)
        ]
        self._horizontal_effective = min(self._effective[0], self._effective[1])

    def means(self) -> dict[str, Estimate]:
        """Mean position; the median as its difference from the mean."""
        latitude_deg, longitude_deg, height_m = self._cloud.centre
        per_latitude, per_longitude = local_frame.metres_per_degree(self._cloud.centre)
        answers = {
            "scatter.mean_latitude_deg": self._mean(latitude_deg, 1, 1.0 / per_latitude),
            # At a pole a degree of longitude has no length: the interval is all the way round.
            "scatter.mean_longitude_deg": self._mean(longitude_deg, 0, min(1.0 / max(per_longitude, 1e-9), 360.0)),
        }
        if len(self._axis[2]):
            answers["scatter.mean_ellipsoidal_height_m"] = self._mean(height_m, 2)
        if not math.isnan(self._horizontal_effective):
            effective = self._horizontal_effective
            answers["scatter.effective_samples"] = self._estimate(effective, None, self._count, effective)
        worst = max((half for half in self._halves[:2] if half is not None), default=None)
        if worst is not None:
            answers["scatter.mean_half_width_m"] = self._estimate(worst, None, self._count, self._horizontal_effective)
        return answers

    def spreads(self) -> dict[str, Estimate]:
        """Standard deviations, plain and robust, DRMS and ellipse."""
        answers = {}
        for axis, (name, values) in enumerate(zip(AXES, self._axis, strict=True)):
            if len(values) < 2:
                continue
            square = (values - values.mean()) ** 2
            std_m = math.sqrt(float(square.sum()) / (len(values) - 1))
            scale = self._scale(square, self._horizontal_effective if axis < 2 else self._effective[2])
            answers[f"scatter.{name}_std_m"] = self._scaled(std_m, scale, self._effective[axis])
            median = float(np.median(values))
            robust_m = changes.MAD_TO_SIGMA * float(np.median(np.abs(values - median)))
            answers[f"scatter.{name}_robust_std_m"] = self._estimate(robust_m, None, len(values))
            answers[f"scatter.{name}_median_m"] = self._estimate(median - float(values.mean()), None, len(values))
        moments = Moments(2)
        moments.update(self._cloud.enu_m[:, :2])
        major_m, minor_m, azimuth_deg = ellipse(moments.covariance)
        drms_m = math.hypot(major_m, minor_m)
        scale = self._scale(self._distance_squared(), self._horizontal_effective)
        for name, value in (
            ("drms", drms_m),
            ("drms2", 2.0 * drms_m),
            ("ellipse_major", major_m),
            ("ellipse_minor", minor_m),
        ):
            answers[f"scatter.{name}_m"] = self._scaled(value, scale, self._horizontal_effective)
        answers["scatter.ellipse_azimuth_deg"] = self._estimate(azimuth_deg, None, self._count)
        for name, share in (("cep50", 0.50), ("r95", 0.95)):
            radius_m = gaussian_radius(share, major_m, minor_m)
            answers[f"scatter.{name}_gaussian_m"] = self._scaled(radius_m, scale, self._horizontal_effective)
        return answers

    def rings(self) -> dict[str, Estimate]:
        """Empirical quantiles of the distance from the mean."""
        square = self._distance_squared()
        answers = self._quantiles(np.sqrt(square), HORIZONTAL_SHARES, self._horizontal_effective)
        up = self._axis[2]
        if len(up) >= 2:
            height = up - up.mean()
            answers |= self._quantiles(np.abs(height), VERTICAL_SHARES, self._effective[2])
            if self._all_up:
                effective = min(self._effective)
                answers |= self._quantiles(np.sqrt(square + height * height), SPATIAL_SHARES, effective)
        return answers

    def movement(self) -> dict[str, Estimate]:
        """Drift, jumps, and how long until the mean is known to a centimetre."""
        answers = {}
        for axis, (name, values) in enumerate(zip(AXES, self._axis, strict=True)):
            slow = self._slow_of(axis)
            if len(values) < 2 or self._duration_s < DRIFT_TIME_CONSTANTS * slow.time_constant_s:
                continue
            slope, error = long_run.slope_error(values, slow, self._duration_s)
            to_mm_per_h = 1000.0 * 3600.0 / self._duration_s
            half = None if error is None else to_mm_per_h * error.half_width(self._confidence)
            drift = to_mm_per_h * slope
            interval = None if half is None else (drift - half, drift + half)
            answers[f"scatter.drift_{name}_mm_per_h"] = self._estimate(drift, interval, len(values))
        answers |= self._jumps()
        errors = [error for error in self._errors[:2] if error is not None]
        if len(errors) == 2:
            times = max(error.times_until(CENTIMETRE, self._confidence) for error in errors)
            needed_s = (times - 1.0) * self._duration_s
            if needed_s <= LONGEST_FORECAST_S:
                answers["scatter.forecast_to_1cm_s"] = self._estimate(needed_s, None, self._count)
        return answers

    def offsets(self, reference: Geographic) -> dict[str, Estimate]:
        """Mean position minus reference."""
        enu_m = self._cloud.about(reference)
        east_m, north_m = float(enu_m[:, 0].mean()), float(enu_m[:, 1].mean())
        answers = {"reference.east_m": self._mean(east_m, 0), "reference.north_m": self._mean(north_m, 1)}
        horizontal_m = math.hypot(east_m, north_m)
        east, north, up = self._halves
        interval = None
        if east is not None and north is not None:
            interval = uncertainty.length_interval(horizontal_m, max(east, north), self._confidence)
            chance = uncertainty.vector_chance((east_m, north_m), (east, north), self._confidence)
            answers["reference.horizontal_chance"] = self._estimate(chance, None, self._count)
        answers["reference.horizontal_m"] = self._estimate(
            horizontal_m, interval, self._count, self._horizontal_effective
        )
        if len(self._axis[2]):
            up_m = float(np.nanmean(enu_m[:, 2]))
            answers["reference.up_m"] = self._mean(up_m, 2)
            if up is not None:
                chance = uncertainty.vector_chance((up_m,), (up,), self._confidence)
                answers["reference.up_chance"] = self._estimate(chance, None, self._count)
        return answers

    def _slow_of(self, axis: int) -> SlowError:
        factor = UP_FACTOR if axis == 2 else 1.0
        return SlowError(self._slow.sigma * factor, self._slow.time_constant_s)

    def _distance_squared(self) -> Floats:
        east, north = self._axis[0], self._axis[1]
        return np.asarray((east - east.mean()) ** 2 + (north - north.mean()) ** 2)

    def _estimate(
        self, value: float, interval: tuple[float, float] | None, samples: int, effective: float = math.nan
    ) -> Estimate:
        return Estimate(value, interval, self._confidence, samples, effective)

    def _mean(self, value: float, axis: int, unit: float = 1.0) -> Estimate:
        half = self._halves[axis]
        interval = None if half is None else (value - half * unit, value + half * unit)
        return self._estimate(value, interval, len(self._axis[axis]), self._effective[axis])

    def _scale(self, square: Floats, effective: float) -> Scale | None:
        """For the interval of any spread that grows with the root of the mean ``square``."""
        (error,) = long_run.mean_errors([square])
        return uncertainty.scale(float(square.mean()), error, self._confidence, effective=effective)

    def _scaled(self, value: float, scale: Scale | None, effective: float) -> Estimate:
        interval = None if scale is None else (value * scale.low, value * scale.high)
        return self._estimate(value, interval, self._count, effective)

    def _quantiles(self, distance_m: Floats, shares: dict[str, float], effective: float) -> dict[str, Estimate]:
        ordered = np.sort(distance_m)
        values = {name: uncertainty.ordered_quantile(ordered, share) for name, share in shares.items()}
        square = distance_m * distance_m
        spread, *errors = long_run.mean_errors([square, *(distance_m > value for value in values.values())])
        scale = uncertainty.scale(float(square.mean()), spread, self._confidence, effective=effective)
        answers = {}
        for (name, share), error in zip(shares.items(), errors, strict=True):
            trials = uncertainty.effective_trials(share, error, self._confidence, len(ordered), effective=effective)
            interval = uncertainty.quantile_interval(ordered, share, trials, self._confidence, spread=scale)
            answers[f"scatter.{name}_m"] = self._estimate(values[name], interval, len(ordered), trials)
        return answers

    def _jumps(self) -> dict[str, Estimate]:
        columns = 3 if self._all_up else 2
        found = changes.find_jumps(self._cloud.axis_ms, self._cloud.enu_m[:, :columns])
        if found is None:
            return {}
        answers = {
            "scatter.jumps": exact(float(len(found.axis_ms)), self._count),
            "scatter.smallest_jump_m": self._estimate(float(found.smallest[:2].max()), None, self._count),
        }
        if len(found.axis_ms):
            lengths = np.sqrt((found.size**2).sum(axis=1))
            largest = int(lengths.argmax())
            answers["scatter.largest_jump_m"] = self._estimate(float(lengths[largest]), None, self._count)
            after_s = float(found.axis_ms[largest] - self._cloud.axis_ms[0]) / 1000.0
            answers["scatter.largest_jump_after_s"] = self._estimate(max(after_s, 0.0), None, self._count)
        else:
            answers["scatter.largest_jump_m"] = exact(0.0, self._count)
            answers["scatter.largest_jump_after_s"] = NOTHING
        return answers


def duration_s(axis_ms: npt.NDArray[np.int64]) -> float:
    """Time during which there were positions: count times usual step, so that gaps do not count."""
    if len(axis_ms) < 2:
        return 0.0
    return max(float(np.median(np.diff(axis_ms))), 0.0) * len(axis_ms) / 1000.0


def slow_error(quality: npt.NDArray[np.int8], duration_s: float) -> SlowError:
    """The prior for the mean of positions of several qualities.

    Their slow errors are independent of each other, each over its own part of the time; the time constant is that of
    the quality that contributes most.
    """
    codes, counts = np.unique(quality, return_counts=True)
    total, largest, time_constant_s = 0.0, -1.0, SLOW_ERRORS[1].time_constant_s
    for code, count in zip(codes, counts, strict=True):
        share = float(count) / len(quality)
        slow = SLOW_ERRORS.get(int(code), SLOW_ERRORS[1])
        part = share**2 * slow.mean_variance(share * duration_s)
        total += part
        if part > largest:
            largest, time_constant_s = part, slow.time_constant_s
    unit = SlowError(1.0, time_constant_s).mean_variance(duration_s)
    return SlowError(math.sqrt(total / unit), time_constant_s)
