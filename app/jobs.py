"""Long work on many items, in processes of its own.

A job maps one function, importable by name, over a list of argument tuples. Workers are
started with the first job and shared by all, one item at a time and by turns, so that a
short job does not wait behind a long one. A worker that dies takes only its own item along.
"""

from __future__ import annotations

import contextlib
import logging
import multiprocessing
import os
import pickle
import secrets
import threading
import time
import traceback
from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from multiprocessing import connection
from typing import Any, Literal

from .worker import work

log = logging.getLogger("sweepbench")

State = Literal["running", "done", "cancelled", "lost"]

_DIED = "The computation of this item ended its process, so it has no result; the others went on."
_BUG = "Something in Sweepbench itself went wrong with this item; the details are in the log file."

GRACE = 2.0  # [s] that an item of a cancelled job may still take
KEPT = 50  # finished jobs remembered


@dataclass(frozen=True, slots=True)
class Failure:
    """An item without a result, and the sentence that says why."""

    index: int
    sentence: str


@dataclass(frozen=True, slots=True)
class Status:
    """How far a job is; ``lost`` is one that this server does not know (any more)."""

    label: str
    done: int
    total: int
    state: State
    failures: tuple[Failure, ...] = ()

    @property
    def finished(self) -> bool:
        return self.state != "running"


@dataclass(slots=True)
class _Job:
    label: str
    function: bytes
    waiting: deque[tuple[int, Sequence[Any]]]
    total: int
    under_way: int = 0
    cancelled: bool = False
    results: list[tuple[int, Any]] = field(default_factory=list)
    failures: list[Failure] = field(default_factory=list)
    done: int = 0

    @property
    def state(self) -> State:
        if self.waiting or self.under_way:
            return "running"
        return "cancelled" if self.cancelled and self.done < self.total else "done"


@dataclass(slots=True, eq=False)
class _Worker:
    process: multiprocessing.process.BaseProcess
    line: connection.Connection
    job: _Job | None = None
    index: int = 0
    deadline: float | None = None


