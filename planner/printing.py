"""What the commands say: tables and one-line findings, plain when piped."""

import logging
import os
import sys
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import Literal

from rich.console import Console
from rich.progress import Progress, SpinnerColumn, TextColumn, TimeElapsedColumn
from rich.table import Table

Column = tuple[str, Literal["left", "right"]]  # heading, and where its texts stand
Tell = Callable[[str], None]
_log = logging.getLogger(__name__)
_moving: list[Progress] = []  # the line that tells the stage; it ends where there is something to say
PLAIN_WIDTH = 200  # columns when nobody's terminal says otherwise


class _Screen(Console):
    """A console that leaves it to the command line what a closed pipe means."""

    def on_broken_pipe(self) -> None:
        raise BrokenPipeError


def screen(stderr: bool = False) -> Console:
    """A console that follows NO_COLOR and is plain when piped."""
    _stop_moving()
    stream = sys.stderr if stderr else sys.stdout
    plain = stream is None or not stream.isatty()  # None: the stream was closed before we began
    width = PLAIN_WIDTH if plain else None
    return _Screen(stderr=stderr, width=width, highlight=False, soft_wrap=plain, emoji=False, markup=False)


def say(text: str) -> None:
    screen().print(text)


def counted(count: int, thing: str, things: str | None = None) -> str:
    """A number with what it counts, as "1 contact", "2 contacts"; `things` where the plural takes more than an s."""
    return f"{count} {thing if count == 1 else things or thing + 's'}"


def table(columns: Sequence[Column], rows: Iterable[Sequence[str]], title: str | None = None) -> None:
    """A table of texts."""
    grid = Table(title=title, title_justify="left", box=None, pad_edge=False, header_style="bold")
    for heading, justify in columns:
        grid.add_column(heading, justify=justify, no_wrap=True)
    for row in rows:
        grid.add_row(*row)
    screen().print(grid)


@contextmanager
def stages(quiet: bool, verbose: bool) -> Iterator[Tell]:
    """Tell which stage runs: a moving line on a terminal, a log when verbose, nothing when quiet or piped.

    Yields a function that takes the name of each stage as it begins. The log also has what the planner decides.
    """
    console = screen(stderr=True)
    if verbose:
        with _decisions_told():
            yield _log.info
    elif quiet or not console.is_terminal:
        yield _silent
    else:
        columns = SpinnerColumn(), TextColumn("{task.description}", markup=False), TimeElapsedColumn()
        progress = Progress(*columns, console=console, transient=True)
        line = progress.add_task("reading")

        def tell(stage: str) -> None:
            progress.update(line, description=stage)
            _moving.append(progress)
            progress.start()

        tell("reading")
        try:
            yield tell
        finally:
            _stop_moving()


def _stop_moving() -> None:
    while _moving:
        _moving.pop().stop()


@contextmanager
def _decisions_told() -> Iterator[None]:
    """The package's log on standard error, each line with the seconds since the program began."""
    package = logging.getLogger("planner")
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(_SinceStart())
    package.addHandler(handler)
    before = package.level
    package.setLevel(logging.INFO)
    try:
        yield
    finally:
        package.setLevel(before)
        package.removeHandler(handler)


class _SinceStart(logging.Formatter):
    def format(self, record: logging.LogRecord) -> str:
        return f"{record.relativeCreated / 1000:7.2f} s  {record.getMessage()}"


def _silent(stage: str) -> None:
    """Hears and says nothing."""


def fault(lines: Iterable[str]) -> None:
    """What went wrong, on standard error, one line each."""
    _stop_moving()
    for line in lines:
        print(line, file=sys.stderr)


def close_quietly() -> None:
    """After a closed pipe nothing more can be said, and Python must not try at exit."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
