"""Who computes, and when: worker threads with a short queue, and the last few studies kept."""

import os
import threading
import time
from collections import OrderedDict
from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeVar

import anyio
import anyio.to_thread

from server.errors import Overloaded
from server.selection import study
from server.selection.job import Job
from server.selection.result import Study
from server.web.schemas import JobIn

T = TypeVar("T")

MAX_WAITING = 8
KEPT_STUDIES = 16
FIRST_GUESS_S = 1.0
LONGEST_RETRY_S = 60


@dataclass(frozen=True, slots=True, eq=False)
class Answer:
    """A job as it came, as it was computed, and what came out."""

    given: JobIn
    job: Job
    study: Study


class Desk:
    """Takes work as long as the queue is short.

    As many threads as cores compute at once; what waits beyond `max_waiting` is told to come back. So a slow job never
    keeps the health check or a plain page waiting.
    """

    def __init__(self, workers: int | None = None, max_waiting: int = MAX_WAITING) -> None:
        """Open for work; nothing runs yet."""
        self.workers = workers or os.cpu_count() or 1
        self.max_waiting = max_waiting
        self.usual_s = FIRST_GUESS_S
        self._limiter = anyio.CapacityLimiter(self.workers)
        self._taken = 0
        self._kept: OrderedDict[str, Answer] = OrderedDict()
        self._lock = threading.Lock()
        self._in_hand: dict[str, threading.Lock] = {}

    async def run(self, work: Callable[..., T], *args: object) -> T:
        """What `work(*args)` returns, computed in a thread. Raises Overloaded where the queue is full."""
        if self._taken >= self.workers + self.max_waiting:
            wait_s = self.usual_s * self._taken / self.workers
            raise Overloaded(min(max(1, round(wait_s)), LONGEST_RETRY_S))
        self._taken += 1
        try:
            return await anyio.to_thread.run_sync(self._timed, work, args, limiter=self._limiter)
        finally:
            self._taken -= 1

    def _timed(self, work: Callable[..., T], args: tuple[object, ...]) -> T:
        started = time.perf_counter()
        try:
            return work(*args)
        finally:
            self.usual_s += 0.2 * (time.perf_counter() - started - self.usual_s)

    async def answer(self, given: JobIn) -> Answer:
        """The study of a job, from what is kept or from a worker."""
        key = given.model_dump_json()
        with self._lock:
            if key in self._kept:
                self._kept.move_to_end(key)
                return self._kept[key]
        return await self.run(self.answer_here, given)

    def answer_here(self, given: JobIn) -> Answer:
        """The study of a job, computed in this thread; one that another thread has in hand is waited for."""
        key = given.model_dump_json()
        with self._lock:
            turn = self._in_hand.setdefault(key, threading.Lock())
        with turn:
            with self._lock:
                if key in self._kept:
                    return self._kept[key]
            try:
                job = given.to_job()
                done = Answer(given, job, study.run(job))
                with self._lock:
                    self._kept[key] = done
                    while len(self._kept) > KEPT_STUDIES:
                        self._kept.popitem(last=False)
                return done
            finally:
                with self._lock:
                    self._in_hand.pop(key, None)
