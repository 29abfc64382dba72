"""Criteria files and presets: what they may say, and how mistakes in them are answered."""

from __future__ import annotations

from pathlib import Path

import pytest

from gnssmon.acceptance.criteria import CriteriaSet, SiteSettings, load_criteria, preset_names, preset_text
from gnssmon.errors import ConfigurationError

EXAMPLE = """
[site]
reference = "-33.41 148.25 312.40"
frame = "EPSG:4979"
antenna_height_m = 1.50
mask_deg = 10

[[criterion]]
quantity = "scatter.r95_m"
at_most = 3.0
confidence = 0.95
minimum_duration = "30m"
note = "why this limit"

[[alarm]]
quantity = "cn0.strongest4_mean_dbhz"
below = 38.0
clear = 40.0
hold = "10s"
over = "30s"
severity = "warning"
"""
"""The criteria file of the interface contract."""


def _load(tmp_path: Path, text: str) -> CriteriaSet:
    path = tmp_path / "mine.toml"
    path.write_text(text, encoding="utf-8")
    return load_criteria(str(path))


def test_contract_example_is_understood(tmp_path):
    """Every key of the contract's example arrives with its unit."""
    loaded = _load(tmp_path, EXAMPLE)

    assert loaded.site == SiteSettings(
        reference="-33.41 148.25 312.40", frame="EPSG:4979", antenna_height_m=1.5, mask_deg=10.0
    )
    (criterion,) = loaded.criteria
    assert (criterion.quantity, criterion.comparison, criterion.limit) == ("scatter.r95_m", "at_most", 3.0)
    assert (criterion.confidence, criterion.minimum_duration_s, criterion.unit) == (0.95, 1800.0, "m")
    (alarm,) = loaded.alarms
    assert (alarm.limit, alarm.clear_limit, alarm.hold_s, alarm.over_s) == (38.0, 40.0, 10.0, 30.0)


MISTAKES = [
    ('quantity = "scatter.r95_n"\nat_most = 3', 2, "criterion.quantity", "'scatter.r95_m'"),
    ('quantity = "scatter.r95_m"\nat_mots = 3', 3, "criterion.at_mots", "'at_most'"),
    ('quantity = "scatter.r95_m"', 1, "criterion", "none stands here"),
    ('quantity = "scatter.r95_m"\nat_most = 3\nat_least = 1', 1, "criterion", "at_most and at_least stand together"),
    ('quantity = "scatter.r95_m"\nat_most = "3 m"', 3, "criterion.at_most", "wanted a number"),
    ('quantity = "scatter.r95_m"\nat_most = 3\nwithin = 1', 1, "criterion", "beside equals"),
    ('quantity = "scatter.r95_m"\nat_most = 3\nconfidence = 95', 1, "criterion", "0.95 was probably meant"),
    (
        'quantity = "scatter.r95_m"\nat_most = 3\nminimum_duration = "half an hour"',
        4,
        "criterion.minimum_duration",
        "30s",
    ),
    ('quantity = "stream.completeness"\nat_least = 99', 1, "criterion", "between 0 and 1"),
    ("at_most = 3", 1, "criterion", "'quantity' is missing"),
    ('quantity = "sky.mask_deg"\nat_most = 3', 2, "criterion.quantity", "no single number"),
    ('quantity = "cn0.mean_dbhz.*"\nat_most = 3', 2, "criterion.quantity", "no single number"),
    ("quantity = 3\nat_most = 3", 2, "criterion.quantity", "in quotes"),
]
ALARM_MISTAKES = [
    ('quantity = "scatter.r95_m"\nabove = 3', 2, "alarm.quantity", "no alarm can watch"),
    ('quantity = "dop.hdop_median"', 1, "alarm", "exactly one of below, above"),
    ('quantity = "dop.hdop_median"\nabove = 4\nclear = 5', 1, "alarm", "must not lie above"),
    ('quantity = "cn0.mean_dbhz"\nbelow = 4\nclear = 3', 1, "alarm", "must not lie below"),
    ('quantity = "dop.hdop_median"\nabove = 4\nseverity = "bad"', 4, "alarm.severity", '"serious"'),
    ('quantity = "dop.hdop_median"\nabove = 4\nover = "2d"', 1, "alarm", "between 1 s and 1 h"),
]


