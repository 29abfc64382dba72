"""Playing a log: pace, pause, jump, step; the same bytes in the same order as without any of them."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from functools import partial
from itertools import pairwise
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock
from gnssmon.recording.recorder import Recorder
from gnssmon.replay.player import LOOK_S, Player
from gnssmon.sources import open_source
from tests.replay.test_epoch_starts import sentence
from tests.sources.sentences import burst, stream

START_MS = 36_000_000
DATA = stream(120)


@pytest.fixture
def log(tmp_path: Path) -> Path:
    path = tmp_path / "log.nmea"
    path.write_bytes(DATA)
    return path


def player_of(path: Path, clock: ManualClock, rate: float = 1.0) -> Player:
    return Player(lambda: open_source(str(path), clock=clock), clock, rate=rate)


def timed(player: Player, clock: ManualClock) -> list[tuple[float, bytes]]:
    return [(round(clock.steady(), 3), chunk.data) for chunk in player.chunks()]


@pytest.mark.parametrize("rate", [0.1, 1.0, 7.0, 500.0])
def test_pace(log: Path, rate: float) -> None:
    """An epoch comes when its time has come: the log's seconds divided by the rate, to one look at the clock."""
    clock = ManualClock()
    player = player_of(log, clock, rate)

    got = timed(player, clock)

    assert b"".join(data for _, data in got) == DATA
    assert clock.steady() == pytest.approx(119.0 / rate, abs=LOOK_S)
    if rate <= 7.0:
        assert [data for _, data in got] == [burst(second) for second in range(120)]
        assert [at for at, _ in got] == pytest.approx([second / rate for second in range(120)], abs=LOOK_S)


def test_as_fast_as_possible(log: Path) -> None:
    """At an infinite rate no time passes, and the log is not cut into epochs."""
    clock = ManualClock()

    got = timed(player_of(log, clock, math.inf), clock)

    assert got == [(0.0, DATA)]


def test_log_facts(log: Path) -> None:
    """The player shows what the log is: size, hash, date."""
    import hashlib

    clock = ManualClock()
    player = player_of(log, clock, math.inf)
    timed(player, clock)

    assert (player.size, player.sha256) == (len(DATA), hashlib.sha256(DATA).hexdigest())
    assert player.utc_offset_ms == 22_403 * 86_400_000
    assert player.axis_ms == START_MS + 119_000


class Watched:
    """A player run to its end with actions planned, and what it had handed on at given times."""

    def __init__(self, log: Path, plan: dict[float, Callable[[Player], object]], looks: list[float]) -> None:
        self.clock = ManualClock()
        self.player = player_of(log, self.clock)
        self.seen: dict[float, tuple[int, bool]] = {}
        self.passes: list[bytes] = []
        for at, action in plan.items():
            self.clock.at(at, lambda action=action: action(self.player))  # type: ignore[misc]
        for at in looks:
            self.clock.at(at, lambda at=at: self._look(at))  # type: ignore[misc]
        while True:
            self.passes.append(b"".join(chunk.data for chunk in self.player.chunks()))
            if not self.player.rewound:
                break

    def _look(self, at: float) -> None:
        self.seen[at] = ((self.player.axis_ms or 0) - START_MS) // 1000, self.player.paused


def test_pause_and_resume(log: Path) -> None:
    """Time stands during a pause and runs on from there."""
    run = Watched(log, {10.5: Player.pause, 70.5: Player.resume}, [10.4, 11.0, 70.0, 80.4])

    assert run.seen == {10.4: (10, False), 11.0: (10, True), 70.0: (10, True), 80.4: (20, False)}
    assert run.passes == [DATA]
    assert run.clock.steady() == pytest.approx(119.0 + 60.0, abs=2 * LOOK_S)


def test_rate_while_playing(log: Path) -> None:
    """A new rate counts from where time is."""
    run = Watched(log, {10.0: lambda p: p.set_rate(10.0), 15.0: lambda p: p.set_rate(0.5)}, [14.96, 20.96])

    assert run.seen[14.96][0] in (59, 60)
    assert run.seen[20.96][0] in (62, 63)


def test_jump_forward(log: Path) -> None:
    """Everything up to the target passes at once, and the log plays on from there: no byte is left out."""
    run = Watched(log, {5.0: lambda p: p.jump(START_MS + 100_400)}, [5.1, 8.0])

    assert run.seen == {5.1: (100, False), 8.0: (103, False)}
    assert run.passes == [DATA]
    assert run.clock.steady() == pytest.approx(5.0 + 18.6, abs=3 * LOOK_S)


def test_jump_backward(log: Path) -> None:
    """A jump back ends the pass; the next one begins at the first byte and is at the target at once."""
    run = Watched(log, {50.0: lambda p: p.jump(START_MS + 20_000)}, [50.1, 55.2])

    assert run.seen == {50.1: (20, False), 55.2: (25, False)}
    assert DATA.startswith(run.passes[0])
    assert run.passes[1] == DATA


