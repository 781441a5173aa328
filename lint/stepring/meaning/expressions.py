"""Lowering of expressions: from C's operators to pure typed expressions and the statements before them.

Operands are evaluated from left to right. C leaves the order open (N1570 6.5p3); any fixed order is one of those that a
compiler may choose. When an operand to the right has side effects, what stands left of it is saved in a
temporary first. Conversions of 6.3 become explicit here, in ``converted``.
"""

from typing import Any

from pycparser import c_ast

from stepring.meaning.builder import (
    Work,
    emit,
    finish,
    int_type,
    jump,
    new_block,
    resume,
    saved,
    temporary,
)
from stepring.meaning.constants import character, element_type, number, text
from stepring.meaning.fold import apply_constant, apply_unary
from stepring.meaning.lowering import (
    COMPARISONS,
    arithmetic,
    condition,
    converted,
    discard,
    effect,
    handle,
    handle_effect,
    has_effects,
    truth,
    value,
)
from stepring.meaning.models import common, integer
from stepring.meaning.places import deref, is_volatile, kept, load, member, place, pointer_to, settled
from stepring.meaning.scope import (
    EnumConstant,
    FunctionSymbol,
    align_of,
    build,
    position,
    size_of,
)
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Binary,
    Branch,
    Clobber,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    FloatConst,
    FloatType,
    FunctionName,
    FunctionType,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    TextConst,
    Unary,
    Unknown,
    UnknownType,
    VariablePlace,
    VoidType,
)
from stepring.places import Position


def _name(work: Work, node: Any) -> Expr:
    symbol = work.scope.lookup(node.name)
    if isinstance(symbol, EnumConstant):
        return Const(symbol.value, symbol.type, position(node, work.at), node.name)
    if isinstance(symbol, FunctionSymbol):
        return FunctionName(node.name, symbol.type)
    if node.name in ("__func__", "__FUNCTION__", "__PRETTY_FUNCTION__"):
        return TextConst(work.function, pointer_to(work, integer(work.model, "char")))
    where = place(work, node)
    if where is None:
        return Unknown(int_type(work), f"the name {node.name}")
    return load(work, where, position(node, work.at))


def _constant(work: Work, node: Any) -> Expr:
    at = position(node, work.at)
    if node.type == "string":
        return TextConst(text(node.value), pointer_to(work, element_type(work.model, node.value)))
    if node.type == "char" or node.value[-1:] == "'":
        return Const(character(node.value, work.model.char_signed), int_type(work), at)
    found = number(work.model, node.value)
    if isinstance(found, float):
        single = node.value[-1:] in "fF"
        return FloatConst(found, FloatType("float", 32) if single else FloatType("double", work.model.double))
    if found is None:
        return Unknown(int_type(work), f"the constant {node.value}")
    return Const(found[0], found[1], at)


def _lvalue(work: Work, node: Any) -> Expr:
    where = place(work, node)
    if where is None:
        return Unknown(int_type(work), "an lvalue")
    at = where.position if isinstance(where, ElementPlace | DerefPlace) else None
    return load(work, where, at or position(node, work.at))


def _member(work: Work, node: Any) -> Expr:
    return load(work, member(work, node), position(node.field, work.at))


