"""Lowering of expressions: from C's operators to pure typed expressions and the statements before them.

Operands are evaluated from left to right. C leaves the order open (N1570 6.5p3); any fixed order is one of those that a
compiler may choose. When an operand to the right has side effects, what stands left of it is saved in a
temporary first. Conversions of 6.3 become explicit here, in ``converted``.
"""

from collections.abc import Callable
from typing import Any

from pycparser import c_ast

from stepring.meaning.builder import (
    Work,
    emit,
    finish,
    int_type,
    jump,
    new_block,
    reads_memory,
    resume,
    saved,
    temporary,
)
from stepring.meaning.constants import character, element_type, number, text
from stepring.meaning.fold import apply_constant, apply_unary, convert
from stepring.meaning.models import common, integer, promoted
from stepring.meaning.scope import (
    EnumConstant,
    FunctionSymbol,
    align_of,
    build,
    find_field,
    position,
    size_of,
)
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
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
    Stop,
    StructType,
    TextConst,
    Unary,
    Unknown,
    UnknownType,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.places import Position

COMPARISONS = frozenset(("<", "<=", ">", ">=", "==", "!="))
NO_RETURN = frozenset(
    {
        *("abort", "exit", "_exit", "_Exit", "quick_exit", "longjmp", "siglongjmp", "thrd_exit", "pthread_exit"),
        *("__assert_fail", "__assert_func", "__builtin_trap", "__builtin_unreachable", "__builtin_abort"),
    }
)


# ------------------------------------------------------------------------------------------------------ conversions


def converted(work: Work, expr: Expr, type_: CType, written: bool = False) -> Expr:
    """``expr`` converted to ``type_``; constants at once, with their spelling's place kept."""
    have = expr.type
    if have == type_:
        if isinstance(expr, Const) and expr.type is not type_:
            return Const(expr.value, type_, expr.position, expr.name)
        return expr
    if isinstance(type_, VoidType):
        return expr
    if isinstance(expr, Const) and isinstance(type_, IntType | PointerType):
        return Const(convert(expr.value, type_), type_, expr.position, expr.name)
    if isinstance(expr, Const) and isinstance(type_, FloatType):
        return FloatConst(float(expr.value), type_)
    if isinstance(expr, FloatConst) and isinstance(type_, FloatType):
        return FloatConst(expr.value, type_)
    if isinstance(have, StructType) or isinstance(type_, StructType):
        return expr if isinstance(have, StructType) else Unknown(type_, "conversion to a structure")
    return Cast(expr, type_, written)


def arithmetic(work: Work, expr: Expr) -> Expr:
    """``expr`` after the integer promotions; a value of unknown type counts as ``int``."""
    type_ = expr.type
    if isinstance(type_, IntType):
        return converted(work, expr, promoted(work.model, type_))
    if isinstance(type_, FloatType):
        return expr
    if isinstance(type_, PointerType):
        return converted(work, expr, integer(work.model, work.model.size_type))
    return converted(work, expr, int_type(work))


# ------------------------------------------------------------------------------------------------------ entry points


def value(work: Work, node: Any) -> Expr:
    """The value of an expression, statements for its side effects having been emitted."""
    handler = _VALUES.get(type(node))
    if handler is None:
        return Unknown(int_type(work), f"expression {type(node).__name__}")
    return handler(work, node)


def effect(work: Work, node: Any) -> None:
    """Evaluate an expression for its side effects only."""
    if isinstance(node, c_ast.Assignment):
        assignment(work, node, wanted=False)
    elif isinstance(node, c_ast.UnaryOp) and node.op in ("++", "--", "p++", "p--"):
        step(work, node, wanted=False)
    elif isinstance(node, c_ast.FuncCall):
        call(work, node, wanted=False)
    elif isinstance(node, c_ast.ExprList):
        for item in node.exprs:
            effect(work, item)
    elif isinstance(node, c_ast.Cast):
        effect(work, node.expr)
    elif isinstance(node, c_ast.TernaryOp) and has_effects(work, node):
        then, otherwise, after = new_block(work), new_block(work), new_block(work)
        condition(work, node.cond, then, otherwise)
        for block, arm in ((then, node.iftrue), (otherwise, node.iffalse)):
            resume(work, block)
            effect(work, arm)
            jump(work, after)
        resume(work, after)
    else:
        discard(work, value(work, node), position(node, work.at))


