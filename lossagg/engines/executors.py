"""Work on other processes and machines, through the executor interface of `concurrent.futures`.

A block of years is a function of its number and of what comes with the task, so it may be computed
anywhere, and again where a worker died. A pool of processes breaks as a whole when one of them dies; a
cluster computes the lost blocks on the workers that are left.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import BrokenExecutor, CancelledError, Executor, Future
from contextlib import contextmanager
from importlib import import_module
from typing import TypeVar

from lossagg.errors import EnvironmentFault
from lossagg.version import __version__

UNDER_WAY = 32
CONNECT_SECONDS = 10
T = TypeVar("T")


def on_executor(
    executor: Executor,
    work: Callable[[int], T],
    blocks: range,
    after: Callable[[int, T], None],
    *,
    under_way: int = UNDER_WAY,
) -> None:
    """Do the work of every block on an executor; `after` is called for each in order, in this thread.

    Args:
        executor: where the work is done.
        work: what is done with the number of a block; it travels to the workers, so it must be picklable.
        blocks: numbers of the blocks.
        after: receives the number and the result of each block.
        under_way: most blocks begun and not yet given to `after`.

    Raises:
        EnvironmentFault: the executor broke, because one of its processes died, or was shut down.
    """
    begun: deque[tuple[int, Future[T]]] = deque()
    try:
        for block in blocks:
            begun.append((block, executor.submit(work, block)))
            if len(begun) >= under_way:
                _finish(begun, after)
        while begun:
            _finish(begun, after)
    except (BrokenExecutor, CancelledError) as error:
        raise EnvironmentFault(
            f"the workers were lost before the simulation was done: {type(error).__name__}",
            remedy="Run it again with workers that stay; a cluster survives the loss of some of them.",
        ) from error
    finally:
        for _, future in begun:
            future.cancel()


def _finish(begun: deque[tuple[int, Future[T]]], after: Callable[[int, T], None]) -> None:
    block, future = begun.popleft()
    after(block, future.result())


@contextmanager
def cluster(address: str) -> Iterator[Executor]:
    """The executor of a running cluster; its workers must have the same version of lossagg.

    Args:
        address: of its scheduler, `tcp://host:8786` or `host:8786`.

    Raises:
        EnvironmentFault: the extra `cluster` is not installed, no scheduler answers, it has no workers, a
            worker has another version, or so many workers died that the work was given up.
    """
    try:
        distributed = import_module("distributed")
    except ImportError as error:
        raise EnvironmentFault(
            "a cluster needs the packages dask and distributed",
            value=error.name,
            remedy='Install them: pip install "lossagg[cluster]".',
        ) from error
    try:
        client = distributed.Client(address, timeout=CONNECT_SECONDS, set_as_default=False)
    except (OSError, ValueError) as error:
        raise EnvironmentFault(
            "no scheduler answers at this address",
            value=address,
            remedy="Start one with `dask scheduler`, and workers with `dask worker ADDRESS`.",
        ) from error
    try:
        _require_workers(client.run(installed_version), address)
        # An executor of its own: shutting it down leaves the cluster running.
        yield client.get_executor(pure=False)
    except distributed.scheduler.KilledWorker as error:
        raise EnvironmentFault(
            "too many workers of the cluster died over the same years, so the work was given up",
            value=address,
            remedy="See the workers' own logs; most often their memory limit was too low.",
        ) from error
    finally:
        client.close()


def installed_version() -> str:
    """The version of lossagg in this process; run on every worker before work is sent there."""
    return __version__


def _require_workers(versions: dict[str, str], address: str) -> None:
    if not versions:
        raise EnvironmentFault(
            "the cluster has no workers", value=address, remedy=f"Start some: dask worker {address}"
        )
    for worker, version in sorted(versions.items()):
        if version != __version__:
            raise EnvironmentFault(
                f"a worker of the cluster has another version of lossagg than this one, {__version__}",
                where=f"worker {worker}",
                value=version,
                remedy="Install the same version everywhere: the same bytes need the same code.",
            )
