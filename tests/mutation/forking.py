"""Running something in a process of its own, forked from this one."""

from __future__ import annotations

import os
import signal
from collections.abc import Callable

PASSED, TIMED_OUT = 0, -1


def forked(run: Callable[[], int], limit_s: float) -> int:
    """Return what `run` returned in its own process; TIMED_OUT where it took longer, or was killed."""
    child = os.fork()
    if child == 0:
        os.setpgid(0, 0)
        status = 70
        try:
            status = run()
        finally:
            os._exit(status)
    signal.signal(signal.SIGALRM, lambda *_: os.killpg(child, signal.SIGKILL))
    signal.setitimer(signal.ITIMER_REAL, limit_s)
    _, status = os.waitpid(child, 0)
    signal.setitimer(signal.ITIMER_REAL, 0)
    return os.WEXITSTATUS(status) if os.WIFEXITED(status) else TIMED_OUT


def silenced() -> None:
    """Send what this process prints nowhere."""
    null = os.open(os.devnull, os.O_WRONLY)
    for stream in (1, 2):
        os.dup2(null, stream)
