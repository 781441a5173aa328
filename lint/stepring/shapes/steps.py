"""Running one flat function from given index values, along every path.

The one idea: the values of a ring's indices are few, so a function can simply be run from each of them. What the
indices do not depend on is cut away first (a static slice over data and control dependence, Weiser 1981), then the
paths of what is left are enumerated: conditions on unknown data fork, paths that meet in the same block with the same
values are one. A path is *certain* if every fork on it was on data that is free to go either way; it is doubtful where
the fork was on state that is not followed here, or on a value that only has bounds.
"""

from collections import defaultdict
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, NamedTuple, TypeAlias

from stepring.meaning.types import (
    Binary,
    Branch,
    Cast,
    Expr,
    IntType,
    Jump,
    Load,
    PointerType,
    Return,
    Stop,
    Switch,
    Unary,
    Variable,
)
from stepring.places import Position
from stepring.shapes.ring_arith import (
    MIRRORED,
    NEGATED,
    Code,
    Compiler,
    Env,
    Ptr,
    Range,
    Value,
    add_offsets,
    cut_range,
    keeps,
    whole,
)
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_flat import FlatOp, Outside, Set, Spoil, Touch
from stepring.shapes.ring_keys import Key, is_local, is_scalar, place_keys
from stepring.shapes.ring_slice import Slice

SPLIT = 64
"""A parameter or a range of up to this many values is split into its values."""
VISITS = 700
"""How often one run may enter a block before its counters are given up."""
_ANYTHING = Range(-(1 << 31), (1 << 32) - 1, False)

Trace: TypeAlias = Any
"""A linked list, newest first: None or (earlier, position, cell, value before, value after)."""
Pair: TypeAlias = tuple[Key, str, int, int, int]
"""One advance: the index, the function, its value before, after, and what was added."""


@dataclass(slots=True)
class Seen:
    """What one access saw: subscripts that certainly occur, bounds of all, and the first bad one of each sort."""

    certain: dict[int, Trace] = field(default_factory=dict)
    doubtful: dict[Value, Trace] = field(default_factory=dict)


@dataclass(slots=True)
class Run:
    """What a run from one set of values gave.

    ``ends`` maps the values of the tracked integers at the end (or at a call out of the code) to (certain, trace).
    ``cut`` says that the run was given up before all paths were seen.
    """

    ends: dict[tuple[Value, ...], tuple[bool, Trace]] = field(default_factory=dict)
    touches: dict[int, Seen] = field(default_factory=dict)
    pairs: dict[Pair, bool] = field(default_factory=dict)
    cut: bool = False
    work: int = 0


@dataclass(slots=True)
class _Compiled:
    """A block: what to do in order, then where to go."""

    ops: list[tuple[str, Any, Any, Any]] = field(default_factory=list)
    kind: str = "stop"
    condition: Code | None = None
    refine: "tuple[_Refine, ...]" = ()
    targets: tuple[int, ...] = ()
    cases: tuple[tuple[int, int, int], ...] = ()
    joins: bool = False
    live: set[Key] = field(default_factory=set)
    free: bool = False


@dataclass(frozen=True, slots=True)
class _Refine:
    """A variable that a condition speaks of: ``key operator other``."""

    key: Key
    operator: str
    other: Code


