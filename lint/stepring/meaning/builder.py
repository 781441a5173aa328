"""The workbench of lowering: blocks under construction, temporaries, scopes, jump targets.

Lowering functions take a ``Work`` as their first argument and append to its current block. Code that no path leads to
is still lowered (it may hold labels), into a block that nothing jumps to.
"""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning.models import integer
from stepring.meaning.scope import Scope
from stepring.meaning.types import (
    Assign,
    Block,
    Branch,
    CaseLabel,
    CType,
    Expr,
    FallThrough,
    IntType,
    Jump,
    Load,
    Object,
    Return,
    Statement,
    Stop,
    Switch,
    Terminator,
    Variable,
    VariablePlace,
)
from stepring.places import Notice, Position


@dataclass(slots=True)
class OpenBlock:
    """A block that is still being filled."""

    statements: list[Statement] = field(default_factory=list)
    terminator: Terminator | None = None


@dataclass(slots=True)
class OpenSwitch:
    """A ``switch`` whose body is being lowered."""

    control: IntType
    end: int
    depth: int
    cases: list[CaseLabel] = field(default_factory=list)
    default: tuple[int, Position] | None = None
    falls: list[FallThrough] = field(default_factory=list)
    unreached: list[Position] = field(default_factory=list)
    nested: bool = False
    # The last statement since the latest label, None right after a label: stacked labels do not fall through.
    latest: Position | None = None
    labelled: bool = False
    head_live: bool = True


@dataclass(slots=True)
class Work:
    """Everything that lowering one function changes."""

    scope: Scope
    function: str
    file: str
    returns: CType
    blocks: list[OpenBlock] = field(default_factory=list)
    current: int = 0
    reached: set[int] = field(default_factory=set)
    variables: dict[str, Variable] = field(default_factory=dict)
    objects: list[Object] = field(default_factory=list)
    breaks: list[int] = field(default_factory=list)
    continues: list[int] = field(default_factory=list)
    switches: list[OpenSwitch] = field(default_factory=list)
    labels: dict[str, int] = field(default_factory=dict)
    computed_gotos: list[int] = field(default_factory=list)
    depth: int = 0
    dead_blocks: set[int] = field(default_factory=set)
    temporaries: int = 0
    effects: dict[int, bool] = field(default_factory=dict)
    # Names whose address is taken somewhere in the function: a call or a store through a pointer can change them.
    addressed: frozenset[str] = frozenset()
    stored: dict[int, frozenset[str]] = field(default_factory=dict)
    at: Position = field(default_factory=lambda: Position("", 0))
    notices: list[Notice] = field(default_factory=list)

    @property
    def model(self) -> Any:
        return self.scope.file.model

    @property
    def live(self) -> bool:
        """Whether some path leads to the current end of the code."""
        return self.current in self.reached and self.blocks[self.current].terminator is None


def new_block(work: Work) -> int:
    """A fresh block's number; it does not become the current one."""
    work.blocks.append(OpenBlock())
    return len(work.blocks) - 1


def emit(work: Work, statement: Statement) -> None:
    """Append a statement to the current block."""
    if work.blocks[work.current].terminator is not None:
        work.current = new_block(work)
    work.blocks[work.current].statements.append(statement)


def finish(work: Work, terminator: Terminator) -> None:
    """End the current block; its successors count as reached if it does."""
    block = work.blocks[work.current]
    if block.terminator is not None:
        return
    block.terminator = terminator
    if work.current in work.reached:
        work.reached.update(successors(terminator))


def resume(work: Work, block: int) -> None:
    """Go on appending at ``block``."""
    work.current = block


def jump(work: Work, target: int) -> None:
    """End the current block with a jump."""
    finish(work, Jump(target))


def successors(terminator: Terminator) -> tuple[int, ...]:
    """The blocks that a terminator can lead to; one that several ways lead to stands there for each."""
    match terminator:
        case Jump(target=target):
            return (target,)
        case Branch(then=then, otherwise=otherwise):
            return (then, otherwise)
        case Switch(cases=cases, default=default):
            return (*(case.target for case in cases), default)
    return ()


def temporary(work: Work, type_: CType) -> VariablePlace:
    """A new temporary of the given type."""
    work.temporaries += 1
    name = f"%{work.temporaries}"
    variable = Variable(name, name, type_, "temporary")
    work.variables[name] = variable
    return VariablePlace(variable)


def saved(work: Work, expr: Expr, at: Position | None = None) -> Expr:
    """The expression's value now, safe from later side effects: a temporary where it reads memory."""
    if not reads_memory(expr):
        return expr
    place = temporary(work, expr.type)
    emit(work, Assign(place, expr, at or work.at))
    return Load(place, expr.type)


def reads_memory(expr: Expr, steady: Callable[[Variable], bool] = lambda variable: False) -> bool:
    """Whether an expression's value depends on memory that a statement could change.

    Temporaries are written once; ``steady`` says of which other variables it is known that they stay.
    """
    stack: list[Any] = [expr]
    while stack:
        node = stack.pop()
        if isinstance(node, Load):
            place = node.place
            if not isinstance(place, VariablePlace):
                return True
            if place.variable.storage != "temporary" and not steady(place.variable):
                return True
        for name in ("operand", "left", "right", "pointer", "steps", "index", "base", "place"):
            child = getattr(node, name, None)
            if child is not None:
                stack.append(child)
    return False


def int_type(work: Work) -> IntType:
    """``int`` of the data model."""
    return integer(work.model, "int")


def close(work: Work) -> tuple[Block, ...]:
    """All blocks, finished; one without terminator runs off the function's end or is never reached."""
    blocks = []
    for number, block in enumerate(work.blocks):
        terminator = block.terminator
        if terminator is None:
            terminator = Return(None, work.at) if number in work.reached else Stop("not reached")
        blocks.append(Block(tuple(block.statements), terminator))
    return tuple(blocks)
