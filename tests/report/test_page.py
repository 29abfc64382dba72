"""The HTML report: stands alone, escapes everything, draws what there is, is written whole or not at all."""

from __future__ import annotations

import os
import re
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

from gnssmon.diagnosis.finding import Finding
from gnssmon.errors import OutputError
from gnssmon.report import files, page
from gnssmon.report import result as results
from gnssmon.report.figures import FIGURES
from gnssmon.report.figures.drawing import svg
from gnssmon.snapshot import Snapshot, SourceFacts, StreamFacts
from tests.report.hand_made import HOSTILE, empty_pictures, snapshot


class _Reader(HTMLParser):
    """Every tag and attribute of a page, as Python's own parser sees them."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.attributes: list[tuple[str, str]] = []
        self.texts: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes += [(name, value or "") for name, value in attrs]

    def handle_data(self, data: str) -> None:
        self.texts.append(data)


def _page(given: Snapshot) -> str:
    return page.html(results.result(given), given)


@pytest.fixture(scope="module")
def full_page() -> str:
    return _page(snapshot())


def test_page_stands_alone(full_page):
    """No script, no frame, nothing that a browser would fetch: it opens without a network."""
    read = _Reader(full_page)

    assert not set(read.tags) & {"script", "iframe", "object", "embed", "link", "img", "base", "form", "a"}
    fetching = [value for name, value in read.attributes if name in ("src", "href", "xlink:href", "data", "action")]
    assert all(value.startswith("#") for value in fetching)
    assert not re.search(r"url\((?!#)", full_page)
    assert "@import" not in full_page


def test_identifiers_of_the_figures_do_not_clash(full_page):
    """Several drawings on one page must not borrow each other's clip paths: every identifier stands once, and
    whatever is pointed at is there."""
    attributes = _Reader(full_page).attributes
    own = [value for name, value in attributes if name == "id"]
    meant = {value[1:] for name, value in attributes if name.endswith("href")}
    meant |= set(re.findall(r"url\(#([^)]+)\)", full_page))

    assert len(own) == len(set(own))
    assert meant
    assert meant <= set(own)


def test_everything_from_outside_is_escaped():
    """A label, a finding, a talker and a formatter full of markup come out as text."""
    hostile = snapshot(
        source=SourceFacts(label=HOSTILE, kind="log", state=HOSTILE),
        findings=(
            Finding(code=HOSTILE, severity="info", summary=HOSTILE, evidence={HOSTILE: HOSTILE}, advice=HOSTILE),
        ),
        stream=StreamFacts(
            bytes=1,
            sentences=1,
            unverified=0,
            checksum_failures=0,
            malformed=0,
            non_nmea_bytes=0,
            by_type={HOSTILE: 1},
            talkers={HOSTILE: 1},
            first_utc=HOSTILE,
            last_utc=HOSTILE,
        ),
    )

    text = _page(hostile)

    assert "script" not in _Reader(text).tags
    assert "\x1b" not in text
    assert "\u202e" not in text
    assert "{{7*7}}" in "".join(_Reader(text).texts)


def test_says_what_a_reader_must_know(full_page):
    """Verdict, criteria, hash of the input, version, cautions, and a place for name, date and signature."""
    text = " ".join(" ".join(_Reader(full_page).texts).split())

    for wanted in (
        "Accepted",
        "scatter.r95_m",
        "1.120 to 1.620",
        "≤ 3 m",
        "5f" * 32,
        "gnssmon 0.",
        "Not a navigation or safety-of-life device.",
        "Signature",
        "2025-05-20 05:30:00 to 11:29:59 UTC",
        "IGS CORS Guidelines",
    ):
        assert wanted in text, wanted


def test_simulated_data_is_said_to_be_simulated():
    """Nobody shall take a practice run for a measurement."""
    simulated = snapshot(source=SourceFacts(label="sim:open", kind="simulated", simulated=True))

    assert "did not come from a receiver" in _page(simulated)


@pytest.mark.parametrize("drawing", FIGURES, ids=lambda drawing: drawing.key)
def test_each_figure_is_svg_of_the_size_of_the_paper(drawing):
    """Well-formed XML (read by Python's own parser) of the stated width; the same twice; nothing to fetch."""
    drawn = svg(drawing, snapshot())

    assert drawn is not None
    root = ElementTree.fromstring(drawn)
    assert root.tag.endswith("svg")
    assert float(root.attrib["width"].removesuffix("pt")) == pytest.approx(drawing.width_mm / 25.4 * 72, abs=0.5)
    assert svg(drawing, snapshot()) == drawn
    assert not [value for key, value in root.attrib.items() if key.endswith("href")]


@pytest.mark.parametrize("drawing", FIGURES, ids=lambda drawing: drawing.key)
def test_nothing_to_draw_is_no_figure(drawing):
    """An empty stream gives no empty axes, and the page says so."""
    assert svg(drawing, snapshot(pictures=empty_pictures())) is None


def test_empty_stream_still_gives_a_page():
    """A run that saw nothing is reported too."""
    text = _page(
        snapshot("default", estimates={}, pictures=empty_pictures(), findings=(), alarms=(), utc_offset_ms=None)
    )

    assert text.count("holds nothing to draw") == len(FIGURES)
    assert "Not enough data yet" in text


def test_scatter_keeps_equal_axes_and_true_rings():
    """A metre east is as long as a metre north, and the CEP50 ring has its radius in those metres."""
    from matplotlib.figure import Figure

    from gnssmon.report.figures.scatter import SCATTER

    figure = Figure(figsize=(4, 5))
    SCATTER.draw(figure, snapshot())
    axes = figure.axes[0]

    assert axes.get_aspect() == 1.0
    radii = sorted(patch.get_radius() for patch in axes.patches if hasattr(patch, "get_radius"))
    picture = snapshot().pictures.scatter
    assert radii == pytest.approx([picture.cep50_m, picture.r95_m])
    ellipse = next(patch for patch in axes.patches if not hasattr(patch, "get_radius"))
    # Azimuth 22 degrees from north is 68 degrees from east; 2.4477 is the published 95 % factor of two dimensions.
    assert ellipse.angle == 68.0
    assert ellipse.width == pytest.approx(2 * 2.4477 * 0.65)


def test_dome_has_north_up_and_east_right():
    """Azimuth 0 is up, azimuth 90 is to the right, the zenith is the middle."""
    from gnssmon.report.figures.drawing import on_dome

    x, y = on_dome(np.array([0.0, 90.0, 123.0]), np.array([0.0, 0.0, 90.0]))

    assert np.round(x, 9).tolist() == [0.0, 90.0, 0.0]
    assert np.round(y, 9).tolist() == [90.0, 0.0, 0.0]


def test_written_whole_or_not_at_all(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    """When the disk fills up, the old report is still there and no half one is left."""
    path = tmp_path / "report.html"
    files.write(path, "old")

    def full(descriptor: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OutputError, match="No space left"):
        page.write(results.result(snapshot()), snapshot(), path)

    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_unwritable_paths_are_known_before_the_run(tmp_path: Path):
    """A folder, a missing folder and a file as folder are refused; a good path is left as it was."""
    (tmp_path / "file").write_text("x")
    for bad in (tmp_path, tmp_path / "missing" / "r.html", tmp_path / "file" / "r.html"):
        with pytest.raises(OutputError):
            page.check_writable(bad)

    page.check_writable(tmp_path / "file")
    page.check_writable(tmp_path / "new.html")

    assert [entry.name for entry in tmp_path.iterdir()] == ["file"]
    assert (tmp_path / "file").read_text() == "x"


@pytest.mark.skipif(not Path("/dev/null").exists(), reason="no such device on this platform")
def test_a_device_is_written_not_replaced():
    """/dev/null stays a device."""
    page.check_writable(Path("/dev/null"))
    files.write(Path("/dev/null"), "text")

    assert Path("/dev/null").is_char_device()


def test_link_stays_a_link(tmp_path: Path):
    """Who keeps the report behind a symbolic link finds it written there."""
    (tmp_path / "real.html").write_text("old")
    (tmp_path / "link.html").symlink_to(tmp_path / "real.html")

    files.write(tmp_path / "link.html", "new")

    assert (tmp_path / "link.html").is_symlink()
    assert (tmp_path / "real.html").read_text() == "new"


def test_a_line_is_broken_over_a_gap():
    """Where minutes are missing the line shows nothing, rather than a straight guess."""
    from gnssmon.report.figures.drawing import broken

    minute, values = broken(np.array([1, 2, 3, 9, 10]), np.array([5.0, 6.0, 7.0, 8.0, 9.0]))

    assert minute.tolist() == [1, 2, 3, 4, 9, 10]
    assert np.isnan(values).tolist() == [False, False, False, True, False, False]
