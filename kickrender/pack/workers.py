"""Batches spread over processes of this machine, the same bytes for any number of them.

Workers are started afresh (never forked, which numba's and the system's threads do not survive), ignore Ctrl-C and
look at a shared flag between two files instead, so that whatever ends a run leaves whole files only.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from multiprocessing import connection
from multiprocessing.sharedctypes import Synchronized
from multiprocessing.synchronize import Event
from typing import Any, TypeVar

from kickrender.errors import WorkerError
from kickrender.pack.render import Stop

Job = TypeVar("Job")  # a batch: whatever tells a worker what to do
Out = TypeVar("Out")  # an outcome: what it answers
Work = Callable[[Job, Stop], Iterator[Out]]
Progress = Callable[[int], None]

LOOK_EVERY_S = 0.2
_QUEUED_PER_JOB = 2  # enough to keep a worker busy, few enough that memory does not grow with the pack


def run_batches(batches: Iterable[Job], work: Work[Job, Out], jobs: int, progress: Progress) -> Iterator[Out]:
    """Outcomes of every batch, in no particular order.

    Parameters
    ----------
    work : function (batch, stop) -> outcomes
        A function of a module, so that a worker can find it.
    jobs : int
        Worker processes; with 1 the work is done in this process.
    progress : function (hits) -> None
        Told how many more hits are done, as often as there is news.
    """
    if jobs == 1:
        for batch in batches:
            for outcome in work(batch, _never):
                progress(1)
                yield outcome
        return
    yield from _spread(batches, work, jobs, progress)


def _spread(batches: Iterable[Job], work: Work[Job, Out], jobs: int, progress: Progress) -> Iterator[Out]:
    context = multiprocessing.get_context("spawn")
    stop, done = context.Event(), context.Value("q", 0)
    pool = ProcessPoolExecutor(jobs, context, _start_worker, (stop, done))
    waiting: set[Future[list[Out]]] = set()
    queue = iter(batches)
    told = 0
    try:
        while True:
            while len(waiting) < _QUEUED_PER_JOB * jobs and (batch := next(queue, None)) is not None:
                waiting.add(pool.submit(_work, work, batch))
            if not waiting:
                return
            finished, waiting = wait(waiting, LOOK_EVERY_S, FIRST_COMPLETED)
            told, before = done.value, told
            progress(told - before)
            for future in finished:
                yield from future.result()
    except BrokenProcessPool:
        raise WorkerError(
            "a worker process died, perhaps for want of memory. The files that were written are whole; run again to "
            "render the rest, with fewer jobs."
        ) from None
    finally:
        stop.set()
        pool.shutdown(cancel_futures=True)


_stop: Event
_done: Synchronized[int]


def _start_worker(stop: Event, done: Any) -> None:
    global _stop, _done
    _stop, _done = stop, done
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with_parent, daemon=True).start()


def _end_with_parent() -> None:
    """A worker whose parent was killed would wait for work for ever."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        connection.wait([parent.sentinel])
        os._exit(1)


def _work(work: Work[Job, Out], batch: Job) -> list[Out]:
    outcomes = []
    for outcome in work(batch, _stop.is_set):
        outcomes.append(outcome)
        with _done.get_lock():
            _done.value += 1
    return outcomes


def _never() -> bool:
    return False
