"""What is being done and what went wrong, in words, and who is told of it."""

from __future__ import annotations

import logging
import threading
import time
from collections.abc import Callable
from typing import TYPE_CHECKING, Final, Literal

from fieldmap.errors import FieldmapError
from fieldmap.show.panels.worker import Stopped, Worker

if TYPE_CHECKING:
    from fieldmap.progress import Tell

__all__ = ["Desk", "Listener", "Topic"]

Topic = Literal["busy", "campaign", "passes", "stale", "map", "results", "saved"]
Listener = Callable[[Topic], None]

LOG: Final = logging.getLogger("fieldmap")


class Desk:
    """Does work here and now, or on a thread of its own, and keeps what goes wrong as words.

    Parameters
    ----------
    background : bool
        Whether long work is done on a thread of its own.

    Attributes
    ----------
    lock : threading.RLock
        Handlers of widgets run in threads of their own, so they hold it. Long work in the
        background takes it for moments only, to show what has become of it.
    """

    def __init__(self, *, background: bool = False) -> None:
        self.background = background
        self.lock = threading.RLock()
        self._worker = Worker()
        self._listeners: list[Listener] = []
        self._errors: dict[str, str] = {}
        self._quick = self._long = ""
        self._since = 0.0

    @property
    def error(self) -> str:
        """What is wrong, in words; empty if nothing is."""
        return " ".join(tuple(self._errors.values()))

    @property
    def busy(self) -> str:
        """What is being done; empty if nothing is."""
        return self._quick or self._long

    @property
    def working(self) -> bool:
        """Whether something is done in the background, or waits for it."""
        return bool(self._long)

    @property
    def stoppable(self) -> bool:
        """Whether `stop` would end something."""
        return self.working and self._worker.stoppable

    @property
    def elapsed(self) -> float:
        """How long the work in the background has taken until now, s."""
        return time.monotonic() - self._since if self._long else 0.0

    def listen(self, listener: Listener) -> None:
        """Call a listener after every change, with what has changed; it must not wait."""
        self._listeners.append(listener)

    def stop(self) -> None:
        """Give up what is solved in the background; the last good map stays."""
        self._worker.stop()

    def wait(self, timeout: float | None = None) -> bool:
        """Wait until nothing is done in the background; never with the lock held.

        Parameters
        ----------
        timeout : float, optional
            s.

        Returns
        -------
        bool
            Whether that is so.
        """
        return self._worker.wait(timeout)

    def attempt(self, what: str, work: Callable[[], None]) -> bool:
        """Say what is being done, do it, and keep what goes wrong as words.

        Parameters
        ----------
        what : str
            What is being done, in a few words; an earlier error of the same is forgotten.
        work : callable
            Does it.

        Returns
        -------
        bool
            Whether nothing went wrong.
        """
        with self.lock:
            return self._try(what, work)

    def _try(self, what: str, work: Callable[[], None]) -> bool:
        """The same without the lock."""
        self._errors.pop(what, None)
        self._work(what)
        try:
            work()
        except Stopped:
            raise
        except FieldmapError as error:
            self._errors[what] = str(error)
        except Exception as error:  # noqa: BLE001 see _failed
            self._failed(what, error)
        finally:
            if not self._worker.here:  # there it is busy until all is done
                self._work("")
        return what not in self._errors

    def _do(self, work: Callable[[Tell], None], what: str, *, lasting: bool = False) -> None:
        """Do long work: in the background if that is wished, here and now if not."""
        if not self.background:
            work(self._work)
            return
        with self.lock:
            self._since = time.monotonic()
            self._long = what
            self._worker.ask(lambda: self._job(work), lasting=lasting)
            self._tell("busy")

    def _job(self, work: Callable[[Tell], None]) -> None:
        try:
            work(self._work_unless_stopped)
        finally:
            with self.lock:
                if not self._worker.pending:
                    self._long = ""
                self._tell("busy")

    def _work_unless_stopped(self, what: str) -> None:
        self._worker.check()
        self._work(what)

    def _go_on(self) -> None:
        """End here if this is work in the background that is not wanted any more."""
        if self._worker.here:
            self._worker.check()

    def _failed(self, what: str, error: Exception) -> None:
        """Say it in the panel: an exception in a handler reaches no user by itself."""
        LOG.error("%s failed", what, exc_info=error)
        kind = type(error).__name__
        self._errors[what] = f"{what}: found a failure of the kit's own ({kind}: {error})."

    def _work(self, what: str) -> None:
        with self.lock:
            if self._worker.here:
                self._long = what
            else:
                self._quick = what
            self._tell("busy")

    def _tell(self, topic: Topic) -> None:
        for listener in self._listeners:
            try:
                listener(topic)
            except Exception as error:  # noqa: BLE001 see _failed
                self._failed("showing", error)
