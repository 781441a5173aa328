"""The door to lowering expressions: their values, their effects, branches on them, and conversions.

Which function lowers which kind of node is a table that the modules beside this one fill (``handle``), so that places,
operators, calls and statement expressions, which all need one another, stand in modules of their own. Conversions of
N1570 6.3 become explicit here, in ``converted``.
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
    resume,
    temporary,
)
from stepring.meaning.fold import convert
from stepring.meaning.models import integer, promoted
from stepring.meaning.scope import (
    position,
)
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Binary,
    Branch,
    Cast,
    Const,
    CType,
    Expr,
    FloatConst,
    FloatType,
    FunctionName,
    FunctionType,
    IntType,
    Load,
    PointerType,
    StructType,
    TextConst,
    Unknown,
    UnknownType,
    VariablePlace,
    VoidType,
)
from stepring.places import Position

COMPARISONS = frozenset(("<", "<=", ">", ">=", "==", "!="))


_VALUES: dict[type, Callable[[Work, Any], Expr]] = {}
_EFFECTS: dict[type, Callable[[Work, Any], object]] = {}


def handle(kind: type, handler: Callable[[Work, Any], Expr]) -> None:
    """Name the function that lowers a kind of expression to its value."""
    _VALUES[kind] = handler


def handle_effect(kind: type, handler: Callable[[Work, Any], object]) -> None:
    """Name the function that lowers a kind of expression whose value nobody wants."""
    _EFFECTS[kind] = handler


def value(work: Work, node: Any) -> Expr:
    """The value of an expression, statements for its side effects having been emitted."""
    handler = _VALUES.get(type(node))
    if handler is None:
        return Unknown(int_type(work), f"expression {type(node).__name__}")
    return handler(work, node)


def effect(work: Work, node: Any) -> None:
    """Evaluate an expression for its side effects only."""
    handler = _EFFECTS.get(type(node))
    if handler is not None:
        handler(work, node)
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
