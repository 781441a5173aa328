"""The ring rules on rings made by a small generator, against what the programs really do.

Each ring is one choice of storage, index type, capacity, wrap idiom and reader, with one slip or none. The host
compiler builds all of them with checks of array bounds, and each is driven for long enough to overflow sixteen bits.
What is observed: whether a subscript left its array, and whether the stored slots follow one another. A program that
never misbehaves must have no finding; one that leaves its array, or skips slots, must have one.
"""

import random
import shutil
import subprocess
from dataclasses import dataclass
from pathlib import Path

import pytest
from tests.rules.marks import RING_RULES
from tests.shapes.ring_support import origin
from tests.support import lower_text

from stepring.rule import Obligation
from stepring.shapes.rings import find_rings, ring_functions
from stepring.shapes.types import Program

GCC = shutil.which("gcc")
TYPES = """
typedef unsigned char uint8_t; typedef signed char int8_t; typedef unsigned short uint16_t; typedef short int16_t;
"""
RUNS = """
static long last_[2]; static int skips_, step_, slots_;
static long slot_(int which, long at) {
    if (last_[which] >= 0 && (last_[which] + step_ - at) % slots_ != 0) skips_ = 1;
    last_[which] = at;
    return at;
}
#define SLOT(x) (slot_(0, x))
#define NEXT(x) (slot_(1, x))
"""


@dataclass(frozen=True, slots=True)
class Made:
    """A generated ring and what it takes to drive it. ``SLOT`` marks the stored slot, ``NEXT`` the one taken out."""

    name: str
    text: str
    capacity: int
    direction: int
    reads: bool
    index: str


def make(number: int, luck: random.Random) -> Made:
    """One ring, deterministic in ``luck``."""
    name = f"r{number}"
    type_ = luck.choice(["uint8_t", "uint8_t", "uint8_t", "uint16_t", "int", "unsigned", "int8_t"])
    capacity = luck.choice([2, 3, 4, 5, 6, 8, 10, 12, 16, 20, 30, 64, 100, 200, 300])
    slip = luck.random() < 0.55
    inside = luck.random() < 0.5
    index, array = (f"r->at{number}", f"r->data{number}") if inside else (f"at{number}", f"data{number}")
    taken = f"struct {name} *r, " if inside else ""
    passed = f"&one{number}, " if inside else ""
    use, advance, direction = _advance(luck, slip, index, type_, capacity)
    early = luck.random() < 0.2
    store = f"{array}[SLOT({use})] = v;"
    body = f"{advance} {store}" if early else f"{store} {advance}"
    head = (
        f"struct {name} {{ int data{number}[{capacity}]; {type_} at{number}; int after; }}; "
        f"static struct {name} one{number};\n"
        if inside
        else f"static int data{number}[{capacity}]; static {type_} at{number};\n"
    )
    text = head + f"void put{number}({taken}int v) {{ {body} }}\n"
    text += f"void entry{number}(int v) {{ put{number}({passed}v); }}\n"
    reads = luck.random() < 0.6
    if reads:
        text += _reader(luck, number, slip and luck.random() < 0.5, index, array, taken, capacity, use != index)
        text += f"int look{number}(uint8_t back) {{ return get{number}({passed}back); }}\n"
    return Made(name, text, capacity, direction, reads, index)


