"""What the commands say: tables and one-line findings, plain when piped."""

import os
import sys
from collections.abc import Callable, Iterable, Sequence
from contextlib import contextmanager
from typing import Literal

from rich.console import Console
from rich.table import Table

Column = tuple[str, Literal["left", "right"]]  # heading, and where its texts stand
PLAIN_WIDTH = 200  # columns when nobody's terminal says otherwise


class _Screen(Console):
    """A console that leaves it to the command line what a closed pipe means."""

    def on_broken_pipe(self) -> None:
        raise BrokenPipeError


def screen(stderr: bool = False) -> Console:
    """A console that follows NO_COLOR and is plain when piped."""
    stream = sys.stderr if stderr else sys.stdout
    width = None if stream.isatty() else PLAIN_WIDTH
    return _Screen(
        stderr=stderr, width=width, highlight=False, soft_wrap=not stream.isatty(), emoji=False, markup=False
    )


def say(text: str) -> None:
    screen().print(text)


def table(columns: Sequence[Column], rows: Iterable[Sequence[str]], title: str | None = None) -> None:
    """A table of texts."""
    grid = Table(title=title, title_justify="left", box=None, pad_edge=False, header_style="bold")
    for heading, justify in columns:
        grid.add_column(heading, justify=justify, no_wrap=True)
    for row in rows:
        grid.add_row(*row)
    screen().print(grid)


@contextmanager
def stages(quiet: bool, verbose: bool):
    """Tell which stage runs: a moving line on a terminal, a log when verbose, nothing when quiet or piped.

    Yields a function that takes the name of each stage as it begins.
    """
    console = screen(stderr=True)
    if quiet or (not verbose and not console.is_terminal):
        yield _silent
    elif verbose:
        yield lambda stage: console.print(stage)
    else:
        with console.status("reading") as status:
            yield lambda stage: status.update(stage)


def _silent(stage: str) -> None:
    """Hears and says nothing."""


Tell = Callable[[str], None]


def fault(lines: Iterable[str]) -> None:
    """What went wrong, on standard error, one line each."""
    for line in lines:
        print(line, file=sys.stderr)


def close_quietly() -> None:
    """After a closed pipe nothing more can be said, and Python must not try at exit."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
