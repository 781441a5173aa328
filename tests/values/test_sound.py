"""Random functions, run on concrete values: whatever is seen must lie in what the engine found."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from random import Random

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from stepring.meaning.types import (
    ArrayType,
    Assign,
    Call,
    DerefPlace,
    Expr,
    Field,
    Function,
    IntType,
    Load,
    Object,
    PlaceExpr,
    PointerStep,
    StructLayout,
)  # fmt: skip
from stepring.values.engine import FunctionValues, analyse
from stepring.values.intervals import contains, number_type, whole
from stepring.values.program import summarise
from stepring.values.scan import expressions_of, walk_deep
from stepring.values.spots import Exposure
from stepring.values.surroundings import Surroundings
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

from .build import (
    BOOL,
    HERE,
    I8,
    I16,
    INT,
    STRUCT,
    U8,
    U16,
    U32,
    Body,
    address,
    arrow,
    at,
    cast,
    element,
    load,
    local,
    member,
    negation,
    num,
    op,
    parameter,
    pointer,
    static,
)  # fmt: skip
from .concrete import Activation, Address, Enough, Machine, Undefined, Value

MEMBERS = (("head", U8), ("count", I16), ("fill", U32))
ONE, TWO = static("one", STRUCT), static("two", STRUCT)
MANY = static("many", ArrayType(STRUCT, 3))
TABLE = static("table", ArrayType(U8, 4))
STATICS = [static(f"s_{k.name.replace(' ', '_')}", k) for k in (U8, I8, U16, INT, BOOL)]
LOCALS = [local(f"x{number}", kind) for number, kind in enumerate((U8, I8, U16, I16, INT, U32))]
P, Q, R = local("p", pointer(STRUCT)), parameter("q", pointer(STRUCT)), local("r", pointer(STRUCT))
BYTE = local("b", pointer(U8))
WORD = local("w", pointer(U16))
LAYOUT = StructLayout(
    STRUCT.identity, False, (Field("head", U8, 0), Field("count", I16, 16), Field("fill", U32, 32)), 8, 4
)
OPERATORS = ("+", "-", "*", "/", "%", "<<", ">>", "&", "|", "^", "<", "<=", ">", ">=", "==", "!=")


class Maker:
    """Makes one random function. Everything is drawn from one random generator that hypothesis seeds."""

    def __init__(self, random: Random, depth: int, pointers: bool, callee: bool) -> None:
        self.random = random
        self.pointers = pointers
        self.callee = callee
        self.depth = depth

    def structures(self) -> PlaceExpr:
        choice = self.random.randrange(6 if self.pointers else 3)
        if choice == 0:
            return at(ONE)
        if choice == 1:
            return at(TWO)
        if choice == 2:
            return element(at(MANY), self.index(3))
        return DerefPlace(load(self.random.choice((P, Q, R))), STRUCT)

    def index(self, length: int) -> Expr:
        if self.random.random() < 0.4:
            return num(self.random.randrange(length))
        if self.random.random() < 0.6:
            return cast(INT, load(self.random.choice(LOCALS)))
        return op("%", cast(INT, load(self.random.choice(LOCALS[:3:2]))), length)

    def place(self) -> PlaceExpr:
        choice = self.random.random()
        if choice < 0.45:
            return at(self.random.choice(LOCALS))
        if choice < 0.65:
            return at(self.random.choice(STATICS))
        if choice < 0.7:
            return element(at(TABLE), self.index(4))
        if choice < 0.78 and self.pointers:
            which = self.random.choice((BYTE, WORD))
            pointer_ = load(which)
            if which is BYTE and self.random.random() < 0.4:
                return DerefPlace(PointerStep(pointer_, self.index(4), which.type), U8)
            return DerefPlace(pointer_, U8 if which is BYTE else U16)
        name, kind = self.random.choice(MEMBERS)
        return member(self.structures(), name, kind)

    def expression(self, depth: int = 2) -> Expr:
        choice = self.random.random()
        if depth == 0 or choice < 0.3:
            if self.random.random() < 0.45:
                return num(self.random.choice((0, 1, 2, 3, 4, 7, 8, 10, 15, 16, 31, 100, 127, 128, 255, 256, -1, -5)))
            return load(self.place())
        if choice < 0.4:
            return cast(self.random.choice((U8, I8, U16, I16, INT, U32, BOOL)), self.expression(depth - 1))
        if choice < 0.45:
            return negation(cast(INT, self.expression(depth - 1)))
        return op(self.random.choice(OPERATORS), self.expression(depth - 1), cast(INT, self.expression(depth - 1)))

    def condition(self) -> Expr:
        if self.random.random() < 0.7:
            operator = self.random.choice(("<", "<=", ">", ">=", "==", "!="))
            return op(operator, self.expression(1), cast(INT, self.expression(1)))
        return self.expression(2)

    def statement(self, body: Body, depth: int) -> None:
        choice = self.random.random()
        if choice < 0.06:
            self.renamed(body)
        elif choice < 0.55 or depth == 0:
            target = self.place()
            body.set(target, cast(target.type, self.expression()))
        elif choice < 0.65 and self.pointers:
            self.pointer_statement(body)
        elif choice < 0.72:
            if self.callee and self.random.random() < 0.7:
                argument = (
                    address(self.structures()) if self.random.random() < 0.6 else load(self.random.choice((P, Q)))
                )
                body.call(
                    "step", argument, cast(U8, self.expression(1)), result=at(self.random.choice(LOCALS)), returns=U8
                )
            else:
                body.call("outside")
        elif choice < 0.86:
            body.when(self.condition(), self.statements(depth - 1), self.statements(depth - 1))
        elif choice < 0.95:
            self.loop(body, depth)
        else:
            cuts = sorted(self.random.sample(range(-3, 20), 4))
            cases = [
                (cuts[0], cuts[1] - 1, self.statements(depth - 1)),
                (cuts[2], cuts[3] - 1, self.statements(depth - 1)),
            ]
            body.switch(cast(INT, self.expression(1)), cases, self.statements(depth - 1))

    def renamed(self, body: Body) -> None:
        """Store through a pointer or index, change that, and load through it again."""
        name, kind = self.random.choice(MEMBERS)
        if self.pointers and self.random.random() < 0.5:
            place = arrow(load(P), name, kind)
            body.set(P, self.random.choice((load(Q), address(ONE), address(TWO))))
            body.set(place, self.random.randrange(20, 30))
            body.set(P, self.random.choice((load(Q), load(R), address(ONE), address(TWO))))
        else:
            chosen = self.random.choice(LOCALS)
            place = member(element(at(MANY), cast(INT, load(chosen))), name, kind)
            body.set(chosen, self.random.randrange(3)).set(place, self.random.randrange(20, 30))
            body.set(chosen, self.random.randrange(3))
        target = self.random.choice(LOCALS)
        body.set(target, cast(target.type, load(place)))

    def loop(self, body: Body, depth: int) -> None:
        inner = self.statements(depth - 1)
        if self.random.random() < 0.6:
            counter = self.random.choice(LOCALS)
            step = self.random.choice((1, 1, 1, 2, 3))
            limit = self.random.choice((3, 5, 10, 12))

            def with_step(b: Body) -> None:
                inner(b)
                b.set(counter, op("+", load(counter), step))

            body.set(counter, 0).loop(op("<", load(counter), limit), with_step)
        else:
            body.loop(self.condition(), inner)

    def pointer_statement(self, body: Body) -> None:
        choice = self.random.randrange(4)
        if choice == 0:
            body.set(P, address(self.structures()) if self.random.random() < 0.5 else load(Q))
        elif choice == 1:
            body.set(R, self.random.choice((load(P), load(Q), address(ONE))))
        elif choice == 2:
            where = self.random.choice(
                (at(LOCALS[0]), at(STATICS[0]), member(at(TWO), "head", U8), element(at(TABLE), num(0)))
            )
            body.set(BYTE, address(where))
        else:
            body.set(WORD, address(self.random.choice((LOCALS[2], STATICS[2]))))

    def statements(self, depth: int) -> Callable[[Body], None]:
        number = self.random.randrange(1, 4)

        def add(body: Body) -> None:
            for _ in range(number):
                self.statement(body, max(depth, 0))

        return add

    def function(self, name: str = "feed") -> Function:
        body = Body()
        if self.pointers:
            body.set(R, address(self.random.choice((ONE, TWO)))).set(P, load(Q))
            body.set(BYTE, address(STATICS[0])).set(WORD, address(LOCALS[2]))
        for variable in LOCALS:
            body.set(variable, self.random.choice((0, 1, 5)))
        for _ in range(self.random.randrange(3, 9)):
            self.statement(body, self.depth)
        body.give(cast(INT, self.expression(1)))
        return body.function(name, [Q], [*LOCALS, P, R, BYTE, WORD, *STATICS, ONE, TWO, MANY, TABLE], returns=INT)


def callee(random: Random) -> Function:
    """A small function that changes a structure behind a pointer."""
    r, amount = parameter("r", pointer(STRUCT)), parameter("amount", U8)
    head = arrow(load(r), "head", U8)
    fill = arrow(load(r), "fill", U32)
    body = Body()
    if random.random() < 0.5:
        body.set(head, op("%", op("+", load(head), load(amount)), 12))
    else:
        body.set(head, op("+", load(head), 1)).when(op(">=", load(head), load(amount)), lambda b: b.set(head, 0))
    if random.random() < 0.5:
        body.set(fill, op("+", load(fill), 1))
    if random.random() < 0.3:
        body.set(STATICS[0], load(amount))
    if random.random() < 0.3:
        body.set(amount, load(head)).call("outside")
    return body.give(load(amount) if random.random() < 0.5 else load(head)).function(
        "step", [r, amount], [STATICS[0]], returns=U8
    )


def scalars() -> list[tuple[Address, Cell, IntType]]:
    """Every lasting scalar: its address, its cell, its type."""
    found: list[tuple[Address, Cell, IntType]] = []
    for variable in STATICS:
        assert isinstance(variable.type, IntType)
        found.append(((variable.identity,), VariableCell(variable.identity), variable.type))
    for name, kind in MEMBERS:
        for whole_ in (ONE, TWO):
            found.append(((whole_.identity, "." + name), VariableCell(whole_.identity, ("." + name,)), kind))
        for slot in range(3):
            found.append(((MANY.identity, slot, "." + name), VariableCell(MANY.identity, ("[]", "." + name)), kind))
    found += [((TABLE.identity, slot), VariableCell(TABLE.identity, ("[]",)), U8) for slot in range(4)]
    return found


def check(values: FunctionValues, machine: Machine, activation: Activation, block: int, number: int) -> None:
    """Every value that the statement is about to compute lies in what was found for it."""
    view = values.before(block, number)
    here = activation.function.blocks[block]
    step = here.statements[number] if number < len(here.statements) else here.terminator
    assert view is not None, ("reached but held unreachable", block, number)
    expressions = list(expressions_of(step))
    if isinstance(step, Assign) and number_type(step.place.type):
        expressions.append(Load(step.place, step.place.type))
    if isinstance(step, Call):
        expressions = list(step.arguments)
    for expression in expressions:
        for part in walk_deep(expression):
            try:
                value: Value = machine.value(activation, part)
            except Undefined:
                continue
            if isinstance(value, int) and number_type(part.type):
                found = view.evaluate(part)
                assert contains(found, value), (block, number, part, value, found)


@pytest.mark.parametrize("summarised", (False, True), ids=("anything", "summaries"))
@pytest.mark.parametrize("pointers", (False, True), ids=("plain", "pointers"))
@given(seed=st.integers(0, 2**40))
@settings(max_examples=250, deadline=None, suppress_health_check=list(HealthCheck))
def test_what_is_seen_lies_in_what_was_found(pointers: bool, summarised: bool, seed: int) -> None:
    examine(Random(seed), pointers, summarised)


@pytest.mark.parametrize("interrupted", (False, True), ids=("alone", "interrupted"))
@pytest.mark.parametrize("pointers", (False, True), ids=("plain", "pointers"))
@given(seed=st.integers(0, 2**40))
@settings(max_examples=80, deadline=None, suppress_health_check=list(HealthCheck))
def test_a_programs_summaries_hold_whenever_a_function_starts(pointers: bool, interrupted: bool, seed: int) -> None:
    examine_program(Random(seed), pointers, interrupted)


def interrupt(random: Random, pointers: bool) -> Function:
    """A function that only stores into a few lasting places."""
    maker = Maker(random, 0, False, callee=False)
    body = Body()
    for variable in LOCALS:
        body.set(variable, random.choice((0, 1, 5)))
    for _ in range(2):
        target = random.choice((at(random.choice(STATICS)), member(at(ONE), *random.choice(MEMBERS))))
        body.set(target, cast(target.type, maker.expression(1)))
    made = body.function("tick", variables=[*LOCALS, *STATICS, ONE, TWO, MANY, TABLE])
    return replace(made, static=False, identity="tick")


def examine_program(random: Random, pointers: bool, interrupted: bool) -> None:
    """A few functions that call each other and are called in any order by code that was not read."""
    inner = callee(random)
    made = [Maker(random, 2, pointers, callee=True).function(f"feed{number}") for number in range(3)]
    feeds = [replace(feed, static=False, identity=feed.name) for feed in made]
    starts: list[tuple[Expr, Address]] = [
        (address(ONE), (ONE.identity,)),
        (address(TWO), (TWO.identity,)),
        (address(element(at(MANY), num(1))), (MANY.identity, 1)),
    ]
    driver = Body()
    for feed, (argument, _) in zip(feeds, starts, strict=True):
        driver.call(feed.name, argument, returns=INT)
    functions = [inner, *feeds, driver.function("drive", variables=[ONE, TWO, MANY])]
    tick = interrupt(random, pointers)
    if interrupted:
        functions.append(tick)
    objects = [Object(variable, (), HERE) for variable in (*STATICS, ONE, TWO, MANY, TABLE)]
    program = summarise(
        functions, objects, lambda cell: True, structs={STRUCT.identity: LAYOUT},
        interrupts=lambda function: function is tick, shared=lambda cell: interrupted,
    )  # fmt: skip
    found = {function.identity: program.of(function) for function in functions}
    lasting = scalars()
    running = 0

    def look(machine: Machine) -> None:
        for address_, cell, kind in lasting:
            value = machine.memory[address_]
            assert isinstance(value, int)
            assert contains(program.value(cell) or whole(kind), value), (cell, value, program.value(cell))

    def enter(machine: Machine) -> None:
        nonlocal running
        look(machine)
        if running < 3 and random.random() < 0.7:
            running += 1
            which = random.randrange(3)
            machine.run(feeds[which], (starts[which][1],))
            running -= 1
        look(machine)

    def seen(machine: Machine, activation: Activation, block: int, number: int) -> None:
        if interrupted and activation.function is not tick and random.random() < 0.1:
            machine.run(tick, ())
        check(found[activation.function.identity], machine, activation, block, number)

    memory: dict[Address, Value] = {address_: 0 for address_, _, _ in lasting}
    for _ in range(6):
        before = dict(memory)
        machine = Machine(memory, {"step": inner}, enter, seen)
        machine.activations = 1
        running = 0
        try:
            enter(machine)
        except (Undefined, Enough):
            memory = before


def examine(random: Random, pointers: bool, summarised: bool) -> None:
    """One random function, analysed and run several times."""
    inner = callee(random)
    function = Maker(random, 3, pointers, callee=True).function()
    lasting = scalars()
    limits: dict[Cell, Interval] = {}
    if summarised:
        for _, cell, kind in lasting:
            limits.setdefault(cell, Interval(0, min(kind.high, random.choice((1, 5, 11, 100))), 1))
    exposure = None
    if summarised:
        # With structures reached by pointers, what holds for members of one must hold for all.
        for name, _ in MEMBERS:
            field = FieldCell(STRUCT.identity, (name,))
            for variable, prefix in ((ONE, ()), (TWO, ()), (MANY, ("[]",))):
                limits[VariableCell(variable.identity, (*prefix, "." + name))] = Interval(0, 11, 1)
            limits[field] = Interval(0, 11, 1)
        exposure = Exposure(
            frozenset(v.identity for v in (ONE, TWO, MANY, TABLE, STATICS[0], STATICS[2])),
            frozenset(
                (
                    VariableCell(STATICS[0].identity),
                    VariableCell(STATICS[2].identity),
                    VariableCell(TWO.identity, (".head",)),
                    VariableCell(TABLE.identity, ("[]",)),
                )
            ),
        )  # fmt: skip
    in_place = random.random() < 0.7

    def outside(machine: Machine) -> None:
        for address_, cell, kind in lasting:
            now = machine.memory[address_]
            assert isinstance(now, int)
            # A summary holds whenever other code starts, so code that is called leaves it true.
            if random.random() < 0.5 or (cell in limits and not contains(limits[cell], now)):
                machine.memory[address_] = pick(limits.get(cell) or whole(kind))

    def pick(values: Interval) -> int:
        edge = random.random()
        if edge < 0.2:
            return values.low
        return values.high if edge < 0.4 else random.randint(values.low, min(values.high, values.low + 300))

    bodies = {"step": inner} if in_place else {}
    values = analyse(function, None, Surroundings(limits, exposure, bodies=lambda name, caller: bodies.get(name)))
    results: list[Value | None] = []
    for _ in range(4):
        memory: dict[Address, Value] = {}
        for address_, cell, kind in lasting:
            memory[address_] = pick(limits.get(cell) or whole(kind))
        start: Address = random.choice(((ONE.identity,), (TWO.identity,), (MANY.identity, random.randrange(3))))
        machine = Machine(
            memory, {"step": inner} if in_place else {}, outside,
            lambda m, a, b, n: check(values, m, a, b, n) if a.outermost else None,
        )  # fmt: skip
        try:
            results.append(machine.run(function, (start,)))
        except (Undefined, Enough):
            continue
        result = results[-1]
        if isinstance(result, int):
            assert contains(values.returned, result)
        for seen in machine.left:
            for address_, cell, _ in lasting:
                value = seen[address_]
                assert isinstance(value, int)
                if cell in limits and not contains(limits[cell], value):
                    assert holds(values, cell, value), (cell, value, values.record)


def holds(values: FunctionValues, cell: Cell, value: int) -> bool:
    """Whether a value outside the summary is among what the analysis says is left in the cell."""
    if contains(values.exits.get(cell), value):
        return True
    assert isinstance(cell, VariableCell)
    if cell.path:
        if contains(values.exits.get(FieldCell(STRUCT.identity, (cell.path[-1][1:],))), value):
            return True
    return any(contains(stored, value) for stored in values.record.pointees.values())
