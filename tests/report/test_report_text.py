"""Strings on their way out."""

import re
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from stepring.report.text import (
    clean,
    escape_message,
    function_name,
    joined,
    one_sentence,
    printable,
    shown_path,
    unescape_message,
)

ANY_TEXT = st.text(alphabet=st.one_of(st.sampled_from("\\[]{}()ab0 "), st.characters()))


@given(ANY_TEXT)
def test_escaping_a_message_can_be_undone(text: str) -> None:
    assert unescape_message(escape_message(text)) == clean(text)


@given(ANY_TEXT)
def test_an_escaped_message_has_no_placeholder_and_no_link(text: str) -> None:
    escaped = escape_message(text)
    assert not re.search(r"[{}]", escaped.replace("{{", "").replace("}}", ""))
    assert not re.search(r"(?<!\\)(\\\\)*[\[\]]", escaped)


def test_a_subscript_before_parentheses_is_no_link() -> None:
    assert escape_message("tbl[st](ev) in {x}") == r"tbl\[st\](ev) in {{x}}"


@pytest.mark.parametrize(
    ("given_text", "shown"),
    [
        ("a\tb\nc", "a b c"),
        ("red\x1b[31m", "red\\x1b[31m"),
        ("byte\udcff", "byte\\xff"),
        ("turn\u202eround", "turn\\u202eround"),
        ("größe 鮭", "größe 鮭"),
        ("\U000e0001", "\\U000e0001"),
    ],
)
def test_printable_text_cannot_steer_a_terminal(given_text: str, shown: str) -> None:
    assert printable(given_text) == shown


def test_sentences_get_one_period() -> None:
    assert one_sentence(" two\n words ") == "two words."
    assert one_sentence("Done!") == "Done!"
    assert joined("One", "", "Two.") == "One. Two."


def test_paths_are_shown_relative_to_where_one_is() -> None:
    assert shown_path("/barge/feed/auger.c", Path("/barge")) == "feed/auger.c"
    assert shown_path("/barge2/auger.c", Path("/barge")) == "/barge2/auger.c"
    assert shown_path("feed/../auger.c", Path("/barge")) == "auger.c"
    assert shown_path("/auger.c", Path("/")) == "auger.c"


def test_a_static_function_is_shown_by_its_name() -> None:
    assert function_name("/barge/feed/auger.c:auger_poll") == "auger_poll"
    assert function_name("auger_poll") == "auger_poll"
