"""The index: times where they are, from a few looks."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from gnssmon.clocks import ManualClock
from gnssmon.replay.index import STRIDE_BYTES, build_index
from gnssmon.sources import open_source
from gnssmon.sources.log_file import LogFile
from tests.replay.test_between import Blocks
from tests.replay.test_epoch_starts import starts
from tests.sources.sentences import stream

DATA = stream(900, sentences=10)


@pytest.mark.parametrize("size", [777, 5000, STRIDE_BYTES, 1 << 22])
def test_rows_are_true_epochs_whatever_the_blocks(size: int) -> None:
    """Each row of the index is an epoch that a full search finds too, and the last epoch is among them."""
    index = build_index(Blocks(DATA, size))

    full = {start.offset: start.axis_ms for start in starts(DATA)[0]}
    assert [full[offset] for offset in index.offset.tolist()] == index.axis_ms.tolist()
    assert index.axis_ms[0] == 36_000_000
    assert index.axis_ms[-1] == 36_000_000 + 899_000
    assert len(index.offset) >= len(DATA) // STRIDE_BYTES
    assert index.size == len(DATA)
    assert index.utc_offset_ms == 22_403 * 86_400_000


def test_time_and_share_are_each_others_inverse() -> None:
    """In an even log the half of the bytes is the half of the time."""
    index = build_index(Blocks(DATA, 1 << 20))

    assert index.time_at(0.5) == pytest.approx(36_450_000, abs=3000)
    for share in np.linspace(0.01, 0.99, 9):
        time_ms = index.time_at(float(share))
        assert time_ms is not None
        assert index.share_at(time_ms) == pytest.approx(share, abs=2e-3)
    assert index.share_at(0) == 0.0
    assert index.time_at(1.0) == 36_000_000 + 899_000


def test_logs_without_times() -> None:
    """A log without a time, or without a byte, has an index that knows nothing."""
    for data in (b"", b"no time here\r\n" * 10_000):
        index = build_index(Blocks(data, 1000))

        assert (index.time_at(0.5), index.share_at(5), len(index.offset)) == (None, None, 0)


def test_a_damaged_log_is_indexed_as_far_as_it_goes(tmp_path: Path) -> None:
    """Damage ends the index, not the program: playing the log will tell."""
    import gzip

    path = tmp_path / "log.gz"
    path.write_bytes(gzip.compress(DATA)[:-2000])

    index = build_index(open_source(str(path), clock=ManualClock()))

    assert 36_000_000 < index.axis_ms[-1] < 36_000_000 + 899_000


def test_source_is_closed(tmp_path: Path) -> None:
    """The index lets go of the log."""
    path = tmp_path / "log"
    path.write_bytes(DATA)
    source = LogFile(path)

    build_index(source)

    assert source.state == "ended"
