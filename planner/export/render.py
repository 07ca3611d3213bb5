"""Figures as bytes that depend on nothing but the figure: no creation date, no program version."""

import io
import warnings
from collections.abc import Iterable, Iterator
from contextlib import contextmanager

from matplotlib.figure import Figure

from planner.charts.style import on_paper

PRODUCT = "downlink-planner"
DROPPED = "_drop_tables_default"  # of fontTools: which tables of a font are left out


def png_bytes(figure: Figure, dpi: int = 150) -> bytes:
    """The figure as a PNG file."""
    file = io.BytesIO()
    _save(figure, file, format="png", dpi=dpi, metadata={"Software": None})
    return file.getvalue()


def pdf_bytes(figures: Iterable[Figure], title: str) -> bytes:
    """A PDF file with a page per figure; each figure is asked for only when its page is due."""
    from matplotlib.backends.backend_pdf import PdfPages

    file = io.BytesIO()
    undated = {"CreationDate": None, "ModDate": None}
    metadata = {"Title": title, "Creator": PRODUCT, "Producer": PRODUCT} | undated
    with on_paper(), _slim_fonts(), PdfPages(file, metadata=metadata) as pages:  # fonts are written as the file closes
        for figure in figures:
            _save(figure, pages, format="pdf")
    return file.getvalue()


@contextmanager
def _slim_fonts() -> Iterator[None]:
    """Fonts are embedded without the tables by which letters are set: a PDF holds letters already set.

    Cutting those tables down would take half the time of a page. matplotlib has no setting for it; should fontTools
    lose this one, PDFs are drawn as well, only slower.
    """
    from fontTools.subset import Options

    kept = getattr(Options, DROPPED, [])
    setattr(Options, DROPPED, [*kept, "GSUB", "GPOS", "GDEF"])
    try:
        yield
    finally:
        setattr(Options, DROPPED, kept)


def _save(figure: Figure, target, **options) -> None:
    with on_paper(), warnings.catch_warnings():
        # A name may hold an emoji; the font draws a box for it, which is all there is to do about it.
        warnings.filterwarnings("ignore", message=r"Glyph \d+ .* missing from font", category=UserWarning)
        figure.savefig(target, **options)
