"""What a store puts into a state variable: the constants it can be, or why that is not known.

Constants are followed through locals, through a file's own statics and through functions that return constants; a
parameter that is stored makes its function a setter.
"""

from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    Assign,
    Binary,
    Call,
    Cast,
    Clobber,
    Const,
    Expr,
    Function,
    FunctionName,
    Load,
    Object,
    Return,
    Unary,
    Variable,
    VariablePlace,
)
from stepring.places import Origin
from stepring.shapes.facts import (
    Constant,
    ForwardFact,
    StoreFact,
)
from stepring.shapes.keys import PlaceKey, place_key, uncast
from stepring.shapes.names import constant_of, sets
from stepring.shapes.state_scan import Scan, Seen, Work, blocks_after, function_identity


def note_forward(work: Work, function: Function, variable: Variable, name: str, argument: int) -> bool:
    """Note a parameter that is handed on as it came; whether it is one."""
    for number, parameter in enumerate(function.parameters):
        if parameter.identity == variable.identity and not _assigned(function, variable):
            work.forwards.append(ForwardFact(function_identity(work, name), argument, function.identity, number))
            return True
    return False


def before_all(scan: Scan, seen: Seen, block: int) -> bool:
    """Whether a local variable is given its first value: no dispatch on it comes before the store."""
    return seen.key.scope == "local" and not any(
        block in blocks_after(scan.function, dispatch) for dispatch, _ in seen.dispatches
    )


def may_set(work: Work, name: str) -> bool:
    """Whether a function may be a setter: one seen here that stores a parameter or hands it on to one that may be, or
    one elsewhere that is named like one."""
    known = work.setters.get(name)
    if known is None:
        function = work.by_name.get(name)
        work.setters[name] = False  # for one that calls itself
        known = work.setters[name] = sets(name) if function is None else _stores_own(work, function)
    return known


def _stores_own(work: Work, function: Function) -> bool:
    own = {parameter.identity for parameter in function.parameters}

    def is_own(value: Expr) -> bool:
        inner = uncast(value)
        return (
            isinstance(inner, Load) and isinstance(inner.place, VariablePlace) and inner.place.variable.identity in own
        )

    statements = [statement for block in function.blocks for statement in block.statements]
    return any(isinstance(statement, Assign) and is_own(statement.value) for statement in statements) or any(
        isinstance(statement, Call)
        and isinstance(statement.callee, FunctionName)
        and any(is_own(argument) for argument in statement.arguments)
        and may_set(work, statement.callee.name)
        for statement in statements
    )


def store_fact(work: Work, scan: Scan, seen: Seen, statement: Assign | Call | Clobber, place: PlaceKey) -> StoreFact:
    function = scan.function
    where = work.names.origin(statement.position)
    fresh = _fresh(function, place) and place.instance not in seen.read_instances
    if isinstance(statement, Clobber):
        return StoreFact(seen.key.key, function.identity, where, (), statement.why, fresh=fresh)
    if isinstance(statement, Call):
        name = statement.callee.name if isinstance(statement.callee, FunctionName) else ""
        if name and name in work.by_name:
            returned = _returned_constants(work, work.by_name[name])
            if returned is not None:
                return StoreFact(seen.key.key, function.identity, where, returned, fresh=fresh)
        return StoreFact(seen.key.key, function.identity, where, (), f"the value returned by {name or 'a call'}")
    constants, why, parameter, stepped, copied = _values(work, scan, statement.value, seen.key.key, where)
    return StoreFact(
        seen.key.key, function.identity, where, constants, why, parameter, fresh and bool(constants), stepped, copied
    )


def _fresh(function: Function, place: PlaceKey) -> bool:
    """Whether the object is the function's own (a local, or reached through a local that is no parameter)."""
    root = place.root
    return root is not None and root.storage in ("automatic", "temporary") and place.kind == "member"