def _unary(work: Work, node: Any) -> Expr:
    op = node.op
    if op in ("++", "--", "p++", "p--"):
        return step(work, node, wanted=True)
    if op in ("sizeof", "_Alignof"):
        return _size(work, node)
    if op == "&":
        inner = node.expr
        where = place(work, inner)
        if where is None:
            found = value(work, inner)
            return found if isinstance(found, FunctionName) else Unknown(pointer_to(work, found.type), "an address")
        if isinstance(where, DerefPlace):
            return where.pointer
        return AddressOf(where, pointer_to(work, where.type))
    if op == "*":
        operand = value(work, node.expr)
        if isinstance(operand, FunctionName) or isinstance(operand.type, FunctionType):
            return operand
        return load(work, deref(work, operand, position(node, work.at)), position(node, work.at))
    if op == "!":
        operand = value(work, node.expr)
        if isinstance(operand, Const):
            return Const(int(operand.value == 0), int_type(work), position(node, work.at))
        return Unary("!", operand, int_type(work))
    operand = arithmetic(work, value(work, node.expr))
    if op == "+":
        return operand
    if isinstance(operand, Const):
        result = apply_unary(op, operand.value, operand.type)
        if result is not None:
            return Const(result, operand.type, position(node, work.at))
    if isinstance(operand, FloatConst) and op == "-":
        return FloatConst(-operand.value, operand.type)
    return Unary(op, operand, operand.type)


def _size(work: Work, node: Any) -> Expr:
    if isinstance(node.expr, c_ast.Typename):
        type_ = build(work.scope, node.expr)
    else:
        type_ = work.scope.evaluator.type_of(work.scope, node.expr)
    structs = work.scope.file.structs
    size = size_of(structs, type_)
    wanted = integer(work.model, work.model.size_type)
    if node.op == "_Alignof":
        return Const(align_of(structs, work.model, type_), wanted, position(node, work.at))
    return (
        Unknown(wanted, "the size of an incomplete type")
        if size is None
        else Const(size, wanted, position(node, work.at))
    )


def _binary(work: Work, node: Any) -> Expr:
    if node.op in ("&&", "||"):
        return _logical(work, node)
    left = value(work, node.left)
    if has_effects(work, node.right):
        left = kept(work, left, node.right)
    right = value(work, node.right)
    return binary(work, node.op, left, right, position(node, work.at))


def binary(work: Work, op: str, left: Expr, right: Expr, at: Position) -> Expr:
    """A binary operator on two values, with the usual conversions (6.3.1.8, 6.5.5 to 6.5.12)."""
    int_ = int_type(work)
    left_pointer = isinstance(left.type, PointerType)
    right_pointer = isinstance(right.type, PointerType)
    if op in COMPARISONS and (left_pointer or right_pointer):
        type_ = left.type if left_pointer else right.type
        return _folded(op, converted(work, left, type_), converted(work, right, type_), int_, at)
    if op == "-" and left_pointer and right_pointer:
        return PointerDistance(left, right, integer(work.model, work.model.ptrdiff_type))
    if op in ("+", "-") and left_pointer:
        steps = arithmetic(work, right)
        return PointerStep(left, steps if op == "+" else negated(work, steps), left.type, at)
    if op == "+" and right_pointer:
        return PointerStep(right, arithmetic(work, left), right.type, at)
    left, right = arithmetic(work, left), arithmetic(work, right)
    if op in ("<<", ">>"):
        return _folded(op, left, right, left.type, at)
    type_ = common(work.model, left.type, right.type)
    left, right = converted(work, left, type_), converted(work, right, type_)
    return _folded(op, left, right, int_ if op in COMPARISONS else type_, at)


def negated(work: Work, steps: Expr) -> Expr:
    """Minus a number of elements, in ``ptrdiff_t`` so that an unsigned count steps back."""
    signed = converted(work, steps, integer(work.model, work.model.ptrdiff_type))
    if isinstance(signed, Const):
        return Const(-signed.value, signed.type, signed.position)
    return Unary("-", signed, signed.type)


def _folded(op: str, left: Expr, right: Expr, type_: CType, at: Position) -> Expr:
    if isinstance(left, Const) and isinstance(right, Const):
        result = apply_constant(op, left.value, right.value, type_)
        if result is not None:
            return Const(result, type_, left.position or at)
    return Binary(op, left, right, type_, at)  # type: ignore[arg-type]


