"""A pool of worker processes: spawned, one numerics thread each, deaf to the interrupt that ends the run.

None of them outlives the process that began it, however that ends.
"""

from __future__ import annotations

import os
import signal
import threading
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, ProcessPoolExecutor
from contextlib import contextmanager, suppress
from multiprocessing import get_context
from multiprocessing.connection import Connection
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
    An error that leaves the block ends them where they are.
    """
    if workers < 2:
        yield None
        return
    kept = {name: os.environ.get(name) for name in THREAD_VARIABLES}
    os.environ.update(dict.fromkeys(THREAD_VARIABLES, "1"))  # read by a worker's numpy as it loads
    context = get_context("spawn")
    far, near = context.Pipe(duplex=False)
    try:
        with ProcessPoolExecutor(
            workers, mp_context=context, initializer=_begin, initargs=(far, begin, given)
        ) as pool:
            try:
                yield pool
            except BaseException:
                near.close()
                pool.shutdown(cancel_futures=True)
                raise
    finally:
        near.close()
        far.close()
        for name, value in kept.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


def _begin(lifeline: Connection, begin: Callable[..., None] | None, given: tuple[Any, ...]) -> None:
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with, args=(lifeline,), daemon=True).start()
    if begin is not None:
        begin(*given)


def _end_with(lifeline: Connection) -> None:
    """End this process once the other end is closed, by its owner or by its owner's death."""
    if hasattr(signal, "pthread_sigmask"):
        signal.pthread_sigmask(signal.SIG_BLOCK, signal.valid_signals())  # they are the main thread's
    with suppress(EOFError, OSError):
        lifeline.recv_bytes()
    os._exit(1)
