"""Places: every token that survives preprocessing leads back to where it was written."""

import itertools
import random
import shutil
import subprocess
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pycparser import c_ast

from stepring.gather.types import Unit
from stepring.places import Origin, Position
from stepring.read.origin import spelled_constant
from stepring.read.reader import Reader
from stepring.read.types import Preprocessed, ReadUnit

CPP = shutil.which("gcc") or shutil.which("cc") or shutil.which("clang")
needs_cpp = pytest.mark.skipif(CPP is None, reason="no C preprocessor on PATH")


def preprocessed(source: Path) -> str:
    assert CPP is not None
    done = subprocess.run([CPP, "-E", "-dD", str(source)], capture_output=True, check=True)
    return done.stdout.decode()


def read_file(source: Path, text: str | None = None) -> ReadUnit:
    unit = Unit(source, source.parent, "database")
    return Reader(source.parent).read(Preprocessed(unit, text or preprocessed(source), {}, True))


def nodes_of(unit: ReadUnit) -> Iterator[Any]:
    stack = [node for declaration in unit.declarations for node in declaration.nodes]
    while stack:
        node = stack.pop()
        yield node
        stack.extend(node)


def where(unit: ReadUnit, node: Any) -> Origin:
    return unit.origin(Position(node.coord.file, node.coord.line, node.coord.column))


def identifiers(unit: ReadUnit) -> list[tuple[str, Origin]]:
    return [(node.name, where(unit, node)) for node in nodes_of(unit) if isinstance(node, c_ast.ID)]


class Program:
    """A random program of macros and expressions; every leaf ``t7`` is unique and its place is known."""

    def __init__(self, rng: random.Random) -> None:
        self.rng = rng
        self.lines: list[str] = [""]
        self.leaves: dict[str, tuple[int, int]] = {}
        self.uses: dict[tuple[int, int], str] = {}
        self.makes: dict[str, set[str]] = {}
        self.objects: list[str] = []
        self.functions: dict[str, int] = {}
        self.count = itertools.count()
        self.headed = False

    def put(self, token: str, leaf: bool = False, macro: bool = False) -> None:
        """Write a token of an expression, with random space, comments and line ends before it."""
        roll = self.rng.random()
        if roll < 0.1:
            self.lines.append(" " * self.rng.randrange(4))
        elif roll < 0.15:
            self.lines[-1] += " \\"
            self.lines.append("")
        elif roll < 0.2:
            self.lines[-1] += " /* note */ "
        elif roll < 0.23:
            self.lines[-1] += " /* two"
            self.lines.append("lines */ ")
        elif roll < 0.25:
            self.lines[-1] += " // rest"
            self.lines.append("")
        self.lines[-1] += " "
        place = (len(self.lines), len(self.lines[-1]) + 1)
        if leaf:
            self.leaves[token] = place
        if macro:
            self.uses[place] = token
        self.lines[-1] += token

    def define(self) -> None:
        number = next(self.count)
        parameters = [f"p{i}" for i in range(self.rng.randrange(0, 3))] if self.rng.random() < 0.6 else None
        made: set[str] = set()
        body: list[str] = []
        for part in range(self.rng.randrange(1, 4)):
            if part:
                body.append(self.rng.choice(["+", "-", "*", ","]))
            kind = self.rng.random()
            if parameters and kind < 0.5:
                one = self.rng.choice(parameters)
                body.append(self.rng.choice([one, f"({one})", f"-{one}"]))
            elif self.objects and kind < 0.65:
                other = self.rng.choice(self.objects)
                made |= self.makes[other]
                body.append(other)
            elif self.functions and kind < 0.8:
                other = self.rng.choice(sorted(self.functions))
                made |= self.makes[other]
                arguments = [self.body_name(made) for _ in range(self.functions[other])]
                body.append(f"{other}({', '.join(arguments)})")
            elif parameters and kind < 0.85:
                body.append(f"{self.body_name(made, paste=True)}##{number}")
                made.add(body[-1].replace("##", ""))
            else:
                body.append(self.body_name(made))
        name = f"M{number}"
        spelled = name if parameters is None else f"{name}({', '.join(parameters)})"
        self.lines.append(f"#define {spelled} ({' '.join(body)})")
        self.lines.append("")
        self.makes[name] = made
        if parameters is None:
            self.objects.append(name)
        else:
            self.functions[name] = len(parameters)

    def body_name(self, made: set[str], paste: bool = False) -> str:
        name = f"b{next(self.count)}{'_' if paste else ''}"
        if not paste:
            made.add(name)
        return name

    def undefine(self) -> None:
        if self.objects:
            name = self.objects.pop(self.rng.randrange(len(self.objects)))
            # only safe where no other macro uses it
            self.lines += [f"#undef {name}", ""] if not self.used_by_others(name) else []
            if self.used_by_others(name):
                self.objects.append(name)

    def used_by_others(self, name: str) -> bool:
        return any(line.startswith("#define") and name in line.split(None, 2)[2] for line in self.lines)

    def expression(self, depth: int) -> None:
        for part in range(self.rng.randrange(1, 4)):
            if part:
                self.put(self.rng.choice(["+", "-", "*", "^"]))
            kind = self.rng.random()
            if kind < 0.35 or depth == 0:
                self.put(f"t{next(self.count)}", leaf=True)
            elif kind < 0.55 and self.objects:
                self.put(self.rng.choice(self.objects), macro=True)
            elif kind < 0.85 and self.functions:
                name = self.rng.choice(sorted(self.functions))
                self.put(name, macro=True)
                self.put("(")
                for number in range(self.functions[name]):
                    if number:
                        self.put(",")
                    self.expression(depth - 1)
                self.put(")")
            elif kind < 0.92 and self.headed:
                self.put("NULL", macro=True)
            else:
                self.put("(")
                self.expression(depth - 1)
                self.put(")")

    def write(self) -> str:
        self.headed = self.rng.random() < 0.4
        if self.headed:
            self.lines += ["#include <stddef.h>", ""]
            self.makes["NULL"] = set()
        for _ in range(self.rng.randrange(1, 5)):
            self.define()
        self.lines += ["int f(void)", "{"]
        for _ in range(self.rng.randrange(1, 6)):
            self.lines.append("")
            self.put("(")
            self.expression(3)
            self.put(")")
            self.put(";")
            if self.rng.random() < 0.2:
                self.define()
            if self.rng.random() < 0.1:
                self.undefine()
            if self.rng.random() < 0.1:
                self.lines += ["#if 0", "dead + code;", "#endif", ""]
        self.lines.append("}")
        return "\n".join(self.lines) + "\n"


