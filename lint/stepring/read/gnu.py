"""GNU C and late ISO C forms that the parser has no grammar for, each in its reserved spelling (see ``read.types``).

The forms are those of the extensions that the GNU compiler's manual describes, and of ISO C23: attributes, assembler
statements, ``typeof``, type arguments of built-in functions, case ranges, label addresses, literals.
"""

import re

from stepring.read.rewrite import OPENERS, Rewriting
from stepring.read.words import TYPE_KEYWORDS, word_set

_GOOD_NUMBER = re.compile(
    r"(?:0[xX][0-9a-fA-F]+|0[bB][01]+|\d+)(?:[uU]ll|[uU]LL|ll[uU]?|LL[uU]?|[uU][lL]|[lL][uU]?|[uU])?"
    r"|(?:\d+\.\d*|\.\d+|\d+(?=[eE]))(?:[eE][-+]?\d+)?[fFlL]?|0[xX][0-9a-fA-F]*\.?[0-9a-fA-F]*[pP][-+]?\d+[fFlL]?"
)
_NUMBER_PARTS = re.compile(
    r"(0[xX][0-9a-fA-F']*\.?[0-9a-fA-F]*(?:[pP][-+]?\d+)?|0[bB][01']+|[\d']*\.?[\d']*(?:[eE][-+]?\d+)?)(.*)"
)
_ESCAPE = re.compile(r"\\(.)", re.DOTALL)
_GOOD_ESCAPES = frozenset("0123456789abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ._~!=&^-\\?'\"\n")
_ASM_QUALIFIERS = word_set("volatile __volatile__ __volatile goto inline __inline __inline__ const")
_MODES = {"QI": "char", "byte": "char", "HI": "short", "DI": "long long", "SF": "", "DF": ""}


