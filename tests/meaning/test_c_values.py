"""Types and values of C expressions, in four data models, against facts that compilers of those models confirmed."""

import csv
from functools import cache
from pathlib import Path

import pytest
from tests.support import lower_text

from stepring.meaning.fold import fold
from stepring.meaning.models import MODELS
from stepring.meaning.types import Function, Return

FACTS = Path(__file__).parents[1] / "data" / "c_values.tsv"
EXACT = {
    "LP64": {"uint32_t": "unsigned int", "int32_t": "int", "uint16_t": "unsigned short", "int16_t": "short"},
    "ILP32": {"uint32_t": "unsigned int", "int32_t": "int", "uint16_t": "unsigned short", "int16_t": "short"},
    "LLP64": {"uint32_t": "unsigned int", "int32_t": "int", "uint16_t": "unsigned short", "int16_t": "short"},
    "IP16": {"uint32_t": "unsigned long", "int32_t": "long", "uint16_t": "unsigned int", "int16_t": "int"},
}


def facts() -> list[tuple[str, str, str]]:
    """(expression, model, type=value) for every cell."""
    lines = [line for line in FACTS.read_text("utf-8").splitlines() if not line.startswith("#")]
    rows = list(csv.DictReader(lines, delimiter="\t", quoting=csv.QUOTE_NONE))
    return [(row["expression"], model, row[model]) for row in rows for model in MODELS]


def prefix(model: str) -> str:
    """The exact-width types as that model's <stdint.h> defines them."""
    names = {"uint8_t": "unsigned char", "int8_t": "signed char", **EXACT[model]}
    return " ".join(f"typedef {base} {name};" for name, base in names.items())


NAMES = (
    *("_Bool", "char", "signed char", "unsigned char", "short", "unsigned short", "int", "unsigned int"),
    *("long", "unsigned long", "long long", "unsigned long long"),
)


@cache
def settled(model: str) -> dict[str, tuple[str, int | None]]:
    """The type and value that lowering and folding give each expression.

    A generic selection tells the type; a function of the fact's type returns the value, so that nothing is converted.
    """
    associations = ", ".join(f"{name}: {number}" for number, name in enumerate(NAMES))
    text = prefix(model) + "\n"
    rows = [(expression, cell.partition("=")[0]) for expression, of, cell in facts() if of == model]
    for number, (expression, name) in enumerate(rows):
        text += f"int kind_{number}(void) {{ return _Generic(({expression}), {associations}, default: -1); }}\n"
        text += f"{name} value_{number}(void) {{ return {expression}; }}\n"
    unit = lower_text(text, model)
    assert not unit.notices
    functions = {function.name: function for function in unit.functions}
    found = {}
    for number, (expression, _) in enumerate(rows):
        kind = _returned(functions[f"kind_{number}"])
        found[expression] = (NAMES[kind] if kind is not None else "", _returned(functions[f"value_{number}"]))
    return found


def _returned(function: Function) -> int | None:
    (block,) = function.blocks
    assert isinstance(block.terminator, Return) and block.terminator.value is not None
    return fold(block.terminator.value)


def test_the_facts_are_there() -> None:
    assert len(facts()) >= 180


@pytest.mark.parametrize(("expression", "model", "wanted"), facts())
def test_type_and_value(expression: str, model: str, wanted: str) -> None:
    name, value = settled(model)[expression]
    assert f"{name}={value}" == wanted
