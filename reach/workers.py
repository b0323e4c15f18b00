"""A pool of worker processes: spawned, one numerics thread each, deaf to the interrupt that ends the run."""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, ProcessPoolExecutor
from contextlib import contextmanager
from multiprocessing import get_context
from typing import Any

THREAD_VARIABLES = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")
LOST = "a worker process died (out of memory?); run again with --workers 1"


@contextmanager
def worker_pool(
    workers: int, begin: Callable[..., None] | None = None, *given: Any
) -> Iterator[Executor | None]:
    """Worker processes, or None where one process is enough.

    They are spawned, so that no thread or lock of this process is copied; each gets one thread for its matrices,
    and calls begin(*given) once. An interrupt is this process's to handle: a worker goes on until it is told to end.
    """
    if workers < 2:
        yield None
        return
    kept = {name: os.environ.get(name) for name in THREAD_VARIABLES}
    os.environ.update(dict.fromkeys(THREAD_VARIABLES, "1"))  # read by a worker's numpy as it loads
    try:
        with ProcessPoolExecutor(
            workers, mp_context=get_context("spawn"), initializer=_begin, initargs=(begin, given)
        ) as pool:
            try:
                yield pool
            except BaseException:
                pool.shutdown(wait=False, cancel_futures=True)  # only what runs already is waited for
                raise
    finally:
        for name, value in kept.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


def _begin(begin: Callable[..., None] | None, given: tuple[Any, ...]) -> None:
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    if begin is not None:
        begin(*given)
