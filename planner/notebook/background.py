"""Long work beside the page: it runs in a thread, what it finds is shown from the kernel's own loop."""

import asyncio
import threading
import time
from collections.abc import Callable
from concurrent.futures import Future
from typing import Any

LOOK_EVERY_S = 0.2  # how often the running time is told and a finished work noticed


class Background:
    """One piece of work at a time. Every callback is called in the loop in which this was made: the kernel's own.

    Parameters
    ----------
    running : hears the stage and the seconds since the start, several times a second
    """

    def __init__(self, running: Callable[[str, float], None]):
        self._running = running
        self._stop = threading.Event()
        self._loop = asyncio.get_running_loop()
        self._task: Future | None = None
        self.stage = ""

    @property
    def is_running(self) -> bool:
        return self._task is not None and not self._task.done()

    def start(self, work: Callable[[Callable, Callable], Any], done: Callable, failed: Callable) -> None:
        """Run `work(progress, cancelled)`, then `done(result)` or `failed(exception)`. Ends a work before it."""
        self.cancel()
        self._stop, self.stage = threading.Event(), ""
        self._task = asyncio.run_coroutine_threadsafe(self._run(work, self._stop, done, failed), self._loop)

    def cancel(self) -> None:
        """Ask the work to end; `failed` then hears its KeyboardInterrupt."""
        self._stop.set()

    async def finished(self) -> None:
        """Wait until the work has ended and its callback is through."""
        while self.is_running:
            await asyncio.sleep(LOOK_EVERY_S / 4)

    async def _run(self, work, stop: threading.Event, done: Callable, failed: Callable) -> None:
        began = time.perf_counter()

        def progress(stage: str) -> None:
            if stop is self._stop:
                self.stage = stage

        future = self._loop.run_in_executor(None, _caught, work, progress, stop.is_set)
        while not future.done():
            if stop is self._stop:
                self._running(self.stage, time.perf_counter() - began)
            await asyncio.wait([future], timeout=LOOK_EVERY_S)
        result, fault = future.result()
        if stop is not self._stop:
            return  # another work has taken its place
        if fault is None:
            done(result)
        else:
            failed(fault)


def _caught(work, progress, cancelled) -> tuple[Any, BaseException | None]:
    """A KeyboardInterrupt must not cross into the loop: it would end the kernel."""
    try:
        return work(progress, cancelled), None
    except BaseException as fault:
        return None, fault
