"""The state store: the latest of everything, at once, and nothing older than it claims."""

from __future__ import annotations

from collections.abc import Iterable
from functools import reduce
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.pipeline import Pipeline
from gnssmon.receiver import MOST_LINES, MOST_TEXTS, Receiver, ReceiverState

LOGS = Path(__file__).parents[2] / "shared" / "logs"
PLACE = "4717.11399,N,00833.91590,E"


def sentence(text: str) -> bytes:
    return f"${text}*{reduce(lambda x, c: x ^ c, text.encode('latin-1'), 0):02X}\r\n".encode("latin-1")


def gga(second: int, quality: str = "1", place: str = PLACE) -> str:
    return f"GPGGA,0000{second:02d}.00,{place},{quality},08,1.01,499.6,M,48.0,M,,"


def after(texts: Iterable[str]) -> ReceiverState:
    """The state after these sentences, fed one at a time."""
    pipeline, receiver = Pipeline(), Receiver()
    for text in texts:
        pipeline.feed(Chunk(sentence(text), 100.0))
        assert pipeline.block is not None
        receiver.update(pipeline.block)
    return receiver.state()


def names(state: ReceiverState) -> list[str]:
    return [satellite.satellite for satellite in state.satellites]


def test_before_anything() -> None:
    """Nothing is claimed before a sentence has come."""
    assert Receiver().state() == ReceiverState()


def test_values_are_there_before_the_epoch_is_complete() -> None:
    """The sentence that has just come is what the state shows."""
    state = after([gga(1), "GPRMC,000001.00,A,4717.11399,N,00833.91590,E,1.0,90.0,200525,,,A", "GPTHS,45.0,A"])
    assert (state.quality, state.satellites_used, state.altitude_m, state.separation_m) == (1, 8, 499.6, 48.0)
    assert state.latitude_deg == pytest.approx(47.2852331667, abs=1e-10)
    assert state.speed_mps == pytest.approx(1852 / 3600)
    assert (state.heading_deg, state.course_deg, state.received_s) == (45.0, 90.0, 100.0)
    assert (state.axis_ms, state.utc_ms, state.dated) == (1_747_699_201_000, 1_747_699_201_000, True)
    assert state.last_fix_axis_ms == state.axis_ms
    assert (state.pdop, state.correction_age_s, state.station) == (None, None, None)


def test_loss_of_fix_shows_at_once() -> None:
    """A GGA without position, even without time, replaces the position; the last fix keeps its time."""
    state = after([gga(1), "GPGGA,,,,,,0,,,,,,,,"])
    assert (state.quality, state.latitude_deg, state.altitude_m) == (0, None, None)
    assert state.last_fix_axis_ms == 1000