class Walk:
    """A flat function made ready to run.

    ``tracked`` are the lasting integers that are followed, in the order of the values that ``run`` takes. ``touches``
    are the accesses that matter, by ``id``; with ``moving`` all stores of tracked integers do as well. ``capacity``
    bounds parameters that reach a subscript or an index: a caller is trusted to pass a slot number, for certain only
    where the function itself checks the parameter. ``wholes`` are the
    values of each tracked integer's type, ``ranges`` bounds of integers that are not tracked, and ``writes`` tells what
    a function stores into; ``types`` is filled with the types of all that is read.
    """

    def __init__(
        self,
        facts: FlatFacts,
        tracked: Sequence[Key],
        touches: frozenset[int],
        moving: bool,
        capacity: int,
        wholes: Mapping[Key, Range],
        ranges: Mapping[Key, Range],
        writes: Callable[[str], frozenset[Key]],
        types: dict[Key, IntType],
    ) -> None:
        self.wholes = wholes
        self.types = types
        self.facts = facts
        self.tracked = tuple(tracked)
        self.follow = frozenset(tracked)
        self.touches = touches
        self.moving = moving
        self.sure = True
        self.capacity = capacity
        self.writes = writes
        self.points = facts.flat.points
        self.compiler = Compiler(self.points, self.follow, ranges)
        self.touched: list[Touch] = []
        self.slice = Slice(facts, self.tracked, touches, moving, writes, types)
        needed = self.slice.needed
        self.reads = self.slice.written | {key for key in needed if key in self.follow}
        self.state = frozenset(
            key for key in needed if is_scalar(key) and key not in self.follow and key not in self.slice.inputs
        )
        self.mixed = moving and self.slice.several_objects()
        self._compile()
        self._memory: dict[tuple[Value, ...], Run] = {}

    @property
    def idle(self) -> bool:
        """Whether nothing in the function matters."""
        return not self.slice.relevant

    # ------------------------------------------------------------------------------------------------------ compile

    def _compile(self) -> None:
        blocks = self.facts.flat.blocks
        into: dict[int, int] = defaultdict(int)
        self.blocks: list[_Compiled] = []
        for number, block in enumerate(blocks):
            made = _Compiled()
            for op in block.ops:
                if id(op) in self.slice.relevant:
                    made.ops.append(self._op(op))
                elif isinstance(op, Outside) and self.moving:
                    made.ops.append(("rest", None, None, None))
            self._end(made, number)
            for target in made.targets:
                into[target] += 1
            self.blocks.append(made)
        for number, made in enumerate(self.blocks):
            made.joins = into[number] > 1
        for made, live in zip(self.blocks, self.slice.live([made.targets for made in self.blocks]), strict=True):
            made.live = live

    def _op(self, op: FlatOp) -> tuple[str, Any, Any, Any]:
        if isinstance(op, Set):
            roles = tuple(
                (number, facts.roles[id(op)], facts.moves.get(id(op), 0))
                for number, cell in enumerate(self.tracked)
                for facts in (self.facts.cells.get(cell),)
                if facts is not None and id(op) in facts.roles
            )
            key, pointer = self.compiler.key(op.place, op.place_frame)
            if key is not None and not (is_local(key) or key in self.follow or key[0] == "var"):
                key = None  # one of several objects: a later load must not see it as the only one
            code = self.compiler.expr(op.value, op.frame)
            return "set", key if pointer is None else pointer, code, (roles, op.position, op.function)
        if isinstance(op, Touch):
            self.touched.append(op)
            subscript = self.compiler.expr(op.subscript, op.frame)
            pointer = self.compiler.expr(op.pointer, op.frame) if op.pointer is not None else None
            return "touch", len(self.touched) - 1, subscript, pointer
        if isinstance(op, Spoil):
            filled = self.slice.filled(op)
            numbers = tuple(number for number, key in enumerate(self.tracked) if key in filled)
            return "spoil", numbers, op.value, op.position
        result = None
        if op.result is not None:
            key, _ = self.compiler.key(op.result, op.frame)
            spoiled = self.writes(op.name) & self.follow if op.known else frozenset()
            result = (key, whole(op.result.type, not op.known and not op.pointers), spoiled)
            return "call", result[0], result[1], result[2]
        return "call", None, None, self.writes(op.name) & self.follow if op.known else frozenset()

    def _end(self, made: _Compiled, number: int) -> None:
        block = self.facts.flat.blocks[number]
        following = block.targets()
        if len(following) > 1 and number not in self.slice.branching:
            onward = self.facts.control_order()[0].get(number, -1)
            made.kind, made.targets = ("leave", ()) if onward == -1 else ("jump", (onward,))
            return
        match block.end:
            case Jump():
                made.kind, made.targets = "jump", following
            case Branch(condition=condition):
                made.kind, made.targets = "branch", following
                made.condition = self.compiler.expr(condition, block.frame)
                made.refine = tuple(self._refine(condition, block.frame))
                made.free = isinstance(condition.type, PointerType)
            case Switch(value=value, cases=cases):
                made.kind, made.targets = "switch", following
                made.condition = self.compiler.expr(value, block.frame)
                made.cases = tuple((case.low, case.high, case.target) for case in cases)
            case Return():
                made.kind = "leave"
            case Stop():
                made.kind = "stop"

    def _refine(self, condition: Expr, frame: str) -> "list[_Refine]":
        """The variables of a condition whose range it cuts."""
        while isinstance(condition, Cast):
            condition = condition.operand
        negated = False
        while isinstance(condition, Unary) and condition.op == "!":
            negated = not negated
            condition = condition.operand
            while isinstance(condition, Cast):
                condition = condition.operand
        zero: Code = lambda env: 0  # noqa: E731
        if isinstance(condition, Binary) and condition.op in NEGATED:
            operator = NEGATED[condition.op] if negated else condition.op
            sides = (
                (condition.left, operator, condition.right),
                (condition.right, MIRRORED[operator], condition.left),
            )
            return [
                _Refine(key, operator, self.compiler.expr(other, frame))
                for side, operator, other in sides
                for key in self._plain(side, frame)
            ]
        operator = "==" if negated else "!="
        return [_Refine(key, operator, zero) for key in self._plain(condition, frame)]

    def _plain(self, expr: Expr, frame: str) -> list[Key]:
        """The key of a variable that stands alone, through conversions that keep its value."""
        while isinstance(expr, Cast) and keeps(expr.operand.type, expr.type):
            expr = expr.operand
        if isinstance(expr, Load) and isinstance(expr.type, IntType):
            keys = place_keys(expr.place, frame, self.points)
            return [key for key in keys if len(keys) == 1 and (is_local(key) or key in self.follow)]
        return []

    # ------------------------------------------------------------------------------------------------------ run

    def run(self, values: Sequence[Value], budget: int) -> Run:
        """All paths from the given values of the tracked integers.

        Runs are remembered by the values that matter: what ``ends`` says of an integer that the function neither
        reads nor stores (``reads``) is that of the first run.
        """
        known = tuple(value for key, value in zip(self.tracked, values, strict=True) if key in self.reads)
        found = self._memory.get(known)
        if found is None:
            found = self._memory[known] = self._explore(values, budget)
        return found

    def _starts(self, values: Sequence[Value]) -> list[tuple[Env, bool]]:
        """The environments to start from: parameters that matter as data are split into slot numbers and the rest."""
        env: Env = dict(zip(self.tracked, values, strict=True))
        starts = [(env, True)]
        for parameter in self.facts.flat.function.parameters:
            key = ("local", "", parameter.identity)
            if key not in self.slice.needed:
                continue
            choices = self._choices(parameter, key in self.slice.data and len(starts) <= SPLIT)
            starts = [({**env, key: value}, sure and certain) for env, sure in starts for value, certain in choices]
        return starts

    def _choices(self, parameter: Variable, split: bool) -> list[tuple[Value, bool]]:
        type_ = parameter.type
        if not isinstance(type_, IntType):
            return [(None, True)]
        if not split:
            return [(Range(type_.low, type_.high, True), True)]
        top = min(self.capacity - 1, type_.high)
        sure = ("local", "", parameter.identity) not in self.facts.unchecked
        if top < SPLIT:
            found: list[tuple[Value, bool]] = [(value, sure) for value in range(top + 1)]
        else:
            found = [(value, sure) for value in (0, 1, top - 1, top)]
            found.append((Range(0, top, True), False))
        if top < type_.high:
            found.append((Range(top + 1, type_.high, True), False))
        if type_.low < 0:
            found.append((Range(type_.low, -1, True), False))
        return found

    def _explore(self, values: Sequence[Value], budget: int) -> Run:
        run = Run()
        sure: list[_Node] = []
        doubtful: list[_Node] = []
        for env, certain in self._starts(values):
            node = _Node(0, env, {}, certain, None)
            (sure if certain else doubtful).append(node)
        known: set[Any] = set()
        visits: dict[int, int] = defaultdict(int)
        while sure or doubtful:
            node = sure.pop() if sure else doubtful.pop()
            block = self.blocks[node.block]
            if block.joins:
                node.env = {
                    key: value for key, value in node.env.items() if not is_local(key) or key in block.live
                }
                mark = (node.block, frozenset(node.env.items()), tuple(sorted(node.moves.items())))
                if mark in known:
                    continue
                known.add(mark)
                visits[node.block] += 1
                if visits[node.block] > VISITS and not self._give_up(node, visits[node.block]):
                    run.cut = True
                    continue
            run.work += len(block.ops) + 1
            if run.work > budget:
                run.cut = True
                break
            if not self._perform(node, block, run):
                continue
            for following in self._following(node, block, run):
                (sure if following.certain else doubtful).append(following)
        return run

    def _give_up(self, node: "_Node", visits: int) -> bool:
        """Forget the exact values of local counters, so that a long loop comes to an end."""
        if visits > 3 * VISITS:
            return False
        for key, value in node.env.items():
            if is_local(key) and isinstance(value, int):
                node.env[key] = self._any(key)
        node.certain = False
        return True

    def _any(self, key: Key) -> Value:
        for variable in self.facts.flat.function.variables:
            if key == ("local", "", variable.identity):
                return whole(variable.type, False)
        return _ANYTHING

    def _perform(self, node: "_Node", block: _Compiled, run: Run) -> bool:
        """The operations of a block; False where the path ends in them."""
        env = node.env
        for kind, what, code, extra in block.ops:
            if kind == "set":
                value = code(env)
                roles, position, function = extra
                key = what
                if not isinstance(what, tuple):
                    target = what(env) if what is not None else None
                    key = target.key if isinstance(target, Ptr) else None
                if key is None:
                    continue
                if key in self.follow or roles:
                    self._move(node, key, value, roles, position, function, run)
                env[key] = value
                if self.mixed and key in self.follow:
                    # Another object of the type keeps the values that it had: both count from here on.
                    node.certain = False
                    self._rest(node, run)
            elif kind == "touch":
                self._touch(node, what, code(env), extra, run)
            elif kind == "spoil":
                for number in what:
                    cell = self.tracked[number]
                    node.moves.pop(number, None)
                    node.trace = (node.trace, extra, cell, env[cell], code)
                    env[cell] = code if code is not None else self._unknown_cell(cell)
                    node.certain = node.certain and code is not None
            elif kind == "call":
                self._rest(node, run)
                for cell in extra:
                    env[cell] = self._unknown_cell(cell)
                    node.certain = False
                if what is not None:
                    env[what] = code
            else:
                self._rest(node, run)
        return True

    def _unknown_cell(self, cell: Key) -> Value:
        return self.wholes.get(cell, _ANYTHING)

    def _move(
        self, node: "_Node", key: Key, value: Value, roles: Any, position: Position, function: str, run: Run
    ) -> None:
        """Book-keeping of an advance: what an index was before it, and what was added."""
        env = node.env
        if key in self.follow:
            before = env.get(key)
            node.trace = (node.trace, position, key, before, value)
        for number, role, by in roles:
            cell = self.tracked[number]
            now = env[cell]
            segment = node.moves.get(number)
            if role == "advance":
                if segment is not None and not segment.early:
                    self._close(node, number, run)
                    segment = None
                start = segment.start if segment is not None else now
                node.moves[number] = _Move(start, by, segment is not None and segment.stored, function, False)
            elif role == "wrap":
                if segment is None:
                    node.moves[number] = _Move(now, 0, False, function, False)
            elif role in ("before", "instead"):
                if segment is not None:
                    self._close(node, number, run)
                node.moves[number] = _Move(now, 0, False, function, role == "before")
            elif role in ("reset", "copy"):
                node.moves.pop(number, None)
        if key in self.follow:
            number = self.tracked.index(key)
            if number in node.moves:
                node.moves[number] = node.moves[number]._replace(stored=True)

    def _close(self, node: "_Node", number: int, run: Run) -> None:
        move = node.moves.pop(number)
        cell = self.tracked[number]
        now = node.env[cell]
        if move.stored and isinstance(move.start, int) and isinstance(now, int):
            pair = (cell, move.function, int(move.start), int(now), move.by)
            run.pairs[pair] = run.pairs.get(pair, False) or node.certain

    def _touch(self, node: "_Node", number: int, subscript: Value, pointer: Code | None, run: Run) -> None:
        touch = self.touched[number]
        if pointer is not None:
            base = pointer(node.env)
            if isinstance(base, Ptr):
                if base.key != (*touch.storage, "[]"):
                    return
                subscript = add_offsets(base.offset, subscript)
            else:
                subscript = None
        seen = run.touches.get(number)
        if seen is None:
            seen = run.touches[number] = Seen()
        if isinstance(subscript, int):
            if node.certain:
                known = seen.certain.get(subscript)
                if known is None and subscript not in seen.certain:
                    seen.certain[subscript] = (node.trace, subscript)
            elif subscript not in seen.doubtful:
                seen.doubtful[subscript] = (node.trace, subscript)
        elif subscript not in seen.doubtful:
            seen.doubtful[subscript] = (node.trace, subscript)

    def _rest(self, node: "_Node", run: Run) -> None:
        """The values that code outside can see now."""
        self._arrive(run, tuple(node.env[cell] for cell in self.tracked), node)

    def _arrive(self, run: Run, values: tuple[Value, ...], node: "_Node") -> None:
        known = run.ends.get(values)
        if known is None or (node.certain and not known[0]):
            run.ends[values] = (node.certain, node.trace)

    def _following(self, node: "_Node", block: _Compiled, run: Run) -> "list[_Node]":
        if block.kind == "jump":
            node.block = block.targets[0]
            return [node]
        if block.kind == "leave":
            for number in list(node.moves):
                self._close(node, number, run)
            self._arrive(run, tuple(node.env[cell] for cell in self.tracked), node)
            return []
        if block.condition is None:
            return []
        value = block.condition(node.env)
        if block.kind == "switch":
            return self._cases(node, block, value)
        if isinstance(value, int):
            node.block = block.targets[0 if value != 0 else 1]
            return [node]
        if isinstance(value, Ptr):
            node.block = block.targets[0]
            return [node]
        exact = value.exact if isinstance(value, Range) else block.free
        if isinstance(value, Range) and (value.low > 0 or value.high < 0):
            node.block = block.targets[0]
            return [node]
        found: list[_Node] = []
        for target, holds in ((block.targets[0], True), (block.targets[1], False)):
            found.extend(self._cut(node, target, exact, block.refine, holds))
        return found

    def _cases(self, node: "_Node", block: _Compiled, value: Value) -> "list[_Node]":
        if isinstance(value, int):
            node.block = next((to for low, high, to in block.cases if low <= value <= high), block.targets[-1])
            return [node]
        exact = isinstance(value, Range) and value.exact
        return [
            _Node(target, dict(node.env), dict(node.moves), node.certain and exact, node.trace)
            for target in dict.fromkeys(block.targets)
        ]

    def _cut(
        self, node: "_Node", target: int, exact: bool, refine: "tuple[_Refine, ...]", holds: bool
    ) -> "list[_Node]":
        """The nodes after one arm of an undecided branch, with the ranges that the condition leaves."""
        env = dict(node.env)
        certain = node.certain and exact
        split: Key | None = None
        for item in refine:
            value = env.get(item.key)
            if not isinstance(value, Range):
                continue
            other = item.other(node.env)
            operator = item.operator if holds else NEGATED[item.operator]
            cut = cut_range(value, operator, other)
            if cut is None:
                return []
            env[item.key] = cut.low if cut.low == cut.high else cut
            few = cut.low != cut.high and cut.high - cut.low < SPLIT
            if few and item.key in self.slice.data and is_local(item.key):
                split = item.key
        if split is None:
            return [_Node(target, env, dict(node.moves), certain, node.trace)]
        whole_range = env[split]
        return [
            _Node(target, {**env, split: value}, dict(node.moves), certain and whole_range.exact, node.trace)
            for value in range(whole_range.low, whole_range.high + 1)
        ]


class _Move(NamedTuple):
    """An advance under way: the value before, what was added (0: only wrapped so far), whether it was stored yet, the
    function, and whether a wrap was done ahead of the advance that is still to come."""

    start: Value
    by: int
    stored: bool
    function: str
    early: bool


@dataclass(slots=True)
class _Node:
    """A path's tip, with the advances that are under way, by the number of the integer."""

    block: int
    env: Env
    moves: dict[int, _Move]
    certain: bool
    trace: Trace