def _values(
    work: Work, scan: Scan, value: Expr, key: str, where: Origin, depth: int = 0
) -> tuple[tuple[Constant, ...], str, int | None, bool, bool]:
    """The constants that a stored value can be: (constants, why not known, parameter, stepped, copied)."""
    inner = uncast(value)
    if isinstance(inner, Const):
        return (constant_of(work.names, inner, where),), "", None, False, False
    if isinstance(inner, Load):
        found = place_key(inner.place, scan.function.identity)
        if found is not None and found.key == key:
            return (), "", None, False, True
        if isinstance(inner.place, VariablePlace):
            variable = inner.place.variable
            for number, parameter in enumerate(scan.function.parameters):
                if parameter.identity == variable.identity and not _assigned(scan.function, variable):
                    return (), f"the parameter {variable.name}", number, False, False
            if depth < 4 and not (variable.lasting and variable.storage in ("global", "extern")):
                return _from_variable(work, scan, variable, key, where, depth)
        if found is not None and found.kind == "member":
            return (), f"the value of {found.shown}", None, False, False
    if isinstance(inner, Binary) and _mentions(inner, key, scan.function):
        return (), "arithmetic on its own value", None, True, False
    return (), f"the value of {expr_text(inner)}"[:120], None, False, False


def _assigned(function: Function, variable: Variable) -> bool:
    return any(
        isinstance(statement, Assign)
        and isinstance(statement.place, VariablePlace)
        and statement.place.variable.identity == variable.identity
        for block in function.blocks
        for statement in block.statements
    )


def _from_variable(
    work: Work, scan: Scan, variable: Variable, key: str, where: Origin, depth: int
) -> tuple[tuple[Constant, ...], str, int | None, bool, bool]:
    """What a variable can hold: the join over everything that is stored in it."""
    constants: list[Constant] = []
    copied = False
    functions = [other.function for other in work.scans] if variable.lasting else [scan.function]
    stored = False
    for function in functions:
        for block in function.blocks:
            for statement in block.statements:
                if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                    if statement.place.variable.identity != variable.identity:
                        continue
                    stored = True
                    here = work.names.origin(statement.position)
                    some, why, parameter, stepped, copy = _values(work, scan, statement.value, key, here, depth + 1)
                    if why or stepped:
                        return (), why or "a computed value", parameter, stepped, False
                    constants.extend(some)
                    copied = copied or copy
                elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                    if statement.result.variable.identity != variable.identity:
                        continue
                    stored = True
                    name = statement.callee.name if isinstance(statement.callee, FunctionName) else "a call"
                    known = work.by_name.get(name)
                    returned = _returned_constants(work, known) if known is not None else None
                    if returned is None:
                        return (), f"the value returned by {name}", None, False, False
                    constants.extend(returned)
    if not stored:
        return (), f"the value of {variable.name}", None, False, False
    if variable.lasting:
        for item in work.unit.objects:
            if item.variable.identity == variable.identity:
                constants.extend(initial_constants(work, item, ()))
    return tuple(dict.fromkeys(constants)), "", None, False, copied


def _returned_constants(work: Work, function: Function) -> tuple[Constant, ...] | None:
    """The constants that a function can return, or None where it returns something else."""
    found: list[Constant] = []
    for block in function.blocks:
        end = block.terminator
        if isinstance(end, Return):
            inner = uncast(end.value) if end.value is not None else None
            where = work.names.origin(end.position)
            if isinstance(inner, Const):
                found.append(constant_of(work.names, inner, where))
            elif isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
                variable = inner.place.variable
                if variable.storage not in ("automatic", "temporary"):
                    return None
                scan = next(other for other in work.scans if other.function is function)
                constants, why, _, stepped, _ = _from_variable(work, scan, variable, "", where, 3)
                if why or stepped:
                    return None
                found.extend(constants)
            else:
                return None
    return tuple(dict.fromkeys(found)) or None


def _mentions(expr: Expr, key: str, function: Function) -> bool:
    stack = [expr]
    while stack:
        node = stack.pop()
        if isinstance(node, Load):
            found = place_key(node.place, function.identity)
            if found is not None and found.key == key:
                return True
        elif isinstance(node, Cast | Unary):
            stack.append(node.operand)
        elif isinstance(node, Binary):
            stack.extend((node.left, node.right))
    return False


def is_fresh(seen: Seen, instance: str) -> bool:
    roots = [place.root for _, _, place in seen.stores if place.instance == instance]
    return (
        bool(roots)
        and all(root is not None and root.storage in ("automatic", "temporary") for root in roots)
        and (seen.key.kind == "member")
    )


def initial_constants(work: Work, item: Object, path: tuple[str | int, ...]) -> list[Constant]:
    found = []
    for initial in item.initial:
        inner = uncast(initial.value)
        if initial.path == path and isinstance(inner, Const):
            found.append(constant_of(work.names, inner, work.names.origin(initial.position)))
    return found