def test_gga_speaks_before_rmc_as_long_as_it_comes() -> None:
    """RMC behind a GGA does not hide its quality; a GGA that has stopped coming does not speak for ever."""
    rmc = "GPRMC,0000{:02d}.00,A,4717.11399,N,00833.91590,E,1.0,90.0,200525,,,A"
    assert after([gga(1, "4"), rmc.format(1)]).quality == 4
    assert after([gga(1, "4"), *(rmc.format(1 + k // 20) for k in range(600))]).quality == 1


def test_single_systems_do_not_speak_for_the_whole() -> None:
    """A GNS of GP or GL behind the one of GN leaves the combined solution in force."""
    gns = ["GNGNS,000001.00,4717.11,N,00833.91,E,RR,09,0.9,100.0,40.0,,", "GPGNS,000001.00,,,,,,05,,,,,"]
    assert after(gns).quality == after(gns[:1]).quality == 4
    assert after(gns[1:]).satellites_used == 5


def test_satellites_of_complete_sets() -> None:
    """A set shows once all its parts have come, by system and number, each satellite with all its signals."""
    first = ["GAGSV,2,1,05,01,40,100,44,02,50,200,,03,60,300,30,04,70,010,20,7", "GAGSV,2,2,05,05,10,020,33,7"]
    other = "GAGSV,1,1,01,01,40,100,41,1"
    gps = "GPGSV,1,1,01,07,30,090,38,1"
    assert names(after([gga(1), first[0]])) == []
    assert names(after([gga(1), first[1]])) == []
    state = after([gga(1), *first, other, gps, "GNGSA,A,3,01,05,,,,,,,,,,,1.8,0.8,1.6,3"])
    assert names(state) == ["G07", "E01", "E02", "E03", "E04", "E05"]
    assert state.satellites[1].cn0_dbhz == {"E1": 44.0, "E5a": 41.0}
    assert (state.satellites[1].elevation_deg, state.satellites[1].azimuth_deg) == (40.0, 100.0)
    assert state.satellites[2].cn0_dbhz == {}
    assert [satellite.used for satellite in state.satellites] == [False, True, False, False, False, True]
    assert (state.pdop, state.hdop, state.vdop) == (1.8, 1.01, 1.6)


def test_torn_set_does_not_replace_a_whole_one() -> None:
    """A set with a part missing leaves the one before in force."""
    whole = ["GPGSV,2,1,05,01,40,100,44,02,50,200,,03,60,300,30,04,70,010,20,1", "GPGSV,2,2,05,05,10,020,33,1"]
    torn = "GPGSV,3,{},09,11,40,100,44,1"
    assert names(after([gga(1), *whole, gga(2), torn.format(1), torn.format(3)])) == ["G01", "G02", "G03", "G04", "G05"]


def test_a_set_that_is_not_renewed_goes() -> None:
    """A set is gone after three of its own periods (common practice): here after 3 s, and not before."""
    gsv = "GPGSV,1,1,01,07,30,090,38,1"
    renewed = [text for k in range(5) for text in (gga(k), gsv)]
    assert names(after([*renewed, gga(5), gga(6), gga(7)])) == ["G07"]
    assert names(after([*renewed, gga(5), gga(6), gga(7), gga(8)])) == []


def test_slow_sets_stay() -> None:
    """Satellites that come every five seconds are there in between."""
    texts = [text for k in range(12) for text in ([gga(k), "GPGSV,1,1,01,07,30,090,38"] if k % 5 == 0 else [gga(k)])]
    assert names(after(texts)) == ["G07"]


def test_empty_set_clears() -> None:
    """A receiver that sees nothing says so with a set of none."""
    assert names(after([gga(1), "GPGSV,1,1,01,07,30,090,38,1", gga(2), "GPGSV,1,1,00,1"])) == []


def test_history_is_bounded_and_safe() -> None:
    """The last 200 lines as received, the last 20 texts made printable."""
    texts = [f"GPTXT,01,01,02,message {k}" for k in range(300)]
    state = after([*texts, "GPTXT,01,01,01,^1B[31mred^B0", "GPDTM,W84,,0.0,N,0.0,E,0.0,W84"])
    assert len(state.lines) == MOST_LINES
    assert [line.sequence for line in state.lines] == list(range(302 - MOST_LINES, 302))
    assert state.lines[-1].raw == b"GPDTM,W84,,0.0,N,0.0,E,0.0,W84"
    assert len(state.texts) == MOST_TEXTS
    assert state.texts[-2:] == ("message 299", "\\x1b[31mred°")
    assert state.datum == "W84"


@pytest.mark.parametrize("size", [512, 4096, 1 << 30])
@pytest.mark.parametrize("name", ["indoor_start_systems", "town_moving_2012", "field_survey_2016"])
def test_chunks_do_not_matter(name: str, size: int) -> None:
    """A log in one chunk, or in bursts, leaves the same state: of a large block the end is enough."""
    path = LOGS / f"{name}.nmea"
    if not LOGS.is_dir():
        assert not path.exists()  # no real logs beside this project
        return
    data = path.read_bytes()
    states = []
    for step in (size, 2048):
        pipeline, receiver = Pipeline(), Receiver()
        for start in range(0, len(data), step):
            pipeline.feed(Chunk(data[start : start + step]))
            assert pipeline.block is not None
            receiver.update(pipeline.block)
        pipeline.finish()
        assert pipeline.block is not None
        receiver.update(pipeline.block)
        states.append(receiver.state())
    assert states[0] == states[1]
    assert states[0].quality is not None
