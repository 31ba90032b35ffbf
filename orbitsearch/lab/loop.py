"""Long work beside widgets: threads compute, one thread touches what is on the screen.

JupyterLab may send widget messages to threads of their own (subshells): on a first page callbacks
were seen in the main thread, after each load of the page in yet another one.  Cells run in the main
thread, on a loop that lives as long as the kernel.  So that loop is the one place where widgets and
figures are touched: `on_kernel_loop` brings callbacks there, and a `Worker` hands over there what
its own thread has found.
"""

import asyncio
import contextlib
import contextvars
import functools
import logging
import sys
import threading
import time
from collections.abc import Callable, Iterable
from typing import Any

from orbitsearch.errors import BadRequest, OrbitsearchError

__all__ = ["Worker", "kernel_loop", "on_kernel_loop"]

# Seconds between two deliveries: twenty a second look continuous and leave the loop to the rest.
INTERVAL = 0.05
# Values that wait for delivery; beyond, the work waits, or a slow handler would fill the memory.
LIMIT = 10_000

_log = logging.getLogger(__name__)
_home: asyncio.AbstractEventLoop | None = None


def _in_kernel() -> bool:
    # Whoever imported no IPython is not run by one; it takes half a second to import.
    shell = getattr(sys.modules.get("IPython"), "get_ipython", lambda: None)()
    return hasattr(shell, "kernel")


def kernel_loop() -> asyncio.AbstractEventLoop | None:
    """Loop of the main thread that cells run on; None in a script or a test.

    A loop that somebody else runs there is none of ours: a script with one of its own, for example,
    or the tests, where playwright leaves one running.
    """
    global _home  # noqa: PLW0603
    if threading.current_thread() is threading.main_thread() and _in_kernel():
        with contextlib.suppress(RuntimeError):
            _home = asyncio.get_running_loop()
    return _home if _home is not None and _home.is_running() else None


def on_kernel_loop(callback: Callable[..., object]) -> Callable[..., None]:
    """Callback that runs on the kernel's loop, whichever thread calls it.

    From the main thread, or where no loop runs, the call is a plain one.  From any other thread it
    returns at once; the calls are made in the order in which they came.

    Parameters
    ----------
    callback : callable
        What it returns is dropped.

    Examples
    --------
    >>> seen = []
    >>> on_kernel_loop(seen.append)(3)
    >>> seen
    [3]
    """

    @functools.wraps(callback)
    def call(*args: Any, **kwargs: Any) -> None:
        loop = kernel_loop()
        if loop is None or threading.current_thread() is threading.main_thread():
            callback(*args, **kwargs)
        else:
            loop.call_soon_threadsafe(functools.partial(callback, *args, **kwargs))

    return call