def make_queue(number: int, luck: random.Random) -> Made:
    """A queue with two indices, told full from empty by a count or by one slot that stays empty."""
    type_ = luck.choice(["uint8_t", "uint8_t", "uint16_t", "unsigned"])
    capacity = luck.choice([3, 4, 5, 8, 12, 16, 20])
    counted = luck.random() < 0.5
    slipped = luck.choice(["", "", "head", "tail"])
    name = f"q{number}"
    inside = luck.random() < 0.6
    fields = f"int data{number}[{capacity}]; {type_} head{number}, tail{number}, count{number}; int after"
    text = f"struct {name} {{ {fields}; }}; static struct {name} one{number};\n" if inside else ""
    if not inside:
        text = f"static int data{number}[{capacity}]; static {type_} head{number}, tail{number}, count{number};\n"
    own = "q->" if inside else ""
    taken, passed = (f"struct {name} *q, ", f"&one{number}, ") if inside else ("", "")
    data, count = f"{own}data{number}", f"{own}count{number}"
    moves = {}
    for end in ("head", "tail"):
        index = f"{own}{end}{number}"
        limit = luck.choice([capacity - 1, capacity + 1, capacity * 2]) if end == slipped else capacity
        moves[end] = luck.choice(
            [
                f"{index}++; if ({index} >= {limit}) {index} = 0;",
                f"if (++{index} == {limit}) {index} = 0;",
                f"{index} = ({index} + 1) % {limit};",
                f"{index} = {index} + 1 < {limit} ? {index} + 1 : 0;",
            ]
        )
    head, tail = f"{own}head{number}", f"{own}tail{number}"
    full = f"{count} == {capacity}" if counted else f"({head} + 1) % {capacity} == {tail}"
    empty = f"{count} == 0" if counted else f"{head} == {tail}"
    up, down = (f"{count}++; ", f"{count}--; ") if counted else ("", "")
    put = f"if ({full}) return 0; {data}[SLOT({head})] = v; {moves['head']} {up}return 1;"
    get = f"int v; if ({empty}) return 0; v = {data}[NEXT({tail})]; {moves['tail']} {down}return v;"
    text += f"int put{number}({taken}int v) {{ {put} }}\nint get{number}({taken}int back) {{ {get} }}\n"
    text += f"void entry{number}(int v) {{ put{number}({passed}v); }}\n"
    text += f"int look{number}(uint8_t back) {{ return get{number}({passed}back); }}\n"
    return Made(name, text, capacity, 1, True, head)


def _advance(luck: random.Random, slip: bool, i: str, type_: str, n: int) -> tuple[str, str, int]:
    """How a slot is used, how the index moves, and in which direction."""
    limit = luck.choice([n, n, n, n + 1, n - 1, 2 * n]) if slip else n
    to = luck.choice([0, 0, 1]) if slip else 0
    cmp = luck.choice([">=", "==", ">"]) if slip else luck.choice([">=", "=="])
    power = n & (n - 1) == 0
    forms = ["reset", "early", "next", "modulo", "choice", "subtract", "down", "exclusive", "free"]
    if power or slip:
        forms += ["mask", "free-mask"]
    form = luck.choice(forms)
    step = luck.choice([1, 1, 2]) if slip and n > 3 else 1  # two forward in three slots is one back
    match form:
        case "reset":
            return i, f"{i}++; if ({i} {cmp} {limit}) {i} = {to};", 1
        case "early":
            return i, f"if (++{i} {cmp} {limit}) {{ {i} = {to}; }}", 1
        case "next":
            return i, f"{type_} next = {i} + 1; if (next {cmp} {limit}) next = {to}; {i} = next;", 1
        case "modulo":
            return i, f"{i} = ({i} + {step}) % {limit};", 1
        case "choice":
            return i, f"{i} = {i} + 1 < {limit} ? {i} + 1 : {to};", 1
        case "subtract":
            less = luck.choice([n, n - 1]) if slip else n
            return i, f"{i} += 1; if ({i} >= {limit}) {i} -= {less};", 1
        case "down":
            return i, f"if ({i} == 0) {i} = {max(limit, 2)}; {i}--;", -1
        case "exclusive":
            return i, f"if ({i} {cmp} {max(limit - 1, 1)}) {i} = {to}; else {i}++;", 1
        case "mask":
            mask = luck.choice([n - 1, n, 2 * n - 1]) if slip else n - 1
            return i, f"{i} = ({i} + 1) & {mask};", 1
        case "free":
            return f"{i} % {limit}", f"{i}++;", 1
    mask = luck.choice([n - 1, 2 * n - 1]) if slip else n - 1
    return f"{i} & {mask}", f"{i}++;", 1


def _reader(luck: random.Random, number: int, slip: bool, i: str, array: str, taken: str, n: int, free: bool) -> str:
    """A function that gets the sample ``back`` steps ago, or all of them."""
    guard = f"if (back >= {n}) return 0;"
    if free or luck.random() < 0.3:
        top = luck.choice(["<=", "<"]) if slip else "<"
        body = f"int sum = 0; (void)back; for (int k = 0; k {top} {n}; k++) sum += {array}[k]; return sum;"
    elif not slip:
        body = luck.choice(
            [
                f"{guard} return {array}[({i} + {n} - 1 - back) % {n}];",
                f"{guard} int at = {i} - 1 - back; if (at < 0) at += {n}; return {array}[at];",
                f"{guard} int at = {i}; do {{ if (at == 0) at = {n}; at--; }} while (back-- > 0); return {array}[at];",
            ]
        )
    else:
        body = luck.choice(
            [
                f"{guard} return {array}[({i} - 1 - back) % {n}];",
                f"{guard} int at = {i} - back; if (at < 0) at += {n}; return {array}[at - 1];",
                f"{guard} uint8_t at = {i} - 1; return {array}[at];",
                f"{guard} unsigned at = {i} + {n} - 1u - back; if (at > {n}) at -= {n}; return {array}[at];",
            ]
        )
    return f"int get{number}({taken}uint8_t back) {{ {body} }}\n"


