"""What each statement does to a state: assignments, calls, the ends of blocks."""

from abc import ABC, abstractmethod
from typing import TypeAlias

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Branch,
    Call,
    Cast,
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
    PointerType,
    Return,
    Statement,
    StructType,
    Switch,
    Terminator,
    Unknown,
    Variable,
    VariablePlace,
)
from stepring.values.addresses import facts_of, keeps_during_call
from stepring.values.frames import Binding, Frame
from stepring.values.intervals import UNBOUNDED, constant, convert, is_subset, number_type, union, whole, within
from stepring.values.library import CONTRACTS, Contract
from stepring.values.refine import assume, refine_by_case, refine_by_default
from stepring.values.spots import Places, Spot, Steps
from stepring.values.states import (
    State,
    View,
    end_name,
    forget,
    join_states,
    read_spot,
    store_spot,
)
from stepring.values.surroundings import Effect, Record, Surroundings
from stepring.values.types import Cell, Interval, VariableCell

Edge: TypeAlias = tuple[int, State]


class Execution(ABC):
    """One analysis: the spots, the surroundings, the frames of callees that are run in place.

    What running a whole body means is left to the subclass (``run_body``).
    """

    def __init__(self, surroundings: Surroundings) -> None:
        self.surroundings = surroundings
        self.places = Places(
            surroundings.summaries,
            surroundings.exposure,
            surroundings.steady,
            surroundings.foreign,
            surroundings.track_pointees,
        )
        self._inner: dict[tuple[int, int], Frame] = {}

    @abstractmethod
    def run_body(self, frame: Frame, start: State, stack: tuple[str, ...], record: Record | None) -> State | None:
        """The joined state at the returns of a function that is entered in the state ``start``; None if it has none."""

    def execute(self, view: View, statement: Statement, stack: tuple[str, ...], record: Record | None) -> bool:
        """Change the view's state as the statement does; False if control does not get past it."""
        if isinstance(statement, Assign):
            self.assign(view, statement)
            return True
        if isinstance(statement, Call):
            return self.call(view, statement, stack, record)
        if isinstance(statement, Begin):
            self.blur(view, VariablePlace(statement.variable), None)
            return True
        for place in statement.places:
            self.blur(view, place, None)
        return True

    def assign(self, view: View, statement: Assign) -> None:
        """An assignment; of a structure, member by member."""
        place, value = statement.place, statement.value
        if number_type(place.type) is None:
            if isinstance(place.type, StructType):
                self._copy_members(view, place, value)
            return
        view.store(place, view.evaluate(value), value)

    def _copy_members(self, view: View, target: PlaceExpr, value: Expr) -> None:
        source = view.frame.access(value.place) if isinstance(value, Load) else None
        offset = len(view.frame.access(target).path)
        found = []
        for spot in self._members_under(view, target):
            what = whole(spot.type)
            if source is not None and source.definite:
                other = self.places.named(source.root, source.path + spot.path[offset:])
                if other is not None:
                    what = read_spot(self.places, view.state, other)
            found.append((spot, what))
        for spot, what in found:
            store_spot(self.places, view.state, spot, what, view.observe)

    def _members_under(self, view: View, place: PlaceExpr) -> list[Spot]:
        """The spots of an object: its own, or those of its parts."""
        if number_type(place.type) is not None:
            return [view.frame.spot(place)]
        access = view.frame.access(place)
        kind = place.type
        while isinstance(kind, ArrayType):
            kind = kind.element
        exposure = self.surroundings.exposure
        if isinstance(kind, StructType) and kind is place.type and exposure is not None:
            for steps in exposure.members.get(kind.identity, ()):
                view.frame.spot(member_place(place, steps))
        length = len(access.path)
        result: list[Spot] = []
        for spot in list(self.places.rooted(access.root)):
            if len(spot.path) > length and _under(access.path, spot.path):
                if "->" not in spot.path[length:]:
                    result.append(spot)
        if isinstance(kind, IntType) and isinstance(place.type, ArrayType):
            element = ElementPlace(place, Load(place, kind), kind)
            result.append(view.frame.spot(element))
        return result

    def blur(self, view: View, place: PlaceExpr, value: Interval | None) -> None:
        """The object may hold anything (or ``value`` in each of its parts) from now on."""
        for spot in self._members_under(view, place):
            what = value if value is not None else whole(spot.type)
            store_spot(self.places, view.state, spot, what, view.observe if not spot.private else None)

    # ------------------------------------------------------------------------------------------------------ calls

    def call(self, view: View, call: Call, stack: tuple[str, ...], record: Record | None) -> bool:
        """A call; False if it does not come back."""
        name = call.callee.name if isinstance(call.callee, FunctionName) else None
        body = self.body(name, view.frame.function, stack)
        if name is None or body is None:
            return self.call_apart(view, call, record)
        inner = self.enter(view, call, body, stack, record)
        if inner is None:
            return False
        self.keep_result(view, call, inner)
        return True

    def call_apart(self, view: View, call: Call, record: Record | None) -> bool:
        """A call of what is not run in place (a known effect, the C library, unknown code); False as for ``call``."""
        name = call.callee.name if isinstance(call.callee, FunctionName) else None
        effect = self.surroundings.effects(name, view.frame.function) if name is not None else None
        contract = CONTRACTS.get(name) if name is not None and effect is None else None
        if contract is not None:
            if not contract.returns:
                return False
            result = self.library(view, call, contract)
        else:
            if record is not None and effect is not None:
                arguments = [view.evaluate(argument) for argument in call.arguments]
                record.enter(effect.callee, arguments, self.deviations(view.state))
                record.pass_to(effect.callee, arguments)
            if record is not None and (effect is None or effect.outward):
                record.looks.append(view.state.copy())
            result = self.outside(view, effect)
            if effect is not None and not effect.comes_back:
                return False
        self.keep_result(view, call, result)
        return True

    def keep_result(self, view: View, call: Call, result: Interval | None) -> None:
        """Store a call's result where it is wanted."""
        if call.result is None:
            return
        kind = number_type(call.result.type)
        if kind is None:
            self.blur(view, call.result, None)
        else:
            value = convert(result, kind) if result is not None and result is not UNBOUNDED else None
            view.store(call.result, value if value is not None else whole(kind))

    def body(self, name: str | None, caller: Function, stack: tuple[str, ...]) -> Function | None:
        """The body to run in place for a callee, if there is one and the nesting allows it."""
        if name is None or len(stack) > self.surroundings.depth:
            return None
        body = self.surroundings.bodies(name, caller)
        return body if body is not None and body.identity not in stack else None

    def frame_for(self, view: View, call: Call, body: Function) -> Frame:
        """The frame in which a callee is run for one call statement."""
        key = (id(view.frame), id(call))
        known = self._inner.get(key)
        if known is not None and known.function is body:
            return known
        callee = facts_of(body)
        bindings = {}
        for parameter, argument in zip(body.parameters, call.arguments, strict=False):
            if isinstance(parameter.type, PointerType) and parameter.identity in callee.unassigned:
                if keeps_during_call(argument, view.frame.taken):
                    bindings[parameter.identity] = Binding(view.frame, argument)
        frame = Frame(self.places, body, f"{view.frame.prefix}{body.name}#{len(self._inner)}/", bindings)
        self._inner[key] = frame
        return frame

    def begin(self, view: View, call: Call, body: Function) -> View:
        """The callee's view at its start: parameters hold the arguments."""
        frame = self.frame_for(view, call, body)
        inner = View(frame, view.state, view.observe)
        values = [view.evaluate(argument) for argument in call.arguments]
        for number, parameter in enumerate(body.parameters):
            kind = number_type(parameter.type)
            if kind is None:
                continue
            given = number < len(values) and values[number] is not UNBOUNDED
            known = convert(values[number], kind) if given else None
            spot = inner.store(VariablePlace(parameter), known if known is not None else whole(kind))
            if number < len(values):
                definition = view._definition(Cast(call.arguments[number], kind), spot)
                if definition is not None and isinstance(parameter.type, IntType):
                    view.state.definitions[spot] = definition
        return inner

    def enter(
        self, view: View, call: Call, body: Function, stack: tuple[str, ...], record: Record | None
    ) -> Interval | None:
        """Run a callee in place; its result (``UNBOUNDED`` if it has none), or None if it does not come back."""
        if record is not None:
            record.enter(
                body.identity, [view.evaluate(argument) for argument in call.arguments], self.deviations(view.state)
            )
        inner = self.begin(view, call, body)
        frame = inner.frame
        inner_stack = (*stack, body.identity)
        leaving = self.run_body(frame, inner.state, inner_stack, record)
        if leaving is None:
            return None
        after = leaving.copy()
        result = self.take_result(frame, after)
        self.drop_frame(frame, after)
        view.state = after
        return result

    def deviations(self, state: State) -> dict[Cell, Interval]:
        """The lasting cells that hold more than their summaries say."""
        found: dict[Cell, Interval] = {}
        for spot, value in state.values.items():
            if spot.private or spot.cell is None or not spot.tracked:
                continue
            value = read_spot(self.places, state, spot) if spot.definite else value
            if not is_subset(value, spot.default):
                known = found.get(spot.cell)
                found[spot.cell] = value if known is None else union(known, value)
        return found

    def give_result(self, view: View, terminator: Return) -> None:
        """Keep a return value for the caller, in a place of its own."""
        if terminator.value is not None and number_type(terminator.value.type) is not None:
            place = result_place(view.frame.function)
            if number_type(place.type) is not None:
                View(view.frame, view.state).store(place, view.evaluate(terminator.value), terminator.value)

    def take_result(self, frame: Frame, state: State) -> Interval:
        """The value that a callee returned; ``UNBOUNDED`` if none."""
        place = result_place(frame.function)
        if number_type(place.type) is None:
            return UNBOUNDED
        return read_spot(self.places, state, frame.spot(place))

    def drop_frame(self, frame: Frame, state: State) -> None:
        """A callee's own variables are gone."""
        prefix = frame.prefix
        for spot in [spot for spot in state.values if spot.root.startswith(prefix)]:
            if spot.reached:
                end_name(self.places, state, spot)
            else:
                state.values.pop(spot, None)
        for spot in [
            spot
            for spot, by in state.definitions.items()
            if spot.root.startswith(prefix) or any(read.root.startswith(prefix) for read in by.reads)
        ]:
            del state.definitions[spot]

    def outside(self, view: View, effect: Effect | None) -> Interval | None:
        """Code that is not run in place: apply its effect, or forget everything that it can reach."""
        if effect is None or effect.outward:
            forget(self.places, view.state, lambda spot: not spot.private)
            return effect.returns if effect is not None else None
        for cell, value in effect.writes.items():
            self._write_cell(view, cell, value, cell in effect.certain)
        if effect.through_pointers:
            forget(self.places, view.state, lambda spot: any(bucket[0] == "scalar" for bucket in spot.buckets))
        return effect.returns

    def _write_cell(self, view: View, cell: Cell, value: Interval | None, certain: bool) -> None:
        state = view.state
        touched = self.places.of_cell(cell)
        if value is None:
            reach = set(touched)
            for spot in touched:
                reach.update(self.places.aliases(spot))
            forget(self.places, state, reach.__contains__)
            return
        for spot in touched:
            single = isinstance(cell, VariableCell) and spot.definite and "[]" not in cell.path
            store_spot(self.places, state, spot, value, None, weak=not (certain and single))

    def library(self, view: View, call: Call, contract: Contract) -> Interval | None:
        """A function of the C library."""
        filled = None
        if contract.fills and len(call.arguments) > 1 and view.evaluate(call.arguments[1]) == constant(0):
            filled = constant(0)
        for number, argument in enumerate(call.arguments):
            if number in contract.writes or (contract.onward is not None and number >= contract.onward):
                self._write_target(view, argument, filled)
        kind = number_type(call.result.type) if call.result is not None else None
        if kind is None or (contract.low is None and contract.high is None):
            return None
        low = kind.low if contract.low is None else contract.low
        return within(whole(kind), low, kind.high if contract.high is None else contract.high)

    def _write_target(self, view: View, pointer: Expr, value: Interval | None) -> None:
        """Something is written to where an argument points."""
        while isinstance(pointer, Cast) and isinstance(pointer.type, PointerType):
            pointer = pointer.operand
        kind = pointer.type.to if isinstance(pointer.type, PointerType) else None
        if kind is None:
            return
        if isinstance(pointer, AddressOf):
            place = pointer.place
            if isinstance(place, ElementPlace):
                place = place.base
            self.blur(view, place, value if place is pointer.place and isinstance(place.type, StructType) else None)
            if value is not None and place is not pointer.place:
                self.blur(view, place, None)
            return
        if isinstance(kind, StructType):
            self.blur(view, DerefPlace(pointer, kind), value)
            return
        byte = IntType("unsigned char", 8, False, 1)
        self.blur(view, DerefPlace(pointer, byte if number_type(kind) is None else kind), None)


