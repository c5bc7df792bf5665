"""Work that takes time, off the window's thread.

A job runs in a thread and speaks to the window only through a queue, which the window empties
with `poll` from its own thread.
"""

from __future__ import annotations

import queue
import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from relorbit.errors import RelorbitError


class Cancelled(Exception):
    """Raised inside a job that was asked to stop."""


@dataclass(frozen=True)
class Outcome:
    """How a job ended: with a result, with an error for the observer, or with a fault."""

    label: str
    result: Any = None
    error: RelorbitError | None = None
    fault: BaseException | None = None
    cancelled: bool = False


class Worker:
    """One job at a time.

    Attributes
    ----------
    label : str or None
        What is being done, None when idle.
    share : float
        How much of it is done, 0 to 1.
    """

    def __init__(self) -> None:
        self._queue: queue.SimpleQueue[tuple[int, str, Any]] = queue.SimpleQueue()
        self._stop = threading.Event()
        self._job = 0
        self._thread: threading.Thread | None = None
        self._on_done: Callable[[Outcome], None] | None = None
        self.label: str | None = None
        self.share = 0.0

    @property
    def busy(self) -> bool:
        return self.label is not None

    def start(
        self,
        label: str,
        work: Callable[[Callable[[float], None]], Any],
        on_done: Callable[[Outcome], None],
    ) -> None:
        """Begin a job.

        Parameters
        ----------
        label : str
            What is being done, in words.
        work : callable
            Runs in a thread of its own. It is given a function to call with the share done, which
            raises `Cancelled` once the job is to stop. It must not touch model or widgets.
        on_done : callable
            Given the `Outcome`, from within `poll`.

        Raises RuntimeError when a job is running.
        """
        if self.busy:
            raise RuntimeError("a job is running")
        self._job += 1
        self._stop = threading.Event()
        self.label, self.share, self._on_done = label, 0.0, on_done
        self._thread = threading.Thread(
            target=self._run, args=(self._job, label, work, self._stop), daemon=True
        )
        self._thread.start()

    def cancel(self) -> None:
        """Ask the job to stop; its outcome comes all the same, as cancelled."""
        self._stop.set()

    def wait(self, seconds: float) -> bool:
        """Wait for the thread to end; True when it has."""
        if self._thread is not None:
            self._thread.join(seconds)
            return not self._thread.is_alive()
        return True

    def poll(self) -> None:
        """Take over what the job has said. Call often, from the window's thread."""
        while True:
            try:
                job, kind, content = self._queue.get_nowait()
            except queue.Empty:
                return
            if job != self._job:
                continue
            if kind == "share":
                self.share = content
                continue
            on_done, self.label, self._on_done = self._on_done, None, None
            if self._stop.is_set():  # it was done before it heard of the cancel
                content = Outcome(content.label, cancelled=True)
            if on_done is not None:
                on_done(content)

    def _run(
        self,
        job: int,
        label: str,
        work: Callable[[Callable[[float], None]], Any],
        stop: threading.Event,
    ) -> None:
        def report(share: float) -> None:
            if stop.is_set():
                raise Cancelled
            self._queue.put((job, "share", share))

        try:
            report(0.0)
            outcome = Outcome(label, work(report))
            if stop.is_set():
                outcome = Outcome(label, cancelled=True)
        except Cancelled:
            outcome = Outcome(label, cancelled=True)
        except RelorbitError as error:
            outcome = Outcome(label, error=error)
        except Exception as fault:
            outcome = Outcome(label, fault=fault)
        self._queue.put((job, "done", outcome))
