"""East, north, up: where the antenna is, how far the positions scatter, how far they are from a reference."""

from __future__ import annotations

import math
from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import uncertainty
from gnssmon.estimators.moments import Moments
from gnssmon.estimators.uncertainty import SlowError
from gnssmon.geodesy import local_frame
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity
from gnssmon.statistics.pictures import MOST_POINTS, ScatterPicture
from gnssmon.statistics.positions import Cloud, Positions
from gnssmon.statistics.subject import EVERYTHING, Site, Span

Floats = npt.NDArray[np.float64]

MEASURES = "definition; names as in NRC, The Global Positioning System: A Shared National Asset (1995), app. D"
ELLIPSE = "eigenvalues of the covariance matrix"
ROBUST = "median absolute deviation times 1.4826"
HERE = "this program's own definition"

HORIZONTAL_SHARES = {"cep50": 0.50, "r68": 0.68, "r95": 0.95, "r99": 0.99}
VERTICAL_SHARES = {"vertical_68": 0.68, "vertical_95": 0.95}
AXES = ("east", "north", "up")

SLOW_ERRORS = {
    4: SlowError(0.005, 1200.0),
    5: SlowError(0.15, 1800.0),
    2: SlowError(0.5, 3600.0),
    1: SlowError(0.7, 10800.0),
}
"""Prior for horizontal errors too slow to be seen, by GGA quality; twice as much in height. Start values for a GUM
type B evaluation (JCGM 100:2008, 4.3): correlation of about 20 min of carrier-phase positions is published
(El-Rabbany & Kleusberg 2003), the sizes are common practice, no source. Other qualities count as autonomous."""
UP_FACTOR = 2.0


def _quantity(name: str, unit: str, meaning: str, source: str) -> Quantity:
    return Quantity(name=name, unit=unit, meaning=meaning, source=source)