@pytest.mark.parametrize(
    ("text", "line", "key", "meant"),
    [("[[criterion]]\n" + text, *rest) for text, *rest in MISTAKES]
    + [("[[alarm]]\n" + text, *rest) for text, *rest in ALARM_MISTAKES]
    + [
        ("[[criteria]]\nquantity = 1", 1, "criteria", "'criterion'"),
        ("[site]\nmask_deg = 100", 1, "site", "between 0 and 90"),
        ("[site]\nantena_height_m = 1", 2, "site.antena_height_m", "'antenna_height_m'"),
        ('needs = ["refrence"]', 1, "needs", '"reference"'),
    ],
)
def test_each_mistake_is_answered_with_line_key_and_what_was_meant(tmp_path, text, line, key, meant):
    """Whoever edits a criteria file can mend it from the error alone."""
    with pytest.raises(ConfigurationError) as error:
        _load(tmp_path, text)

    message = str(error.value)
    assert f"mine.toml, line {line}, key '{key}': " in message
    assert meant in message


def test_unquoted_reference_shows_the_line(tmp_path):
    """The commonest slip of all, a coordinate without quotes, is no riddle."""
    with pytest.raises(ConfigurationError, match=r"line 2: not TOML: .*, in: reference = -33.41 148.25 312.4"):
        _load(tmp_path, "[site]\nreference = -33.41 148.25 312.4\n")


def test_unknown_name_offers_the_nearest_preset():
    """A name that is neither file nor preset is answered with the presets."""
    with pytest.raises(ConfigurationError, match=r"nearest preset: 'rtk-rover'; presets: default, "):
        load_criteria("rtk-rovr")


@pytest.mark.parametrize("name", preset_names())
def test_every_number_of_a_preset_has_a_source_or_says_that_it_has_none(name):
    """No limit stands without telling where it comes from."""
    loaded = load_criteria(name)

    assert loaded.criteria
    assert loaded.title
    for rule in (*loaded.criteria, *loaded.alarms):
        assert rule.source, rule.quantity
    assert "common practice, no source" in preset_text(name)


def test_usual_kinds_of_installation_have_a_preset():
    """The four kinds that were asked for, and the default."""
    assert set(preset_names()) == {"default", "autonomous", "differential", "rtk-rover", "reference-station"}


@pytest.mark.parametrize("name", ["rtk-rover", "reference-station"])
def test_preset_refuses_to_judge_without_the_site_data_it_needs(name):
    """It names the reference and the antenna height, and how to give them; the command line can."""
    loaded = load_criteria(name)

    with pytest.raises(ConfigurationError, match=r"--reference.*--antenna-height"):
        loaded.at(SiteSettings())
    with pytest.raises(ConfigurationError, match=r"--antenna-height"):
        loaded.at(SiteSettings(reference="1 2 3"))
    judged = loaded.at(SiteSettings(reference="1 2 3", antenna_height_m=1.5))
    assert judged.site == SiteSettings(reference="1 2 3", antenna_height_m=1.5, mask_deg=10.0)


def test_command_line_overrides_the_file(tmp_path):
    """What is said on the command line counts; what is not said there stays as in the file."""
    site = _load(tmp_path, EXAMPLE).at(SiteSettings(antenna_height_m=2.0)).site

    assert (site.antenna_height_m, site.reference) == (2.0, "-33.41 148.25 312.40")


def test_file_without_alarms_gets_the_default_ones(tmp_path):
    """A headless run calls when the position is gone even if nobody thought of alarms."""
    loaded = _load(tmp_path, '[[criterion]]\nquantity = "stream.gaps"\nat_most = 0')

    assert {rule.quantity for rule in loaded.alarms} >= {"fix.share_none", "stream.completeness"}
    assert loaded.confidences == (0.95,)


def test_hash_is_that_of_the_file(tmp_path):
    """The report can name the criteria file beyond doubt (hash by hashlib of the bytes on disk)."""
    import hashlib

    loaded = _load(tmp_path, EXAMPLE)

    assert loaded.sha256 == hashlib.sha256((tmp_path / "mine.toml").read_bytes()).hexdigest()
