"""Bytes to text, the same way everywhere, so that columns of one stage mean the same character in another.

Source files are UTF-8 in most trees and one of the ISO 8859 family in old ones, often mixed. Each byte that is not part
of valid UTF-8 becomes the character of the same number (ISO 8859-1), so every byte sequence decodes, one stray byte is
one column, and no lone surrogate reaches a report. A file with NUL bytes (UTF-16 and UTF-32 C has one at every other
place) is no text in the sense of ISO C translation phase 1 as compilers implement it.
"""

import codecs
import stat
from pathlib import Path

from stepring.places import Notice

MAXIMUM_BYTES = 256 * 1024 * 1024
_WIDE_MARKS = (codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE, codecs.BOM_UTF32_LE, codecs.BOM_UTF32_BE)


def _as_latin_1(error: UnicodeError) -> tuple[str, int]:
    if not isinstance(error, UnicodeDecodeError):
        raise error
    return error.object[error.start : error.end].decode("latin-1"), error.end


codecs.register_error("stepring_latin_1", _as_latin_1)


def decode(data: bytes) -> str:
    """``data`` as text: UTF-8, stray bytes as ISO 8859-1, a byte order mark removed, line ends as ``\\n``."""
    text = data.decode("utf-8", "stepring_latin_1")
    if text.startswith("\ufeff"):
        text = text[1:]
    if "\r" in text:
        text = text.replace("\r\n", "\n").replace("\r", "\n")
    return text


def is_text(data: bytes) -> bool:
    """False for data that no ASCII-compatible encoding gives: NUL bytes, or a UTF-16 or UTF-32 byte order mark."""
    return b"\0" not in data and not data.startswith(_WIDE_MARKS)


def read_bytes(path: Path | str) -> bytes | Notice:
    """A regular file's bytes, or the sentence that says why not."""
    path = Path(path)
    try:
        status = path.stat()
        if not stat.S_ISREG(status.st_mode):
            return Notice("unreadable-file", "warning", f"{path} is not a regular file and was left out.", str(path))
        if status.st_size > MAXIMUM_BYTES:
            limit = MAXIMUM_BYTES // (1024 * 1024)
            text = f"{path} is larger than {limit} MB and was left out."
            return Notice("unreadable-file", "warning", text, str(path))
        return path.read_bytes()
    except (OSError, ValueError) as error:
        return Notice("unreadable-file", "warning", f"{path} cannot be read: {reason(error)}.", str(path))


def read_text(path: Path | str) -> str | Notice:
    """A file's text, or the sentence that says why not (unreadable, or not text)."""
    data = read_bytes(path)
    if isinstance(data, Notice):
        return data
    if not is_text(data):
        return not_text(path)
    return decode(data)


def not_text(path: Path | str) -> Notice:
    """The notice for a file that is not text."""
    text = f"{path} is not text (it holds NUL bytes or is UTF-16) and was left out; store it as UTF-8."
    return Notice("not-text", "warning", text, str(path))


def reason(error: BaseException) -> str:
    """An exception's cause in a few words, without numbers or paths that the sentence already holds."""
    if isinstance(error, OSError) and error.strerror:
        return error.strerror[:1].lower() + error.strerror[1:]
    return str(error) or type(error).__name__