def discard(work: Work, expr: Expr, at: Position) -> None:
    """Evaluate a value that nothing uses: it may read a device's register, or do what is undefined."""
    inner = expr
    while isinstance(inner, Cast):
        inner = inner.operand
    match inner:
        case Const() | FloatConst() | TextConst() | AddressOf() | FunctionName() | Unknown():
            return
        case Load(place=VariablePlace(variable=variable)) if not variable.volatile:
            return  # ``(void)unused;``
    if not isinstance(expr.type, VoidType | UnknownType | FunctionType):
        emit(work, Assign(temporary(work, expr.type), expr, at))


def condition(work: Work, node: Any, then: int, otherwise: int) -> None:
    """Branch on an expression; ``&&``, ``||`` and ``!`` become control flow (6.5.13, 6.5.14)."""
    if isinstance(node, c_ast.BinaryOp) and node.op in ("&&", "||"):
        middle = new_block(work)
        if node.op == "&&":
            condition(work, node.left, middle, otherwise)
        else:
            condition(work, node.left, then, middle)
        resume(work, middle)
        condition(work, node.right, then, otherwise)
        return
    if isinstance(node, c_ast.UnaryOp) and node.op == "!":
        condition(work, node.expr, otherwise, then)
        return
    if isinstance(node, c_ast.ExprList):
        for item in node.exprs[:-1]:
            effect(work, item)
        condition(work, node.exprs[-1], then, otherwise)
        return
    test = value(work, node)
    finish(work, Branch(truth(work, test), then, otherwise, position(node, work.at)))


def truth(work: Work, test: Expr) -> Expr:
    """An expression that is not zero exactly if ``test`` compares unequal to zero."""
    if isinstance(test, Binary) and test.op in COMPARISONS:
        return test
    if isinstance(test.type, FloatType):
        return Binary("!=", test, FloatConst(0.0, test.type), int_type(work))
    return test


def has_effects(work: Work, node: Any) -> bool:
    """Whether evaluating a node changes anything (assignment, step, call, statement expression)."""
    if node is None:
        return False
    known = work.effects.get(id(node))
    if known is not None:
        return known
    if isinstance(node, c_ast.Assignment | c_ast.FuncCall | c_ast.Compound) or (
        isinstance(node, c_ast.UnaryOp) and node.op in ("++", "--", "p++", "p--")
    ):
        result = True
    elif isinstance(node, c_ast.UnaryOp) and node.op in ("sizeof", "_Alignof"):
        result = False
    else:
        result = any(has_effects(work, child) for child in node)
    work.effects[id(node)] = result
    return result


# ------------------------------------------------------------------------------------------------------ places


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
            whole = pointer.type if isinstance(pointer.type, PointerType) else _pointer(work, int_type(work))
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


def _pointer(work: Work, to: CType) -> PointerType:
    return PointerType(to, work.model.pointer)


def load(work: Work, where: PlaceExpr, at: Position | None = None) -> Expr:
    """The value in a place; arrays and functions decay to pointers (6.3.2.1p3, p4)."""
    if isinstance(where.type, ArrayType):
        return AddressOf(where, _pointer(work, where.type.element))
    if isinstance(where.type, FunctionType):
        return AddressOf(where, _pointer(work, where.type))
    return Load(where, where.type, at)


# ------------------------------------------------------------------------------------------------------ values


def _name(work: Work, node: Any) -> Expr:
    symbol = work.scope.lookup(node.name)
    if isinstance(symbol, EnumConstant):
        return Const(symbol.value, symbol.type, position(node, work.at), node.name)
    if isinstance(symbol, FunctionSymbol):
        return FunctionName(node.name, symbol.type)
    if node.name in ("__func__", "__FUNCTION__", "__PRETTY_FUNCTION__"):
        return TextConst(work.function, _pointer(work, integer(work.model, "char")))
    where = place(work, node)
    if where is None:
        return Unknown(int_type(work), f"the name {node.name}")
    return load(work, where, position(node, work.at))


