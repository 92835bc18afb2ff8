"""Batches through workers: in this process, or in a pool of spawned ones, results in the order of the batches."""

from __future__ import annotations

import ctypes
import os
import signal
import threading
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Future, ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from itertools import islice
from multiprocessing import connection, get_context, parent_process
from typing import Any, TypeVar

from geoshape.errors import GeoshapeError

Task = TypeVar("Task")
Answer = TypeVar("Answer")

SMALL_RUN_BATCHES = 2
"""A run of no more batches is done before a pool would have started."""

TASKS_AHEAD = 2
"""Batches under way or waiting, for each process: enough to keep it busy, few enough for constant memory."""


_M_TRIM_THRESHOLD, _M_MMAP_THRESHOLD = -1, -3
_TRIM_BYTES, _MMAP_BYTES = 256 * 2**20, 32 * 2**20


def keep_freed_memory() -> None:
    """Let this process keep the memory that it frees, where the C library has a way to say so.

    NumPy's temporaries would otherwise go back to the system after each step and be faulted in again by the next,
    which takes two thirds of the time of the formulas.
    """
    try:
        mallopt = ctypes.CDLL(None).mallopt
    except (AttributeError, OSError, TypeError):
        return
    mallopt(_M_MMAP_THRESHOLD, _MMAP_BYTES)
    mallopt(_M_TRIM_THRESHOLD, _TRIM_BYTES)


def usable_cores() -> int:
    """Count the cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


class Workers:
    """Makes workers: each process calls ``prepare`` once and the function it returns for every task.

    Parameters
    ----------
    prepare : callable
        Takes ``settings`` and returns the function of a task; importable by name, as spawned processes need it.
    settings : object
        Anything that can be pickled.
    jobs : int
        Processes; 1 does everything in this one.
    """

    def __init__(self, prepare: Callable[[Any], Callable[[Any], Any]], settings: object, jobs: int) -> None:
        self._prepare = prepare
        self._settings = settings
        self._jobs = jobs

    def run(self, tasks: Iterable[tuple[Task, object]]) -> Iterator[tuple[Task, Any]]:
        """Answer tasks in their order.

        Parameters
        ----------
        tasks : iterable of (kept, sent)
            What stays in this process, and what goes to the worker.

        Yields
        ------
        (kept, answer)

        Raises
        ------
        GeoshapeError
            A worker process died.
        """
        stream = iter(tasks)
        head = list(islice(stream, SMALL_RUN_BATCHES + 1)) if self._jobs > 1 else []
        if len(head) <= SMALL_RUN_BATCHES:
            function = self._prepare(self._settings)
            for kept, sent in (*head, *stream) if head else stream:
                yield kept, function(sent)
            return
        yield from self._in_pool(_chained(head, stream))

    def _in_pool(self, tasks: Iterator[tuple[Task, object]]) -> Iterator[tuple[Task, Any]]:
        executor = ProcessPoolExecutor(
            self._jobs,
            # A forked copy of a process that holds GDAL or PROJ can hang or break.
            mp_context=get_context("spawn"),
            initializer=_start_worker,
            initargs=(self._prepare, self._settings),
        )
        waiting: deque[tuple[Task, Future[Any]]] = deque()
        try:
            for kept, sent in tasks:
                with _interrupts_ignored():
                    future = executor.submit(_work, sent)
                waiting.append((kept, future))
                if len(waiting) >= self._jobs * TASKS_AHEAD:
                    yield _finished(waiting.popleft())
            while waiting:
                yield _finished(waiting.popleft())
        except BrokenProcessPool:
            raise GeoshapeError(
                "a worker process died, most likely for want of memory; use fewer processes with --jobs"
            ) from None
        finally:
            executor.shutdown(wait=True, cancel_futures=True)


@contextmanager
def _interrupts_ignored() -> Iterator[None]:
    """Let processes that start meanwhile be born deaf to interrupts: those are the parent's business.

    A signal that comes just now is lost; only the main thread can do this, and only it is interrupted.
    """
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


def _chained(head: list[tuple[Task, object]], rest: Iterator[tuple[Task, object]]) -> Iterator[tuple[Task, object]]:
    yield from head
    yield from rest


def _finished(item: tuple[Task, Future[Any]]) -> tuple[Task, Any]:
    kept, future = item
    return kept, future.result()


_function: Callable[[Any], Any] | None = None


def _start_worker(prepare: Callable[[Any], Callable[[Any], Any]], settings: object) -> None:
    threading.Thread(target=_die_with_parent, daemon=True).start()
    keep_freed_memory()
    global _function  # noqa: PLW0603 - the one state a worker process has
    _function = prepare(settings)


def _die_with_parent() -> None:
    """End this process when its parent is killed, which no message tells."""
    parent = parent_process()
    if parent is not None:
        connection.wait([parent.sentinel])
        os._exit(1)


def _work(sent: object) -> object:
    assert _function is not None  # noqa: S101 - set when the worker started
    return _function(sent)