@needs_cpp
@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(seed=st.integers(0, 2**32))
def test_every_surviving_token_leads_to_its_place(tmp_path: Path, seed: int) -> None:
    program = Program(random.Random(seed))
    source = tmp_path / "program.c"
    source.write_text(program.write())
    unit = read_file(source)
    assert not unit.notices, unit.notices
    seen = set()
    for name, origin in identifiers(unit):
        if name in program.leaves:
            seen.add(name)
            assert (origin.line, origin.column) == program.leaves[name], (name, origin)
            assert origin.spelling == name
            assert origin.end_column == origin.column + len(name)
        else:
            used = program.uses.get((origin.line, origin.column))
            assert used is not None, (name, origin)
            assert name in program.makes[used], (name, origin, used)
            assert origin.spelling == used
    text = preprocessed(source)
    assert all(name in seen for name in program.leaves if f" {name} " in text.replace(")", " ").replace("(", " "))


STATES = """\
#define FEED_PRIME 3
enum feed { FEED_IDLE, FEED_RUN };
#define STEP(n) (100 + (n))
static int auger_state;
int tick(int event, int *done)
{
    switch (auger_state) {
    case FEED_PRIME:
        if (event) auger_state = FEED_RUN;
        break;
    case FEED_IDLE: case STEP(2):
        *done = STEP(event
                     + 1); break;
    }
    return auger_state;
}
"""


@needs_cpp
def test_constants_keep_their_names(tmp_path: Path) -> None:
    source = tmp_path / "feed.c"
    source.write_text(STATES)
    unit = read_file(source)
    cases = [node.expr for node in nodes_of(unit) if isinstance(node, c_ast.Case)]
    names = {spelled_constant(unit.origin, Position(e.coord.file, e.coord.line, e.coord.column)) for e in cases}
    assert names == {"FEED_PRIME", "FEED_IDLE", "STEP"}
    prime = next(e for e in cases if isinstance(e, c_ast.Constant) and e.value == "3")
    assert where(unit, prime) == Origin(str(source), 8, 10, 20, "FEED_PRIME")
    event = [origin for name, origin in identifiers(unit) if name == "event" and origin.line == 12]
    assert event == [Origin(str(source), 12, 22, 27, "event")]


