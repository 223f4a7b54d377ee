"""The job registry: long work in spawned worker processes, polled by the browser, stoppable.

Each worker process has one thread here that feeds it and listens. A worker that dies, or does not stop within a grace
time, is replaced; its job ends as failed or cancelled and no other job notices.
"""

import heapq
import itertools
import multiprocessing
import secrets
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Literal

from . import worker

State = Literal["queued", "running", "done", "failed", "cancelled"]
GRACE_S = 5.0
"""How long a worker may take to notice a stop before it is ended."""
KEPT = 200
"""Finished jobs remembered for clients that still poll."""


@dataclass(eq=False)
class Job:
    """One piece of long work. ``key`` names what it makes, so that asking twice does the work once."""

    kind: str
    arguments: dict[str, Any]
    key: str
    text: str = "Waiting"
    id: str = field(default_factory=lambda: secrets.token_hex(8))
    state: State = "queued"
    share: float = 0.0
    result_url: str | None = None
    error: dict[str, Any] | None = None
    on_done: Callable[["Job", Any], None] | None = None
    stop: threading.Event = field(default_factory=threading.Event)

    @property
    def ended(self) -> bool:
        """True once nothing more will happen."""
        return self.state in ("done", "failed", "cancelled")


class Registry:
    """All jobs of one server, and the threads and processes that work on them."""

    def __init__(self, workers: int = 1, *, tasks: str = "curvebank_web.work", grace_s: float = GRACE_S) -> None:
        self.tasks, self.grace_s = tasks, grace_s
        self._jobs: dict[str, Job] = {}
        self._queue: list[tuple[int, int, Job]] = []
        self._order = itertools.count()
        self._changed = threading.Condition()
        self._closing = False
        self._threads = [threading.Thread(target=self._serve, name=f"jobs-{n}", daemon=True) for n in range(workers)]
        self._started = False

    def start(self) -> None:
        """Start the workers; done on the first job, or early so that the first job need not wait for imports."""
        with self._changed:
            if not self._started:
                self._started = True
                for thread in self._threads:
                    thread.start()

    def submit(
        self, kind: str, key: str, arguments: dict[str, Any], *, first: bool = False, on_done: Callable[[Job, Any], None] | None = None
    ) -> Job:
        """Queue work, or return the job that already does it. ``first`` puts it before ordinary work."""
        self.start()
        with self._changed:
            live = next((j for j in self._jobs.values() if j.key == key and not j.ended and not j.stop.is_set()), None)
            if live:
                return live
            job = Job(kind=kind, arguments=arguments, key=key, on_done=on_done)
            self._jobs[job.id] = job
            heapq.heappush(self._queue, (0 if first else 1, next(self._order), job))
            self._forget()
            self._changed.notify_all()
        return job

    def get(self, job_id: str) -> Job | None:
        """A job by its id, or None."""
        return self._jobs.get(job_id)

    def place(self, job: Job) -> int:
        """1 for the next in line, 0 for a job that is not waiting."""
        with self._changed:
            waiting = [j for _, _, j in sorted(self._queue, key=lambda item: item[:2]) if not j.ended]
        return waiting.index(job) + 1 if job in waiting else 0

    def cancel(self, job: Job) -> None:
        """Ask a job to stop; a waiting one ends at once."""
        with self._changed:
            job.stop.set()
            if job.state == "queued":
                job.state, job.text = "cancelled", "Stopped"
            elif job.state == "running":
                job.text = "Stopping"
            self._changed.notify_all()

    def wait(self, job: Job, timeout_s: float) -> bool:
        """Wait until a job has ended; False when the time is over."""
        with self._changed:
            return self._changed.wait_for(lambda: job.ended, timeout_s)

    def close(self) -> None:
        """Stop everything and end the worker processes."""
        with self._changed:
            self._closing = True
            for job in self._jobs.values():
                job.stop.set()
                if job.state == "queued":
                    job.state = "cancelled"
            self._changed.notify_all()
            started = self._started
        if started:
            for thread in self._threads:
                thread.join(timeout=10)

    def _forget(self) -> None:
        ended = [j.id for j in self._jobs.values() if j.ended]
        for job_id in ended[: max(0, len(ended) - KEPT)]:
            del self._jobs[job_id]

    def _next(self) -> Job | None:
        with self._changed:
            while not self._closing:
                while self._queue:
                    job = heapq.heappop(self._queue)[2]
                    if not job.ended:
                        job.state, job.text = "running", "Starting"
                        self._changed.notify_all()
                        return job
                self._changed.wait()
        return None

    def _serve(self) -> None:
        process = _Process(self.tasks)
        try:
            while (job := self._next()) is not None:
                if not process.alive():
                    process.end()
                    process = _Process(self.tasks)
                outcome = self._perform(process, job)
                self._finish(job, outcome)
        finally:
            process.end()

    def _perform(self, process: "_Process", job: Job) -> tuple[Any, ...]:
        """Feed one job to the worker and follow it to its end."""
        told: float | None = None
        try:
            process.send(("task", job.kind, job.arguments))
            while True:
                if process.pipe.poll(0.05):
                    message = process.pipe.recv()
                    if message[0] == "progress":
                        job.share = min(max(message[1], job.share), 1.0)
                        job.text = job.text if job.stop.is_set() else message[2]
                    elif message[0] != "ready":
                        return message
                if job.stop.is_set():
                    if told is None:
                        told = time.monotonic()
                        process.send(("stop",))
                    elif time.monotonic() - told > (0.5 if self._closing else self.grace_s):
                        process.end()
                        return ("cancelled",)
        except (EOFError, OSError):
            process.end()
            if job.stop.is_set():
                return ("cancelled",)
            message = "The worker process ended, perhaps for want of memory. Nothing that was kept is lost. Run it again, or scan coarser."
            return ("failed", {"code": "worker-died", "message": message, "path": None})

    def _finish(self, job: Job, outcome: tuple[Any, ...]) -> None:
        state: State = outcome[0]
        if state == "done" and job.on_done is not None:
            try:
                job.on_done(job, outcome[1])
            except Exception as error:
                state, outcome = (
                    "failed",
                    ("failed", {"code": "not-kept", "message": f"The result could not be kept: {error}.", "path": None}),
                )
        with self._changed:
            job.arguments = {}
            if state == "done":
                job.share, job.text = 1.0, "Done"
            elif state == "cancelled":
                job.text = "Stopped"
            else:
                job.text, job.error = "Failed", outcome[1]
            job.state = state
            self._changed.notify_all()


class _Process:
    """A spawned worker and its pipe. Spawned, not forked: this process has threads."""

    def __init__(self, tasks: str) -> None:
        worker.one_thread()
        context = multiprocessing.get_context("spawn")
        self.pipe, theirs = context.Pipe()
        self.process = context.Process(target=worker.main, args=(theirs, tasks), name="curvebank-worker", daemon=True)
        self.process.start()
        theirs.close()

    def alive(self) -> bool:
        return not self.pipe.closed and self.process.is_alive()

    def send(self, message: tuple[Any, ...]) -> None:
        self.pipe.send(message)

    def end(self) -> None:
        """End the process: an idle one leaves by itself when its pipe closes, a busy one is killed."""
        if self.pipe.closed:
            return
        self.pipe.close()
        self.process.join(timeout=0.5)
        if self.process.is_alive():
            self.process.kill()
            self.process.join()
        self.process.close()
