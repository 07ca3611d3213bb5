"""Words of a mission never become markup, and a field refuses with the rule."""

import ipywidgets as widgets
import pytest
from bench_examples import without_markup

from planner.errors import InputError, NoWeekError
from planner.notebook.pieces import NumberField, figures_html, line_html, lines_html, table_html, told_in

NASTY = "<img src=x onerror=alert(1)> & co"


@pytest.mark.parametrize(
    "html",
    [
        line_html(NASTY, "bad"),
        lines_html([NASTY]),
        table_html([NASTY], [[NASTY]]),
        figures_html([(NASTY, NASTY, NASTY)]),
    ],
)
def test_text_is_escaped(html):
    assert "<img" not in html
    assert NASTY in without_markup(html)


def test_good_and_bad_are_told_by_a_mark_beside_the_colour():
    assert "✔" in line_html("fine", "good")
    assert "✘" in line_html("wrong", "bad")


def test_long_lists_are_counted():
    assert "… and 88 more" in lines_html((str(k) for k in range(100)), most=12)


@pytest.mark.parametrize("fault", [InputError("one", "two"), NoWeekError("one\ntwo")])
def test_a_users_fault_is_told_line_by_line(fault):
    message = widgets.HTML()
    with told_in(message):
        raise fault
    assert without_markup(message.value) == "✘ one ✘ two"


def test_anything_else_is_told_without_a_traceback():
    message = widgets.HTML()
    with told_in(message):
        raise ZeroDivisionError("by nought")
    assert without_markup(message.value) == "✘ unexpected ZeroDivisionError: by nought"


def test_a_refused_number_is_told_and_the_one_before_stays():
    taken = []

    def take(value):
        if value > 100:
            raise InputError(f"must be at most 100, got {value:g}")
        taken.append(value)

    field = NumberField("floor", "%", 60.0, take)
    field.box.value = 130.0
    assert without_markup(field.message.value) == "✘ must be at most 100, got 130 ✘ 60 % stays in force"
    assert taken == []
    field.box.value = 55.0
    assert (taken, field.message.value) == ([55.0], "")
