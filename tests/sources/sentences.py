"""A few seconds of an invented receiver, built by pynmea2."""

from __future__ import annotations

import pynmea2


def burst(second: int, *, sentences: int = 8) -> bytes:
    """One epoch: GGA, RMC and GSV parts, of the second ``second`` after 10:00:00 on 2031-05-04."""
    time = f"10{second // 60 % 60:02d}{second % 60:02d}.00"
    position = ("4807.03800", "S", "01131.00000", "W")
    lines = [
        pynmea2.GGA("GN", "GGA", (time, *position, "1", "10", "0.9", "545.4", "M", "46.9", "M", "", "")),
        pynmea2.RMC("GN", "RMC", (time, "A", *position, "0.02", "84.40", "040531", "", "", "A")),
    ]
    for part in range(max(0, sentences - 2)):
        number = str(part % 4 + 1)
        groups = [
            f"{4 * part + i + 1:02d},{10 + 7 * i:02d},{(37 * part + 90 * i) % 360:03d},{30 + i}" for i in range(4)
        ]
        lines.append(pynmea2.GSV("GP", "GSV", ("4", number, "16", *",".join(groups).split(","), "1")))
    return b"".join(str(line).encode() + b"\r\n" for line in lines)


def stream(seconds: int, **what: int) -> bytes:
    """Bursts one behind the other."""
    return b"".join(burst(second, **what) for second in range(seconds))
