"""The simulated receiver as a source."""

from __future__ import annotations

import threading

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock
from gnssmon.errors import SourceError
from gnssmon.replay.player import Player
from gnssmon.session import run
from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario
from gnssmon.sources import open_source
from tests.test_chunks import parts
from tests.test_session import Noting

CLOCK = ManualClock()


def test_bytes_and_times_are_the_generators() -> None:
    """Each epoch's bytes with its simulated time of arrival, in order, whatever they are joined to."""
    source = open_source("sim:open_roof?seed=7&duration=2m", clock=CLOCK)
    expected = [(data, at) for at, data in generate(load_scenario("open_roof"), duration_s=120.0, seed=7)]

    chunks = list(source.chunks())

    assert [piece for chunk in chunks for piece in parts(chunk)] == expected
    assert len(chunks) < len(expected) / 4
    assert (source.kind, source.baud) == ("simulated", load_scenario("open_roof").stream.baud)


def test_the_same_text_gives_the_same_bytes() -> None:
    """A seed is a run; another seed is another."""

    def data(text: str) -> bytes:
        return b"".join(chunk.data for chunk in open_source(text, clock=CLOCK).chunks())

    assert data("sim:open_roof?duration=5s") == data("sim:open_roof?duration=5s&seed=1")
    assert data("sim:open_roof?duration=5s") != data("sim:open_roof?duration=5s&seed=2")


def test_played_at_its_own_pace() -> None:
    """Through the player a simulated minute takes a minute, an epoch a second."""
    clock = ManualClock()
    player = Player(lambda: open_source("sim:open_roof?duration=1m", clock=clock), clock)
    times: list[float] = []
    for chunk in player.chunks():
        assert isinstance(chunk, Chunk)
        times.append(clock.steady())

    assert len(times) == 60
    assert times == pytest.approx(list(range(60)), abs=0.2)


def test_for_is_simulated_time() -> None:
    """``for_s`` counts the stream's own seconds."""
    monitor = Noting()
    source = open_source("sim:open_roof?duration=1h", clock=CLOCK)

    outcome = run(source, monitor, [], CLOCK, stop=threading.Event(), for_s=10.0)

    assert outcome.ended == "end"
    assert monitor.data.count(b"GGA,") == 10


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("sim:open_rof", "open_roof"),
        ("sim:", "scenario"),
        ("sim:open_roof?sed=1", "'sed=1'.*'seed=7'"),
        ("sim:open_roof?seed=x", "not known"),
        ("sim:open_roof?duration=x", "not a duration"),
    ],
)
def test_mistakes(text: str, words: str) -> None:
    """An unknown scenario or setting is answered with what is known."""
    with pytest.raises(SourceError, match=words):
        open_source(text, clock=CLOCK)
