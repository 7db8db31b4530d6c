"""Shown values: escapes, the length limit, and that nothing unsafe gets through."""

import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.shown import one_line, shown_value


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        ("", ""),
        ("host.example", "host.example"),
        ("münchen.example", "münchen.example"),
        ("a\nb\tc\x00\x1b[31m\x7f", "a\\x0ab\\x09c\\x00\\x1b[31m\\x7f"),
        ("\x85\u2028\u202egpj.test", "\\x85\\u2028\\u202egpj.test"),
        ("\ud800", "\\ud800"),
        ("a" * 201, "a" * 200),
        ("a" * 198 + "\n", "a" * 198 + "\\x"),
    ],
)
def test_examples(value: str, shown: str) -> None:
    assert shown_value(value) == shown


@given(st.text(st.characters(), max_size=300))
def test_no_control_character_and_no_length_gets_through(value: str) -> None:
    shown = shown_value(value)
    assert len(shown) <= 200
    assert not [char for char in shown if unicodedata.category(char) in ("Cc", "Cs", "Zl", "Zp")]
    if value.isascii() and value.isprintable():
        assert shown == value[:200]


def test_errors_fit_on_one_line() -> None:
    assert one_line(ValueError("first\n  second\x1b")) == "first second\\x1b"
    assert one_line(ValueError()) == "ValueError"
