"""A watch over one solve, which ends a solver that does not come back.

The alarm of the operating system's interval timer (SIGALRM) raises SolverHung where the solver was called. So it ends
whatever waits or loops in Python. It can't end a loop inside a solver's compiled code, whether that holds Python's lock
(piqp) or not (daqp): a signal's handler runs only once the code returns. It must bound itself, and does: see BACKENDS.

There is no watch where signals can't be had: outside the main thread, on a system without interval timers, and in a
process that uses SIGALRM or its timer for something else.
"""

from __future__ import annotations

import os
import signal
import threading
from types import FrameType

from reach.errors import SolverHung

# A solve takes some 20 to 200 µs here, and a thousand times that on a loaded machine. The time is that of the clock: a
# process that was held (job control, a debugger) finds one alarm due as it goes on, however long it was held. So only
# a solve that two alarms in a row find at work does not come back.
TICK_S = 10.0


class _Now:
    """What the main thread solves: the solver's name, "" between solves, the solve's number; what the alarm saw."""

    __slots__ = ("armed", "name", "number", "seen")

    def __init__(self) -> None:
        self.name, self.number, self.armed, self.seen = "", 0, False, -1


_now = _Now()


class Watch:
    """Begins and ends with each solve, at no cost to speak of: the timer runs on between solves, as long as this lives.

    Attributes
    ----------
    on : whether it can be had in this process and thread
    """

    def __init__(self) -> None:
        self._thread = threading.get_ident()
        self.on = _taken()

    def begin(self, name: str) -> None:
        """Note which solver is at work from now on."""
        if self.on and threading.get_ident() == self._thread:
            _now.name = name
            _now.number += 1
            if not _now.armed:
                _now.armed = True
                signal.setitimer(signal.ITIMER_REAL, TICK_S)

    def end(self) -> None:
        """Note that it came back."""
        if self.on and threading.get_ident() == self._thread:
            _now.name = ""

    def __del__(self) -> None:
        if self.on and _now.armed and not _now.name and threading.get_ident() == self._thread:
            signal.setitimer(signal.ITIMER_REAL, 0.0)
            _now.armed = False


def _taken() -> bool:
    """Take the alarm, where nobody has it."""
    if not hasattr(signal, "setitimer") or threading.current_thread() is not threading.main_thread():
        return False
    if signal.getitimer(signal.ITIMER_REAL)[0] > 0.0 and not _now.armed:
        return False
    handler = signal.getsignal(signal.SIGALRM)
    if handler is signal.SIG_DFL:
        signal.signal(signal.SIGALRM, _tick)
    return handler in (signal.SIG_DFL, _tick)


def _tick(number: int, _: FrameType | None) -> None:
    if not _now.armed:  # somebody else's alarm, which ends a process that does not expect it
        signal.signal(number, signal.SIG_DFL)
        os.kill(os.getpid(), number)
    elif not _now.name:
        _now.armed = False  # until the next solve
    else:
        hangs, _now.seen = _now.seen == _now.number, _now.number
        signal.setitimer(signal.ITIMER_REAL, TICK_S)
        if hangs:
            raise SolverHung(
                f'solver "{_now.name}" did not come back within {TICK_S:g} s from a problem that takes it under a '
                f"millisecond; name another as solver.name or solver.fallback in the cell"
            )
