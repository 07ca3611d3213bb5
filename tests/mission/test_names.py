"""Names in ids."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.mission.names import alike, slug


@pytest.mark.parametrize(
    ("name", "expected"),
    [("MARSHLIGHT-1", "marshlight-1"), ("Corrie Head", "corrie-head"), ("a:b/c d", "a-b-c-d"), ("__", "x"),
     ("Østravåle", "østravåle"), ("🛰", "x"), (" a\n,b ", "a-b")],
)  # fmt: skip
def test_slugs(name, expected):
    assert slug(name) == expected


@given(st.text(max_size=80))
def test_a_slug_is_one_plain_word_and_its_own_slug(name):
    word = slug(name)
    assert word
    assert not set(word) & set(" .:,/\\\n\t'\"_")
    assert slug(word) == word


def test_alike_names_are_told_against_the_first():
    assert alike(["A b", "c", "a-B", "a_b"]) == [("A b", "a-B"), ("A b", "a_b")]
    assert alike(["a", "b"]) == []
    assert alike(["A", "A"]) == [("A", "A")]
