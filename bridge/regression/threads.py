"""Blocks of rows on threads of our own, each with one BLAS thread.

Handing every small block to several BLAS threads costs more than it saves.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from functools import lru_cache
from typing import TypeVar

from threadpoolctl import ThreadpoolController

ROWS = 4096  # a block of some thirty columns fits a core's cache
MOST_THREADS = 4
FEW = 3  # blocks not worth starting threads for

Result = TypeVar("Result")


@contextmanager
def one_blas_thread() -> Iterator[None]:
    """Within the block, matrix products and factorisations run in the calling thread alone."""
    with _controller().limit(limits=1, user_api="blas"):
        yield


@lru_cache(maxsize=1)
def _controller() -> ThreadpoolController:
    return ThreadpoolController()  # looks through the loaded libraries once


def over_blocks(n: int, work: Callable[[slice], Result], rows: int = ROWS) -> list[Result]:
    """`work` on blocks of so many rows, on a few threads; the outcomes in the order of the blocks."""
    return list(each_block(n, work, rows))


def each_block(n: int, work: Callable[[slice], Result], rows: int = ROWS) -> Iterator[Result]:
    """The same one by one, for outcomes too large to keep. Nothing is done before the first is asked for."""
    blocks = [slice(start, min(start + rows, n)) for start in range(0, n, rows)]
    if len(blocks) < FEW:
        yield from map(work, blocks)
        return
    with ThreadPoolExecutor(min(MOST_THREADS, os.cpu_count() or 1)) as pool:
        yield from pool.map(work, blocks)