def settled_condition(work: Work, node: Any) -> bool | None:
    """Whether a condition is a constant expression, and true; None where it is not constant."""
    stack = [node]
    while stack:
        item = stack.pop()
        if isinstance(item, c_ast.ID):
            if not isinstance(work.scope.lookup(item.name), EnumConstant):
                return None
        elif isinstance(item, c_ast.UnaryOp) and item.op in ("sizeof", "_Alignof"):
            continue
        elif isinstance(item, c_ast.BinaryOp | c_ast.UnaryOp | c_ast.TernaryOp):
            stack.extend(item)
        elif isinstance(item, c_ast.Cast):
            stack.append(item.expr)
        elif not isinstance(item, c_ast.Constant) or item.type == "string":
            return None
    found = work.scope.evaluator.constant(work.scope, node)
    if isinstance(found, FloatConst):
        return bool(found.value)
    return bool(found.value) if isinstance(found, Const) else None


def _logical(work: Work, node: Any) -> Expr:
    int_ = int_type(work)
    left_settled = settled_condition(work, node.left)
    if left_settled is (node.op == "||"):
        return Const(int(left_settled), int_, position(node, work.at))
    if left_settled is not None:
        right = truth(work, value(work, node.right))
        if isinstance(right, Const):
            return Const(int(right.value != 0), int_, position(node, work.at))
        return (
            right
            if isinstance(right, Binary) and right.op in COMPARISONS
            else Binary("!=", right, converted(work, Const(0, int_), right.type), int_)
        )
    result = temporary(work, int_)
    yes, no, after = new_block(work), new_block(work), new_block(work)
    at = position(node, work.at)
    condition(work, node, yes, no)
    for block, number_ in ((yes, 1), (no, 0)):
        resume(work, block)
        emit(work, Assign(result, Const(number_, int_), at))
        jump(work, after)
    resume(work, after)
    return Load(result, int_)


def _conditional(work: Work, node: Any) -> Expr:
    same = isinstance(node.iftrue, c_ast.ID) and node.iftrue.name == "__stepring_same"
    at = position(node, work.at)
    first: Expr | None = None
    settled_to = None if same else settled_condition(work, node.cond)
    if settled_to is not None:
        # The arm that is not evaluated still takes part in the result's type (6.5.15p5).
        chosen = value(work, node.iftrue if settled_to else node.iffalse)
        other = work.scope.evaluator.type_of(work.scope, node.iffalse if settled_to else node.iftrue)
        if isinstance(chosen.type, IntType | FloatType) and isinstance(other, IntType | FloatType):
            return converted(work, chosen, common(work.model, chosen.type, other))
        return chosen
    then, otherwise, after = new_block(work), new_block(work), new_block(work)
    if same:
        first = saved(work, value(work, node.cond))
        finish(work, Branch(truth(work, first), then, otherwise, at))
    else:
        condition(work, node.cond, then, otherwise)
    resume(work, then)
    left = first if first is not None else value(work, node.iftrue)
    then_end = work.current
    resume(work, otherwise)
    right = value(work, node.iffalse)
    type_ = _conditional_type(work, left, right)
    if isinstance(type_, VoidType):
        jump(work, after)
        resume(work, then_end)
        jump(work, after)
        resume(work, after)
        return Unknown(type_, "void")
    result = temporary(work, type_)
    emit(work, Assign(result, converted(work, right, type_), position(node.iffalse, at)))
    jump(work, after)
    resume(work, then_end)
    emit(work, Assign(result, converted(work, left, type_), position(node.iftrue, at)))
    jump(work, after)
    resume(work, after)
    return Load(result, type_)


def _conditional_type(work: Work, left: Expr, right: Expr) -> CType:
    if isinstance(left.type, IntType | FloatType) and isinstance(right.type, IntType | FloatType):
        return common(work.model, left.type, right.type)
    if isinstance(left.type, VoidType) or isinstance(right.type, VoidType):
        return VoidType()
    if isinstance(left.type, PointerType):
        null = isinstance(left, Const) and left.value == 0 and isinstance(right.type, PointerType)
        return right.type if null else left.type
    if isinstance(right.type, PointerType):
        return right.type
    return right.type if isinstance(left.type, UnknownType) else left.type


