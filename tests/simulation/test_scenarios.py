"""Scenarios: each comes with words that teach, loads, runs, and speaks NMEA; mistakes in a file are named."""

from __future__ import annotations

from importlib import resources

import pynmea2
import pytest

from gnssmon.configuration import load
from gnssmon.errors import ConfigurationError
from gnssmon.simulation.generator import Generator
from gnssmon.simulation.scenario import Scenario, load_scenario, scenario_names

NAMES = scenario_names()
FOLDER = resources.files("gnssmon.simulation") / "scenarios"
SITE = "title = 't'\n[site]\nlatitude_deg = 10.0\nlongitude_deg = 20.0\nheight_m = 5.0\n"


def test_there_are_enough():
    """At least twelve come with the program, healthy and faulty ones, and the demonstration among them."""
    assert len(NAMES) >= 12
    assert {load_scenario(name).healthy for name in NAMES} == {True, False}
    assert "demo" in NAMES


@pytest.mark.parametrize("name", NAMES)
def test_each_is_a_readable_file(name):
    """A comment on top says what it is about; a title fits the list; one line says what it teaches."""
    text = (FOLDER / f"{name}.toml").read_text("utf-8")
    scenario = load_scenario(name)

    assert text.startswith("# ")
    assert len([line for line in text.splitlines() if line.startswith("# ")]) >= 2
    assert all(len(line) <= 120 for line in text.splitlines())
    assert scenario.name == name
    assert 10 < len(scenario.title) <= 58
    assert scenario.teaches


@pytest.mark.parametrize("name", NAMES)
def test_each_speaks_nmea(name):
    """A minute of each: pynmea2 reads every sentence; only where a line damages them do some fail."""
    scenario = load_scenario(name)
    run = Generator(scenario, duration_s=60.0, seed=2)
    data = b"".join(part for _, part in run.chunks())
    line = run.truth()["line"]
    good = bad = 0
    for text in data.split(b"\n"):
        try:
            pynmea2.parse(text[max(0, text.rfind(b"$")) :].decode("ascii"), check=True)
            good += 1
        except (pynmea2.ParseError, UnicodeDecodeError):
            bad += text.startswith(b"$")

    offered = line["sentences"] - line["missing_sentences"]
    harmed = line["cut_sentences"] + line["damaged_sentences"]
    assert good > 20
    # A damaged or cut sentence may take the one behind it along, when its line end is gone.
    assert offered - 2 * harmed <= good <= offered
    assert bad <= 2 * harmed
    if not harmed and not scenario.stream.binary_bytes_per_epoch:
        assert bad == 0


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (SITE + "[antenna]\nroloff_db = 3\n", ("line 7", "antenna.roloff_db", "'rolloff_db'")),
        (SITE + "[receiver]\nsignals = ['G1', 'G3']\n", ("receiver", "'G3'")),
        (SITE + "[stream]\nrate_hz = 60.0\n", ("rate_hz", "0.2", "50")),
        (SITE + "[[event]]\nkind = 'storm'\nat = '1m'\n", ("line 7", "event.kind", '"interference"')),
        (SITE + "[[event]]\nkind = 'interference'\nat = '1m'\nbands = ['L1']\n", ("'L1'", "E5a")),
        (SITE + "[[event]]\nkind = 'cable_loss'\nat = '1m'\nshape = 'ramp'\n", ("ramp", "'for'")),
        (SITE + "[[event]]\nkind = 'silence'\nat = '1m'\nfor = '3m'\nevery = '2m'\n", ("'every'",)),
        (SITE + "[[event]]\nkind = 'text'\nat = '1m'\ntext = 'a*b'\n", ("plain characters",)),
        (SITE + "[stream]\nstart = '12:00'\n", ("stream.start", "date")),
        (SITE.replace("10.0", "91.0"), ("latitude_deg", "89.9")),
        ("title = 't'\n", ("'site'", "missing")),
    ],
)
def test_mistakes_are_named(text, words):
    """Key, line and what would be right stand in the error."""
    with pytest.raises(ConfigurationError) as caught:
        load(Scenario, text, name="mine.toml")

    assert "mine.toml" in str(caught.value)
    for word in words:
        assert word in str(caught.value)


def test_unknown_scenario(tmp_path):
    """A wrong name gives the nearest one; a file of one's own is read."""
    with pytest.raises(ConfigurationError, match="open_roof"):
        load_scenario("open_rof")
    (tmp_path / "mine.toml").write_text(SITE)
    assert load_scenario(str(tmp_path / "mine.toml")).name == "mine"


def test_the_demonstration_shows_something_within_two_minutes():
    """Its first event begins in the first two minutes and ends soon after; every quarter of an hour it comes again."""
    demo = load_scenario("demo")
    first = min(demo.event, key=lambda event: event.at_s)

    assert first.at_s < 60.0
    assert first.at_s + first.for_s < 120.0
    assert {event.every_s for event in demo.event} == {900.0}
