"""Worker processes: started alike on every system, deaf to Ctrl-C, gone when their parent is.

The parent alone decides what Ctrl-C means, so a worker must not hear of it, not even while it
starts; and a parent that is killed cannot tell its workers, so they watch it.  A parent that wants
no more results tells them the same way, and they leave in the middle of what they do.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from multiprocessing import resource_tracker
from multiprocessing.connection import Connection, wait
from typing import Any

from orbitsearch.errors import BadRequest, OrbitsearchError

__all__ = ["check_workers", "result_of", "worker_pool"]


def check_workers(workers: int | None) -> int:
    """Number of worker processes: as given, or the cores this process may use."""
    if workers is None:
        usable = getattr(os, "sched_getaffinity", None)
        return len(usable(0)) if usable else os.cpu_count() or 1
    if workers < 1:
        raise BadRequest(f"`workers` must be at least 1: {workers}")
    return workers


def _start_worker(stop: Connection) -> None:
    # Ctrl-C goes to every process of the terminal; the parent alone decides what it means.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with_parent, args=[stop], daemon=True).start()


def _end_with_parent(stop: Connection) -> None:
    # A killed parent cannot tell its workers, and they hold both ends of the pipe they wait on.
    parent = multiprocessing.parent_process()
    # Nobody reads what is sent to stop, so that every worker sees it.
    wait([stop] if parent is None else [stop, parent.sentinel])
    os._exit(1)


class _Inline(Executor):
    """Executor that runs a task when it is submitted: no processes, for one worker."""

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        """Run the task at once."""
        future: Future[Any] = Future()
        future.set_result(fn(*args, **kwargs))
        return future


@contextmanager
def worker_pool(workers: int) -> Iterator[Executor]:
    """Executor with that many processes; for one it works in this process.

    Leaving it at the end of the block drops what has not begun and waits for what has.  Leaving it
    by an exception, or because the generator around it is closed, ends the workers at once: they
    hold no files or locks of ours, only work that nobody waits for.
    """
    if workers == 1:
        yield _Inline()
        return
    # Spawned, not forked: the same on every system, and safe beside threads of a notebook.
    context = multiprocessing.get_context("spawn")
    stopped, stop = context.Pipe(duplex=False)
    pool = ProcessPoolExecutor(workers, context, initializer=_start_worker, initargs=(stopped,))
    try:
        with _interrupts_held():
            # Each task starts a worker as long as none is idle yet.
            for _ in range(workers):
                pool.submit(os.getpid)
        yield pool
    except BaseException:
        stop.send(None)
        raise
    finally:
        # A second Ctrl-C, from someone impatient, must not leave workers behind.
        with _interrupts_held():
            pool.shutdown(wait=True, cancel_futures=True)
        stop.close()
        stopped.close()


@contextmanager
def _interrupts_held() -> Iterator[None]:
    """Ctrl-C waits, and processes started meanwhile never hear of it, not even as they start."""
    before = None
    if hasattr(signal, "pthread_sigmask"):
        # Started with the first worker, it would let the interrupts go.
        resource_tracker.ensure_running()
        before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    # Workers inherit the mask of this thread; the signal still comes by way of any other thread.
    handler, held = signal.getsignal(signal.SIGINT), []
    mine = handler is not None and threading.current_thread() is threading.main_thread()
    if mine:
        signal.signal(signal.SIGINT, lambda *_: held.append(True))
    try:
        yield
    finally:
        if mine:
            signal.signal(signal.SIGINT, handler)
        if before is not None:
            signal.pthread_sigmask(signal.SIG_SETMASK, before)
    if held and callable(handler):
        handler(signal.SIGINT, None)


def result_of(future: Future[Any]) -> Any:
    """Result of a task; OrbitsearchError when its worker died."""
    try:
        return future.result()
    except BrokenProcessPool:
        raise OrbitsearchError(
            "a worker process died (out of memory?); what was found so far is kept: run the search"
            " again, with fewer `--workers` or a smaller `--grid`"
        ) from None
