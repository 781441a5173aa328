"""The program as proofs about rings see it: bodies by name, what they mention and store, traces made once.

Functions that can be entered are told from helpers that are only called: a helper is proved where it is called, with
what its callers give it.
"""

from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence, Set
from dataclasses import dataclass, field, replace

from stepring.meaning.fold import fold
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Binary,
    Call,
    Cast,
    CType,
    DataModel,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    IntType,
    Load,
    MemberPlace,
    Object,
    PlaceExpr,
    PointerType,
    StructLayout,
    StructType,
    VariablePlace,
)
from stepring.paths.induction import Family
from stepring.paths.symbolic import trace_function
from stepring.paths.symbolic_types import Around, Limits, Trace
from stepring.paths.symbolic_writes import Writes, function_writes, names_of, own_writes
from stepring.shapes.ring_keys import Key, inner_structs, place_keys
from stepring.shapes.ring_writers import Outside
from stepring.values.scan import expressions_of, inside_place, places_of, walk_deep


@dataclass(slots=True, eq=False)
class RingProgram:
    """Functions, objects and structures, with what was found out about them so far."""

    functions: Sequence[Function]
    bodies: Mapping[str, list[Function]]
    objects: Sequence[Object]
    structs: Mapping[str, StructLayout]
    variables: Mapping[str, CType]
    around: Around
    limits: Limits
    doors: tuple[Function, ...]
    traces: dict[tuple[str, bool, frozenset[str]], Trace] = field(default_factory=dict)
    written: dict[str, Writes] = field(default_factory=dict)
    named: dict[str, frozenset[Key]] = field(default_factory=dict)
    calls: dict[str, frozenset[str]] = field(default_factory=dict)
    nearby: dict[str, list[Function]] = field(default_factory=dict)

    def trace(self, function: Function, sets_up: bool, opaque: frozenset[str]) -> Trace:
        """A function's trace; ``sets_up``: it works on an object that nobody uses yet. Opaque ones are not laid out."""
        near = frozenset(opaque & self.reached(function)) - {function.identity}
        key = (function.identity, sets_up, near)
        if key not in self.traces:
            around = replace(self.around, opaque=near)
            self.traces[key] = trace_function(around, function, limits=self.limits, private=sets_up)
        return self.traces[key]

    def reached(self, function: Function) -> frozenset[str]:
        """The identities of the functions that a function calls, directly or not."""
        known = self.calls.get(function.identity)
        if known is None:
            self.calls[function.identity] = frozenset()  # for functions that call each other
            found: set[str] = set()
            for name in _callees(function):
                body = self.around.resolve(function, name)
                if body is not None:
                    found |= {body.identity} | self.reached(body)
            known = self.calls[function.identity] = frozenset(found)
        return known

    def sets(self, function: Function, setting: Set[Key], *, clears: bool = True) -> bool:
        """Whether a function stores into some keys by itself, or through helpers that cannot be entered.

        Without ``clears``, null pointers do not count: who only takes a ring's storage away sets nothing up.
        """
        for here in self.near(function):
            writes = own_writes(self.around, here, clears=clears)
            if writes.keys & setting or (writes.pointers and self.around.exposed & setting):
                return True
        return False

    def speaks_of(self, function: Function, keys: Set[Key]) -> bool:
        """Whether a function speaks of some keys by itself, or through helpers that cannot be entered."""
        return any(not keys.isdisjoint(_own_mentions(here)) for here in self.near(function))

    def near(self, function: Function) -> list[Function]:
        """A function with the helpers that cannot be entered: others are operations themselves."""
        known = self.nearby.get(function.identity)
        if known is not None:
            return known
        doors = {door.identity for door in self.doors}
        pending, seen = [function], {function.identity}
        found: list[Function] = []
        while pending:
            here = pending.pop()
            found.append(here)
            for name in _callees(here):
                body = self.around.resolve(here, name)
                if body is not None and body.identity not in seen and body.identity not in doors:
                    seen.add(body.identity)
                    pending.append(body)
        self.nearby[function.identity] = found
        return found

    def writes(self, function: Function) -> Writes:
        """What a function, with its callees, may store into."""
        if function.identity not in self.written:
            self.written[function.identity] = function_writes(self.around, function)
        return self.written[function.identity]

    def mentions(self, function: Function) -> frozenset[Key]:
        """The keys that a function's text, or that of a function it calls, speaks of."""
        if function.identity not in self.named:
            self.named[function.identity] = frozenset()  # for functions that call each other
            found = set(_own_mentions(function))
            for name in _callees(function):
                body = self.around.resolve(function, name)
                if body is not None:
                    found |= self.mentions(body)
            self.named[function.identity] = frozenset(found)
        return self.named[function.identity]

    def has(self, name: str) -> bool:
        """Whether a function's body is at hand."""
        return name in self.bodies

    def starts(self, family: Family, struct: str | None) -> list[dict[Key, int] | None]:
        """What the integers of each object of a family hold at start; None where that is not known."""
        if struct is None:
            return list(_variable_starts(self, family))
        return [start for item in self.objects for start in _object_starts(self, item, family, struct)]


