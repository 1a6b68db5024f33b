"""Blocks of a large batch over threads."""

from __future__ import annotations

import os
from contextlib import AbstractContextManager, nullcontext
from typing import Any

__all__ = ["workers"]


def workers(blocks: int) -> AbstractContextManager[Any]:
    """A mapping function: plain for little work, over threads (one BLAS thread each) for much."""
    threads = min(blocks, os.cpu_count() or 1)
    return nullcontext(map) if threads < 2 else _Threads(threads)


class _Threads:
    """Threads for whole blocks, with the BLAS held to one thread each so that they do not fight over the cores."""

    def __init__(self, threads: int) -> None:
        from concurrent.futures import ThreadPoolExecutor  # loaded for large batches only

        self._pool = ThreadPoolExecutor(threads)
        self._limits: Any = None

    def __enter__(self) -> Any:
        from threadpoolctl import threadpool_limits

        self._limits = threadpool_limits(limits=1, user_api="blas")
        return self._pool.map

    def __exit__(self, *_: object) -> None:
        self._pool.shutdown()
        self._limits.restore_original_limits()
