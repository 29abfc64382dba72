"""The stream: completeness, gaps, errors, what comes how often, and the load of the line."""

from __future__ import annotations

from gnssmon.dashboard.drawing import Grid, Plot, Size
from gnssmon.dashboard.panels.panel import Panel, clock_time, nothing, number, percent, value
from gnssmon.nmea.inspection import MEANINGS
from gnssmon.report import words
from gnssmon.snapshot import Snapshot

LABEL = 12

MOST_GAPS = 5


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the figures, most important first; below them sentence types, epochs per minute and the latest gaps."""
    facts = snapshot.stream
    if not facts.bytes:
        return nothing(size, "nothing received yet: is the receiver powered, connected, and its output switched on?")
    grid = Grid(size)
    if not facts.sentences:
        grid.wrap(0, 0, f"{words.size(facts.bytes)} received, but no NMEA sentence: wrong baud rate, or a binary "
                  "protocol (switch on NMEA output)?", "bad", size.width)  # fmt: skip
        return grid
    rows = _figures(snapshot)
    for y, (label, text, tone) in enumerate(rows[: size.height]):
        grid.put(0, y, label, "quiet", LABEL - 1)
        grid.put(LABEL, y, text, tone, size.width - LABEL)
    y = len(rows) + 1
    y = _types(grid, snapshot, y)
    if size.height - y >= 9:
        _rate(grid, snapshot, (0, y + 1, size.width, min(10, size.height - y - 1)))
    return grid


def _figures(snapshot: Snapshot) -> list[tuple[str, str, str]]:
    facts = snapshot.stream
    interval = value(snapshot, "stream.interval_s")
    complete = value(snapshot, "stream.completeness")
    every = ""
    if interval:
        every = f" at {1 / interval:.4g} Hz" if interval < 1.05 else f", one every {interval:.4g} s"
    rows = [("Complete", f"{percent(complete)}{every}", "doubt" if (complete or 1.0) < 0.99 else "")]
    gaps, longest = value(snapshot, "stream.gaps"), value(snapshot, "stream.longest_gap_s")
    text = "none" if not gaps else f"{gaps:.0f}, longest {number(longest)} s"
    rows.append(("Gaps", text, ""))
    failures = value(snapshot, "stream.checksum_failure_share")
    text = "all right" if not facts.checksum_failures else f"{facts.checksum_failures} wrong, {percent(failures)}"
    rows.append(("Checksums", text, "doubt" if (failures or 0.0) > 0.001 else ""))
    rate, load = value(snapshot, "stream.bytes_per_s"), value(snapshot, "stream.link_load")
    text = "–" if rate is None else f"{rate:.0f} B/s" + (f", load {load * 100:.0f} %" if load is not None else "")
    rows.append(("Rate", text, "doubt" if (load or 0.0) > 0.8 else ""))
    rows.append(("Received", f"{words.size(facts.bytes)}, {facts.sentences} sentences", ""))
    epochs, duration = value(snapshot, "stream.epochs"), value(snapshot, "stream.duration_s")
    rows.append(("Epochs", f"{number(epochs, 0)} in {number(duration, 0)} s", ""))
    if facts.malformed:
        rows.append(("Malformed", f"{facts.malformed} sentence{'s' if facts.malformed > 1 else ''}", ""))
    if facts.non_nmea_bytes:
        rows.append(("Other bytes", words.size(facts.non_nmea_bytes), ""))
    if facts.unverified:
        rows.append(("Unchecked", f"{facts.unverified} sentences without checksum", ""))
    if facts.talkers:
        rows.append(("Talkers", " ".join(sorted(facts.talkers)), ""))
    return rows


def _types(grid: Grid, snapshot: Snapshot, y: int) -> int:
    """Sentence types with their counts, and how many an epoch."""
    by_type = sorted(snapshot.stream.by_type.items(), key=lambda pair: (-pair[1], pair[0]))
    if grid.height - y < 3 or not by_type:
        return y
    epochs = value(snapshot, "stream.epochs") if snapshot.window == "since start" else None
    grid.put(0, y, "sentence      count  an epoch", "quiet", grid.width)
    most = grid.height - y - 1
    most = min(most, 14)
    for i, (name, count) in enumerate(by_type[:most]):
        if i == most - 1 and len(by_type) > most:
            grid.put(0, y + 1 + i, f"and {len(by_type) - most + 1} more types", "quiet", grid.width)
            return y + most + 1
        grid.put(0, y + 1 + i, name, "strong", 8)
        grid.right(19, y + 1 + i, str(count))
        grid.right(29, y + 1 + i, f"{count / epochs:.2f}" if epochs else "", "")
        if grid.width >= 50:
            grid.put(31, y + 1 + i, MEANINGS.get(name, ""), "quiet", grid.width - 31)
    return y + 1 + min(most, len(by_type))


def _rate(grid: Grid, snapshot: Snapshot, box: tuple[int, int, int, int]) -> None:
    picture = snapshot.pictures.stream
    left, top, width, height = box
    if len(picture.minute) < 2:
        return
    highest = float(picture.epochs.max())
    grid.put(left, top, f"epochs a minute, at most {highest:.0f}", "quiet", width)
    first, last = float(picture.minute[0]), float(picture.minute[-1])
    plot = Plot(grid, (left, top + 1, width, height - 2), (first, last + 1.0), (0.0, highest * 1.05 + 0.1))
    for minute, epochs in zip(picture.minute.tolist(), picture.epochs.tolist(), strict=True):
        plot.line(minute, float(epochs), minute + 0.99, float(epochs), "one", "·")
    plot.draw()
    grid.put(left, top + height - 1, clock_time(snapshot, first * 60_000)[:5], "quiet")
    grid.right(left + width, top + height - 1, f"{clock_time(snapshot, last * 60_000)[:5]} UTC", "quiet")


PANEL = Panel(
    key="stream",
    title="Stream",
    help="""\
Whether the receiver's output arrives whole: the share of epochs that came of those due at the stream's own rate, \
gaps, sentences whose checksum fails, and bytes that are no sentence. The load of the line is what comes, of what its \
baud rate carries; known for serial ports only. Counts of bytes and sentences are since the start.

Usual: 99 % of epochs or more (IGS station guidelines), no checksum failures on a short cable; a load below 80 % \
(common practice, no source).

If epochs are missing: too many sentences for the baud rate, a bad cable, or a receiver that is too busy. Checksum \
failures: cable, ground, a wrong rate nearby, two talkers on one line.""",
    render=render,
)