def _constant(work: Work, node: Any) -> Expr:
    at = position(node, work.at)
    if node.type == "string":
        return TextConst(text(node.value), _pointer(work, element_type(work.model, node.value)))
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
            return found if isinstance(found, FunctionName) else Unknown(_pointer(work, found.type), "an address")
        if isinstance(where, DerefPlace):
            return where.pointer
        return AddressOf(where, _pointer(work, where.type))
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
    if wanted and (_volatile(target) or not isinstance(target, VariablePlace | MemberPlace)):
        new = saved(work, new, at)
        emit(work, Assign(target, new, at))
        return new
    emit(work, Assign(target, new, at))
    if not wanted or isinstance(new, Const):
        return new
    return Load(target, target.type, at)


def _volatile(where: PlaceExpr) -> bool:
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


def _call(work: Work, node: Any) -> Expr:
    return call(work, node, wanted=True)


def call(work: Work, node: Any, *, wanted: bool) -> Expr:
    """A call; arguments are converted to the parameters' types (6.5.2.2p7) or promoted (p6)."""
    at = position(node, work.at)
    name = node.name.name if isinstance(node.name, c_ast.ID) else None
    arguments = list(node.args.exprs) if node.args is not None else []
    special = _SPECIAL.get(name or "")
    if special is not None:
        return special(work, arguments, at)
    if name is not None and work.scope.lookup(name) is None:
        callee: Expr = FunctionName(name, FunctionType(int_type(work), None))
    else:
        callee = value(work, node.name)
    type_ = callee.type.to if isinstance(callee.type, PointerType) else callee.type
    if not isinstance(type_, FunctionType):
        type_ = FunctionType(int_type(work), None)
    if any(has_effects(work, item) for item in arguments):
        callee = kept(work, callee, *arguments)
    values: list[Expr] = []
    for index, item in enumerate(arguments):
        argument = value(work, item)
        if type_.parameters is not None and index < len(type_.parameters):
            argument = converted(work, argument, type_.parameters[index])
        elif isinstance(argument.type, IntType):
            argument = arithmetic(work, argument)
        elif isinstance(argument.type, FloatType) and argument.type.name == "float":
            argument = converted(work, argument, FloatType("double", work.model.double))
        later = arguments[index + 1 :]
        values.append(kept(work, argument, *later) if any(has_effects(work, other) for other in later) else argument)
    returns = type_.returns
    result = temporary(work, returns) if wanted and not isinstance(returns, VoidType) else None
    emit(work, Call(callee, tuple(values), result, at))
    if name is not None and (name in NO_RETURN or "noreturn" in work.scope.file.attributes.get(name, ())):
        finish(work, Stop(f"{name} does not return"))
        resume(work, new_block(work))
    if result is None:
        return Unknown(returns, "void")
    return Load(result, returns, at)


# ------------------------------------------------------------------------------------------------------ reserved calls


def _expect(work: Work, arguments: list[Any], at: Position) -> Expr:
    result = value(work, arguments[0])
    for other in arguments[1:]:
        effect(work, other)
    return result


def _zero(work: Work, arguments: list[Any], at: Position) -> Expr:
    return Const(0, int_type(work), at)


def _asm(work: Work, arguments: list[Any], at: Position) -> Expr:
    places = tuple(found for item in arguments if (found := place(work, item)) is not None)
    emit(work, Clobber(places, "inline assembly", at))
    return Unknown(VoidType(), "inline assembly")


def _choose(work: Work, arguments: list[Any], at: Position) -> Expr:
    test = work.scope.evaluator.constant(work.scope, arguments[0])
    chosen = arguments[1] if isinstance(test, Const) and test.value else arguments[2]
    return value(work, chosen)


def _label_address(work: Work, arguments: list[Any], at: Position) -> Expr:
    return Unknown(_pointer(work, VoidType()), "a label's address")


def _computed_goto(work: Work, arguments: list[Any], at: Position) -> Expr:
    value(work, arguments[0])
    work.computed_gotos.append(work.current)
    finish(work, Stop("a computed goto"))
    resume(work, new_block(work))
    return Unknown(VoidType(), "a computed goto")


