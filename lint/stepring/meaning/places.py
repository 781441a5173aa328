"""Lowering of lvalues: from names, members, subscripts and pointers to places (N1570 6.3.2.1, 6.5.2).

The address of a known place gives back the place, so that ``*(buf + i)`` and ``buf[i]`` are one thing. What leads to
a place is saved in temporaries where a later side effect could change it.
"""

from typing import Any

from pycparser import c_ast

from stepring.meaning.builder import (
    Work,
    emit,
    int_type,
    reads_memory,
    saved,
    temporary,
)
from stepring.meaning.lowering import arithmetic, effect, has_effects, value
from stepring.meaning.scope import (
    build,
    find_field,
    position,
)
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    FloatType,
    FunctionType,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    PointerType,
    StructType,
    UnknownType,
    Variable,
    VariablePlace,
)
from stepring.places import Position


def place(work: Work, node: Any) -> PlaceExpr | None:
    """The place that an lvalue denotes, or None where the node is no lvalue."""
    match node:
        case c_ast.ID():
            symbol = work.scope.lookup(node.name)
            if isinstance(symbol, Variable):
                work.variables[symbol.identity] = symbol
                return VariablePlace(symbol)
            if symbol is None and node.name not in ("__func__", "__FUNCTION__", "__PRETTY_FUNCTION__"):
                # A name without declaration: with a header missing, most often a register.
                unknown = Variable(node.name, node.name, int_type(work), "extern", volatile=True)
                work.variables[unknown.identity] = unknown
                return VariablePlace(unknown)
            return None
        case c_ast.StructRef():
            return member(work, node)
        case c_ast.ArrayRef():
            base, subscript = node.name, node.subscript
            pointer = value(work, base)
            if not isinstance(pointer.type, PointerType) and not isinstance(pointer.type, UnknownType):
                other = value(work, subscript)
                if isinstance(other.type, PointerType):  # 6.5.2.1p2: E1[E2] and E2[E1] are the same
                    return deref(
                        work, PointerStep(other, pointer, other.type, position(subscript, work.at)), position(node)
                    )
            if has_effects(work, subscript):
                pointer = kept(work, pointer, subscript)
            index = arithmetic(work, value(work, subscript))
            whole = pointer.type if isinstance(pointer.type, PointerType) else pointer_to(work, int_type(work))
            return deref(
                work, PointerStep(pointer, index, whole, position(subscript, work.at)), position(node, work.at)
            )
        case c_ast.UnaryOp(op="*"):
            return deref(work, value(work, node.expr), position(node, work.at))
        case c_ast.CompoundLiteral():
            type_ = build(work.scope, node.type)
            if isinstance(type_, ArrayType) and type_.length is None:
                type_ = ArrayType(type_.element, work.scope.evaluator.initial_length(work.scope, type_, node.init))
            target = temporary(work, type_)
            work.scope.evaluator.initialise(work, target, node.init)
            return target
        case c_ast.Cast() if has_effects(work, node.expr) is False:
            return None
        case c_ast.ExprList():
            for item in node.exprs[:-1]:
                effect(work, item)
            return place(work, node.exprs[-1])
    return None


def member(work: Work, node: Any) -> PlaceExpr:
    """``a.b`` and ``p->b``, through unnamed members."""
    at = position(node.field, work.at)
    base: PlaceExpr | None
    if node.type == "->":
        pointer = value(work, node.name)
        base = deref(work, pointer, at)
    else:
        base = place(work, node.name)
        if base is None:
            whole = value(work, node.name)
            base = temporary(work, whole.type)
            emit(work, Assign(base, whole, at))
    name = node.field.name
    if isinstance(base.type, StructType):
        identity = base.type.identity
        for struct, found in find_field(work.scope.file.structs, identity, name):
            base = MemberPlace(base, struct, found.name, found.type, found.volatile)
            if found.name == name:
                return base
        return MemberPlace(base, identity, name, UnknownType(name))
    shown = base.type.name if isinstance(base.type, UnknownType) else "unknown"
    return MemberPlace(base, f"{shown}@", name, UnknownType(name))


def deref(work: Work, pointer: Expr, at: Position) -> PlaceExpr:
    """``*pointer``; the address of a known place gives back that place, an element where an array decayed."""
    if isinstance(pointer, AddressOf):
        if isinstance(pointer.place.type, ArrayType) and not _whole(pointer):
            zero = Const(0, int_type(work))
            return ElementPlace(pointer.place, zero, pointer.place.type.element, at)
        return pointer.place
    if isinstance(pointer, PointerStep) and isinstance(pointer.pointer, AddressOf):
        inner = pointer.pointer
        if isinstance(inner.place.type, ArrayType) and not _whole(inner):
            return ElementPlace(inner.place, pointer.steps, inner.place.type.element, pointer.position or at)
    type_ = pointer.type
    return DerefPlace(pointer, type_.to if isinstance(type_, PointerType) else UnknownType("pointee"), at)