class GnuForms(Rewriting):
    """Rules for GNU C and ISO C23; ``int_bytes`` is the size of ``int``."""

    int_bytes = 4

    def collect(self, first: int, last: int) -> None:
        """Attribute words between two brackets: identifiers that are not arguments of another one."""
        index = first
        while index < last:
            word = self.words[index]
            if word[0].isalpha() or word[0] == "_":
                name = word.strip("_")
                self.attributes.add(name)
                if name == "mode" and self.word(index + 1) == "(":
                    self._mode(index, self.word(index + 2).strip("_"))
                if name in ("fallthrough", "__fallthrough__"):
                    self.falls.append(self.places[index])
            elif word == "(":
                if index != first:
                    index = self.group_end(index)
            index += 1

    def _attribute(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        self.collect(index + 2, end)
        self.blank(index, end)

    def _mode(self, index: int, mode: str) -> None:
        """A GNU machine mode gives the width: the declaration's ``int`` becomes the type of that width."""
        if mode in ("SI",):
            wide = "long" if self.int_bytes < 4 else "int"
        elif mode in ("word", "pointer"):
            wide = "int" if self.int_bytes < 4 else "long"
        else:
            wide = _MODES.get(mode, "")
        if not wide:
            return
        back = index - 1
        while back >= 0 and self.words[back] not in (";", "{", "}"):
            if self.words[back] == "int":
                self.out[back] = wide
                return
            if self.words[back] in ("unsigned", "signed") and self.word(back + 1) not in (
                "int",
                "char",
                "long",
                "short",
            ):
                self.out[back] = f"{self.words[back]} {wide}"
                return
            back -= 1

    def assembler(self, index: int) -> None:
        at = index + 1
        while self.word(at) in _ASM_QUALIFIERS:
            at += 1
        before = self.word(index - 1)
        if self.word(at) != "(":
            if self.word(at)[:1] == '"':
                while self.word(at)[:1] == '"':
                    at += 1
                self.blank(index, at - 1)
                self.out[index] = "__stepring_asm()"
            return
        end = self.group_end(at)
        if self.braces == 0:
            self.blank(index, end)
            if before in ("", ";", "}") and self.word(end + 1) == ";":
                self.blank(end + 1, end + 1)
            return
        statement = before in (";", "{", "}", ":", "else", "do")
        if before == ")":
            head = self.word(self.match.get(index - 1, index) - 1)
            statement = head in ("if", "while", "for", "switch")
        if not statement:
            self.blank(index, end)
            return
        self.blank(index, end)
        self.out[index] = "__stepring_asm"
        self.out[at] = "("
        self.out[end] = ")"
        section = 0
        walk = at + 1
        kept = False
        while walk < end:
            word = self.words[walk]
            if word == ":":
                section += 1
                if section > 1:
                    break
            elif section == 1:
                if word == "[":
                    walk = self.group_end(walk)
                elif word == "(":
                    close = self.group_end(walk)
                    for one in range(walk, close + 1):
                        self.out.pop(one, None)
                    walk = close
                    kept = True
                elif word == "," and kept:
                    self.out.pop(walk, None)
            elif word == "(":
                walk = self.group_end(walk)
            walk += 1

    def _typeof(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        self.fresh += 1
        name = f"__stepring_typeof_{self.fresh}"
        self.out[index] = name
        self.operands.append((name, index + 2, end - 1))
        self.hidden.append((index + 1, end))

    def _auto_type(self, index: int) -> None:
        at = index + 1
        while at < len(self.words) and self.words[at] not in ("=", ";"):
            at += 1
        self.fresh += 1
        name = f"__stepring_typeof_{self.fresh}"
        self.out[index] = name
        end = at + 1
        while end < len(self.words) and self.words[end] not in (",", ";"):
            end = self.group_end(end) + 1 if self.words[end] in OPENERS else end + 1
        self.operands.append((name, at + 1, end - 1))

    def _auto(self, index: int) -> None:
        after = self.word(index + 1)
        if (
            after
            and (after[0].isalpha() or after[0] == "_")
            and self.word(index + 2) == "="
            and after not in TYPE_KEYWORDS
        ):
            self._auto_type(index)

    def _alignof(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        self.out[index] = "_Alignof"
        if self.word(index + 2) in TYPE_KEYWORDS:
            return
        self.fresh += 1
        name = f"__stepring_typeof_{self.fresh}"
        self.out[index + 1] = f"({name}"
        self.operands.append((name, index + 2, end - 1))
        self.hidden.append((index + 2, end - 1))

    def _va_arg(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        comma = self.comma(index + 2, end)
        if comma < 0:
            return
        star = " *"
        for at in range(comma + 1, end - 1):
            if self.words[at] == "(" and self.words[at + 1] == "*":
                # a pointer to function or array: the star goes inside its declarator
                self.before.setdefault(at + 1, []).append("*")
                star = ""
                break
        self.before.setdefault(index, []).extend(["(*(", (comma + 1, end - 1), f"{star})__stepring_va_arg"])
        self.out[index] = ""
        self.hidden.append((comma, end - 1))
        self.out[end] = "))"

    def _same_type(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        comma = self.comma(index + 2, end)
        if comma < 0:
            return
        self.out[index] = "__stepring_same_type"
        self.out[index + 1] = "(sizeof("
        self.out[comma] = "), sizeof("
        self.out[end] = "))"

    def _old_designator(self, index: int) -> None:
        if self.word(index - 1) in ("{", ","):
            self.before.setdefault(index, []).append(".")
            self.out[index + 1] = "="

    def _range(self, index: int) -> None:
        if not self.openers or self.words[self.openers[-1]] != "[":
            return
        opener = self.openers[-1]
        self.before.setdefault(opener + 1, []).append("__stepring_range(")
        self.out[index] = ","
        self.before.setdefault(self.group_end(opener), []).append(")")

    def _case(self, index: int) -> None:
        at = index + 1
        dots = -1
        choices = 0
        while at < len(self.words):
            word = self.words[at]
            if word == "?":
                choices += 1
            elif word == ":":
                if not choices:
                    break
                choices -= 1
            elif word == "...":
                dots = at
            elif word in (";", "{", "}"):
                return
            at = self.group_end(at) + 1 if word in ("(", "[") else at + 1
        if dots >= 0:
            self.before.setdefault(index + 1, []).append("__stepring_range(")
            self.out[dots] = ","
            self.before.setdefault(at, []).append(")")

    def _goto(self, index: int) -> None:
        if self.word(index + 1) != "*":
            return
        self.out[index] = "__stepring_goto("
        self.out[index + 1] = ""
        end = index
        while end < len(self.words) and self.words[end] != ";":
            end += 1
        self.before.setdefault(end, []).append(")")

    def _label_address(self, index: int) -> None:
        before, after = self.word(index - 1), self.word(index + 1)
        if not after or not (after[0].isalpha() or after[0] in "_$"):
            return
        operand = bool(before) and (before[0].isalnum() or before[0] in "_$)]'\"}" or before in ("++", "--"))
        if before == ")":
            # after a cast to a pointer; a parenthesised value would make it a conjunction
            operand = self.word(index - 2) != "*"
        if before in ("return", "case"):
            operand = False
        if operand or not before:
            return
        self.out[index] = "__stepring_label("
        self.before.setdefault(index + 2, []).append(")")

    def _enum(self, index: int) -> None:
        """An enumeration's fixed underlying type is left out."""
        at = index + 1
        if self.word(at) != ":" and self.word(at + 1) != ":":
            return
        colon = at if self.word(at) == ":" else at + 1
        end = colon + 1
        while end < len(self.words) and (self.words[end][0].isalpha() or self.words[end][0] == "_"):
            end += 1
        if self.word(end) == "{" and end > colon + 1:
            self.blank(colon, end - 1)

    def _literal(self, index: int, word: str) -> None:
        if "\\" in word:
            word = _ESCAPE.sub(lambda m: m[0] if m[1] in _GOOD_ESCAPES else m[1], word).replace("\\\n", "")
        quote = word[-1]
        if quote == "'":
            inner = word[word.index("'") + 1 : -1]
            parts = re.findall(r"\\x[0-9a-fA-F]*|\\[0-7]{1,3}|\\.|.", inner)
            if not parts:
                word = r"'\0'"
            elif len(parts) > 4:
                word = "'" + "".join(parts[-4:]) + "'"
        if word != self.words[index]:
            self.out[index] = word

    def _number(self, index: int, word: str) -> None:
        if _GOOD_NUMBER.fullmatch(word):
            return
        parts = _NUMBER_PARTS.fullmatch(word)
        if parts is None or not parts[1]:
            return
        digits, suffix = parts[1], parts[2].lower()
        if suffix == "" and "'" in digits:
            return
        real = not digits.lower().startswith(("0x", "0b")) and ("." in digits or "e" in digits.lower())
        if real or (digits.lower().startswith("0x") and "p" in digits.lower()):
            kept = suffix[0] if suffix[:1] in ("f", "l") and suffix != "f64" else ""
        else:
            kept = ("u" if "u" in suffix else "") + ("ll" if "ll" in suffix else "l" if "l" in suffix else "")
        self.out[index] = digits + kept
