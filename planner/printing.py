"""What the commands say: tables and one-line findings, plain when piped."""

import io
import logging
import os
import sys
import textwrap
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager, suppress
from typing import IO, Literal

from rich.cells import cell_len
from rich.console import Console
from rich.progress import Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

Column = tuple[str, Literal["left", "right"]]  # heading, and where its texts stand
Tell = Callable[[str], None]
_log = logging.getLogger(__name__)
_moving: list[Progress] = []  # the line that tells the stage; it ends where there is something to say
GAP, NO_BREAK = "  ", "\N{NO-BREAK SPACE}"
LONGEST_WHOLE = 45  # cells; what is longer in a table is a sentence
PLAIN_WIDTH = 100_000  # columns where there is no terminal: as wide as it takes


class _Screen(Console):
    """A console whose reader may go away: the command goes on unheard, for its exit status is an answer too."""

    def on_broken_pipe(self) -> None:
        close_quietly(self.file)


def open_streams() -> None:
    """Make both output streams fit to say anything: what they cannot encode is escaped, a closed one hears nothing."""
    for handle, name in ((1, "stdout"), (2, "stderr")):
        stream = getattr(sys, name)
        if stream is None:  # else the next file that is opened would get its number, and what others say there
            os.dup2(os.open(os.devnull, os.O_WRONLY), handle)
            setattr(sys, name, os.fdopen(handle, "w"))
        elif isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


def settle_streams() -> None:
    """What could not be said must not be tried again by Python as it ends: that would change the exit status."""
    for stream in (sys.stdout, sys.stderr):
        try:
            stream.flush()
        except OSError:
            close_quietly(stream)


def screen(stderr: bool = False) -> Console:
    """A console that follows NO_COLOR and is plain when piped."""
    _stop_moving()
    stream = sys.stderr if stderr else sys.stdout
    plain = stream is None or not stream.isatty()  # None: the stream was closed before we began, and nobody opened it
    width = PLAIN_WIDTH if plain else None
    return _Screen(stderr=stderr, width=width, highlight=False, soft_wrap=plain, emoji=False, markup=False)


def say(text: str) -> None:
    screen().print(text)


def counted(count: int, thing: str, things: str | None = None) -> str:
    """A number with what it counts, as "1 contact", "2 contacts"; `things` where the plural takes more than an s."""
    return f"{count} {thing if count == 1 else things or thing + 's'}"


def table(columns: Sequence[Column], rows: Iterable[Sequence[str]]) -> None:
    """A table of texts, none of them cut short: a row too wide for a terminal goes on in the next line.

    It breaks between columns, so that an id stays in one piece to be copied; long cells also break between words.
    """
    console = screen()
    texts = [tuple(heading for heading, _ in columns), *rows]
    widths = [max(map(cell_len, column)) for column in zip(*texts, strict=True)]
    justified = [justify for _, justify in columns]
    head, *body = ("\n".join(_lines(row, widths, justified, console.width)) for row in texts)
    console.print(head, style="bold", soft_wrap=True)
    if body:
        console.print("\n".join(body), soft_wrap=True)


def _lines(texts: Sequence[str], widths: Sequence[int], justified: Sequence[str], most: int) -> list[str]:
    cells = [
        " " * (width - cell_len(text)) + text if justify == "right" else text + " " * (width - cell_len(text))
        for text, width, justify in zip(texts, widths, justified, strict=True)
    ]
    if sum(widths) + len(GAP) * (len(widths) - 1) <= most:
        return [GAP.join(cells).rstrip()]
    whole = [
        cell.replace(" ", NO_BREAK) if width <= LONGEST_WHOLE else cell.strip()
        for cell, width in zip(cells, widths, strict=True)
    ]
    before_last = sum(widths[:-1]) + len(GAP) * (len(widths) - 1)
    indent = " " * (before_last if before_last <= most // 2 else 4)
    folded = textwrap.wrap(GAP.join(whole), most, subsequent_indent=indent, break_on_hyphens=False)
    return [line.replace(NO_BREAK, " ").rstrip() for line in folded]


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
    """What went wrong, on standard error, one line each; where nobody hears it the exit status must do."""
    _stop_moving()
    try:
        for line in lines:
            print(line, file=sys.stderr)
    except OSError:
        close_quietly(sys.stderr)


def close_quietly(stream: IO[str]) -> None:
    """From here on nobody hears this stream."""
    with suppress(OSError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())
