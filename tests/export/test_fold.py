"""Lines of text: nothing lost, nothing too wide."""

from hypothesis import given
from hypothesis import strategies as st

from planner.export.fold import fold, shortened, width

WORDS = st.text(st.sampled_from("ab ø北🛰-"), max_size=60)


# Unicode Standard Annex 11: ideographs and emoji are wide, Latin letters narrow.
def test_wide_letters_take_two():
    assert (width("Dry Pan"), width("北海道"), width("🛰Ø")) == (7, 6, 2)
    assert width("🚀") == 2


@given(WORDS, st.integers(6, 30))
def test_no_letter_is_lost_and_no_line_too_wide(text, letters):
    lines = fold(text, letters, "  ")
    assert "".join(lines).replace(" ", "") == text.replace(" ", "")
    assert all(width(line) <= letters for line in lines)


@given(WORDS, st.integers(3, 30))
def test_shortened_text_fits(text, letters):
    assert width(shortened(text, letters)) <= letters
    assert shortened(text, 200) == text


def test_lines_break_at_spaces_first():
    assert fold("search along the track", 12) == ["search along", "the track"]
    assert fold("! search along the track", 12, "  ") == ["! search", "  along the", "  track"]
    assert fold("8PSK\u00a03/4 x", 8) == ["8PSK\u00a03/4", "x"]
    assert fold("", 8) == [""]
