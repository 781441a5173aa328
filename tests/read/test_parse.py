"""Parsing: coordinates are those of the text, one bad declaration spoils no other, nothing escapes."""

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pycparser import c_ast

from stepring.read.carve import Chunk, carve
from stepring.read.dialect import clean
from stepring.read.kept import Kept
from stepring.read.parse import Job, Parsed, parse_all, place_of_offset


def jobs_of(text: str, types: str = "") -> list[Job]:
    known = frozenset(types.split())
    chunks = [chunk for piece in carve(text, "/barge/a.c", Kept(1 << 20)) for chunk in piece.chunks]
    return [Job(chunk, clean(chunk.text), chunk.uses & known) for chunk in chunks]


def identifiers(parsed: Parsed) -> list[Any]:
    stack, found = list(parsed.nodes), []
    while stack:
        node = stack.pop()
        if isinstance(node, c_ast.ID):
            found.append(node)
        stack.extend(node)
    return found


def test_coordinates_are_those_of_the_text() -> None:
    text = '# 5 "/barge/b.c"\nint a; int f(T x)\n{\n  return a +\n      x;\n}\n'
    parsed = parse_all(jobs_of(text, "T"))
    places = {(n.name, n.coord.file, n.coord.line, n.coord.column) for one in parsed for n in identifiers(one)}
    assert places == {("a", "/barge/b.c", 7, 10), ("x", "/barge/b.c", 8, 7)}
    assert (parsed[1].nodes[0].coord.line, parsed[1].nodes[0].coord.column) == (5, 12)


def test_type_names_are_known_and_can_be_shadowed() -> None:
    text = "T a; int f(void) { int T = 1; return T * 2; } int g(void) { T *p = (T *) 0; return sizeof(T) * *p; }"
    for one in parse_all(jobs_of(text, "T")):
        assert not one.error
        assert len(one.nodes) == 1


def test_a_bad_declaration_spoils_no_other() -> None:
    text = "int a;\nint bad(void) { return ( ; }\nint good(void) { return a; }\nT worse;\nint last;\n"
    parsed = parse_all(jobs_of(text))
    assert [bool(one.error) for one in parsed] == [False, True, False, True, False]
    assert (parsed[1].line, parsed[1].file) == (2, "/barge/a.c")
    assert all(one.error.strip() for one in parsed if not one.nodes)


def test_typeof_operands_are_parsed_at_their_place() -> None:
    text = "int f(T x)\n{\n  __typeof__ ((T) x) y; typeof(int *) z; __auto_type w =\n x + 1; return y; }"
    [parsed] = parse_all(jobs_of(text, "T"))
    first, second, third = parsed.typeofs.values()
    assert isinstance(first, c_ast.Cast)
    assert (first.coord.line, first.expr.coord.line) == (3, 3)
    assert isinstance(second, c_ast.Typename)
    assert isinstance(third, c_ast.BinaryOp)
    assert (third.left.coord.line, third.left.coord.column) == (4, 2)


@pytest.mark.parametrize("depth", [50, 10_000])
def test_deep_nesting_is_read_or_refused(depth: int) -> None:
    texts = [
        "int f(void) { return " + "(" * depth + "1" + ")" * depth + "; } int g;",
        "int f(void) " + "{" * depth + "}" * depth + " int g;",
        "int t[] = " + "{" * depth + "1" + "}" * depth + "; int g;",
        "int f(int a) { " + "if (a) ; else " * depth + "; } int g;",
        "int " + "*" * depth + "p; int g;",
        "int f(int a) { return " + "-" * 1 + "~" * depth + "a; } int g;",
    ]
    for text in texts:
        first, second = parse_all(jobs_of(text))
        assert second.nodes
        assert first.nodes or "nested too deeply" in first.error
        if depth == 50:
            assert first.nodes


@given(st.text(alphabet="(){}[];,*&=+-ab1\"'\\#:?.<> \n", max_size=120))
def test_nothing_escapes(text: str) -> None:
    for parsed in parse_all(jobs_of(text + "\n;", "a")):
        assert parsed.nodes or parsed.error or not parsed.nodes


def test_places_of_offsets_follow_markers() -> None:
    text = 'int t[] = {\n#line 7 "/barge/t.inc"\n1,\n 2 };'
    chunk = Chunk("other", text, "/barge/a.c", 3, 5, 8, 0, 0, False, (), (), (), True, frozenset())
    assert place_of_offset(chunk, text, 0) == ("/barge/a.c", 3, 5)
    assert place_of_offset(chunk, text, text.index("1,")) == ("/barge/t.inc", 7, 1)
    assert place_of_offset(chunk, text, text.index("2 }")) == ("/barge/t.inc", 8, 2)