class Scatter:
    """Positions of a window: spread, rings, ellipse, mean, offset from the reference."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        _quantity("scatter.east_std_m", "m", "Standard deviation of the east component (n - 1).", MEASURES),
        _quantity("scatter.north_std_m", "m", "Standard deviation of the north component (n - 1).", MEASURES),
        _quantity("scatter.up_std_m", "m", "Standard deviation of the ellipsoidal height (n - 1).", MEASURES),
        _quantity("scatter.cep50_m", "m", "Radius about the mean that holds 50 % of the positions.", MEASURES),
        _quantity("scatter.r68_m", "m", "Radius about the mean that holds 68 % of the positions.", MEASURES),
        _quantity("scatter.r95_m", "m", "Radius about the mean that holds 95 % of the positions.", MEASURES),
        _quantity("scatter.r99_m", "m", "Radius about the mean that holds 99 % of the positions.", MEASURES),
        _quantity("scatter.drms_m", "m", "DRMS: root of the sum of the east and north variances.", MEASURES),
        _quantity("scatter.drms2_m", "m", "2DRMS: twice the DRMS.", MEASURES),
        _quantity("scatter.vertical_68_m", "m", "Height difference from the mean that 68 % keep within.", MEASURES),
        _quantity("scatter.vertical_95_m", "m", "Height difference from the mean that 95 % keep within.", MEASURES),
        _quantity("scatter.sep50_m", "m", "Radius of the sphere about the mean that holds 50 %.", MEASURES),
        _quantity(
            "scatter.cep50_gaussian_m", "m", "CEP50 that normal errors of the same ellipse would have.", MEASURES
        ),
        _quantity("scatter.r95_gaussian_m", "m", "R95 that normal errors of the same ellipse would have.", MEASURES),
        _quantity("scatter.east_robust_std_m", "m", "East spread that a few outliers cannot move.", ROBUST),
        _quantity("scatter.north_robust_std_m", "m", "North spread that a few outliers cannot move.", ROBUST),
        _quantity("scatter.up_robust_std_m", "m", "Height spread that a few outliers cannot move.", ROBUST),
        _quantity(
            "scatter.effective_samples",
            "count",
            "How many independent positions the window is worth for its mean (the worse of east and north).",
            "equal-weighted cosines: Lazarus, Lewis, Stock & Watson, J. Bus. Econ. Stat. 36 (2018)",
        ),
        _quantity("scatter.positions", "count", "Positions with a fix that went in.", HERE),
        _quantity("scatter.mean_latitude_deg", "deg", "Mean latitude (WGS 84).", MEASURES),
        _quantity("scatter.mean_longitude_deg", "deg", "Mean longitude (WGS 84).", MEASURES),
        _quantity(
            "scatter.mean_ellipsoidal_height_m",
            "m",
            "Mean height above the ellipsoid: altitude + separation.",
            MEASURES,
        ),
        _quantity("scatter.ellipse_major_m", "m", "Semi-major axis of the 1-sigma error ellipse (39 %).", ELLIPSE),
        _quantity("scatter.ellipse_minor_m", "m", "Semi-minor axis of the 1-sigma error ellipse (39 %).", ELLIPSE),
        _quantity("scatter.ellipse_azimuth_deg", "deg", "Azimuth of the ellipse's major axis, 0 to 180.", ELLIPSE),
        _quantity("reference.east_m", "m", "Mean position minus reference, east.", HERE),
        _quantity("reference.north_m", "m", "Mean position minus reference, north.", HERE),
        _quantity("reference.up_m", "m", "Mean position minus reference, up.", HERE),
        _quantity("reference.horizontal_m", "m", "Horizontal distance of the mean position from the reference.", HERE),
    )

    def __init__(self, site: Site) -> None:
        self._site = site
        self._positions = Positions()
        self._clouds: dict[Span, Cloud | None] = {}
        self._answers: dict[tuple[Span, float], dict[str, Estimate]] = {}

    def update(self, batch: EpochBatch) -> None:
        """Take in the positions of closed epochs."""
        before = len(self._positions)
        self._positions.update(batch)
        if len(self._positions) != before:
            self._forget_answers()

    def merge(self, other: Self) -> None:
        """Take in the positions of a later part of the stream."""
        self._positions.merge(other._positions)
        self._forget_answers()

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; ``NOTHING`` where there are too few positions."""
        key = (span, confidence)
        if key not in self._answers:
            answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
            cloud = self._cloud(span)
            if cloud is not None:
                answers |= _Answers(cloud, self._site, confidence).everything()
            self._answers[key] = answers
        return dict(self._answers[key])

    def picture(self, span: Span = EVERYTHING) -> ScatterPicture:
        """Positions, ellipse and rings for drawing."""
        return _picture(self._cloud(span), self._site, self.summary(span))

    def _cloud(self, span: Span) -> Cloud | None:
        if span not in self._clouds:
            self._clouds[span] = self._positions.cloud(span)
        return self._clouds[span]

    def _forget_answers(self) -> None:
        self._clouds.clear()
        self._answers.clear()