def _va_start(work: Work, arguments: list[Any], at: Position) -> Expr:
    places = tuple(found for item in arguments[:1] if (found := place(work, item)) is not None)
    emit(work, Clobber(places, "the variable arguments", at))
    return Unknown(VoidType(), "the variable arguments")


def _va_end(work: Work, arguments: list[Any], at: Position) -> Expr:
    return Unknown(VoidType(), "the variable arguments")


def _va_arg(work: Work, arguments: list[Any], at: Position) -> Expr:
    effect(work, arguments[0])
    return Unknown(_pointer(work, VoidType()), "a variable argument")


def _offsetof(work: Work, arguments: list[Any], at: Position) -> Expr:
    wanted = integer(work.model, work.model.size_type)
    type_ = build(work.scope, arguments[0])
    offset = 0
    path: list[Any] = []
    node = arguments[1] if len(arguments) > 1 else None
    while isinstance(node, c_ast.StructRef | c_ast.ArrayRef):
        path.append(node.field.name if isinstance(node, c_ast.StructRef) else node.subscript)
        node = node.name
    if isinstance(node, c_ast.ID):
        path.append(node.name)
    for item in reversed(path):
        if isinstance(item, str) and isinstance(type_, StructType):
            chain = [found for _, found in find_field(work.scope.file.structs, type_.identity, item)]
            if not chain:
                return Unknown(wanted, "offsetof")
            offset += sum(found.offset for found in chain)
            type_ = chain[-1].type
        elif isinstance(type_, ArrayType):
            index = work.scope.evaluator.constant(work.scope, item)
            size = size_of(work.scope.file.structs, type_.element)
            if not isinstance(index, Const) or size is None:
                return Unknown(wanted, "offsetof")
            offset += 8 * size * index.value
            type_ = type_.element
        else:
            return Unknown(wanted, "offsetof")
    return Const(offset // 8, wanted, at)


def _generic(work: Work, node: Any) -> Expr:
    control = work.scope.evaluator.type_of(work.scope, node.expr)
    if isinstance(control, ArrayType | FunctionType):  # the control decays as any value does (6.3.2.1p3, p4)
        control = _pointer(work, control.element if isinstance(control, ArrayType) else control)
    fallback = None
    for association in node.associations:
        if association.type is None:
            fallback = association.expr
        elif build(work.scope, association.type) == control:
            return value(work, association.expr)
    return value(work, fallback) if fallback is not None else Unknown(int_type(work), "no association fits")


_SPECIAL: dict[str, Callable[[Work, list[Any], Position], Expr]] = {
    "__builtin_expect": _expect,
    "__builtin_expect_with_probability": _expect,
    "__builtin_assume_aligned": _expect,
    "__builtin_constant_p": _zero,
    "__stepring_same_type": _zero,
    "__stepring_asm": _asm,
    "__stepring_choose": _choose,
    "__stepring_label": _label_address,
    "__stepring_goto": _computed_goto,
    "__stepring_va_arg": _va_arg,
    **dict.fromkeys(("va_start", "__builtin_va_start", "va_copy", "__builtin_va_copy"), _va_start),
    **dict.fromkeys(("va_end", "__builtin_va_end"), _va_end),
    "offsetof": _offsetof,
    "__builtin_offsetof": _offsetof,
}

_VALUES: dict[type, Callable[[Work, Any], Expr]] = {
    c_ast.ID: _name,
    c_ast.Constant: _constant,
    c_ast.ArrayRef: _lvalue,
    c_ast.CompoundLiteral: _lvalue,
    c_ast.StructRef: _member,
    c_ast.UnaryOp: _unary,
    c_ast.BinaryOp: _binary,
    c_ast.TernaryOp: _conditional,
    c_ast.Cast: _cast,
    c_ast.ExprList: _comma,
    c_ast.Assignment: _assignment,
    c_ast.FuncCall: _call,
    c_ast.GenericSelection: _generic,
}


def handle(kind: type, handler: Callable[[Work, Any], Expr]) -> None:
    """Let another module lower a kind of expression (statement expressions need statements)."""
    _VALUES[kind] = handler