def _cast(work: Work, node: Any) -> Expr:
    type_ = build(work.scope, node.to_type)
    return converted(work, value(work, node.expr), type_, written=True)


def _comma(work: Work, node: Any) -> Expr:
    for item in node.exprs[:-1]:
        effect(work, item)
    return value(work, node.exprs[-1])


def _assignment(work: Work, node: Any) -> Expr:
    return assignment(work, node, wanted=True)


def assignment(work: Work, node: Any, *, wanted: bool) -> Expr:
    """``=`` and the compound assignments (6.5.16); the result is the value stored."""
    at = position(node, work.at)
    target = place(work, node.lvalue)
    if target is None:
        result = value(work, node.rvalue)
        emit(work, Clobber((), "a store that could not be resolved", at))
        return result
    if has_effects(work, node.rvalue):
        target = settled(work, target, node.rvalue)
    if node.op == "=":
        new = value(work, node.rvalue)
    else:
        right_first = has_effects(work, node.rvalue)
        right = value(work, node.rvalue) if right_first else None
        old = load(work, target, at)
        new = binary(work, node.op[:-1], old, right if right is not None else value(work, node.rvalue), at)
    new = converted(work, new, target.type)
    return store(work, target, new, at, wanted)


def store(work: Work, target: PlaceExpr, new: Expr, at: Position, wanted: bool) -> Expr:
    """Store, and give the stored value back: reloaded from plain memory, kept apart for volatile objects."""
    if wanted and (is_volatile(target) or not isinstance(target, VariablePlace | MemberPlace)):
        new = saved(work, new, at)
        emit(work, Assign(target, new, at))
        return new
    emit(work, Assign(target, new, at))
    if not wanted or isinstance(new, Const):
        return new
    return Load(target, target.type, at)


def step(work: Work, node: Any, *, wanted: bool) -> Expr:
    """``++`` and ``--``, before and after (6.5.2.4, 6.5.3.1)."""
    at = position(node, work.at)
    target = place(work, node.expr)
    if target is None:
        return Unknown(int_type(work), "a step of something that is no place")
    old = load(work, target, at)
    after = node.op.startswith("p")
    if wanted and after:
        old = saved(work, old, at)
    one = Const(1, int_type(work))
    new = converted(work, binary(work, "+" if "+" in node.op else "-", old, one, at), target.type)
    result = store(work, target, new, at, wanted and not after)
    return old if after else result


def _unary_effect(work: Work, node: Any) -> None:
    if node.op in ("++", "--", "p++", "p--"):
        step(work, node, wanted=False)
    else:
        discard(work, _unary(work, node), position(node, work.at))


def _comma_effect(work: Work, node: Any) -> None:
    for item in node.exprs:
        effect(work, item)


def _cast_effect(work: Work, node: Any) -> None:
    effect(work, node.expr)


def _assignment_effect(work: Work, node: Any) -> None:
    assignment(work, node, wanted=False)


for _kind, _handler in (
    (c_ast.ID, _name),
    (c_ast.Constant, _constant),
    (c_ast.ArrayRef, _lvalue),
    (c_ast.CompoundLiteral, _lvalue),
    (c_ast.StructRef, _member),
    (c_ast.UnaryOp, _unary),
    (c_ast.BinaryOp, _binary),
    (c_ast.TernaryOp, _conditional),
    (c_ast.Cast, _cast),
    (c_ast.ExprList, _comma),
    (c_ast.Assignment, _assignment),
):
    handle(_kind, _handler)
handle_effect(c_ast.UnaryOp, _unary_effect)
handle_effect(c_ast.ExprList, _comma_effect)
handle_effect(c_ast.Cast, _cast_effect)
handle_effect(c_ast.Assignment, _assignment_effect)