class _Answers:
    """The numbers of one window."""

    def __init__(self, cloud: Cloud, site: Site, confidence: float) -> None:
        self.cloud, self.site, self.confidence = cloud, site, confidence
        self.count = len(cloud)
        self.horizontal = cloud.enu_m[:, :2]
        up = cloud.enu_m[:, 2]
        known = np.isfinite(up)
        self.has_up = bool(known.any())
        self.all_up = bool(known.all())
        self.spatial = cloud.enu_m if self.all_up else cloud.enu_m[known]
        self.duration_s = _duration_s(cloud.axis_ms)
        self.effective = [math.nan] * 3
        self.mean_variance = [math.nan] * 3
        if self.count >= uncertainty.FEWEST_SAMPLES:
            covariance = uncertainty.mean_covariance(self.horizontal)
            self.mean_variance[:2] = [float(covariance[0, 0]), float(covariance[1, 1])]
        if len(self.spatial) >= uncertainty.FEWEST_SAMPLES:
            self.mean_variance[2] = float(uncertainty.mean_covariance(self.spatial[:, 2:])[0, 0])

    def everything(self) -> dict[str, Estimate]:
        answers = {"scatter.positions": Estimate(float(self.count), (self.count, self.count), 1.0, self.count)}
        answers |= self._means()
        if self.count >= 2:
            answers |= self._spreads()
            answers |= self._rings()
        if self.site.reference is not None:
            answers |= self._offsets(self.site.reference)
        return answers

    def _half_widths(self) -> list[float | None]:
        """Half widths of the intervals of the mean east, north, up; None: too short to say."""
        widths: list[float | None] = []
        for axis, variance in enumerate(self.mean_variance):
            if math.isnan(variance):
                widths.append(None)
                continue
            slow = _slow_variance(self.cloud.quality, self.duration_s) * (UP_FACTOR**2 if axis == 2 else 1.0)
            widths.append(uncertainty.mean_error(variance, slow, self.confidence))
        return widths

    def _estimate(self, value: float, half: float | None, axis: int) -> Estimate:
        interval = None if half is None else (value - half, value + half)
        return Estimate(value, interval, self.confidence, self.count, self.effective[axis])

    def _means(self) -> dict[str, Estimate]:
        latitude_deg, longitude_deg, height_m = self.cloud.centre
        per_latitude, per_longitude = local_frame.metres_per_degree(self.cloud.centre)
        east, north, up = self._half_widths()
        answers = {
            "scatter.mean_latitude_deg": self._estimate(
                latitude_deg, None if north is None else north / per_latitude, 1
            ),
            "scatter.mean_longitude_deg": self._estimate(
                longitude_deg, None if east is None or not per_longitude else east / per_longitude, 0
            ),
        }
        if self.has_up:
            answers["scatter.mean_ellipsoidal_height_m"] = self._estimate(height_m, up, 2)
        return answers

    def _spreads(self) -> dict[str, Estimate]:
        moments = Moments(2)
        moments.update(self.horizontal)
        covariance = moments.covariance
        variances = [float(covariance[0, 0]), float(covariance[1, 1]), math.nan]
        if len(self.spatial) >= 2:
            variances[2] = float(self.spatial[:, 2].var(ddof=1))
        answers = {}
        for axis, name in enumerate(AXES):
            variance, of_mean = variances[axis], self.mean_variance[axis]
            if math.isnan(variance):
                continue
            if of_mean > 0.0:
                self.effective[axis] = min(max(variance / of_mean, 1.0), float(self.count))
            values = self.spatial[:, 2] if axis == 2 else self.horizontal[:, axis]
            answers[f"scatter.{name}_std_m"] = self._spread(math.sqrt(variance), self.effective[axis])
            robust = 1.482602218505602 * float(np.median(np.abs(values - np.median(values))))
            answers[f"scatter.{name}_robust_std_m"] = Estimate(robust, None, self.confidence, len(values))
        effective = min(self.effective[:2])
        drms = math.sqrt(variances[0] + variances[1])
        major, minor, azimuth_deg = ellipse(covariance)
        answers["scatter.drms_m"] = self._spread(drms, effective)
        answers["scatter.drms2_m"] = self._spread(2.0 * drms, effective)
        answers["scatter.ellipse_major_m"] = self._spread(major, effective)
        answers["scatter.ellipse_minor_m"] = self._spread(minor, effective)
        answers["scatter.ellipse_azimuth_deg"] = Estimate(azimuth_deg, None, self.confidence, self.count, effective)
        answers["scatter.cep50_gaussian_m"] = Estimate(gaussian_radius(0.50, major, minor), None, self.confidence)
        answers["scatter.r95_gaussian_m"] = Estimate(gaussian_radius(0.95, major, minor), None, self.confidence)
        if not math.isnan(effective):
            answers["scatter.effective_samples"] = Estimate(effective, None, self.confidence, self.count, effective)
        return answers

    def _spread(self, value: float, effective: float) -> Estimate:
        interval = uncertainty.spread_interval(value, effective, self.confidence)
        return Estimate(value, interval, self.confidence, self.count, effective)

    def _rings(self) -> dict[str, Estimate]:
        east, north = (self.horizontal - self.horizontal.mean(axis=0)).T
        squares = east * east + north * north
        answers = self._quantiles(np.sqrt(squares), HORIZONTAL_SHARES)
        if len(self.spatial) >= 2:
            up = self.spatial[:, 2] - self.spatial[:, 2].mean()
            answers |= self._quantiles(np.abs(up), VERTICAL_SHARES)
            if self.all_up:
                answers |= self._quantiles(np.sqrt(squares + up * up), {"sep50": 0.50})
        return answers

    def _quantiles(self, distance_m: Floats, shares: dict[str, float]) -> dict[str, Estimate]:
        ordered = np.sort(distance_m)
        answers = {}
        for name, share in shares.items():
            value = uncertainty.ordered_quantile(ordered, share)
            effective = uncertainty.effective_samples((distance_m > value).astype(np.float64))
            interval = uncertainty.quantile_interval(ordered, share, effective, self.confidence)
            answers[f"scatter.{name}_m"] = Estimate(value, interval, self.confidence, len(ordered), effective)
        return answers

    def _offsets(self, reference: local_frame.Geographic) -> dict[str, Estimate]:
        enu_m = self.cloud.about(reference)
        halves = self._half_widths()
        answers = {}
        east_m, north_m = float(enu_m[:, 0].mean()), float(enu_m[:, 1].mean())
        for axis, value in enumerate((east_m, north_m)):
            answers[f"reference.{AXES[axis]}_m"] = self._estimate(value, halves[axis], axis)
        if self.has_up:
            answers["reference.up_m"] = self._estimate(float(np.nanmean(enu_m[:, 2])), halves[2], 2)
        horizontal_m = math.hypot(east_m, north_m)
        interval = None
        if halves[0] is not None and halves[1] is not None:
            interval = uncertainty.length_interval(horizontal_m, max(halves[0], halves[1]), self.confidence)
        answers["reference.horizontal_m"] = Estimate(
            horizontal_m, interval, self.confidence, self.count, min(self.effective[:2])
        )
        return answers