def test_jumps_in_a_pause(log: Path) -> None:
    """In a pause jumps go where they should, both ways, and the pause lasts."""
    run = Watched(
        log,
        {
            30.0: Player.pause,
            31.0: lambda p: p.jump(START_MS + 90_000),
            33.0: lambda p: p.jump(START_MS + 10_000),
            35.0: Player.resume,
        },
        [30.5, 32.0, 34.0, 40.0],
    )

    assert run.seen == {30.5: (30, True), 32.0: (90, True), 34.0: (10, True), 40.0: (15, False)}


def test_steps(log: Path) -> None:
    """A step pauses and goes one epoch on, or back; several steps add up."""
    run = Watched(
        log,
        {
            10.5: Player.step,
            11.5: lambda p: p.step(3),
            12.5: lambda p: p.step(-1),
            13.5: lambda p: p.step(-5),
            14.5: lambda p: p.step(-500),
            15.5: Player.step,
            16.5: Player.resume,
        },
        [11.0, 12.0, 13.0, 14.0, 15.0, 16.0],
    )

    assert [second for second, _ in run.seen.values()] == [11, 14, 13, 8, 0, 1]
    assert all(paused for _, paused in run.seen.values())
    assert run.passes[-1] == DATA


def test_any_play_of_controls_ends_with_the_whole_log(log: Path) -> None:
    """Random controls at random times: each pass is a beginning of the log, the last one all of it."""
    for seed in range(25):
        chance = random.Random(seed)
        plan: dict[float, Callable[[Player], object]] = {}
        for _ in range(15):
            to_ms, rate = START_MS + chance.randrange(120_000), chance.choice([0.1, 3.0, 40.0, math.inf])
            plan[chance.uniform(0.0, 60.0)] = chance.choice(
                [
                    Player.pause,
                    Player.resume,
                    Player.step,
                    lambda p: p.step(-2),
                    partial(Player.jump, axis_ms=to_ms),
                    partial(Player.set_rate, rate=rate),
                ]
            )
        plan[61.0] = Player.resume
        run = Watched(log, plan, [])

        assert run.passes[-1] == DATA, seed
        assert all(DATA.startswith(one) for one in run.passes), seed


def test_closing_ends_a_pause(log: Path) -> None:
    """A player that stands still ends when it is closed."""
    run = Watched(log, {5.0: Player.pause, 1000.0: Player.close}, [])

    assert run.clock.steady() == pytest.approx(1000.0, abs=2 * LOOK_S)
    assert run.player.state == "ended"


def test_a_date_that_is_set_is_no_pause(tmp_path: Path) -> None:
    """A receiver that begins with a date of decades ago and then knows better is not waited for."""
    path = tmp_path / "log"
    path.write_bytes(
        sentence("GPRMC,000010.00,V,,,,,,,060180,,,N")
        + sentence("GPRMC,101112.00,V,,,,,,,040531,,,N")
        + sentence("GPRMC,101113.00,V,,,,,,,040531,,,N")
        + sentence("GPRMC,101100.00,V,,,,,,,040531,,,N")
        + sentence("GPRMC,101101.00,V,,,,,,,040531,,,N")
    )
    clock = ManualClock()

    got = timed(player_of(path, clock), clock)

    assert clock.steady() == pytest.approx(2.0, abs=3 * LOOK_S)
    assert b"".join(data for _, data in got) == path.read_bytes()


def test_a_recording_plays_by_its_arrivals(tmp_path: Path) -> None:
    """Pieces of a recording come with the pauses between their arrivals, with their own times, silence included."""
    chance = random.Random(4)
    clock = ManualClock()
    recorder = Recorder(tmp_path / "r", clock, source="roof")
    sent = []
    for second in range(8):
        data = burst(second)
        for at in range(0, len(data), 200):
            clock.sleep(chance.uniform(0.05, 0.3))
            sent.append(Chunk(data[at : at + 200], clock.now()))
            recorder(sent[-1])
    clock.sleep(1.0)
    sent.append(Chunk(b"", clock.now()))
    recorder(sent[-1])
    recorder.close()
    clock = ManualClock()
    player = player_of(tmp_path / "r", clock, 2.0)

    came = [(clock.steady(), chunk) for chunk in player.chunks()]

    assert b"".join(chunk.data for _, chunk in came) == stream(8)
    assert [chunk.received_s for _, chunk in came if chunk.data] == sorted(
        {chunk.received_s for chunk in sent if chunk.data}
    )
    waits = [b - a for (a, _), (b, _) in pairwise(came)]
    expected = [(b.received_s - a.received_s) / 2.0 for (_, a), (_, b) in pairwise(came)]
    assert waits == pytest.approx(expected, abs=1e-3)


def test_wrong_rates_are_refused(log: Path) -> None:
    """Slower than a tenth, standing, or no number: not a rate to play at."""
    clock = ManualClock()
    player = player_of(log, clock)

    for rate in (0.0, 0.05, -1.0, math.nan):
        with pytest.raises(ValueError, match="slowest"):
            player.set_rate(rate)
    timed(player, clock)
    with pytest.raises(ValueError, match="read once"):
        timed(player, clock)