class Jobs:
    """The one pool of worker processes.

    Parameters
    ----------
    workers : int, optional
        How many; one less than the machine's processors unless given.
    """

    def __init__(self, workers: int | None = None):
        self._size = workers or min(32, max(1, (os.cpu_count() or 2) - 1))
        self._jobs: dict[str, _Job] = {}
        self._turns: deque[_Job] = deque()
        self._workers: list[_Worker] = []
        self._changed = threading.Condition()
        self._context = multiprocessing.get_context("spawn")  # the same on every system, and safe beside threads
        self._thread: threading.Thread | None = None
        self._closed = False
        self._wake_reader, self._wake_writer = connection.Pipe(duplex=False)

    def submit(
        self, function: Callable[..., Any], arguments: Sequence[Sequence[Any]], *, label: str, name: str | None = None
    ) -> str:
        """Start ``function(*items)`` for every tuple of items.

        Parameters
        ----------
        function : callable
            Of a module's top level; it and its arguments travel to another process.
        arguments : sequence of tuples
        label : str
            What the user reads beside the progress.
        name : str, optional
            The job's id; one that is known already is not started again unless it was cancelled, so that a page may ask twice.

        Returns
        -------
        str
            The job's id.
        """
        job = _Job(label, pickle.dumps(function), deque(enumerate(arguments)), len(arguments))
        name = name or secrets.token_urlsafe(9)
        with self._changed:
            if self._closed:
                raise RuntimeError("jobs are closed")
            known = self._jobs.get(name)
            if known is not None and not known.cancelled:
                return name
            self._forget_old_jobs()
            self._jobs[name] = job
            self._turns.append(job)
            if self._thread is None:
                self._thread = threading.Thread(target=self._run, name="sweepbench jobs", daemon=True)
                self._thread.start()
        self._wake()
        return name

    def status(self, name: str) -> Status:
        """How far a job is; asking changes nothing."""
        with self._changed:
            return self._status(name)

    def take(self, name: str) -> list[tuple[int, Any]]:
        """The results that arrived since the last call, as (place in the arguments, result); handed out once."""
        with self._changed:
            job = self._jobs.get(name)
            taken = job.results if job else []
            if job:
                job.results = []
            return taken

    def results(self, name: str) -> list[tuple[int, Any]]:
        """The results that have not been taken, as ``take`` gives them; asking changes nothing."""
        with self._changed:
            job = self._jobs.get(name)
            return list(job.results) if job else []

    def cancel(self, name: str) -> None:
        """Leave out the items that have not begun; what is under way gets a moment to finish."""
        with self._changed:
            job = self._jobs.get(name)
            if job is None or job.state != "running":
                return
            job.cancelled = True
            job.waiting.clear()
            for worker in self._workers:
                if worker.job is job:
                    worker.deadline = time.monotonic() + GRACE
            self._changed.notify_all()
        self._wake()

    def wait(self, name: str, timeout: float) -> Status:
        """The status when the job has finished, or after ``timeout`` seconds."""
        with self._changed:
            self._changed.wait_for(lambda: self._status(name).finished, timeout)
            return self._status(name)

    def close(self) -> None:
        """End all workers at once; a second call changes nothing."""
        with self._changed:
            self._closed = True
        self._wake()
        if self._thread is not None:
            self._thread.join()
            self._thread = None
        self._wake_reader.close()
        self._wake_writer.close()

    def _status(self, name: str) -> Status:
        job = self._jobs.get(name)
        if job is None:
            return Status("", 0, 0, "lost")
        return Status(job.label, job.done, job.total, job.state, tuple(job.failures))

    def _forget_old_jobs(self) -> None:
        finished = [name for name, job in self._jobs.items() if job.state != "running"]
        for name in finished[:-KEPT]:
            del self._jobs[name]

    def _wake(self) -> None:
        with contextlib.suppress(OSError):  # closed meanwhile
            self._wake_writer.send_bytes(b"")

    # The rest runs in the thread of the jobs.

    def _run(self) -> None:
        while True:
            with self._changed:
                if self._closed:
                    break
                self._hand_out()
                lines = {worker.line: worker for worker in self._workers}
                deadlines = [worker.deadline for worker in self._workers if worker.deadline is not None]
            patience = max(0.0, min(deadlines) - time.monotonic()) if deadlines else None
            for ready in connection.wait([self._wake_reader, *lines], patience):
                if ready is self._wake_reader:
                    self._wake_reader.recv_bytes()
                else:
                    self._hear(lines[ready])
            self._end_overdue()
        for worker in self._workers:
            self._dismiss(worker)

    def _hand_out(self) -> None:
        """Give every idle worker an item, job by job in turn."""
        for job in list(self._turns):
            if not job.waiting:
                self._turns.remove(job)
        idle = [worker for worker in self._workers if worker.job is None]
        waiting = sum(len(job.waiting) for job in self._turns)
        while len(self._workers) < self._size and len(idle) < waiting:
            idle.append(self._hire())
            self._workers.append(idle[-1])
        while idle and self._turns:
            worker, job = idle[-1], self._turns[0]
            self._turns.rotate(-1)
            index, arguments = job.waiting.popleft()
            if not job.waiting:
                self._turns.remove(job)
            worker.job, worker.index = job, index
            job.under_way += 1
            try:
                message = pickle.dumps((job.function, arguments))
            except (pickle.PicklingError, TypeError, AttributeError):
                self._settle(worker, ("bug", traceback.format_exc()))
                continue
            idle.pop()
            with contextlib.suppress(OSError):  # it died while idle; hearing it says so
                worker.line.send_bytes(message)

    def _hire(self) -> _Worker:
        ours, theirs = self._context.Pipe()
        process = self._context.Process(target=work, args=(theirs,), name="sweepbench worker", daemon=True)
        process.start()
        theirs.close()  # so that the line ends with the process
        return _Worker(process, ours)

    def _hear(self, worker: _Worker) -> None:
        try:
            outcome = pickle.loads(worker.line.recv_bytes())
        except (EOFError, OSError):
            with self._changed:
                self._workers.remove(worker)
                self._settle(worker, ("sentence", _DIED))
            self._dismiss(worker)
            return
        with self._changed:
            self._settle(worker, outcome)

    def _settle(self, worker: _Worker, outcome: tuple[str, Any]) -> None:
        """Book the outcome of a worker's item and make the worker idle."""
        job, kind, value = worker.job, *outcome
        if job is not None:
            job.under_way -= 1
            job.done += 1
            if kind == "value":
                job.results.append((worker.index, value))
            elif kind == "bug":
                log.error("An item of the job %r failed unexpectedly.\n%s", job.label, value)
                job.failures.append(Failure(worker.index, _BUG))
            else:
                job.failures.append(Failure(worker.index, value))
        worker.job = worker.deadline = None
        self._changed.notify_all()

    def _end_overdue(self) -> None:
        with self._changed:
            now = time.monotonic()
            overdue = [w for w in self._workers if w.deadline is not None and w.deadline <= now]
            for worker in overdue:
                self._workers.remove(worker)
                worker.job.under_way -= 1  # neither a result nor a failure: it was called off
                self._changed.notify_all()
        for worker in overdue:
            self._dismiss(worker)

    def _dismiss(self, worker: _Worker) -> None:
        worker.process.terminate()
        worker.process.join()
        worker.process.close()
        worker.line.close()