def ellipse(covariance: Floats) -> tuple[float, float, float]:
    """Semi-axes a ≥ b (m) and azimuth of a (deg, 0 to 180) of the 1-sigma ellipse of an east-north covariance."""
    east, north, mixed = float(covariance[0, 0]), float(covariance[1, 1]), float(covariance[0, 1])
    middle = (east + north) / 2.0
    reach = math.hypot((east - north) / 2.0, mixed)
    azimuth_deg = math.degrees(0.5 * math.atan2(2.0 * mixed, north - east)) % 180.0
    return math.sqrt(middle + reach), math.sqrt(max(middle - reach, 0.0)), azimuth_deg


def gaussian_radius(share: float, major: float, minor: float) -> float:
    """Radius that holds ``share`` of a normal distribution with these standard deviations along its axes.

    The probability of a circle is an integral over the azimuth, P(r) = 1 - (1/2π) ∫ (ab/q) exp(-r²q/2a²b²) dφ with
    q = a² sin²φ + b² cos²φ; it is summed at 256 azimuths and inverted by bisection.
    """
    if major <= 0.0:
        return 0.0
    ratio = max(minor / major, 1e-3)
    phase = (np.arange(256) + 0.5) * (2.0 * math.pi / 256)
    q = np.sin(phase) ** 2 + ratio**2 * np.cos(phase) ** 2
    low, high = 0.0, 10.0
    for _ in range(50):
        radius = (low + high) / 2.0
        inside = 1.0 - float(np.mean(ratio / q * np.exp(-(radius**2) * q / (2.0 * ratio**2))))
        low, high = (radius, high) if inside < share else (low, radius)
    return major * (low + high) / 2.0


