"""Figures as bytes that depend on nothing but the figure: no creation date, no program version."""

import io
import warnings
from collections.abc import Iterable

from matplotlib.figure import Figure

from planner.charts.style import on_paper

PRODUCT = "downlink-planner"


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
    with on_paper(), PdfPages(file, metadata=metadata) as pages:  # fonts are written as the file closes
        for figure in figures:
            _save(figure, pages, format="pdf")
    return file.getvalue()


def _save(figure: Figure, target, **options) -> None:
    with on_paper(), warnings.catch_warnings():
        # A name may hold an emoji; the font draws a box for it, which is all there is to do about it.
        warnings.filterwarnings("ignore", message=r"Glyph \d+ .* missing from font", category=UserWarning)
        figure.savefig(target, **options)
