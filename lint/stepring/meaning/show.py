"""IR as text: expressions as C, functions as a listing of their blocks, for messages and for people who debug."""

from collections.abc import Iterator

from stepring.meaning.types import (
    AddressOf,
    Assign,
    Begin,
    Binary,
    Branch,
    Call,
    Cast,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    FloatConst,
    Function,
    FunctionName,
    IntType,
    Jump,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    Return,
    Statement,
    Stop,
    StructType,
    Switch,
    TextConst,
    Unary,
    Unknown,
    VariablePlace,
)


def type_text(type_: CType) -> str:
    """A type's name as C spells it, near enough for a message."""
    match type_:
        case IntType(name=name):
            return name
        case StructType(identity=identity):
            return identity.split("@", 1)[0]
        case PointerType(to=to):
            return f"{type_text(to)} *"
    return str(getattr(type_, "name", type(type_).__name__))


def place_text(place: PlaceExpr) -> str:
    """A place as C spells it: ``p->head``, ``buf[i]``."""
    match place:
        case VariablePlace(variable=variable):
            return variable.name
        case MemberPlace(base=MemberPlace(name="", base=outer), name=name, struct=struct, type=type_):
            return place_text(MemberPlace(outer, struct, name, type_))  # an unnamed member is not spelled
        case MemberPlace(base=DerefPlace(pointer=pointer), name=name) if not isinstance(pointer, PointerStep):
            return f"{expr_text(pointer)}->{name}"
        case MemberPlace(base=base, name=name):
            return f"{place_text(base)}.{name}" if name else place_text(base)
        case ElementPlace(base=base, index=index):
            return f"{place_text(base)}[{expr_text(index)}]"
        case DerefPlace(pointer=PointerStep(pointer=pointer, steps=steps)):
            return f"{expr_text(pointer)}[{expr_text(steps)}]"
        case DerefPlace(pointer=pointer):
            return f"*{expr_text(pointer)}"


def expr_text(expr: Expr, *, casts: bool = False) -> str:
    """An expression as C; implicit conversions are left out unless ``casts``."""
    match expr:
        case Const(value=value, name=name):
            return name or str(value)
        case FloatConst(value=real):
            return repr(real)
        case TextConst(text=text):
            return '"' + text.encode("unicode_escape").decode() + '"'
        case Load(place=place):
            return place_text(place)
        case AddressOf(place=place):
            return f"&{place_text(place)}"
        case FunctionName(name=name):
            return name
        case Unary(op=op, operand=operand):
            return f"{op}{_inner(operand, casts)}"
        case Binary(op=op, left=left, right=right):
            return f"{_inner(left, casts)} {op} {_inner(right, casts)}"
        case Cast(operand=operand, type=type_, written=written):
            return f"({type_text(type_)}){_inner(operand, casts)}" if written or casts else expr_text(operand)
        case PointerStep(pointer=pointer, steps=steps):
            return f"{_inner(pointer, casts)} + {_inner(steps, casts)}"
        case PointerDistance(left=left, right=right):
            return f"{_inner(left, casts)} - {_inner(right, casts)}"
        case Unknown(why=why):
            return f"<{why}>"


def _inner(expr: Expr, casts: bool) -> str:
    text = expr_text(expr, casts=casts)
    while isinstance(expr, Cast) and not (expr.written or casts):
        expr = expr.operand
    return f"({text})" if isinstance(expr, Binary | PointerStep | PointerDistance) else text


def statement_text(statement: Statement) -> str:
    """A statement on one line."""
    match statement:
        case Assign(place=place, value=value):
            return f"{place_text(place)} = {expr_text(value, casts=True)}"
        case Call(callee=callee, arguments=arguments, result=result):
            call = f"{expr_text(callee)}({', '.join(expr_text(item) for item in arguments)})"
            return f"{place_text(result)} = {call}" if result is not None else call
        case Begin(variable=variable):
            return f"begin {variable.name}"
        case _:
            return f"clobber {', '.join(place_text(place) for place in statement.places)} ({statement.why})"


def listing(function: Function) -> str:
    """A function's blocks, one statement a line."""
    return "\n".join(_lines(function))


def _lines(function: Function) -> Iterator[str]:
    yield f"{function.identity}:"
    for number, block in enumerate(function.blocks):
        yield f"  b{number}:"
        for statement in block.statements:
            yield f"    {statement_text(statement)}"
        match block.terminator:
            case Jump(target=target):
                yield f"    jump b{target}"
            case Branch(condition=condition, then=then, otherwise=otherwise):
                yield f"    if {expr_text(condition, casts=True)} b{then} else b{otherwise}"
            case Switch(value=value, cases=cases, default=default):
                arms = ", ".join(
                    f"{case.name or case.low}{'' if case.low == case.high else f'..{case.high}'}: b{case.target}"
                    for case in cases
                )
                yield f"    switch {expr_text(value)} {{{arms}; else b{default}}}"
            case Return(value=value):
                yield f"    return {expr_text(value)}" if value is not None else "    return"
            case Stop(why=why):
                yield f"    stop ({why})"
