"""Snapshots to draw: of nothing, of an invented receiver, of a hostile stream, of the real logs where present."""

from __future__ import annotations

import math
import random
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np

from gnssmon.chunks import Chunk
from gnssmon.monitor import Monitor, Settings
from gnssmon.receiver import LineNow, SatelliteNow
from gnssmon.snapshot import Snapshot, SourceFacts

LOGS = Path(__file__).parents[2].parent / "shared" / "logs"
"""Real logs, present on the machines that hold them; tests that need them say so."""

ESCAPES = b"\x1b[2J\x1b]0;title\x07\x9b31m\r\x08[red]markup[/red]\xe2\x80\xae"


def sentence(body: str) -> bytes:
    """A sentence with its checksum."""
    check = 0
    for byte in body.encode():
        check ^= byte
    return f"${body}*{check:02X}\r\n".encode()


def stream(seconds: int = 180, *, start_s: int = 36_000, seed: int = 5) -> bytes:
    """An invented receiver at 1 Hz: twelve satellites on two bands, a position that wanders by metres."""
    dice = random.Random(seed)
    lines = []
    for t in range(seconds):
        second = start_s + t
        clock = f"{second // 3600:02d}{second // 60 % 60:02d}{second % 60:02d}.00"
        north, east = dice.gauss(0.0, 0.0006), dice.gauss(0.0, 0.0004)
        place = f"{1250.5 + north:011.6f},S,{4515.25 + east:012.6f},E"
        lines.append(sentence(f"GNRMC,{clock},A,{place},0.0,,200525,,,D"))
        height = 100 + dice.gauss(0, 1)
        lines.append(sentence(f"GNGGA,{clock},{place},2,12,0.7,{height:.2f},M,-12.5,M,1.0,0101"))
        lines.append(sentence("GNGSA,A,3,01,02,03,04,05,06,,,,,,,1.3,0.7,1.1,1"))
        for band in (1, 6):
            for part in range(3):
                rows = ""
                for k in range(4):
                    number = part * 4 + k + 1
                    elevation, azimuth = 5 + number * 6, number * 29 % 360
                    level = "" if number == 12 else str(round(33 + elevation / 6 + dice.gauss(0, 1)))
                    rows += f",{number:02d},{elevation:02d},{azimuth:03d},{level}"
                lines.append(sentence(f"GPGSV,3,{part + 1},12{rows},{band}"))
    return b"".join(lines)


def _fed(data: bytes, label: str = "invented.nmea") -> Snapshot:
    monitor = Monitor(Settings(), SourceFacts(label=label, kind="log"))
    monitor.feed(Chunk(data))
    monitor.finish()
    return monitor.snapshot()


@cache
def empty() -> Snapshot:
    """Before the first byte."""
    return _fed(b"")


@cache
def full() -> Snapshot:
    """Three minutes of the invented receiver."""
    return _fed(stream())


@cache
def hostile() -> Snapshot:
    """Escape sequences, markup and noise between sentences that state what no receiver would."""
    dice = random.Random(11)
    pieces = []
    for t in range(40):
        pieces.append(stream(1, start_s=40_000 + t * 7, seed=t))
        pieces.append(sentence(f"GPTXT,01,01,02,{ESCAPES.decode('latin-1')}").replace(b"\r\n", b"") + ESCAPES + b"\r\n")
        pieces.append(
            sentence(f"GNGGA,{'9' * 60},8959.999,N,17959.999,E,9,99999,99.99,1e99,M,-9999999,M,9999999,99999")
        )
        pieces.append(sentence("P" + "[bold]" * 8 + "," * 30))
        pieces.append(bytes(dice.randrange(256) for _ in range(50)))
    return _fed(b"".join(pieces), label=ESCAPES.decode("latin-1") * 5)


@cache
def absurd() -> Snapshot:
    """The invented receiver with every drawn number replaced by one that cannot be drawn."""
    good = full()
    bad = np.array([math.nan, math.inf, -math.inf, 1e300, -1e300, 0.0])
    pictures = good.pictures
    scatter = replace(
        pictures.scatter,
        east_m=np.resize(bad, pictures.scatter.east_m.shape),
        north_m=np.resize(bad[::-1], pictures.scatter.north_m.shape),
        mean_m=(math.inf, math.nan, 1e300),
        cep50_m=math.inf,
        r95_m=math.nan,
        ellipse_m=(math.nan, math.inf, -1e9),
        quality=np.resize(np.array([-1, 9, 120], dtype=np.int8), pictures.scatter.quality.shape),
    )
    level = replace(
        pictures.level,
        mean_dbhz=np.resize(bad, pictures.level.mean_dbhz.shape),
        level_dbhz=np.resize(bad, pictures.level.level_dbhz.shape),
    )
    sky = replace(pictures.sky, horizon_deg=np.resize(bad, pictures.sky.horizon_deg.shape))
    receiver = replace(
        good.receiver,
        quality=99,
        latitude_deg=1e300,
        longitude_deg=-math.inf,
        altitude_m=math.nan,
        hdop=math.inf,
        satellites=tuple(
            SatelliteNow(f"?{i}\x1b\u6f22", e, a, True, {"\x1b[": 1e300, "G1": math.nan})
            for i, (e, a) in enumerate(zip(bad.tolist(), bad[::-1].tolist(), strict=True))
        ),
        lines=tuple(LineNow(i, ESCAPES * 9) for i in range(200)),
        texts=("\x1b",),
    )
    estimates = {
        name: replace(e, value=bad[i % 6], interval=(math.nan, math.inf))
        for i, (name, e) in enumerate(good.estimates.items())
    }
    return replace(
        good,
        pictures=replace(pictures, scatter=scatter, level=level, sky=sky),
        receiver=receiver,
        estimates=estimates,
        stream=replace(good.stream, by_type={"\x1b[31m\u202e": 10**30, "\u6f22\u5b57": 1}, talkers={"\x1b": 1}),
    )


def real() -> list[Snapshot]:
    """The real logs, where this machine holds them; else none."""
    return [_fed(path.read_bytes(), path.name) for path in sorted(LOGS.glob("*.nmea"))]
