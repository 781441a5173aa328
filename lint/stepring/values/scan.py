"""Walking the IR: the expressions and places in a statement, the parts of an expression."""

from collections.abc import Iterator

from stepring.meaning.types import (
    AddressOf,
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    Return,
    Statement,
    Switch,
    Terminator,
    Unary,
    VariablePlace,
)


def expressions_of(step: Statement | Terminator) -> tuple[Expr, ...]:
    """The expressions that a statement or terminator evaluates, without those inside the places it writes."""
    if isinstance(step, Assign):
        return (step.value,)
    if isinstance(step, Call):
        return (step.callee, *step.arguments)
    if isinstance(step, Branch):
        return (step.condition,)
    if isinstance(step, Switch):
        return (step.value,)
    if isinstance(step, Return) and step.value is not None:
        return (step.value,)
    return ()


def places_of(step: Statement) -> tuple[PlaceExpr, ...]:
    """The places that a statement writes."""
    if isinstance(step, Assign):
        return (step.place,)
    if isinstance(step, Call):
        return (step.result,) if step.result is not None else ()
    return step.places if isinstance(step, Clobber) else ()


def parts_of(expression: Expr) -> tuple[Expr, ...]:
    """The operands of an expression; a place's own expressions are reached through ``inside_place``."""
    if isinstance(expression, (Unary, Cast)):
        return (expression.operand,)
    if isinstance(expression, (Binary, PointerDistance)):
        return (expression.left, expression.right)
    if isinstance(expression, PointerStep):
        return (expression.pointer, expression.steps)
    return ()


def walk_expression(expression: Expr) -> Iterator[Expr]:
    """The expression and all its operands, without those inside places."""
    stack = [expression]
    while stack:
        part = stack.pop()
        yield part
        stack.extend(parts_of(part))


def inside_place(place: PlaceExpr) -> Iterator[Expr]:
    """The index and pointer expressions that a place is found with."""
    while True:
        if isinstance(place, DerefPlace):
            yield place.pointer
            return
        if isinstance(place, ElementPlace):
            yield place.index
        if not isinstance(place, (ElementPlace, MemberPlace)):
            return
        place = place.base


def walk_deep(expression: Expr) -> Iterator[Expr]:
    """The expression and everything that is evaluated for it, those inside places included."""
    stack = [expression]
    while stack:
        part = stack.pop()
        yield part
        stack.extend(parts_of(part))
        if isinstance(part, (Load, AddressOf)):
            stack.extend(inside_place(part.place))


def places_in(function: Function) -> Iterator[PlaceExpr]:
    """Every place that the function writes or loads, its parameters first; some more than once."""
    for parameter in function.parameters:
        yield VariablePlace(parameter)
    for block in function.blocks:
        for statement in block.statements:
            for place in places_of(statement):
                yield place
                for inner in inside_place(place):
                    yield from _loaded(inner)
            for expression in expressions_of(statement):
                yield from _loaded(expression)
        for expression in expressions_of(block.terminator):
            yield from _loaded(expression)


def _loaded(expression: Expr) -> Iterator[PlaceExpr]:
    for part in walk_deep(expression):
        if isinstance(part, Load):
            yield part.place
