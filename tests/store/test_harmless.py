"""Text that could drive a terminal is shown so that it cannot."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from blendtui.store.harmless import harmless, spoken, unsafe


@given(st.text())
def test_nothing_unsafe_is_left(text):
    assert unsafe(harmless(text)) == ""


@given(st.text(st.characters(min_codepoint=32, max_codepoint=126)))
def test_plain_text_stays(text):
    assert harmless(text) == text


def test_what_it_shows():
    assert harmless("a\x1b[2J\x07\x7f\x9b\u202eb") == "a␛[2J␇␡\\u009b\\u202eb"
    assert harmless("x" * 10, 5) == "xxxx…"
    assert spoken("\x9b") == "control sequence introducer (U+009B)"
    assert spoken("\x01") == "control character (U+0001)"