@needs_cpp
def test_two_declarations_on_one_line_stay_apart(tmp_path: Path) -> None:
    source = tmp_path / "pair.c"
    source.write_text("int a, b; int f(void) { return a; } int g(void) { return b; }\n")
    unit = read_file(source)
    assert {(name, origin.column) for name, origin in identifiers(unit)} == {("a", 32), ("b", 58)}


@needs_cpp
def test_a_macro_that_makes_whole_functions(tmp_path: Path) -> None:
    source = tmp_path / "made.c"
    source.write_text(
        "#define GETTER(n) int get_##n(void) { return n; }\nint level, flow;\nGETTER(level) GETTER(flow)\n"
    )
    unit = read_file(source)
    assert {(name, origin.line, origin.column) for name, origin in identifiers(unit)} == {
        ("level", 3, 8),
        ("flow", 3, 22),
    }
    assert [(place.name, place.line) for place in unit.functions] == [("get_level", 3), ("get_flow", 3)]


def test_without_the_source_the_text_stands_in(tmp_path: Path) -> None:
    text = '# 1 "/elsewhere/pump.c"\nint q;\nint f(void)\n{\n  return q  + 1;\n}\n'
    source = tmp_path / "pump.i"
    unit = Reader(tmp_path).read(Preprocessed(Unit(source, tmp_path, "preprocessed"), text, {}, True))
    [(name, origin)] = identifiers(unit)
    assert (name, origin) == ("q", Origin("/elsewhere/pump.c", 4, 10, 11, "q"))


@pytest.mark.parametrize("line", [-5, 0, 1, 3, 10**9])
@pytest.mark.parametrize("column", [-1, 0, 1, 10**6])
@pytest.mark.parametrize("file", ["", "/no/such/file.c", "\0", "@own"])
def test_any_position_gives_an_origin(tmp_path: Path, line: int, column: int, file: str) -> None:
    source = tmp_path / "x.c"
    source.write_text("int a;\nint f(void)\n{ return a; }\n")
    text = f'# 1 "{source}"\n' + source.read_text()
    unit = read_file(source, text)
    origin = unit.origin(Position(str(source) if file == "@own" else file, line, column))
    assert origin.line >= 1
    assert origin.column >= 1
    assert origin.end_column >= origin.column


@needs_cpp
def test_attributes_and_ranges_before_a_token_do_not_move_it(tmp_path: Path) -> None:
    body = "__attribute__((unused)) static int f(int a) { switch (a) { case 1 ... 4: return a ?: zz; } return 0; }"
    source = tmp_path / "shift.c"
    source.write_text(f"int zz;\n{body}\n")
    unit = read_file(source)
    found = {(name, origin.column) for name, origin in identifiers(unit) if not name.startswith("__")}
    assert found == {
        ("a", body.index("(a)") + 2),
        ("a", body.index("a ?") + 1),
        ("zz", body.index("zz") + 1),
    }
    constants = {node.value: where(unit, node).column for node in nodes_of(unit) if isinstance(node, c_ast.Constant)}
    assert constants["1"] == body.index("1 ...") + 1
    assert constants["4"] == body.index("4:") + 1


@needs_cpp
def test_latin_1_sources_are_read(tmp_path: Path) -> None:
    source = tmp_path / "latin.c"
    text = "/* 5 \xb5m */ int a; /* \xb5 */ int f(void) { return a; }\n"
    source.write_bytes(text.encode("latin-1"))
    unit = read_file(source, preprocessed_bytes(source))
    [(_, origin)] = identifiers(unit)
    assert origin.column == text.rindex("a;") + 1
    assert origin.spelling == "a"


def preprocessed_bytes(source: Path) -> str:
    assert CPP is not None
    done = subprocess.run([CPP, "-E", "-dD", str(source)], capture_output=True, check=True)
    return done.stdout.decode("latin-1")


@needs_cpp
def test_byte_order_mark_takes_no_column(tmp_path: Path) -> None:
    source = tmp_path / "bom.c"
    text = "int a; int f(void) { return a; }\n"
    source.write_bytes(b"\xef\xbb\xbf" + text.encode())
    unit = read_file(source)
    [(_, origin)] = identifiers(unit)
    assert (origin.line, origin.column, origin.spelling) == (1, text.rindex("a;") + 1, "a")
