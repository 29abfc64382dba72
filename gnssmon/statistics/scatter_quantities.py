"""The table of what positions tell: name, unit, meaning, source."""

from __future__ import annotations

from gnssmon.quantities import Quantity

MEASURES = "definition; names as in NRC, The Global Positioning System: A Shared National Asset (1995), app. D"
ELLIPSE = "eigenvalues of the covariance matrix"
ROBUST = "median absolute deviation times 1.4826, 1/Φ⁻¹(3/4)"
LONG_RUN = "cosine weights: Müller, J. Econometrics 141 (2007); Lazarus et al., J. Bus. Econ. Stat. 36 (2018)"
JUMPS = "medians of 10 s, difference above six times the usual: this program's own, from simulation"
HERE = "this program's own definition"
GGA = "GGA geoid separation, IEC 61162-1"

_ROWS = (
    ("scatter.positions", "count", "Positions with a fix that went in.", HERE),
    ("scatter.east_std_m", "m", "Standard deviation of the east component (n - 1).", MEASURES),
    ("scatter.north_std_m", "m", "Standard deviation of the north component (n - 1).", MEASURES),
    ("scatter.up_std_m", "m", "Standard deviation of the ellipsoidal height (n - 1).", MEASURES),
    ("scatter.cep50_m", "m", "Radius about the window's mean that holds 50 % of its positions.", MEASURES),
    ("scatter.r68_m", "m", "Radius about the window's mean that holds 68 % of its positions.", MEASURES),
    ("scatter.r95_m", "m", "Radius about the window's mean that holds 95 % of its positions.", MEASURES),
    ("scatter.r99_m", "m", "Radius about the window's mean that holds 99 % of its positions.", MEASURES),
    ("scatter.drms_m", "m", "DRMS: root of the sum of the east and north variances.", MEASURES),
    ("scatter.drms2_m", "m", "2DRMS: twice the DRMS.", MEASURES),
    ("scatter.vertical_68_m", "m", "Height difference from the mean that 68 % of the positions keep within.", MEASURES),
    ("scatter.vertical_95_m", "m", "Height difference from the mean that 95 % of the positions keep within.", MEASURES),
    ("scatter.sep50_m", "m", "Radius of the sphere about the mean that holds 50 % of the positions.", MEASURES),
    ("scatter.cep50_gaussian_m", "m", "CEP50 that normal errors of the same ellipse would have.", MEASURES),
    ("scatter.r95_gaussian_m", "m", "R95 that normal errors of the same ellipse would have.", MEASURES),
    ("scatter.east_robust_std_m", "m", "East spread that a few outliers cannot move.", ROBUST),
    ("scatter.north_robust_std_m", "m", "North spread that a few outliers cannot move.", ROBUST),
    ("scatter.up_robust_std_m", "m", "Height spread that a few outliers cannot move.", ROBUST),
    ("scatter.east_median_m", "m", "Median minus mean, east.", HERE),
    ("scatter.north_median_m", "m", "Median minus mean, north.", HERE),
    ("scatter.up_median_m", "m", "Median minus mean, up.", HERE),
    (
        "scatter.ellipse_major_m",
        "m",
        "Semi-major axis of the 1-sigma error ellipse (39 %; times 2.448: 95 %).",
        ELLIPSE,
    ),
    (
        "scatter.ellipse_minor_m",
        "m",
        "Semi-minor axis of the 1-sigma error ellipse (39 %; times 2.448: 95 %).",
        ELLIPSE,
    ),
    ("scatter.ellipse_azimuth_deg", "deg", "Azimuth of the ellipse's major axis from north, 0 to 180.", ELLIPSE),
    ("scatter.mean_latitude_deg", "deg", "Mean latitude (WGS 84); the interval counts slow errors in.", MEASURES),
    ("scatter.mean_longitude_deg", "deg", "Mean longitude (WGS 84); the interval counts slow errors in.", MEASURES),
    ("scatter.mean_ellipsoidal_height_m", "m", "Mean height above the ellipsoid: altitude + separation.", MEASURES),
    ("scatter.mean_half_width_m", "m", "Half width of the mean's interval, the worse of east and north.", LONG_RUN),
    (
        "scatter.effective_samples",
        "count",
        "How many independent positions the window is worth for its mean (the worse of east and north).",
        LONG_RUN,
    ),
    (
        "scatter.forecast_to_1cm_s",
        "s",
        "How much longer to observe, at the present noise, until the mean is known to a centimetre; up to 30 days.",
        LONG_RUN,
    ),
    ("scatter.drift_east_mm_per_h", "mm/h", "Slope of the east component; from six of its slow periods on.", LONG_RUN),
    (
        "scatter.drift_north_mm_per_h",
        "mm/h",
        "Slope of the north component; from six of its slow periods on.",
        LONG_RUN,
    ),
    ("scatter.drift_up_mm_per_h", "mm/h", "Slope of the height; from six of its slow periods on.", LONG_RUN),
    ("scatter.jumps", "count", "How often the position stepped aside and stayed there.", JUMPS),
    ("scatter.largest_jump_m", "m", "Length of the largest such step.", JUMPS),
    ("scatter.largest_jump_after_s", "s", "When it came, seconds from the window's first position.", JUMPS),
    ("scatter.smallest_jump_m", "m", "The smallest horizontal step that could have been seen in this noise.", JUMPS),
    ("scatter.separation_m", "m", "Mean geoid separation that the stream states.", GGA),
    (
        "scatter.geoid_difference_m",
        "m",
        "That separation minus the EGM96 model's; null where no EGM96 grid is installed.",
        "EGM96, NGA",
    ),
    ("reference.east_m", "m", "Mean position minus reference, east.", HERE),
    ("reference.north_m", "m", "Mean position minus reference, north.", HERE),
    ("reference.up_m", "m", "Mean position minus reference, up.", HERE),
    ("reference.horizontal_m", "m", "Horizontal distance of the mean position from the reference.", HERE),
    (
        "reference.horizontal_chance",
        "share",
        "Probability that chance and slow errors alone put the mean so far off horizontally.",
        "chi-square with two degrees of freedom on the offsets over their uncertainties",
    ),
    (
        "reference.up_chance",
        "share",
        "Probability that chance and slow errors alone put the mean so far off in height.",
        "chi-square with one degree of freedom on the offset over its uncertainty",
    ),
)

QUANTITIES = tuple(
    Quantity(name=name, unit=unit, meaning=meaning, source=source) for name, unit, meaning, source in _ROWS
)
