"""Work beside the page: it tells how long it runs, ends when cancelled, and never blocks the loop."""

import asyncio
import threading
import time

from planner.notebook.background import Background

A_HANG_S = 30.0  # how soon a cancelled work ends is measured in benchmarks/


def run(work, during=None):
    """(running reports, results, faults) of one work."""

    async def main():
        told, done, failed = [], [], []
        background = Background(lambda stage, seconds: told.append((stage, seconds)))
        background.start(work, done.append, failed.append)
        if during is not None:
            await during(background)
        await background.finished()
        return told, done, failed

    return asyncio.run(main())


def test_the_result_arrives_in_the_loops_own_thread():
    threads = []

    async def main():
        background = Background(lambda stage, seconds: None)
        background.start(
            lambda progress, cancelled: threading.get_ident(),
            lambda result: threads.append((result, threading.get_ident())),
            threads.append,
        )
        await background.finished()

    asyncio.run(main())
    ((worker, receiver),) = threads
    assert receiver == threading.get_ident() != worker


def test_stage_and_seconds_are_told_while_it_runs():
    def work(progress, cancelled):
        progress("thinking")
        time.sleep(0.5)

    told, done, failed = run(work)
    assert (done, failed) == ([None], [])
    assert told[-1][0] == "thinking"
    assert told[-1][1] > told[0][1]


def test_a_fault_is_handed_over():
    def work(progress, cancelled):
        raise ValueError("no")

    _, done, failed = run(work)
    assert done == []
    assert str(failed[0]) == "no"


def test_a_cancelled_work_ends():
    def work(progress, cancelled):
        until = time.monotonic() + A_HANG_S
        while not cancelled():
            assert time.monotonic() < until
            time.sleep(0.01)
        raise KeyboardInterrupt

    async def cancel(background):
        await asyncio.sleep(0.1)
        background.cancel()

    _, _, failed = run(work, cancel)
    assert isinstance(failed[0], KeyboardInterrupt)


def test_only_the_last_of_two_works_is_heard():
    async def start_another(background):
        background.start(lambda progress, cancelled: "second", done.append, done.append)

    done = []

    def slow(progress, cancelled):
        time.sleep(0.2)
        return "first"

    _, first, failed = run(slow, start_another)
    assert (first, failed, done) == ([], [], ["second"])
