"""Lowering of calls (N1570 6.5.2.2), of the reserved calls that stand for dialect (see ``read.types``), and of
``_Generic``."""

from collections.abc import Callable
from typing import Any

from pycparser import c_ast

from stepring.meaning.atomics import ATOMICS
from stepring.meaning.builder import (
    Work,
    emit,
    finish,
    int_type,
    new_block,
    resume,
    temporary,
)
from stepring.meaning.lowering import arithmetic, converted, effect, handle, handle_effect, has_effects, value
from stepring.meaning.models import integer
from stepring.meaning.places import kept, place, pointer_to
from stepring.meaning.scope import (
    build,
    find_field,
    position,
    size_of,
)
from stepring.meaning.types import (
    ArrayType,
    Call,
    Clobber,
    Const,
    Expr,
    FloatType,
    FunctionName,
    FunctionType,
    IntType,
    Load,
    PointerType,
    Stop,
    StructType,
    Unknown,
    VoidType,
)
from stepring.places import Position

NO_RETURN = frozenset(
    {
        *("abort", "exit", "_exit", "_Exit", "quick_exit", "longjmp", "siglongjmp", "thrd_exit", "pthread_exit"),
        *("__assert_fail", "__assert_func", "__builtin_trap", "__builtin_unreachable", "__builtin_abort"),
    }
)


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
    operands, atomic = ATOMICS.get(name or "", (0, None))
    if atomic is not None and len(arguments) >= operands:
        return atomic(work, arguments, at)
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


def _call_effect(work: Work, node: Any) -> None:
    call(work, node, wanted=False)


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
    return Unknown(pointer_to(work, VoidType()), "a label's address")


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
    return Unknown(pointer_to(work, VoidType()), "a variable argument")


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
        control = pointer_to(work, control.element if isinstance(control, ArrayType) else control)
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


handle(c_ast.FuncCall, _call)
handle(c_ast.GenericSelection, _generic)
handle_effect(c_ast.FuncCall, _call_effect)