def ring_program(
    functions: Sequence[Function],
    called: Sequence[Function],
    objects: Sequence[Object],
    structs: Mapping[str, StructLayout],
    model: DataModel,
    outside: Outside,
    defined: frozenset[str] | None,
    limits: Limits,
) -> RingProgram:
    """Put a program together."""
    bodies: dict[str, list[Function]] = defaultdict(list)
    known: set[tuple[str, object]] = set()
    every: list[Function] = []
    for function in (*functions, *called):
        mark = (function.identity, function.position)
        if mark not in known:
            known.add(mark)
            bodies[function.name].append(function)
            every.append(function)

    def resolve(caller: Function, name: str) -> Function | None:
        found = bodies.get(name, [])
        for item in found:
            if item.static and item.position.file == caller.position.file:
                return item
        plain = [item for item in found if not item.static] or found
        near = [item for item in plain if item.position.file == caller.position.file] or plain
        return near[0] if len(near) == 1 else None

    variables: dict[str, CType] = {}
    for function in every:
        for variable in function.variables:
            if variable.lasting:
                variables.setdefault(variable.identity, variable.type)
    constants: dict[str, int] = {}
    for object_ in objects:
        variables[object_.variable.identity] = object_.variable.type
        if object_.variable.const and not object_.variable.volatile and isinstance(object_.variable.type, IntType):
            value = fold(object_.initial[0].value) if len(object_.initial) == 1 else 0 if not object_.initial else None
            if value is not None and (object_.initial or object_.variable.storage != "extern"):
                constants[object_.variable.identity] = value
    exposed = frozenset(key for function in every for key in _exposed(function))
    around = Around(structs, model, resolve, constants, exposed, defined)
    # A function that is only laid out here may be called from anywhere else, if it stores into what a ring may be.
    storing = {(one.name, one.position) for some in outside.writers.values() for one in some}
    extra = [function for function in called if (function.name, function.position) in storing]
    doors = tuple(dict.fromkeys((*entered(functions, objects, outside), *extra)))
    return RingProgram(functions, bodies, objects, structs, variables, around, limits, doors)


def entered(functions: Sequence[Function], objects: Sequence[Object], outside: Outside) -> Iterator[Function]:
    """The functions that code outside can enter: not static, or their address is taken, or nobody here calls them."""
    called: set[tuple[str, str]] = set()
    taken: set[str] = set()
    for function in functions:
        for name in _callees(function):
            if name != function.name:
                called.add((name, function.position.file))
        taken |= _taken(function)
    for item in objects:
        for initial in item.initial:
            taken |= {part.name for part in walk_deep(initial.value) if isinstance(part, FunctionName)}
    for function in functions:
        inside = (function.name, function.position.file) in called
        if not function.static or not inside or function.name in taken or ("call", function.name) in outside.writers:
            yield function


def touching(program: RingProgram, keys: frozenset[Key], struct: str) -> Iterator[Function]:
    """The functions that can be entered and, by themselves or through helpers, speak of any of some keys."""
    for function in program.doors:
        mentioned = program.mentions(function)
        if mentioned & keys or (struct and ("struct", struct) in mentioned):
            yield function
            continue
        if any(key[0] == "struct" and struct in inner_structs(key[1], program.structs) for key in mentioned):
            yield function