def _under(prefix: tuple[str, ...], path: tuple[str, ...]) -> bool:
    """Whether a path starts with a prefix, unknown elements taken for equal."""
    return all(x == y or (x[0] == y[0] == "[") for x, y in zip(prefix, path, strict=False))


def member_place(base: PlaceExpr, steps: Steps) -> PlaceExpr:
    """The place of a part of a structure; some element of each array on the way."""
    place = base
    for struct, name, kind in steps:
        if struct:
            place = MemberPlace(place, struct, name, kind)
        else:
            place = ElementPlace(place, Unknown(IntType("int", 32, True, 4), "some element"), kind)
    return place


_RESULTS: dict[int, tuple[Function, VariablePlace]] = {}


def result_place(function: Function) -> VariablePlace:
    """The place in which a function's result is kept for its caller."""
    known = _RESULTS.get(id(function))
    if known is not None and known[0] is function:
        return known[1]
    place = VariablePlace(Variable("%result", "%result", function.type.returns, "temporary"))
    if len(_RESULTS) > 4096:
        _RESULTS.clear()
    _RESULTS[id(function)] = (function, place)
    return place


def leave(places: Places, view: View, terminator: Terminator) -> list[Edge]:
    """The states in which control goes on after a terminator; the view's state is used up."""
    if isinstance(terminator, Jump):
        return [(terminator.target, view.state)]
    if isinstance(terminator, Branch):
        edges = []
        for target, holds in ((terminator.then, True), (terminator.otherwise, False)):
            side = View(view.frame, view.state.copy() if holds else view.state)
            if assume(side, terminator.condition, holds):
                edges.append((target, side.state))
        return edges
    if isinstance(terminator, Switch):
        return _leave_switch(places, view, terminator)
    return []


def _leave_switch(places: Places, view: View, switch: Switch) -> list[Edge]:
    arriving: dict[int, State] = {}
    for case in switch.cases:
        side = View(view.frame, view.state.copy())
        if refine_by_case(side, switch.value, case.low, case.high):
            known = arriving.get(case.target)
            arriving[case.target] = side.state if known is None else join_states(places, known, side.state)
    side = View(view.frame, view.state)
    ranges = sorted((case.low, case.high) for case in switch.cases)
    if refine_by_default(side, switch.value, ranges):
        known = arriving.get(switch.default)
        arriving[switch.default] = side.state if known is None else join_states(places, known, side.state)
    return list(arriving.items())