def _whole(pointer: AddressOf) -> bool:
    return isinstance(pointer.type, PointerType) and pointer.type.to == pointer.place.type


def pointer_to(work: Work, to: CType) -> PointerType:
    return PointerType(to, work.model.pointer)


def load(work: Work, where: PlaceExpr, at: Position | None = None) -> Expr:
    """The value in a place; arrays and functions decay to pointers (6.3.2.1p3, p4)."""
    if isinstance(where.type, ArrayType):
        return AddressOf(where, pointer_to(work, where.type.element))
    if isinstance(where.type, FunctionType):
        return AddressOf(where, pointer_to(work, where.type))
    return Load(where, where.type, at)


def is_volatile(where: PlaceExpr) -> bool:
    while True:
        match where:
            case VariablePlace(variable=variable):
                return variable.volatile
            case MemberPlace(volatile=True):
                return True
            case MemberPlace(base=base) | ElementPlace(base=base):
                where = base
            case _:
                return False


def settled(work: Work, where: PlaceExpr, *later: Any) -> PlaceExpr:
    """The same place, with the values that lead to it kept from what the nodes evaluated later do."""
    match where:
        case MemberPlace(base=base, struct=struct, name=name, type=type_, volatile=volatile):
            return MemberPlace(settled(work, base, *later), struct, name, type_, volatile)
        case ElementPlace(base=base, index=index, type=type_, position=at):
            return ElementPlace(settled(work, base, *later), kept(work, index, *later), type_, at)
        case DerefPlace(
            pointer=PointerStep(pointer=pointer, steps=steps, type=step_type, position=step_at), type=type_, position=at
        ):
            moved = PointerStep(kept(work, pointer, *later), kept(work, steps, *later), step_type, step_at)
            return DerefPlace(moved, type_, at)
        case DerefPlace(pointer=pointer, type=type_, position=at):
            return DerefPlace(kept(work, pointer, *later), type_, at)
    return where


def kept(work: Work, expr: Expr, *later: Any) -> Expr:
    """A value kept from what the nodes evaluated later do: saved where they could change it.

    The address of a place stays the address of that place, so that ``q->slots[q->head++]`` is still an element of the
    member ``slots``.
    """
    if isinstance(expr, AddressOf):
        return AddressOf(settled(work, expr.place, *later), expr.type)
    changed = frozenset[str]().union(*(_stored(work, node) for node in later))

    def steady(variable: Variable) -> bool:
        return (
            variable.storage in ("automatic", "parameter")
            and not variable.volatile
            and isinstance(variable.type, IntType | FloatType | PointerType)
            and variable.name not in work.addressed
            and variable.name not in changed
        )

    return saved(work, expr) if reads_memory(expr, steady) else expr


def _stored(work: Work, node: Any) -> frozenset[str]:
    """The names that evaluating a node stores into directly."""
    known = work.stored.get(id(node))
    if known is None:
        names: set[str] = set()
        stack = [node]
        while stack:
            item = stack.pop()
            targets: list[Any] = []
            if isinstance(item, c_ast.Assignment):
                targets = [item.lvalue]
            elif isinstance(item, c_ast.UnaryOp) and item.op in ("++", "--", "p++", "p--"):
                targets = [item.expr]
            elif isinstance(item, c_ast.FuncCall) and item.args is not None:
                if isinstance(item.name, c_ast.ID) and item.name.name.startswith("__stepring_"):
                    targets = item.args.exprs
            names.update(target.name for target in targets if isinstance(target, c_ast.ID))
            stack.extend(child for child in item if child is not None)
        known = work.stored[id(node)] = frozenset(names)
    return known


def taken_labels(body: Any) -> tuple[str, ...]:
    """The labels whose address is taken in a function's body, also in the initialisers of its statics."""
    names: list[str] = []
    stack = [body]
    while stack:
        item = stack.pop()
        if isinstance(item, c_ast.FuncCall) and getattr(item.name, "name", "") == "__stepring_label":
            names.extend(argument.name for argument in item.args.exprs)
        stack.extend(child for child in item if child is not None)
    return tuple(sorted(set(names)))


def addressed_names(body: Any) -> frozenset[str]:
    """The names whose address is taken with ``&`` somewhere in a function's body."""
    names: set[str] = set()
    stack = [body]
    while stack:
        item = stack.pop()
        if isinstance(item, c_ast.UnaryOp) and item.op == "&" and isinstance(item.expr, c_ast.ID):
            names.add(item.expr.name)
        stack.extend(child for child in item if child is not None)
    return frozenset(names)
