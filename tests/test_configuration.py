"""Settings files: what is read, and that every mistake is answered with file, line, key and what was meant."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.configuration import Duration, line_of, load, nearest
from gnssmon.errors import ConfigurationError


@dataclass(frozen=True, slots=True)
class Rule:
    name: str
    limit: float
    hold_s: Duration = field(default=0.0, metadata={"key": "hold"})
    severity: Literal["low", "high"] = "low"

    def __post_init__(self) -> None:
        if self.limit < 0:
            raise ConfigurationError("a limit below zero makes no sense")


@dataclass(frozen=True, slots=True)
class Place:
    height_m: float = 0.0
    size: tuple[float, float] | None = None
    count: int = 0
    on: bool = False


@dataclass(frozen=True, slots=True)
class File:
    rule: tuple[Rule, ...] = ()
    place: Place = Place()
    levels: dict[str, float] = field(default_factory=dict)
    either: float | str = 0.0


GOOD = """# a comment
either = "text"

[place]
height_m = 2
size = [
  1.0,
  2.5,
]

[levels]
G1 = 45

[[rule]]
name = '''two
lines'''
limit = 3

[[rule]]
name = "b"
limit = 4.5
hold = "1m30s"
severity = "high"
"""


def test_reads_tables_lists_and_defaults():
    """A table becomes a dataclass, a list of tables a tuple of them, an absent key its default."""
    expected = File(
        rule=(Rule("two\nlines", 3.0), Rule("b", 4.5, 90.0, "high")),
        place=Place(height_m=2.0, size=(1.0, 2.5)),
        levels={"G1": 45.0},
        either="text",
    )

    assert load(File, GOOD, name="good.toml") == expected


MISTAKES = [
    ("[place]\nheigth_m = 2", 2, "place.heigth_m", "'height_m'"),
    ("[palce]\nheight_m = 2", 1, "palce", "'place'"),
    ("# no\n\n[[rule]]\nname = 'a'\nlimit = '3 m'", 5, "rule.limit", "wanted a number"),
    ("[[rule]]\nname = 'a'\nlimit = 3\n[[rule]]\nname = 'b'", 4, "rule", "'limit' is missing"),
    ("[[rule]]\nname = 'a'\nlimit = 3\n[[rule]]\nname = 'b'\nlimit = true", 6, "rule.limit", "got true"),
    ("[[rule]]\nname = 'a'\nlimit = 3\nseverity = 'hihg'", 4, "rule.severity", '"high"'),
    ("[[rule]]\nname = 'a'\nlimit = 3\nhold = 'soon'", 4, "rule.hold", "not a duration"),
    ("[[rule]]\nname = 'a'\nlimit = 3\nhold = -1", 4, "rule.hold", "duration"),
    ("[rule]\nname = 'a'\nlimit = 3", 1, "rule", "[[rule]]"),
    ("[[rule]]\nname = 'a'\n\nlimit = -3", 1, "rule", "below zero"),
    ("[place]\nsize = [\n 1.0,\n]", 2, "place.size", "2 values"),
    ("[place]\nsize = [1.0, 'b']", 2, "place.size", "wanted a number"),
    ("[place]\ncount = 1.5", 2, "place.count", "a whole number"),
    ("[place]\nheight_m = inf", 2, "place.height_m", "finite"),
    ("place = 3", 1, "place", "wanted a table"),
    ("levels.G1 = 'x'", 1, "levels.G1", "wanted a number"),
    ("either = [1]", 1, "either", "a number, got a list; or wanted a text"),
]


@pytest.mark.parametrize(("text", "line", "key", "meant"), MISTAKES)
def test_each_mistake_names_file_line_key_and_what_was_meant(text, line, key, meant):
    """The error of a settings file can be mended without looking anything up."""
    with pytest.raises(ConfigurationError) as error:
        load(File, text, name="my.toml")

    message = str(error.value)
    assert message.startswith(f"my.toml, line {line}, key '{key}': ")
    assert meant in message
    assert "\n" not in message


def test_broken_toml_names_line_and_shows_it():
    """What is not TOML at all is shown as it stands, with its line."""
    with pytest.raises(ConfigurationError, match=r"^my.toml, line 2: not TOML: .*, in: height_m = 1 2$"):
        load(File, "[place]\nheight_m = 1 2\n", name="my.toml")


@pytest.mark.parametrize("content", [b"\xff\xfe\x00", b"x" * 200_001, None])
def test_unreadable_file_is_an_error_with_its_path(tmp_path: Path, content):
    """A file that is absent, too large or not text is refused with its name."""
    path = tmp_path / "my.toml"
    if content is not None:
        path.write_bytes(content)

    with pytest.raises(ConfigurationError, match=r"my\.toml"):
        load(File, path)


def test_hostile_text_in_a_key_is_made_harmless():
    """Control characters of a key or value do not reach the terminal."""
    with pytest.raises(ConfigurationError) as error:
        load(File, '"\\u001b[31m" = 1', name="my.toml")

    assert "\x1b" not in str(error.value)


@given(st.lists(st.sampled_from(["[place]", "# c", "", 'either = "x"', "[[rule]]", "limit = [\n1,\n2]"]), max_size=8))
@settings(max_examples=50, deadline=None)
def test_line_points_at_the_statement_that_gives_the_key(before):
    """Whatever stands above, the line found is the one on which the key is written."""
    text = "\n".join([*before, "[unlike.anything]", "wanted = 1", "after = 2"])
    try:
        tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return

    assert line_of(text, ("unlike", "anything", "wanted")) == text.splitlines().index("wanted = 1") + 1


def test_nearest_always_offers_something():
    """Even a word that is like none of the known ones gets an offer."""
    assert nearest("zzz", ["at_most"]) == "'at_most'"
    assert nearest("at_mots", ["name", "at_most", "at_least"], 2) == "'at_most', 'at_least'"
