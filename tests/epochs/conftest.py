"""Epochs from sentences written as text: the checksums are added here, framing and decoding are the program's own."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import fields
from functools import reduce

import numpy as np
import pytest

from gnssmon.chunks import Chunk
from gnssmon.epochs.batch import EpochBatch
from gnssmon.pipeline import Pipeline

Assemble = Callable[..., EpochBatch]


def sentence(text: str) -> bytes:
    return f"${text}*{reduce(lambda x, c: x ^ c, text.encode(), 0):02X}\r\n".encode()


def assembled(
    texts: Sequence[str], received_s: Sequence[float] | None = None, pipeline: Pipeline | None = None
) -> EpochBatch:
    """All epochs of a stream that is fed one sentence at a time."""
    pipeline = pipeline or Pipeline()
    times = received_s or [float("nan")] * len(texts)
    batches = [pipeline.feed(Chunk(sentence(text), at)) for text, at in zip(texts, times, strict=True)]
    return joined([*batches, pipeline.finish()])


def joined(batches: Sequence[EpochBatch]) -> EpochBatch:
    """The batches as one."""
    values = {
        f.name: np.concatenate([getattr(batch, f.name) for batch in batches])
        for f in fields(EpochBatch)
        if f.name not in ("signals", "used")
    }
    start = np.cumsum([0, *(len(batch) for batch in batches[:-1])])
    for group in ("signals", "used"):
        kind = type(getattr(batches[0], group))
        columns = {f.name: np.concatenate([getattr(getattr(b, group), f.name) for b in batches]) for f in fields(kind)}
        columns["epoch"] = np.concatenate([getattr(b, group).epoch + s for b, s in zip(batches, start, strict=True)])
        values[group] = kind(**columns)
    return EpochBatch(**values)


@pytest.fixture(name="assemble")
def _assemble() -> Assemble:
    return assembled


@pytest.fixture(name="join")
def _join() -> Callable[[Sequence[EpochBatch]], EpochBatch]:
    return joined