class Worker:
    """One run of a function in a thread; its values arrive in batches on the kernel's loop.

    Where no loop runs, nothing is delivered by itself: call `drain`.  A worker runs once; make a
    new one for the next run.

    Parameters
    ----------
    work : callable
        Without arguments; returns what the thread iterates over, usually a generator.  Between two
        values the generator can be closed; long work in one step may look at `stopping`.
    on_values : callable
        Called with the list of the values since the last call, in order.
    on_error : callable, optional
        Called with one line when the work, or `on_values`, raised.  The line is kept in `error`.
    on_end : callable, optional
        Called without arguments after the last value, in any case.

    Examples
    --------
    >>> seen = []
    >>> worker = Worker(lambda: iter("abc"), seen.extend)
    >>> worker.start()
    >>> worker.drain(10)
    True
    >>> seen
    ['a', 'b', 'c']
    """

    def __init__(
        self,
        work: Callable[[], Iterable[Any]],
        on_values: Callable[[list[Any]], object],
        on_error: Callable[[str], object] | None = None,
        on_end: Callable[[], object] | None = None,
    ) -> None:
        self._work = work
        self._on_values = on_values
        self._on_error = on_error
        self._on_end = on_end
        self._changed = threading.Condition()  # guards what is below
        self._values: list[Any] = []
        self._stopping = False
        self._dropped = False
        self._finished = False
        self._told = False  # the end, to `on_end`
        self._due = False  # a delivery is on its way
        self._not_before = 0.0
        self._thread: threading.Thread | None = None
        self._loop: asyncio.AbstractEventLoop | None = None
        self._context: contextvars.Context | None = None
        self.error: str | None = None

    @property
    def stopping(self) -> bool:
        """Whether `stop` was called: work that takes long in one step may look and return."""
        return self._stopping

    @property
    def running(self) -> bool:
        """From `start` until the end has been delivered, or dropped."""
        return self._thread is not None and not self._told

    def start(self) -> None:
        """Begin; returns at once."""
        if self._thread is not None:
            raise BadRequest("a `Worker` runs once; make a new one for the next run")
        self._loop = kernel_loop()
        # What a handler prints belongs where the work was started.
        self._context = contextvars.copy_context()
        # A daemon: the kernel must be able to end while something is computed.
        self._thread = threading.Thread(target=self._run, name="lab worker", daemon=True)
        self._thread.start()

    def stop(self, *, drop: bool = False) -> None:
        """Ask the work to end after its next value; returns at once.

        Parameters
        ----------
        drop : bool
            Deliver nothing any more, neither values nor the end: somebody has lost interest, and a
            late value must not overwrite what the next worker shows.
        """
        with self._changed:
            self._stopping = True
            self._dropped = self._dropped or drop
            if drop:
                self._told = True
                self._values.clear()
            self._changed.notify_all()

    def drain(self, wait: float = 0.0) -> bool:
        """Deliver in this thread what is there.

        Parameters
        ----------
        wait : float
            Seconds to go on delivering, if the work has not ended before.

        Returns
        -------
        bool
            Whether all is delivered, the end included.
        """
        until = time.monotonic() + wait
        while True:
            with self._changed:
                # Waiting for the end rather than the next value: batches, not single values.
                self._changed.wait_for(
                    lambda: self._finished or self._told or len(self._values) >= LIMIT,
                    timeout=min(INTERVAL, max(0.0, until - time.monotonic())),
                )
            self._deliver()
            if self._told or time.monotonic() >= until:
                return self._told

    # ------------------------------------------------------------ in the worker's thread

    def _run(self) -> None:
        values: Iterable[Any] = ()
        try:
            values = self._work()
            for value in values:
                if not self._put(value):
                    break
        except Exception as error:
            self._fail(error)
        finally:
            try:
                # Here, not in `stop`: only the thread that runs a generator may close it.
                getattr(values, "close", lambda: None)()
            except Exception as error:
                self._fail(error)
            with self._changed:
                self._finished = True
                self._changed.notify_all()
            self._wake()

    def _put(self, value: Any) -> bool:
        """File a value; False when no more are wanted."""
        with self._changed:
            self._changed.wait_for(lambda: len(self._values) < LIMIT or self._stopping)
            if not self._dropped:
                self._values.append(value)
            self._changed.notify_all()
        self._wake()
        return not self._stopping

    def _wake(self) -> None:
        with self._changed:
            if self._due or self._loop is None or self._dropped:
                return
            self._due = True
        # A closed loop means that the kernel is ending, and nobody is left to be told.
        with contextlib.suppress(RuntimeError):
            self._loop.call_soon_threadsafe(self._schedule, context=self._context)

    # ------------------------------------------------------------ on the loop

    def _schedule(self) -> None:
        assert self._loop is not None
        self._loop.call_at(max(self._loop.time(), self._not_before), self._tick)

    def _tick(self) -> None:
        assert self._loop is not None
        with self._changed:
            self._due = False
        self._deliver()
        # Counted from the end of the handler, or a slow one would leave no time to the others.
        self._not_before = self._loop.time() + INTERVAL

    def _deliver(self) -> None:
        with self._changed:
            values, self._values = self._values, []
            ended = self._finished and not self._told
            self._changed.notify_all()
        if values and not self._dropped:
            try:
                self._on_values(values)
            except Exception as error:
                self._fail(error)
                self.stop()
        if ended and not self._dropped:
            self._told = True
            if self.error is not None and self._on_error is not None:
                self._on_error(self.error)
            if self._on_end is not None:
                self._on_end()

    def _fail(self, error: Exception) -> None:
        # The first is the cause; the traceback is for a log that somebody has asked for.
        _log.debug("lab worker failed", exc_info=error)
        if self.error is None:
            ours = isinstance(error, OrbitsearchError)
            self.error = str(error) if ours else f"{type(error).__name__}: {error}"


# Modules are imported by cells, so this is when the loop can be seen for the first time.
kernel_loop()
