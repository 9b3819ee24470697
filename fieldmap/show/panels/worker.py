"""One thread for what takes long: the newest request wins, and a person can stop it."""

from __future__ import annotations

import logging
import threading
from collections import deque
from collections.abc import Callable
from typing import Final, NamedTuple

__all__ = ["Job", "Stopped", "Worker"]

Job = Callable[[], None]
LOG: Final = logging.getLogger("fieldmap")


class Stopped(Exception):  # noqa: N818 - no error: somebody wished it
    """Raised within a job that is to end."""


class _Entry(NamedTuple):
    job: Job
    lasting: bool


class Worker:
    """Does one job at a time on a thread of its own, which ends when there is nothing to do.

    Examples
    --------
    >>> worker, done = Worker(), []
    >>> worker.ask(lambda: done.append("solved"))
    >>> worker.wait(5.0), done
    (True, ['solved'])
    """

    def __init__(self) -> None:
        # held for moments only, never while a job runs
        self._change = threading.Condition()
        self._queue: deque[_Entry] = deque()
        self._running: _Entry | None = None
        self._thread: threading.Thread | None = None
        self._halt = False

    @property
    def idle(self) -> bool:
        """Whether nothing is done and nothing waits."""
        return self._thread is None

    @property
    def pending(self) -> bool:
        """Whether a job waits behind the one that runs."""
        return bool(self._queue)

    @property
    def stoppable(self) -> bool:
        """Whether something runs or waits that can be given up."""
        running = self._running
        entries = (*self._queue, running) if running else tuple(self._queue)
        return any(not entry.lasting for entry in entries)

    @property
    def here(self) -> bool:
        """Whether the caller is a job."""
        return threading.current_thread() is self._thread

    def ask(self, job: Job, *, lasting: bool = False) -> None:
        """Do a job soon.

        Parameters
        ----------
        job : callable
            It should call `check` at every step.
        lasting : bool
            Whether it is done to its end whatever is asked for later. One that is not takes the
            place of all such that wait or run.
        """
        with self._change:
            if not lasting:
                self._drop()
            self._queue.append(_Entry(job, lasting))
            if self._thread is None:
                self._thread = threading.Thread(target=self._run, name="fieldmap", daemon=True)
                self._thread.start()

    def stop(self) -> None:
        """Give up what runs or waits, unless it is lasting; does not wait for its end."""
        with self._change:
            self._drop()

    def check(self) -> None:
        """End the job that calls it if it is not wanted any more.

        Raises
        ------
        Stopped
            To be let through.
        """
        if self._halt:
            raise Stopped

    def wait(self, timeout: float | None = None) -> bool:
        """Wait until nothing is left to do; a job that calls it does not wait for itself.

        Parameters
        ----------
        timeout : float, optional
            s.

        Returns
        -------
        bool
            Whether nothing is left.
        """
        if self.here:
            return False
        with self._change:
            return self._change.wait_for(lambda: self._thread is None, timeout)

    def _drop(self) -> None:
        self._queue = deque(entry for entry in self._queue if entry.lasting)
        self._halt = self._running is not None and not self._running.lasting

    def _take(self) -> _Entry | None:
        """The next job; without any the thread is given up in the same moment."""
        with self._change:
            self._halt = False
            self._running = self._queue.popleft() if self._queue else None
            if self._running is None:
                self._thread = None
                self._change.notify_all()
            return self._running

    def _run(self) -> None:
        while (entry := self._take()) is not None:
            try:
                entry.job()
            except Stopped:
                pass
            except Exception:
                LOG.exception("a job failed")
