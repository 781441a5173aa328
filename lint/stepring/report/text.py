"""Strings on their way out: nothing from the inspected C may break a format, a terminal or a reader's eye.

C sources and file names hold anything. A file name is bytes; Python shows undecodable ones as lone surrogates, which no
UTF-8 file may hold. Source text may hold control characters that a terminal would obey. And SARIF reads braces and
square brackets in a message as placeholders and links (2.1.0 section 3.11).
"""

import os
import re
from pathlib import Path

_SURROGATE = re.compile("[\ud800-\udfff]")
_BRACKET = re.compile(r"(\\*)([\[\]])")
_ESCAPED_BRACKET = re.compile(r"((?:\\\\)*)\\([\[\]])")

REPLACEMENT = "\N{REPLACEMENT CHARACTER}"


def clean(text: str) -> str:
    """The text with every lone surrogate (an undecodable byte) as U+FFFD, so that it can be written as UTF-8."""
    return _SURROGATE.sub(REPLACEMENT, text)


def escape_message(text: str) -> str:
    """Plain text as a SARIF message string: braces doubled, square brackets and the backslashes before them escaped."""
    doubled = clean(text).replace("{", "{{").replace("}", "}}")
    return _BRACKET.sub(lambda found: found[1] * 2 + "\\" + found[2], doubled)


def unescape_message(text: str) -> str:
    """The plain text of a SARIF message string that holds no placeholders and no links."""
    plain = _ESCAPED_BRACKET.sub(lambda found: found[1][: len(found[1]) // 2] + found[2], text)
    return plain.replace("{{", "{").replace("}}", "}")


def printable(text: str) -> str:
    """The text safe for a terminal and for one line: tabs as a blank, other unprintable characters as an escape."""
    return "".join(_shown(character) for character in text)


def _shown(character: str) -> str:
    if character.isprintable():
        return character
    if character in "\t\n\r\v\f":
        return " "
    code = ord(character)
    if 0xDC80 <= code <= 0xDCFF:  # an undecodable byte, as os.fsdecode gives it
        return f"\\x{code - 0xDC00:02x}"
    if code <= 0xFF:
        return f"\\x{code:02x}"
    return f"\\u{code:04x}" if code <= 0xFFFF else f"\\U{code:08x}"


def function_name(identity: str) -> str:
    """A function's name in C: the identity of a static one is ``file:name``."""
    return identity.rpartition(":")[2]


def one_sentence(text: str) -> str:
    """The text on one line, blanks collapsed, with a period at its end; empty stays empty."""
    line = " ".join(text.split())
    if not line or line[-1] in ".!?":
        return line
    return line + "."


def joined(*parts: str) -> str:
    """Sentences in a row, empty ones left out."""
    return " ".join(part for part in map(one_sentence, parts) if part)


def shown_path(file: str, base: Path | None = None) -> str:
    """A file name for people: relative to ``base`` (the current folder) where it is below it, printable."""
    try:
        start = os.path.normpath(base if base is not None else Path.cwd())
    except OSError:  # the current folder is gone
        return printable(file)
    path = os.path.normpath(os.path.join(start, file))  # noqa: PTH118 (names may hold any byte; no file is touched)
    if path.startswith(start.rstrip(os.sep) + os.sep):
        return printable(path[len(start.rstrip(os.sep)) + 1 :])
    return printable(path)