def _duration_s(axis_ms: npt.NDArray[np.int64]) -> float:
    """Time during which there were positions: count times usual step."""
    if len(axis_ms) < 2:
        return 0.0
    return float(np.median(np.diff(axis_ms))) * len(axis_ms) / 1000.0


def _slow_variance(quality: npt.NDArray[np.int8], duration_s: float) -> float:
    """Prior variance of the mean east or north from errors too slow to be seen; errors of two kinds of fix are
    independent of each other."""
    codes, counts = np.unique(quality, return_counts=True)
    total = 0.0
    for code, count in zip(codes, counts, strict=True):
        share = count / len(quality)
        total += share**2 * SLOW_ERRORS.get(int(code), SLOW_ERRORS[1]).mean_variance(share * duration_s)
    return total


def _picture(cloud: Cloud | None, site: Site, answers: dict[str, Estimate]) -> ScatterPicture:
    about = "mean" if site.reference is None else "reference"
    if cloud is None:
        nothing = np.empty(0)
        return ScatterPicture(
            axis_ms=np.empty(0, dtype=np.int64),
            east_m=nothing,
            north_m=nothing,
            up_m=nothing,
            quality=np.empty(0, dtype=np.int8),
            origin=site.reference,
            about=about,
            mean_m=None,
            ellipse_m=None,
            cep50_m=math.nan,
            r95_m=math.nan,
            minute=np.empty(0, dtype=np.int64),
            minute_mean_m=np.empty((0, 3)),
        )
    enu_m = cloud.enu_m if site.reference is None else cloud.about(site.reference)
    shown = slice(None)
    if len(cloud) > MOST_POINTS:
        shown = np.linspace(0, len(cloud) - 1, MOST_POINTS).astype(np.intp)  # type: ignore[assignment]
    minute, minute_mean_m = _minute_means(cloud.axis_ms, enu_m)

    def number(name: str) -> float:
        value = answers[name].value
        return value if isinstance(value, float) else math.nan

    axes = tuple(number(f"scatter.ellipse_{name}") for name in ("major_m", "minor_m", "azimuth_deg"))
    mean_up_m = float(np.nanmean(enu_m[:, 2])) if np.isfinite(enu_m[:, 2]).any() else math.nan
    return ScatterPicture(
        axis_ms=cloud.axis_ms[shown],
        east_m=enu_m[shown, 0],
        north_m=enu_m[shown, 1],
        up_m=enu_m[shown, 2],
        quality=cloud.quality[shown],
        origin=cloud.centre if site.reference is None else site.reference,
        about=about,
        mean_m=(float(enu_m[:, 0].mean()), float(enu_m[:, 1].mean()), mean_up_m),
        ellipse_m=None if math.isnan(axes[0]) else (axes[0], axes[1], axes[2]),
        cep50_m=number("scatter.cep50_m"),
        r95_m=number("scatter.r95_m"),
        minute=minute,
        minute_mean_m=minute_mean_m,
    )


def _minute_means(axis_ms: npt.NDArray[np.int64], enu_m: Floats) -> tuple[npt.NDArray[np.int64], Floats]:
    minute, row = np.unique(axis_ms // 60_000, return_inverse=True)
    means = np.full((len(minute), 3), np.nan)
    for axis in range(3):
        known = np.isfinite(enu_m[:, axis])
        count = np.bincount(row[known], minlength=len(minute))
        total = np.bincount(row[known], weights=enu_m[known, axis], minlength=len(minute))
        np.divide(total, count, out=means[:, axis], where=count > 0)
    return minute, means