def _steps(function: Function) -> Iterator[Expr | PlaceExpr]:
    for block in function.blocks:
        for statement in block.statements:
            for place in places_of(statement):
                yield place
                for inner in inside_place(place):
                    yield from walk_deep(inner)
            for expression in expressions_of(statement):
                yield from walk_deep(expression)
        for expression in expressions_of(block.terminator):
            yield from walk_deep(expression)


def comparisons(function: Function) -> Iterator[Binary]:
    """The comparisons that a function makes."""
    for part in _steps(function):
        if isinstance(part, Binary) and part.op in ("==", "!=", "<", "<=", ">", ">="):
            yield part


def _own_mentions(function: Function) -> Iterator[Key]:
    for part in _steps(function):
        place = part.place if isinstance(part, Load | AddressOf) else part
        if not isinstance(place, VariablePlace | MemberPlace | ElementPlace):
            type_ = place.type
            if isinstance(type_, StructType):
                yield ("struct", type_.identity)
            continue
        here: PlaceExpr = place
        while True:
            if isinstance(here.type, StructType):
                yield ("struct", here.type.identity)
            for key in place_keys(here, "", {}):
                if key[0] != "local":
                    yield key
            if not isinstance(here, MemberPlace | ElementPlace):
                break
            here = here.base
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Call):
                for argument in statement.arguments:
                    inner = argument
                    while isinstance(inner, Cast):
                        inner = inner.operand
                    if isinstance(inner.type, PointerType) and isinstance(inner.type.to, StructType):
                        yield ("struct", inner.type.to.identity)


def _callees(function: Function) -> Iterator[str]:
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                yield statement.callee.name


def _taken(function: Function) -> set[str]:
    found: set[str] = set()
    for block in function.blocks:
        for statement in block.statements:
            expressions = list(expressions_of(statement))
            if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                expressions = expressions[1:]
            for expression in expressions:
                found |= {part.name for part in walk_deep(expression) if isinstance(part, FunctionName)}
        for expression in expressions_of(block.terminator):
            found |= {part.name for part in walk_deep(expression) if isinstance(part, FunctionName)}
    return found


def _exposed(function: Function) -> Iterator[Key]:
    """The lasting scalars whose address a function takes, other than to name them."""
    named = names_of(function).values()
    for part in _steps(function):
        if isinstance(part, AddressOf) and isinstance(part.place.type, IntType | PointerType):
            if any(part.place is place for place in named):
                continue
            for key in place_keys(part.place, "", {}):
                if key[0] != "local" and key[-1] not in ("[]", "*"):
                    yield key


def _variable_starts(program: RingProgram, family: Family) -> Iterator[dict[Key, int] | None]:
    values: dict[Key, int] = {}
    objects = {item.variable.identity: item for item in program.objects}
    for key in (*family.variables, *family.offsets):
        if key not in family.types:
            continue
        item = objects.get(key[1])
        if item is None:
            yield None
            return
        found = [fold(initial.value) for initial in item.initial]
        if any(value is None for value in found) or (key[-1] == "[]" and len(set(found)) > 1):
            yield None
            return
        values[key] = found[0] if found else 0  # type: ignore[assignment]
    yield values


def _object_starts(program: RingProgram, item: Object, family: Family, struct: str) -> Iterator[dict[Key, int] | None]:
    """The objects of a structure inside one variable: by the paths of its initialiser, and one that is all zero."""
    type_ = item.variable.type
    while isinstance(type_, ArrayType):
        type_ = type_.element
    if not isinstance(type_, StructType) or struct not in inner_structs(type_.identity, program.structs):
        return
    members = {key[2]: key for key in family.offsets if key in family.types}
    groups: dict[tuple[str | int, ...], dict[Key, int] | None] = {}
    for initial in item.initial:
        last = initial.path[-1] if initial.path else None
        if last not in members:
            if last is not None:
                groups.setdefault(initial.path[:-1], dict.fromkeys(members.values(), 0))
            continue
        group = groups.setdefault(initial.path[:-1], dict.fromkeys(members.values(), 0))
        value = fold(initial.value)
        if value is None:
            groups[initial.path[:-1]] = None
        elif group is not None:
            group[members[str(last)]] = value
    yield from groups.values()
    if not item.initial or isinstance(item.variable.type, ArrayType) or type_.identity != struct:
        yield dict.fromkeys(members.values(), 0)
