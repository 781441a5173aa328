"""Words of compilers for small processors, and words that only a missing header could explain.

A vendor's keyword that programs also use as a plain identifier counts as a keyword only by its position: two words in
a row where the grammar has no place for two identifiers.
"""

from stepring.read.gnu import GnuForms
from stepring.read.infer import Guess
from stepring.read.rewrite import wordlike
from stepring.read.words import (
    AFTER_DECLARATOR,
    AT_WORDS,
    BY_POSITION,
    DROPPED,
    NEEDS_GROUP,
    STATEMENT_KEYWORDS,
    TAKES_GROUP,
    TAKES_TYPE,
    TYPE_KEYWORDS,
    TYPED_BY_POSITION,
)

_SIGNS = ("signed", "unsigned", "long", "short")
NO_GUESS = Guess()


class VendorForms(GnuForms):
    """Rules for vendor dialects; ``guess`` names unknown words, ``types`` known type names (None: do not use them)."""

    guess: Guess = NO_GUESS
    types: frozenset[str] | None = None

    def _drop(self, index: int, word: str) -> None:
        before, after = self.word(index - 1), self.word(index + 1)
        if after in (";", ",", "=", "[", ")") and (before[:1].isalpha() or before[:1] in ("_", "*")):
            return  # the declared name itself, as headers have members called __align
        if word in NEEDS_GROUP and after != "(" and not after[:1].isdigit():
            return
        self.out[index] = ""
        if word in TAKES_GROUP:
            if after == "(":
                if word == "__declspec":
                    self.collect(index + 2, self.group_end(index + 1))
                self.blank(index + 1, self.group_end(index + 1))
            elif after and after[0].isdigit():
                self.blank(index + 1, index + 1)
        if DROPPED[word]:
            self.attributes.add(DROPPED[word])

    def _interrupt_macro(self, index: int) -> None:
        """``ISR(vector) { ... }`` where no header defines the macro: a function of that name without parameters."""
        end = self.group_end(index + 1)
        if (
            self.braces
            or self.word(index + 1) != "("
            or self.word(end + 1) != "{"
            or self.word(index - 1) not in ("", ";", "}")
        ):
            return
        if not (self.word(index + 2)[:1].isalpha() or self.word(index + 2)[:1] == "_"):
            return
        self.out[index] = "void"
        self.out[index + 1] = ""
        self.blank(index + 3, end)
        self.out[end] = "(void)"
        self.attributes.add("interrupt")

    def _by_position(self, index: int, word: str) -> None:
        before, after = self.word(index - 1), self.word(index + 1)
        plain_after = bool(after) and (after[0].isalpha() or after[0] in "_$") and after not in STATEMENT_KEYWORDS
        typed_before = bool(before) and (before[0].isalpha() or before[0] in "_$") and before not in STATEMENT_KEYWORDS
        if before in ("struct", "union", "enum", ".", "->", "goto"):
            return
        starts = before in ("", ";", "}", "{", "(", ",") or before in TYPE_KEYWORDS or typed_before or before == "*"
        if (
            word in AFTER_DECLARATOR
            and self.braces == 0
            and before
            and before not in ("{", ";", "}", "static", "extern")
        ):
            closes = before == ")" or before[0].isdigit() or before in AFTER_DECLARATOR
            if closes and (after in ("{", ";", ",") or after[:1].isdigit() or after in AFTER_DECLARATOR or plain_after):
                self.out[index] = ""
                if after[:1].isdigit() or (
                    plain_after and word in ("interrupt", "using") and after not in AFTER_DECLARATOR
                ):
                    self.out[index + 1] = ""
                if BY_POSITION[word]:
                    self.attributes.add(BY_POSITION[word])
                return
        if word == "interrupt" and after == "[" and self.braces == 0 and before in ("", ";", "}"):
            self.blank(index, self.group_end(index + 1))
            self.attributes.add("interrupt")
            return
        if word in TYPED_BY_POSITION and before == "(" and after == ")":
            operand = self.word(index + 2)
            if operand and (operand[0].isalnum() or operand[0] == "_"):
                self.out[index] = TYPED_BY_POSITION[word]
            return
        listed = before == "," and self.braces == 0 and not self.openers
        if not starts or not (plain_after or (after == "*" and (typed_before or listed))):
            return
        typed = TYPED_BY_POSITION.get(word)
        self.out[index] = typed or ""
        if BY_POSITION[word]:
            self.attributes.add(BY_POSITION[word])
        if typed and word != "bit" and self.word(index + 2) == "=":
            self.to_declarator_end(index + 2, stop_at_assign=False)
            self.attributes.add("at")

    def _placement(self, index: int) -> None:
        after = self.word(index + 1)
        if after in AT_WORDS and self.word(index + 2) not in (";", "=", ","):
            self.blank(index, index + 1)
            if AT_WORDS[after]:
                self.attributes.add(AT_WORDS[after])
            return
        self.to_declarator_end(index)
        self.attributes.add("at")

    def to_declarator_end(self, index: int, stop_at_assign: bool = True) -> None:
        end = index
        while end < len(self.words):
            word = self.words[end]
            if word in (";", ",") or (word == "{") or (stop_at_assign and word == "="):
                break
            end = self.group_end(end) + 1 if word in ("(", "[") else end + 1
        self.blank(index, end - 1)

    def _guessed(self, index: int, word: str) -> None:
        """An unknown word that stands where no C could: left out, or given the statement it stands for."""
        grouped = self.word(index + 1) == "("
        end = self.group_end(index + 1) if grouped else index
        after = self.word(end + 1)
        if word in self.guess.types:
            if self.word(index - 1) in _SIGNS:
                self.out[index] = ""
        elif word in self.guess.decorations:
            before = self.word(index - 1)
            beside = wordlike(after) or wordlike(before) or before in (")", "]") or (grouped and not self.braces)
            beside = beside or (after == "}" and before in (";", "}"))
            call = grouped and after == ";" and self.braces and before != "]"
            if beside and before not in (".", "->", "return", "goto") and not call:
                self.blank(index, end)
        elif word in self.guess.strings:
            if self.word(index - 1)[-1:] == '"' or after[:1] == '"':
                self.out[index] = '""'
        elif grouped and word in self.guess.loops and after == "{":
            self.before.setdefault(index, []).append("while (")
            self.out[end] = "))"
        elif grouped and word in self.guess.statements and after not in (";", ",", ")"):
            self.out[end] = ");"

    def _argument(self, index: int, word: str) -> bool:
        """What can only be an argument of an unknown macro: assembler operands, a type (which becomes its size)."""
        types = self.types or frozenset()
        if self.word(index + 1) == "(" and self.word(index + 2)[:1] == '"' and word not in STATEMENT_KEYWORDS:
            end = self.group_end(index + 1)
            inner = self.words[index + 2 : end]
            if ":" in inner and "?" not in inner and self.word(index - 1) in (";", "{", "}"):
                self.assembler(index)
                return True
        if self.word(index - 1) not in ("(", ",") or not self.openers or self.words[self.openers[-1]] != "(":
            return False
        callee = self.word(self.openers[-1] - 1)
        if not wordlike(callee) or callee in STATEMENT_KEYWORDS or callee in TAKES_TYPE or callee in types:
            return False
        end = index
        typed = False
        while end < len(self.words) and self.words[end] not in (",", ")"):
            word = self.words[end]
            tagged = self.word(end - 1) in ("struct", "union", "enum") and wordlike(word)
            if not (word in TYPE_KEYWORDS or word in types or tagged or (word == "*" and typed)):
                return False
            typed = True
            end += 1
        before = self.word(self.openers[-1] - 2)
        if before in TYPE_KEYWORDS or before in types or before == "*":
            return False
        self.before.setdefault(index, []).append("sizeof(")
        self.before.setdefault(end, []).append(")")
        return True
