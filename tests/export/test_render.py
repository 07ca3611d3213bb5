"""Bytes of figures depend on the figure alone."""

import os
import subprocess
import sys
import warnings
import zlib

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


# ISO 32000-1, 9.9 (from memory): an embedded TrueType font needs none of the tables by which letters are set.
def test_embedded_fonts_hold_no_layout_tables_and_the_librarys_settings_are_as_before():
    from fontTools.subset import Options

    before = list(Options().drop_tables)
    content = pdf_bytes([figure()], "title")
    assert Options().drop_tables == before
    inflated = [
        zlib.decompress(part.partition(b"endstream")[0].strip(b"\r\n"))
        for part in content.split(b"stream\n")[1::2]
        if part.startswith(b"x")
    ]
    fonts = [stream for stream in inflated if stream.startswith(b"\0\1\0\0")]  # as TrueType files begin
    assert fonts
    assert not any(table in font[:400] for font in fonts for table in (b"GSUB", b"GPOS", b"GDEF"))
