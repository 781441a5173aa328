"""Runs IR on concrete values: integers, and addresses as (variable, path). Stops at undefined behaviour."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning import fold
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Binary,
    Branch,
    Call,
    Cast,
    Const,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    IntType,
    Jump,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    Return,
    Switch,
    Unary,
    Variable,
    VariablePlace,
)

Address = tuple[Any, ...]
Value = int | Address


class Undefined(Exception):
    """C says nothing about what follows."""


class Enough(Exception):
    """The step limit is reached."""


Watch = Callable[["Activation", int, int], None]


@dataclass
class Activation:
    """One running function; ``locals`` maps its variables' identities to the roots of their objects."""

    function: Function
    number: int
    outermost: bool


@dataclass
class Machine:
    memory: dict[Address, Value]
    functions: Mapping[str, Function]
    outside: Callable[[Machine], None]
    watch: Callable[[Machine, Activation, int, int], None]
    steps: int = 400
    activations: int = 0
    left: list[dict[Address, Value]] = field(default_factory=list)

    def root(self, activation: Activation, variable: Variable) -> Address:
        if variable.lasting:
            return (variable.identity,)
        return (f"{activation.number}/{variable.identity}",)

    def place(self, activation: Activation, place: PlaceExpr) -> Address:
        if isinstance(place, VariablePlace):
            return self.root(activation, place.variable)
        if isinstance(place, MemberPlace):
            return (*self.place(activation, place.base), "." + place.name)
        if isinstance(place, ElementPlace):
            index = self.value(activation, place.index)
            assert isinstance(index, int)
            assert isinstance(place.base.type, ArrayType)
            if not 0 <= index < (place.base.type.length or 0):
                raise Undefined
            return (*self.place(activation, place.base), index)
        assert isinstance(place, DerefPlace)
        target = self.value(activation, place.pointer)
        if not isinstance(target, tuple):
            raise Undefined
        return target

    def value(self, activation: Activation, expression: Expr) -> Value:
        if isinstance(expression, Const):
            return expression.value
        if isinstance(expression, Load):
            address = self.place(activation, expression.place)
            if address not in self.memory:
                raise Undefined
            return self.memory[address]
        if isinstance(expression, AddressOf):
            address = self.place(activation, expression.place)
            return (*address, 0) if isinstance(expression.place.type, ArrayType) else address
        if isinstance(expression, Cast):
            operand = self.value(activation, expression.operand)
            return fold.convert(operand, expression.type) if isinstance(operand, int) else operand
        if isinstance(expression, Unary):
            operand = self.value(activation, expression.operand)
            assert isinstance(operand, int)
            return self._defined(fold.apply_unary(expression.op, operand, expression.type))
        if isinstance(expression, PointerStep):
            base, steps = self.value(activation, expression.pointer), self.value(activation, expression.steps)
            if not isinstance(base, tuple) or not isinstance(base[-1], int) or not isinstance(steps, int):
                raise Undefined
            return (*base[:-1], base[-1] + steps)
        assert isinstance(expression, Binary)
        left, right = self.value(activation, expression.left), self.value(activation, expression.right)
        if isinstance(left, tuple) or isinstance(right, tuple):
            return int((left == right) == (expression.op == "=="))
        return self._defined(fold.apply_binary(expression.op, left, right, expression.type))

    @staticmethod
    def _defined(value: int | None) -> int:
        if value is None:
            raise Undefined
        return value

    def run(self, function: Function, arguments: tuple[Value, ...]) -> Value | None:
        activation = Activation(function, self.activations, self.activations == 0)
        self.activations += 1
        for parameter, argument in zip(function.parameters, arguments, strict=True):
            self.memory[self.root(activation, parameter)] = argument
        block = 0
        while True:
            for number, statement in enumerate(function.blocks[block].statements):
                self.step(activation, block, number)
                if isinstance(statement, Assign):
                    value = self.value(activation, statement.value)
                    self.memory[self.place(activation, statement.place)] = value
                elif isinstance(statement, Call):
                    self.call(activation, statement)
                elif isinstance(statement, Begin):
                    self.memory.pop(self.root(activation, statement.variable), None)
            terminator = function.blocks[block].terminator
            self.step(activation, block, len(function.blocks[block].statements))
            if isinstance(terminator, Jump):
                block = terminator.target
            elif isinstance(terminator, Branch):
                taken = self.value(activation, terminator.condition)
                block = terminator.then if taken != 0 else terminator.otherwise
            elif isinstance(terminator, Switch):
                control = self.value(activation, terminator.value)
                assert isinstance(control, int)
                block = next((c.target for c in terminator.cases if c.low <= control <= c.high), terminator.default)
            else:
                assert isinstance(terminator, Return)
                if activation.outermost:
                    self.left.append(dict(self.memory))
                return self.value(activation, terminator.value) if terminator.value is not None else None

    def step(self, activation: Activation, block: int, number: int) -> None:
        self.steps -= 1
        if self.steps < 0:
            raise Enough
        self.watch(self, activation, block, number)

    def call(self, activation: Activation, call: Call) -> None:
        assert isinstance(call.callee, FunctionName)
        arguments = tuple(self.value(activation, argument) for argument in call.arguments)
        body = self.functions.get(call.callee.name)
        result: Value | None = None
        if body is None:
            self.left.append(dict(self.memory))
            self.outside(self)
        else:
            result = self.run(body, arguments)
        if call.result is not None and result is not None:
            assert isinstance(result, int) and isinstance(call.result.type, IntType)
            self.memory[self.place(activation, call.result)] = fold.convert(result, call.result.type)
