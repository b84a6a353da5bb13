"""Running jobs in processes of their own, a few at a time, whatever becomes of each."""

from __future__ import annotations

import signal
import subprocess
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from lossagg.batch.failure import debugging

_POLL_SECONDS = 0.05


@dataclass(frozen=True)
class Job:
    """A command to run, and the key by which its end is reported."""

    key: str
    command: tuple[str, ...]


def run_jobs(jobs: Sequence[Job], at_once: int, ended: Callable[[str, int], None]) -> None:
    """Run jobs, at most `at_once` at the same time, in their order.

    Args:
        jobs: the commands.
        at_once: most processes alive at any time.
        ended: called with the key and the return code of each as it ends; a code below zero is the
            number of the signal that ended it.

    If anything is raised meanwhile, an interruption included, every process still alive is killed.
    """
    waiting, alive = list(jobs), dict[str, subprocess.Popen[bytes]]()
    try:
        while waiting or alive:
            while waiting and len(alive) < at_once:
                job = waiting.pop(0)
                alive[job.key] = _start(job)
            for key, process in list(alive.items()):
                code = process.poll()
                if code is not None:
                    del alive[key]
                    ended(key, code)
            if alive:
                time.sleep(_POLL_SECONDS)
    finally:
        for process in alive.values():
            process.kill()
            process.wait()


def _start(job: Job) -> subprocess.Popen[bytes]:
    quiet = None if debugging() else subprocess.DEVNULL
    return subprocess.Popen(job.command, stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=quiet)


def ending(code: int) -> str:
    """How a process ended that gave no answer."""
    if code >= 0:
        return f"its process ended with code {code} and without an answer"
    try:
        name = signal.Signals(-code).name
    except ValueError:
        name = f"signal {-code}"
    hint = "; the machine may have run out of memory" if -code == 9 else ""
    return f"its process was ended by {name} and gave no answer{hint}"
