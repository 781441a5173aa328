"""Builds IR by hand: types, variables, expressions with C's conversions left to the caller, and structured bodies."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Binary,
    Block,
    Branch,
    Call,
    CaseLabel,
    Cast,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    FunctionType,
    IntType,
    Jump,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerType,
    Return,
    Statement,
    StructType,
    Switch,
    SwitchSyntax,
    Terminator,
    Unary,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.places import Position

U8 = IntType("unsigned char", 8, False, 1)
I8 = IntType("signed char", 8, True, 1)
U16 = IntType("unsigned short", 16, False, 2)
I16 = IntType("short", 16, True, 2)
INT = IntType("int", 32, True, 3)
U32 = IntType("unsigned int", 32, False, 3)
BOOL = IntType("_Bool", 8, False, 0)
HERE = Position("auger.c", 1, 1)
VOID = VoidType()
STRUCT = StructType("struct hopper")


def pointer(to: CType) -> PointerType:
    return PointerType(to, 32)


def local(name: str, kind: CType, storage: str = "automatic", volatile: bool = False) -> Variable:
    return Variable(name, f"{name}@1", kind, storage, volatile)  # type: ignore[arg-type]


def static(name: str, kind: CType, volatile: bool = False) -> Variable:
    return Variable(name, f"auger.c:{name}", kind, "static", volatile)


def parameter(name: str, kind: CType) -> Variable:
    return local(name, kind, "parameter")


def at(variable: Variable) -> PlaceExpr:
    return VariablePlace(variable)


def member(base: PlaceExpr, name: str, kind: CType, volatile: bool = False) -> PlaceExpr:
    assert isinstance(base.type, StructType)
    return MemberPlace(base, base.type.identity, name, kind, volatile)


def arrow(p: Expr, name: str, kind: CType) -> PlaceExpr:
    assert isinstance(p.type, PointerType)
    return member(DerefPlace(p, p.type.to), name, kind)


def element(base: PlaceExpr, index: Expr) -> PlaceExpr:
    assert isinstance(base.type, ArrayType)
    return ElementPlace(base, index, base.type.element)


def load(place: PlaceExpr | Variable) -> Load:
    if isinstance(place, Variable):
        place = VariablePlace(place)
    return Load(place, place.type)


def address(place: PlaceExpr | Variable) -> Expr:
    if isinstance(place, Variable):
        place = VariablePlace(place)
    return AddressOf(place, pointer(place.type))


def num(value: int, kind: CType = INT) -> Const:
    return Const(value, kind)


def cast(kind: CType, operand: Expr) -> Expr:
    return operand if operand.type == kind else Cast(operand, kind)


def op(operator: str, left: Expr, right: Expr | int) -> Expr:
    """A binary operator, both operands converted to int (unsigned int if the left one is)."""
    kind = left.type if left.type in (INT, U32) else INT
    if isinstance(right, int):
        right = num(right, kind)
    compares = operator in ("<", "<=", ">", ">=", "==", "!=")
    return Binary(operator, cast(kind, left), cast(kind, right), INT if compares else kind)  # type: ignore[arg-type]


def negation(operand: Expr) -> Expr:
    return Unary("!", operand, INT)


@dataclass
class Body:
    """Builds the blocks of a function from structured statements."""

    blocks: list[tuple[list[Statement], Terminator | None]] = field(default_factory=lambda: [([], None)])
    here: int = 0
    exits: list[tuple[int, int]] = field(default_factory=list)

    def new(self) -> int:
        self.blocks.append(([], None))
        return len(self.blocks) - 1

    def end(self, terminator: Terminator, then: int) -> None:
        statements, old = self.blocks[self.here]
        if old is None:
            self.blocks[self.here] = (statements, terminator)
        self.here = then

    def add(self, statement: Statement) -> Body:
        self.blocks[self.here][0].append(statement)
        return self

    def set(self, place: PlaceExpr | Variable, value: Expr | int) -> Body:
        if isinstance(place, Variable):
            place = VariablePlace(place)
        if isinstance(value, int):
            value = num(value, place.type)
        return self.add(Assign(place, cast(place.type, value), HERE))

    def call(self, name: str, *arguments: Expr, result: PlaceExpr | None = None, returns: CType = VOID) -> Body:
        callee = FunctionName(name, FunctionType(returns, None))
        return self.add(Call(callee, arguments, result, HERE))

    def when(self, condition: Expr, then: Callable[[Body], object], otherwise: Callable[[Body], object] = id) -> Body:
        yes, no, after = self.new(), self.new(), self.new()
        self.end(Branch(condition, yes, no, HERE), yes)
        then(self)
        self.end(Jump(after), no)
        otherwise(self)
        self.end(Jump(after), after)
        return self

    def loop(self, condition: Expr, body: Callable[[Body], object]) -> Body:
        head, inside, after = self.new(), self.new(), self.new()
        self.end(Jump(head), head)
        self.end(Branch(condition, inside, after, HERE), inside)
        body(self)
        self.end(Jump(head), after)
        return self

    def switch(
        self, value: Expr, cases: Sequence[tuple[int, int, Callable[[Body], object]]], default: Callable[[Body], object]
    ) -> Body:
        targets = [self.new() for _ in cases]
        other, after = self.new(), self.new()
        labels = tuple(
            CaseLabel(low, high, target, HERE, HERE) for (low, high, _), target in zip(cases, targets, strict=True)
        )
        syntax = SwitchSyntax(HERE, (), (), HERE, False, 1)
        self.end(Switch(value, labels, other, syntax), other)
        default(self)
        self.end(Jump(after), after)
        for (_, _, body), target in zip(cases, targets, strict=True):
            self.here = target
            body(self)
            self.end(Jump(after), after)
        return self

    def give(self, value: Expr | None = None) -> Body:
        self.end(Return(value, HERE), self.new())
        return self

    def function(
        self, name: str = "feed", parameters: Sequence[Variable] = (), variables: Sequence[Variable] = (),
        returns: CType = VOID,
    ) -> Function:  # fmt: skip
        if self.blocks[self.here][1] is None:
            self.end(Return(None, HERE), self.here)
        blocks = tuple(Block(tuple(s), t if t is not None else Return(None, HERE)) for s, t in self.blocks)
        kinds = tuple(p.type for p in parameters)
        return Function(
            name, f"auger.c:{name}", FunctionType(returns, kinds), tuple(parameters), (*parameters, *variables), blocks,
            HERE, 99, True, True,
        )  # fmt: skip
