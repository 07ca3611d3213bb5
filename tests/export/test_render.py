"""Bytes of figures depend on the figure alone."""

import os
import subprocess
import sys
import warnings

from planner.charts import style
from planner.export.render import pdf_bytes, png_bytes

ANOTHER_RUN = """
import hashlib
from planner.charts import style
from planner.export.render import pdf_bytes, png_bytes
def figure():
    with style.on_paper():
        made = style.new_figure((3, 2), title="Ørsund")
        made.subplots().plot([1, 2], [3, 4], marker="^")
    return made
print(hashlib.sha256(pdf_bytes([figure(), figure()], "two pages") + png_bytes(figure())).hexdigest())
"""


def figure(title="Ørsund"):
    with style.on_paper():
        made = style.new_figure((3, 2), title=title)
        made.subplots().plot([1, 2], [3, 4], marker="^")
    return made


def test_two_processes_at_different_times_give_the_same_bytes():
    runs = [
        subprocess.run(
            [sys.executable, "-c", ANOTHER_RUN],
            env=os.environ | {"SOURCE_DATE_EPOCH": day, "PYTHONHASHSEED": day},
            capture_output=True,
            check=True,
        ).stdout
        for day in ("0", "86400")
    ]
    assert runs[0] == runs[1] != b""


def test_a_pdf_has_a_page_per_figure_and_no_date():
    data = pdf_bytes([figure(), figure(), figure()], "three pages")
    assert data.startswith(b"%PDF-")
    assert data.count(b"/Type /Page ") + data.count(b"/Type /Page\n") == 3
    assert b"/CreationDate" not in data
    assert b"(three pages)" in data


def test_a_png_names_no_program():
    assert png_bytes(figure()).startswith(b"\x89PNG")
    assert b"Software" not in png_bytes(figure())


def test_letters_that_the_font_lacks_are_no_warning():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        png_bytes(figure("🛰 $_{ \\frac"))


def test_the_fonts_of_a_pdf_are_truetype_ones_that_every_viewer_draws():
    content = pdf_bytes([style.new_figure(title="charge")], "title")
    assert b"/Subtype /Type3" not in content
    assert b"/CIDFontType2" in content or b"/TrueType" in content
