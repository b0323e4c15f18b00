"""Tasks on workers or on this process, with progress and the time left; an interrupt leaves what is done."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import BrokenExecutor, Executor, Future, as_completed
from typing import Any, TypeVar

from reach.errors import WorkerLost
from reach.workers import LOST

SAID_EVERY_S = 1.0

Progress = Callable[[str], None]
Done = TypeVar("Done")


class Rounds:
    """Runs rounds of tasks.

    Parameters
    ----------
    pool : where to run, None for this process
    progress : called with a line of how far it is

    Attributes
    ----------
    stopped : whether an interrupt ended a round
    """

    def __init__(self, pool: Executor | None, progress: Progress | None):
        self._pool, self._progress = pool, progress
        self.stopped = False

    def over(
        self, name: str, work: Callable[..., Done], tasks: Sequence[tuple[Any, ...]]
    ) -> list[Done | None]:
        """The answers in the order of the tasks, None for those left at an interrupt.

        Raises
        ------
        WorkerLost
            When a worker process died.
        """
        out: list[Done | None] = [None] * len(tasks)
        begun = said = time.monotonic()
        try:
            for count, (k, answer) in enumerate(self._answers(work, tasks), 1):
                out[k] = answer
                now = time.monotonic()
                if self._progress and (now - said > SAID_EVERY_S or count == len(tasks)):
                    said = now
                    left = (now - begun) / count * (len(tasks) - count)
                    self._progress(f"{name}: {count} of {len(tasks)} parts, about {left:.0f} s left")
        except KeyboardInterrupt:
            self.stopped = True
        except BrokenExecutor as error:
            raise WorkerLost(LOST) from error
        return out

    def _answers(
        self, work: Callable[..., Done], tasks: Sequence[tuple[Any, ...]]
    ) -> Iterator[tuple[int, Done]]:
        if self._pool is None:
            for k, task in enumerate(tasks):
                yield k, work(*task)
            return
        waiting: dict[Future[Done], int] = {}
        try:
            for k, task in enumerate(tasks):
                waiting[self._pool.submit(work, *task)] = k
            for future in as_completed(waiting):
                yield waiting[future], future.result()
        finally:
            for future in waiting:
                future.cancel()
