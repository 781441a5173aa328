"""Random expressions over variables of every integer type: type and value are those that the host's compiler gives.

The compiler checks for undefined behaviour itself; where it stops, the interpreter of the IR must stop too.
"""

import os
import random
import re
import shutil
import subprocess
from collections.abc import Mapping
from pathlib import Path

import pytest
from tests.paths.host import KINDS, call_all
from tests.support import lower_text

from stepring.meaning.types import Cast, IntType, Return, TypedUnit
from stepring.paths.interpreter import fresh, program, run

BATCH = 250
BATCHES = 80 if os.environ.get("STEPRING_MANY") else 9

WIDTHS = {"_Bool": 1, "char": 8, "signed char": 8, "unsigned char": 8, "short": 16, "unsigned short": 16} | {
    "int": 32,
    "unsigned int": 32,
    "long": 64,
    "unsigned long": 64,
    "long long": 64,
    "unsigned long long": 64,
}


def variables(draw: random.Random, widths: Mapping[str, int] = WIDTHS) -> list[tuple[str, str, int]]:
    """(name, type, value): two of every type, with values at and near the limits more often than others."""
    found = []
    for number, name in enumerate(KINDS * 2):
        unsigned = "unsigned" in name or name == "_Bool"
        width = widths[name]
        low = 0 if unsigned else -(1 << (width - 1))
        high = (1 << width) - 1 if unsigned else (1 << (width - 1)) - 1
        near = [low, low + 1, high, high - 1, 0, 1, 2, 3, 7, 8, min(high, 31), min(high, 100)]
        value = draw.choice(near) if draw.random() < 0.7 else draw.randint(low, high)
        found.append((f"v{number}", name, max(low, min(high, value))))
    return found


def expression(draw: random.Random, names: list[str], depth: int) -> str:
    """A random expression without side effects; ``KEEP`` marks what the host must compute as it stands."""
    if depth == 0 or draw.random() < 0.08:
        return draw.choice(names)

    def part() -> str:
        return expression(draw, names, depth - 1)

    kind = draw.random()
    if kind < 0.36:
        return f"KEEP({part()} {draw.choice(('+', '-', '*', '&', '|', '^'))} {part()})"
    if kind < 0.46:
        return f"({part()} {draw.choice(('<', '<=', '>', '>=', '==', '!='))} {part()})"
    if kind < 0.56:
        if draw.random() < 0.15:
            return f"KEEP({part()} {draw.choice(('/', '%'))} {part()})"
        divisor = part()
        return f"(({divisor}) ? KEEP({part()} {draw.choice(('/', '%'))} ({divisor})) : {part()})"
    if kind < 0.67:
        left = part() if draw.random() < 0.3 else f"(unsigned {draw.choice(('char', 'int', 'long'))}){part()}"
        count = f"({part()} & {draw.choice((7, 15, 31))})" if draw.random() < 0.9 else part()
        return f"KEEP({left} {draw.choice(('<<', '>>'))} {count})"
    if kind < 0.76:
        return f"KEEP({draw.choice(('-', '~', '!', '+'))}{part()})"
    if kind < 0.86:
        return f"(({draw.choice(KINDS)}){part()})"
    if kind < 0.93:
        return f"({part()} {draw.choice(('&&', '||'))} {part()})"
    if kind < 0.97:
        return f"({part()} ? {part()} : {part()})"
    return f"({part()}, {part()})"


def kind_of(unit: TypedUnit, name: str) -> str:
    """The type of the expression that a function of type ``long long`` returns, before it is converted."""
    function = next(item for item in unit.functions if item.name == name)
    kinds = set()
    for block in function.blocks:
        if isinstance(block.terminator, Return) and block.terminator.value is not None:
            value = block.terminator.value
            if isinstance(value, Cast) and not value.written:
                value = value.operand
            assert isinstance(value.type, IntType)
            kinds.add(value.type.name)
    (only,) = kinds
    return only


@pytest.mark.skipif(shutil.which("gcc") is None, reason="the host has no gcc")
@pytest.mark.parametrize("seed", range(BATCHES))
def test_batch(seed: int, tmp_path: Path) -> None:
    draw = random.Random(seed)
    declared = variables(draw)
    names = [name for name, _, _ in declared]
    text = "".join(f"{type_} {name};\n" for name, type_, _ in declared)
    bodies = [expression(draw, names, draw.randint(2, 4)) for _ in range(BATCH)]
    for number, body in enumerate(bodies):
        text += f"long long e{number}(void) {{ return {body}; }}\n"
    start = "".join(f" {name} = ({type_}){value & (1 << 64) - 1}ull;" for name, type_, value in declared)
    text += f"void start(void) {{{start} }}\n"
    unit = lower_text(text.replace("KEEP(", "("))
    assert not unit.notices
    host = call_all(tmp_path, text, [("0", "(start(), 0)")] + [(body, f"e{i}()") for i, body in enumerate(bodies)])
    made = program([unit])
    stopped = 0
    memory = fresh(made)
    assert run(made, "start", memory=memory).kind == "returned"
    for number, (body, wanted) in enumerate(zip(bodies, host[1:], strict=True)):
        outcome = run(made, f"e{number}", memory=memory)
        if wanted is None:
            stopped += 1
            assert outcome.kind == "undefined", body
            continue
        kind, value = wanted
        assert (outcome.kind, outcome.value) == ("returned", value), (body, outcome.reason)
        assert kind_of(unit, f"e{number}") == KINDS[kind], body
    # Most must have come through, or the test shows little.
    assert stopped < BATCH * 0.4


@pytest.mark.skipif(shutil.which("gcc") is None, reason="the host has no gcc")
@pytest.mark.parametrize("seed", range(100, 100 + BATCHES // 2))
def test_constant_batch_with_32_bit_long(seed: int, tmp_path: Path) -> None:
    """The same with constants for variables, in another data model: the compiler only has to agree, not to link."""
    draw = random.Random(seed)
    declared = variables(draw, {**WIDTHS, "long": 32, "unsigned long": 32})
    constants = {name: f"(({type_}){value & (1 << 64) - 1}ull)" for name, type_, value in declared}
    bodies = []
    while len(bodies) < BATCH:
        body = expression(draw, list(constants), draw.randint(2, 4)).replace("KEEP(", "(")
        if "," not in body:  # no constant expression has a comma operator (6.6p3)
            bodies.append(re.sub(r"\bv\d+\b", lambda name: constants[name[0]], body))
    kinds = ", ".join(f"{name}: {number}" for number, name in enumerate(KINDS))
    text = "".join(
        f"long long e{i}(void) {{ return {body}; }} int k{i}(void) {{ return _Generic(({body}), {kinds}); }}\n"
        for i, body in enumerate(bodies)
    )
    unit = lower_text(text, "ILP32")
    assert not unit.notices
    made = program([unit])
    claims = []
    for number, body in enumerate(bodies):
        outcome = run(made, f"e{number}")
        if outcome.kind == "returned":
            kind = run(made, f"k{number}").value
            value = f"(long long){outcome.value & (1 << 64) - 1}ull"
            claims.append(f'_Static_assert((long long)({body}) == {value}, "value of {number}");')
            claims.append(f'_Static_assert(_Generic(({body}), {kinds}) == {kind}, "type of {number}");')
    assert len(claims) > BATCH
    source = tmp_path / "claims.c"
    source.write_text("\n".join(claims) + "\n")
    command = ["gcc", "-std=gnu11", "-m32", "-w", "-fsyntax-only", str(source)]
    done = subprocess.run(command, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr[:2000]
