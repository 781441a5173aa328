"""The original source files: read once, cut into tokens once, and only where somebody asks for a place in them.

A file is decoded as UTF-8 or, where it is none, as Latin-1 (every byte is a character there). Tokens are preprocessing
tokens (ISO C N1570 section 6.4); comments, spliced line ends and directive lines are left out, since none of them
reaches the parser.
"""

import re
from bisect import bisect_left
from pathlib import Path

TOKEN_TEXT = (
    r'(?:u8|[LuU])?"(?:[^"\\\n]|\\.|\\\n)*"?'
    r"|(?:u8|[LuU])?'(?:[^'\\\n]|\\.)*'?"
    r"|[^\W\d][\w$]*|\$[\w$]*"
    r"|\.?\d(?:[eEpP][+-]|'(?=\w)|\w|\.(?!\.))*"
    r"|\.\.\.|->|&&|\|\||\+\+|--|<<=|>>=|[-+*/%&|^!<>=]=|<<|>>|\#\#|."
)
TOKEN = re.compile(TOKEN_TEXT)
_COMMENT = r"/\*(?:[^*]|\*(?!/))*(?:\*/)?|//(?:[^\\\n]|\\[ \t\r]*\n|\\.)*"
_PART = re.compile(
    r"(?P<space>[ \t\f\v\r]+|\\[ \t\r]*\n)|(?P<line>\n)|(?P<comment>" + _COMMENT + r")|(?P<token>" + TOKEN_TEXT + r")"
)
_REST_OF_DIRECTIVE = re.compile(r"(?:[^\\\n/]|\\[ \t\r]*\n|\\.|" + _COMMENT + r"|/)*")
_FALL_PART = re.compile(
    r'"(?:[^"\\\n]|\\.)*"|\'(?:[^\'\\\n]|\\.)*\'|(/\*(?:[^*]|\*(?!/))*(?:\*/)?|//[^\n]*)|([A-Za-z_]\w*)'
)
_FALL_COMMENT = re.compile(
    r"\bfall(?:s|ing|en)?\b[\s\-_*]*(?:\w+[\s\-_*]+){0,3}?(?:through|thru|throu|into)\b|\bfalls?(?:through|thru)\b"
    r"|\b(?:fall|continue|run)s?\b[\s*]+(?:\w+[\s*]+){0,2}?(?:in)?to\b[\s*]+(?:\w+[\s*]+){0,2}?(?:next|default|case)\b"
    r"|\bcontinu(?:e|es|ing)\b(?=[\s*/.]*\Z|[\s*]+(?:\w+[\s*]+){0,2}?(?:to|into|with|in|on)\b)"
    r"|\bno\s+break\b|\b(?:intentional|deliberate)(?:ly)?\b.{0,20}\bbreak\b|\bdrop(?:s|ping)?[\s-]+through\b"
    r"|\bbreak\b.{0,30}\b(?:omitted|left out|missing)\b",
    re.IGNORECASE | re.DOTALL,
)
_FALL_WORD = re.compile(r"(?:\A|_)fall_?thr(?:ough|u)(?:\Z|_)", re.IGNORECASE)


class SourceFile:
    """A file's lines and tokens. ``texts[i]`` stands on ``lines[i]`` at ``columns[i]`` (both from 1)."""

    __slots__ = ("columns", "content", "lines", "texts")

    def __init__(self, text: str) -> None:
        self.content = text.split("\n")
        self.texts: list[str] = []
        self.lines: list[int] = []
        self.columns: list[int] = []
        line, start, at = 1, 0, 0
        fresh = True
        length = len(text)
        scan = _PART.match
        while at < length:
            match = scan(text, at)
            if match is None:
                break
            kind = match.lastgroup
            end = match.end()
            if kind == "token":
                if fresh and text[at] == "#":
                    rest = _REST_OF_DIRECTIVE.match(text, at)
                    end = rest.end() if rest is not None else end
                    crossed = text.count("\n", at, end)
                    if crossed:
                        line += crossed
                        start = text.rfind("\n", at, end) + 1
                else:
                    self.texts.append(match.group())
                    self.lines.append(line)
                    self.columns.append(at - start + 1)
                    fresh = False
                    crossed = text.count("\n", at, end)
                    if crossed:
                        line += crossed
                        start = text.rfind("\n", at, end) + 1
            elif kind == "line":
                line += 1
                start = end
                fresh = True
            else:
                crossed = text.count("\n", at, end)
                if crossed:
                    line += crossed
                    start = text.rfind("\n", at, end) + 1
            at = end

    def first_on(self, line: int) -> int:
        """The index of the first token on or after a line."""
        return bisect_left(self.lines, line)


class SourceFiles:
    """The original files of a run; a file that cannot be read is None."""

    def __init__(self) -> None:
        self._texts: dict[str, str | None] = {}
        self._files: dict[str, SourceFile | None] = {}
        self._falls: dict[str, frozenset[tuple[str, int]]] = {}

    def text(self, file: str) -> str | None:
        if file not in self._texts:
            try:
                raw = Path(file).read_bytes()
            except (OSError, ValueError):
                self._texts[file] = None
            else:
                try:
                    self._texts[file] = raw.decode("utf-8-sig")
                except UnicodeDecodeError:
                    self._texts[file] = raw.decode("latin-1")
        return self._texts[file]

    def get(self, file: str) -> SourceFile | None:
        if file not in self._files:
            text = self.text(file)
            self._files[file] = SourceFile(text) if text is not None else None
        return self._files[file]

    def fall_marks(self, file: str) -> frozenset[tuple[str, int]]:
        """(file, line) of the comments and words that mark a fall-through on purpose, as programmers write them.

        Of a comment over several lines, its last line.
        """
        known = self._falls.get(file)
        if known is None:
            text = self.text(file)
            found: set[tuple[str, int]] = set()
            if text is not None and re.search(r"fall|break|through|continu", text, re.IGNORECASE):
                line, start = 1, 0
                for match in _FALL_PART.finditer(text):
                    comment, word = match[1], match[2]
                    marked = (
                        _FALL_COMMENT.search(comment)
                        if comment
                        else word and "all" in word.lower() and _FALL_WORD.search(word)
                    )
                    if marked:
                        line += text.count("\n", start, match.end())
                        start = match.end()
                        found.add((file, line))
            known = self._falls[file] = frozenset(found)
        return known
