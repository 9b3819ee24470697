"""The same work many times over, on as many processes as there are processors."""

from __future__ import annotations

import os
import sys
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from multiprocessing import get_context
from types import ModuleType
from typing import TYPE_CHECKING, Any, Final, Generic, Protocol, TypeVar

from fieldmap.errors import InputError, RefusedError

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["Job", "processes", "run_all"]

T = TypeVar("T")
T_co = TypeVar("T_co", covariant=True)

_THREADS: Final = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")


class Job(Protocol, Generic[T_co]):
    """Work that is told apart by a number."""

    def run(self, number: int) -> T_co:
        """Do the work of this number."""


def processes(wanted: int | None, pieces: int) -> int:
    """How many processes to use: all processors if nothing is wanted, never more than pieces.

    Raises
    ------
    InputError
        Fewer than one.
    """
    if wanted is not None and wanted < 1:
        raise InputError("argument 'workers'", repr(wanted), "1 or more")
    return min(wanted or os.cpu_count() or 1, pieces)


def run_all(job: Job[T], count: int, workers: int, caller: str) -> Iterator[T]:
    """Run a job for the numbers 0 to count - 1.

    Parameters
    ----------
    job : Job
        The work; it is sent to every process once.
    count : int
        How often.
    workers : int
        Processes, one thread each; the calling one alone where it is 1.
    caller : str
        Function that the user called, for the sentence of a refusal.

    Yields
    ------
    object
        What the job gave, in the order of the numbers.

    Raises
    ------
    RefusedError
        A process ended before its work was done.
    """
    if workers == 1:
        yield from map(job.run, range(count))
        return
    pool = ProcessPoolExecutor(workers, get_context("spawn"), initializer=_receive, initargs=(job,))
    try:
        with pool:
            with _plain_start():
                found = pool.map(_one, range(count))  # starts all workers
            yield from found
    except BrokenProcessPool:
        text = f"a worker process ended before its work was done; call {caller} with workers=1."
        raise RefusedError("workers-lost", "argument 'workers'", text) from None


@contextmanager
def _plain_start() -> Iterator[None]:
    """Processes that start here use one thread each, and do not import the user's script again."""
    before = {name: os.environ.get(name) for name in _THREADS}
    main = sys.modules["__main__"]
    os.environ.update(dict.fromkeys(_THREADS, "1"))  # they share the processors
    sys.modules["__main__"] = ModuleType("__main__")
    try:
        yield
    finally:
        sys.modules["__main__"] = main
        for name, value in before.items():
            if value is None:
                del os.environ[name]
            else:
                os.environ[name] = value


_received: list[Job[Any]] = []  # of a worker process, which serves one call only


def _receive(job: Job[Any]) -> None:
    _received[:] = [job]


def _one(number: int) -> Any:
    return _received[0].run(number)