def program_of(made: list[Made]) -> str:
    """All rings in one C program that is driven by the number of a ring."""
    cases = "\n".join(
        f"case {number}: step_ = {item.direction}; slots_ = {item.capacity};"
        + (f" if (look) look{number}((uint8_t)(look % {min(item.capacity, 250) + 2})); else" if item.reads else "")
        + f" entry{number}(k); break;"
        for number, item in enumerate(made)
    )
    return (
        "#include <stdio.h>\n#include <stdlib.h>\n"
        + TYPES
        + RUNS
        + "".join(item.text for item in made)
        + f"""
int main(int argc, char **argv) {{
    int which = argc > 1 ? atoi(argv[1]) : 0;
    last_[0] = last_[1] = -1;
    unsigned luck = 12345;
    for (int k = 0; k < 200000; k++) {{
        /* The reader with every argument before anything was stored, then at random between the stores. */
        luck = luck * 1664525u + 1013904223u;
        unsigned look = k < 310 ? 310 - k : luck >> 24 < 90 ? (luck >> 8 & 0xFFFF) + 1 : 0;
        switch (which) {{
        {cases}
        }}
    }}
    puts(skips_ ? "skips" : "follows");
    return 0;
}}
"""
    )


def observe(made: list[Made], folder: Path) -> list[str]:
    """What each ring does: ``leaves`` its array, ``skips`` slots or ``follows``."""
    source, binary = folder / "rings.c", folder / "rings"
    source.write_text(program_of(made))
    flags = ["-w", "-O1", "-fwrapv", "-fsanitize=bounds,address", "-fno-sanitize-recover=all"]
    subprocess.run([str(GCC), *flags, "-o", str(binary), str(source)], check=True, capture_output=True)
    seen = []
    for number in range(len(made)):
        done = subprocess.run([str(binary), str(number)], capture_output=True, text=True)
        seen.append(done.stdout.strip() if done.returncode == 0 else "leaves")
    return seen


def judge(item: Made) -> list[Obligation]:
    """The failed obligations for one ring."""
    unit = lower_text(TYPES + item.text.replace("SLOT(", "(").replace("NEXT(", "("))
    assert not unit.notices, (unit.notices, item.text)
    kept = ring_functions(unit.functions)
    rings = find_rings(kept, unit.objects, unit.types.structs, unit.types.model, origin)
    program = Program((), rings)
    return [found for rule in RING_RULES for found in rule.check(program) if found.kind == "fail"]


def disagreements(made: list[Made], folder: Path) -> tuple[list[str], dict[str, int]]:
    """Where findings and observations differ, in words; and how often each behaviour was observed."""
    wrong: list[str] = []
    counts: dict[str, int] = {}
    for item, seen in zip(made, observe(made, folder), strict=True):
        counts[seen] = counts.get(seen, 0) + 1
        findings = judge(item)
        failed = [found for found in findings if found.level != "note"]
        notes = len(findings) - len(failed)  # a last slot that nobody uses is only noted
        bounds = [found for found in failed if found.level == "error"]
        if seen == "leaves" and not failed:
            wrong.append(f"missed: leaves its array\n{item.text}")
        if seen == "skips" and not failed and not notes:
            wrong.append(f"missed: skips slots\n{item.text}")
        if seen != "leaves" and bounds:
            wrong.append(f"false: {bounds[0].what}\n{item.text}")
        elif seen == "follows" and failed:
            wrong.append(f"false: {failed[0].rule} {failed[0].what}\n{item.text}")
    return wrong, counts


@pytest.mark.skipif(GCC is None, reason="no gcc to run the rings with")
@pytest.mark.parametrize("seed", range(3))
def test_findings_are_what_the_programs_do(seed: int, tmp_path: Path) -> None:
    luck = random.Random(seed)
    made = [make(number, luck) for number in range(24)] + [make_queue(number, luck) for number in range(24, 36)]
    wrong, counts = disagreements(made, tmp_path)
    assert not wrong, "\n".join(wrong)
    assert len(counts) == 3 and min(counts.values()) >= 3
