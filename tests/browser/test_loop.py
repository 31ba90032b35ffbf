"""Workers without a browser: batches, order, errors, the end; in a kernel, on its loop."""

import threading
import time

import pytest
from harness import run_notebook

from orbitsearch.errors import BadRequest
from orbitsearch.lab import loop
from orbitsearch.lab.loop import Worker, on_kernel_loop


def test_every_value_arrives_once_and_in_order():
    batches, ended = [], []
    worker = Worker(
        lambda: iter(range(3 * loop.LIMIT)), batches.append, on_end=lambda: ended.append(1)
    )
    assert not worker.running
    worker.start()
    assert worker.running
    assert worker.drain(60)
    assert [v for batch in batches for v in batch] == list(range(3 * loop.LIMIT))
    assert max(map(len, batches)) <= loop.LIMIT
    assert ended == [1]
    assert not worker.running
    assert worker.drain()
    assert ended == [1]


def test_nothing_is_delivered_but_by_drain_where_no_loop_runs():
    got = []
    worker = Worker(lambda: iter([1, 2]), got.extend)
    worker.start()
    worker._thread.join(10)
    assert got == []
    assert worker.drain()
    assert got == [1, 2]


def endless(closed):
    try:
        while True:
            time.sleep(0.001)
            yield 1
    finally:
        closed.set()


@pytest.mark.parametrize("drop", [True, False])
def test_stop_closes_the_generator(drop):
    closed, got, ended = threading.Event(), [], []
    worker = Worker(lambda: endless(closed), got.extend, on_end=lambda: ended.append(1))
    worker.start()
    worker.drain(0.05)
    assert got
    before = time.monotonic()
    worker.stop(drop=drop)
    assert time.monotonic() - before < 0.5
    count = len(got)
    assert closed.wait(10)
    assert worker.drain(10)
    # What was found before the end is not lost, unless nobody wants it.
    assert len(got) == count if drop else len(got) >= count
    assert ended == ([] if drop else [1])
    assert not worker.running


def test_a_stopped_worker_that_waits_for_room_ends():
    closed = threading.Event()

    def fast():
        try:
            while True:
                yield 1
        finally:
            closed.set()

    worker = Worker(fast, lambda values: None)
    worker.start()
    time.sleep(0.1)
    worker.stop()
    assert closed.wait(10)


def failing(error):
    yield 1
    raise error


@pytest.mark.parametrize(
    ("error", "line"),
    [
        (BadRequest("`q` must be positive: -1"), "`q` must be positive: -1"),
        (KeyError("x"), "KeyError: 'x'"),
    ],
)
def test_an_error_arrives_as_one_line_after_the_values(error, line):
    told = []
    worker = Worker(lambda: failing(error), told.extend, told.append, lambda: told.append("end"))
    worker.start()
    assert worker.drain(10)
    assert told == [1, line, "end"]
    assert worker.error == line


def test_a_handler_that_raises_ends_the_work():
    closed, told = threading.Event(), []

    def handler(values):
        raise ValueError("no room")

    worker = Worker(lambda: endless(closed), handler, told.append)
    worker.start()
    assert worker.drain(10)
    assert closed.is_set()
    assert told == ["ValueError: no room"]


def test_a_worker_runs_once():
    worker = Worker(list, print)
    worker.start()
    with pytest.raises(BadRequest, match="a `Worker` runs once; make a new one"):
        worker.start()


def test_a_callback_is_called_at_once_where_no_loop_runs():
    seen = []
    thread = threading.Thread(
        target=on_kernel_loop(lambda: seen.append(threading.current_thread()))
    )
    thread.start()
    thread.join()
    assert seen == [thread]


IN_A_KERNEL = """
import asyncio, threading, time
from orbitsearch.lab.loop import Worker, on_kernel_loop
main, seen, batches, done = threading.main_thread(), [], [], asyncio.Event()

def work():
    for number in range(200):
        time.sleep(0.001)
        yield number

def arrived(values):
    batches.append(values)
    seen.append(threading.current_thread() is main)

worker = Worker(work, arrived, on_end=done.set)
worker.start()
"""
# The loop is free while a cell waits.
WAITS = """
await asyncio.wait_for(done.wait(), 30)
print(sum(batches, []) == list(range(200)), 2 <= len(batches) <= 40, all(seen))
late = on_kernel_loop(lambda: seen.append(threading.current_thread() is main))
threading.Thread(target=late).start()
await asyncio.sleep(0.2)
print(len(seen) == len(batches) + 1 and seen[-1])
"""


def test_in_a_kernel_values_arrive_by_themselves_in_the_main_thread(tmp_path):
    outputs = run_notebook(tmp_path, IN_A_KERNEL, WAITS)
    assert outputs == ["", "True True True\nTrue\n"]
