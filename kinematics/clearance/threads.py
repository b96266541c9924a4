"""Work shared between two threads, for compiled functions that free Python's lock."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor, as_completed
from typing import TypeVar

Piece = TypeVar("Piece")

#: More threads than this are no gain: the work waits for memory.
THREADS = 2


def in_threads(
    work: Callable[[Piece], object], pieces: Sequence[Piece], progress: Callable[[int, int], None] | None = None
) -> None:
    """Do the work for every piece; pieces not yet begun are dropped when one fails or the user stops it.

    progress : called with (done, total).
    """
    pool = ThreadPoolExecutor(min(THREADS, os.cpu_count() or 1))
    try:
        waiting = [pool.submit(work, piece) for piece in pieces]
        for number, ready in enumerate(as_completed(waiting), 1):
            ready.result()
            if progress is not None:
                progress(number, len(pieces))
    finally:
        pool.shutdown(wait=True, cancel_futures=True)
