"""A witness as a C program that drives the original file to the place where it goes wrong.

The program includes the original source, so that static functions and objects can be reached without a change to it;
then it makes the witness's objects, sets its start values and makes its calls. What the witness says came from outside
is handed out by functions that carry the outside functions' symbols. While the defect is there, the program stops at
the reported line: an undefined step by the compiler's own checks, a wrong value by a comparison that says what is due.
Once the defect is mended it ends with status 0, which makes it a regression test.

It includes no header of its own, since those could contradict what the included file declares; the few functions of the
system that it needs are declared by their symbols.
"""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from stepring.meaning.types import ArrayType, CType, Function, FunctionType, IntType, PointerType, Variable, VoidType
from stepring.paths.interpreter import Program
from stepring.paths.memory import Memory
from stepring.paths.mentions import functions_mentioned
from stepring.paths.replay import Unfit, prepared
from stepring.paths.types import Fault
from stepring.paths.witness import Made, Reference, Value, Witness, WitnessCall

MARK = "replay:"
MAIN = "replay_main_of_the_unit"
ENDLESS_SECONDS = 2

_UNSEEN: dict[Fault, str] = {
    "uninitialised": "a value read before it was set",
    "pointer": "a pointer made outside its array",
    "arguments": "a call with the wrong arguments",
}
"""Faults that the compiler's checks do not look for."""


class NotPossible(Exception):
    """The witness cannot be made into a program; the text is a clause that says why."""


@dataclass(frozen=True, slots=True)
class Heading:
    """What the comment at the top says: the finding's ``title`` lines, its ``place``, and how to ``build`` it all."""

    title: tuple[str, ...]
    place: str
    build: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Plan:
    """What a program is made of.

    ``included`` are the files to include, as the include directive spells them; ``owned`` the identities of all
    functions and objects that are reached by that, ``bodies`` the names of all functions that the files define.
    ``place`` is where the finding is, as ``file:line``. ``before`` are the watched places' values before each call,
    for comments. ``undefined`` are symbols that no linked file defines and that the run does not need.
    """

    program: Program
    witness: Witness
    included: tuple[str, ...]
    owned: frozenset[str]
    bodies: frozenset[str]
    place: str
    before: tuple[tuple[tuple[str, str], ...], ...] = ()
    undefined: tuple[str, ...] = ()


def driver_text(plan: Plan, heading: Heading) -> str:
    """The program's text. ``NotPossible`` where the witness cannot be made into one."""
    witness = plan.witness
    _refuse(plan)
    try:
        memory = prepared(plan.program, witness)
    except Unfit as trouble:
        raise NotPossible(str(trouble)) from None
    lines = [
        *_comment(heading, witness),
        "",
        f"#define main {MAIN}",
        *(f'#include "{_spelled(file)}"' for file in plan.included),
        "#undef main",
        "",
        *_support(witness),
        *_stubs(plan),
        *(_made(item) for item in witness.made),
        "",
        "int main(void)",
        "{",
        *(f"    {line}" if line else "" for line in _main(plan, memory)),
        "}",
    ]
    return "\n".join(lines) + "\n"


def _refuse(plan: Plan) -> None:
    """Say what rules a program out from the start."""
    witness = plan.witness
    fault = witness.ending.fault
    if witness.ending.kind == "undefined" and fault in _UNSEEN:
        raise NotPossible(f"the compiler's checks do not look for {_UNSEEN[fault]}")
    for call in witness.calls:
        for given in call.outside:
            if given.name.startswith("0x"):
                raise NotPossible(f"the code reads the device register at {given.name}, which a host does not have")
            if given.name in plan.bodies:
                raise NotPossible(f"{given.name} has a body, which would run in place of the witness's value")


# --------------------------------------------------------------------------------------------------------- the comment


def _comment(heading: Heading, witness: Witness) -> Iterator[str]:
    yield f"/* {_harmless(heading.title[0])}"
    for line in heading.title[1:]:
        yield f" * {_harmless(line)}"
    yield " *"
    yield " * Build it in the project's root:"
    for line in heading.build:
        yield f" *   {_harmless(line)}"
    yield " *"
    yield f" * While the defect is there, the program stops at {_harmless(heading.place)}."
    yield " * Once it is mended, the program ends with status 0."
    for clause in witness.assumed:
        yield f" * Assumed: {_harmless(clause)}"
    yield " */"


def _harmless(text: str) -> str:
    """Text that cannot end or spoil a comment."""
    plain = "".join(letter if letter.isprintable() else "?" for letter in text)
    return plain.replace("*/", "* /").replace("/*", "/ *").replace("??/", "? ?/")


def _spelled(file: str) -> str:
    if '"' in file or "\\" in file or not file.isprintable():
        raise NotPossible(f"{file!r} cannot be named in an include directive")
    return file


# --------------------------------------------------------------------------------------------------------- the support


def _support(witness: Witness) -> Iterator[str]:
    yield "#define REPLAY_TEXT_(x) #x"
    yield "#define REPLAY_TEXT(x) REPLAY_TEXT_(x)"
    yield "#define REPLAY_SYMBOL(name) __asm__(REPLAY_TEXT(__USER_LABEL_PREFIX__) name)"
    yield 'int replay_say(int, const char *, ...) REPLAY_SYMBOL("dprintf");'
    if witness.ending.kind == "endless":
        yield 'unsigned replay_alarm(unsigned) REPLAY_SYMBOL("alarm");'
    yield 'const char *__asan_default_options(void) { return "detect_leaks=0:detect_stack_use_after_return=1"; }'
    yield ""


def _stubs(plan: Plan) -> Iterator[str]:
    """The functions that stand in for those outside, each defined by its symbol."""
    types: dict[str, CType] = {}
    for unit in plan.program.units:
        for function in unit.functions:
            types.update(functions_mentioned(function))
    wanted = dict.fromkeys(given.name for call in plan.witness.calls for given in call.outside)
    if wanted:
        most = max(len(call.outside) for call in plan.witness.calls)
        yield "/* What comes from outside, in the order in which it is asked for. */"
        yield f"static struct {{ const char *name; unsigned long long value; }} replay_given[{most}];"
        yield "static unsigned replay_count, replay_next;"
        yield "static void replay_gives(const char *name, unsigned long long value)"
        yield "{"
        yield "    replay_given[replay_count].name = name;"
        yield "    replay_given[replay_count++].value = value;"
        yield "}"
        yield "static unsigned long long replay_taken(const char *name)"
        yield "{"
        yield "    if (replay_next < replay_count && __builtin_strcmp(replay_given[replay_next].name, name) == 0)"
        yield "        return replay_given[replay_next++].value;"
        yield f'    replay_say(2, "{MARK} %s is asked for and the witness gives nothing; it gives 0\\n", name);'
        yield "    return 0;"
        yield "}"
    for name in wanted:
        yield from _stub(name, types.get(name))
    if plan.undefined:
        yield "/* What else the file needs to be linked; nothing comes from it in this run. */"
    for name in plan.undefined:
        if name not in wanted:
            yield from _idle(plan.program, name, types.get(name))
    yield ""


def _idle(program: Program, name: str, type_: CType | None) -> Iterator[str]:
    """A definition of what the witness says nothing of: a function that does nothing, or an object that is zero."""
    variable = _extern_variable(program, name)
    if variable is not None:
        yield _definition(variable)
        return
    result = _result_type(type_)
    body = "" if result == "void" else "return 0; "
    if result is None:
        result, body = "void", f'replay_say(2, "{MARK} {name} is called and is not there\\n"); __builtin_trap(); '
    shown = result if result.endswith("*") else result + " "
    yield f'{shown}replay_idle_{name}(void) REPLAY_SYMBOL("{name}");'
    yield f"{shown}replay_idle_{name}(void) {{ {body}}}"


def _result_type(type_: CType | None) -> str | None:
    """What a function gives, as C; None where it is not known or neither void, an integer nor a pointer."""
    match type_:
        case FunctionType(returns=VoidType()):
            return "void"
        case FunctionType(returns=IntType(name=spelled)):
            return spelled
        case FunctionType(returns=PointerType()):
            return "void *"
    return None


def _stub(name: str, type_: CType | None) -> Iterator[str]:
    if not name.isidentifier():
        raise NotPossible(f"{name} is no function")
    if not isinstance(type_, FunctionType):
        raise NotPossible(f"{name} is read from outside and is no function")
    result = _result_type(type_)
    if result is None:
        raise NotPossible(f"{name} gives a value that is neither an integer nor a pointer")
    taken = f'replay_taken("{name}")'
    bodies = {"void": f"(void){taken};", "void *": f"return (void *)(__UINTPTR_TYPE__){taken};"}
    body = bodies.get(result, f"return ({result}){taken};")
    shown = result if result.endswith("*") else result + " "
    yield f'{shown}replay_{name}(void) REPLAY_SYMBOL("{name}");'
    yield f"{shown}replay_{name}(void) {{ {body} }}"


def _extern_variable(program: Program, name: str) -> Variable | None:
    for unit in program.units:
        for function in unit.functions:
            for variable in function.variables:
                if variable.identity == name and variable.lasting:
                    return variable
    return None


def _definition(variable: Variable) -> str:
    if isinstance(variable.type, ArrayType) and variable.type.length is None:
        raise NotPossible(f"{variable.name} is an array of unknown length that no file defines")
    return f"__typeof__({variable.name}) {variable.name};"


# ------------------------------------------------------------------------------------------------------------- the run


def _made(made: Made) -> str:
    name = made.type.partition("@")[0]
    if not all(word.isidentifier() for word in name.split()) or name.startswith("unnamed "):
        raise NotPossible(f"the type {name} has no name that C could use")
    return f"static {name} {made.name}" + (f"[{made.elements}];" if made.elements > 1 else ";")


def _main(plan: Plan, memory: Memory) -> Iterator[str]:
    witness = plan.witness
    singles = {made.name for made in witness.made if made.elements == 1}
    if witness.start:
        yield "/* The start. */"
    for start in witness.start:
        place = _place(plan, start.object, start.path, singles, change=True)
        yield f"{place} = {_value(plan, memory, start.value, singles)};"
    if witness.start:
        yield ""
    yield "/* The calls. */"
    last = len(witness.calls)
    for number, call in enumerate(witness.calls, 1):
        yield from _given(plan, memory, call, singles)
        spelled = _call(plan, memory, call, singles)
        before = plan.before[number - 1] if number <= len(plan.before) else ()
        shown = f" /* with {_harmless(', '.join(' '.join(pair) for pair in before))} */" if before else ""
        if number < last:
            yield (f"(void){spelled};" if _returns(plan, call) else f"{spelled};") + shown
        else:
            if shown:
                yield shown.strip()
            yield from _ending(plan, spelled, call, singles)
    yield "return 0;"


def _given(plan: Plan, memory: Memory, call: WitnessCall, singles: set[str]) -> Iterator[str]:
    if any(other.outside for other in plan.witness.calls):
        yield "replay_count = replay_next = 0;"
    for given in call.outside:
        value = _value(plan, memory, given.value, singles)
        cast = "(__UINTPTR_TYPE__)" if isinstance(given.value, Reference) else ""
        yield f'replay_gives("{given.name}", {"0" if given.value is None else cast + value});'


def _call(plan: Plan, memory: Memory, call: WitnessCall, singles: set[str]) -> str:
    function = _function(plan, call.function)
    if function is None or function.identity not in plan.owned:
        raise NotPossible(f"{_plain(call.function)} is not in a file that can be included")
    arguments = ", ".join(_value(plan, memory, value, singles) for value in call.arguments)
    name = _plain(call.function)
    return f"{MAIN if name == 'main' else name}({arguments})"


def _returns(plan: Plan, call: WitnessCall) -> bool:
    function = _function(plan, call.function)
    return function is not None and not isinstance(function.type.returns, VoidType)


def _function(plan: Plan, identity: str) -> Function | None:
    every: Iterable[Function] = (function for unit in plan.program.units for function in unit.functions)
    return next((function for function in every if identity in (function.identity, function.name)), None)


def _ending(plan: Plan, spelled: str, call: WitnessCall, singles: set[str]) -> Iterator[str]:
    """The last call, and what is compared after it."""
    ending = plan.witness.ending
    if ending.kind == "undefined":
        yield f"{spelled}; /* {_harmless(plan.place)}: {_harmless(ending.fault or 'undefined')} */"
        return
    where = _quoted(plan.place)
    if ending.kind == "endless":
        yield f'replay_say(2, "{where}: the call has {ENDLESS_SECONDS} s to come back\\n");'
        yield f"replay_alarm({ENDLESS_SECONDS});"
        yield f"{spelled};"
        return
    if ending.kind == "result":
        found, what = spelled, f"{_plain(call.function)} returns"
    else:
        yield f"{spelled};"
        name, path = split_place(ending.place)
        found = _place(plan, name, path, singles)
        what = f"{found} is"
    wrong = _comparison(ending.found, ending.expected)
    due = f"; {ending.expected} is due" if ending.expected else ""
    yield "{"
    yield f"    long long found = (long long)({found});"
    yield f"    if ({wrong}) {{"
    yield f'        replay_say(2, "{where}: {_quoted(what)} %lld{_quoted(due)}\\n", found);'
    yield "        return 1;"
    yield "    }"
    yield "}"


def _comparison(found: str, expected: str) -> str:
    """When the value found is wrong, as C."""
    low, separator, high = expected.partition(" to ")
    if _is_number(expected):
        return f"found != {_number(int(expected))}"
    if separator and _is_number(low) and _is_number(high):
        return f"found < {_number(int(low))} || found > {_number(int(high))}"
    if _is_number(found):
        return f"found == {_number(int(found))}"
    raise NotPossible(f"the value that comes out ({found}) is no integer")


def _is_number(text: str) -> bool:
    return text.removeprefix("-").isdigit() and text.isascii()


def _number(value: int) -> str:
    """An integer constant of type ``long long``; what only an unsigned one holds is converted."""
    if value == -(1 << 63):
        return f"({value + 1}LL - 1)"
    if value > (1 << 63) - 1:
        return f"(long long){value}ULL"
    return f"{value}LL"


def _quoted(text: str) -> str:
    """Text for the inside of a string literal that is a format."""
    plain = "".join(letter if letter.isprintable() else "?" for letter in text)
    return plain.replace("\\", "\\\\").replace('"', '\\"').replace("%", "%%").replace("??", "?\\?")


# ---------------------------------------------------------------------------------------------------- places and values


def split_place(place: str) -> tuple[str, str]:
    """An object's name or identity, and the path after it."""
    head, colon, tail = place.rpartition(":")
    name = tail
    while name and not (name.isidentifier() or _is_local(name)):
        cut = max(name.rfind("."), name.rfind("["), name.rfind("->"))
        name = name[: max(cut, 0)]
    return head + colon + name, tail[len(name) :]


def _is_local(name: str) -> bool:
    variable, at, place = name.partition("@")
    return bool(at) and variable.isidentifier() and all(part.isdigit() for part in place.split("."))


def _place(plan: Plan, item: str, path: str, singles: set[str], *, change: bool = False) -> str:
    """An object's part as C spells it in the program, to be read or, with ``change``, to be set."""
    if item in {made.name for made in plan.witness.made}:
        return item + (path.removeprefix("[0]") if item in singles else path)
    number = plan.program.static_named(item)
    if number is None:
        raise NotPossible(f"{item} is not in the program")
    variable = plan.program.statics[number].variable
    if variable.storage == "static-local":
        raise NotPossible(f"{variable.name} is static in a function and cannot be reached from outside it")
    if variable.const and change:
        raise NotPossible(f"{variable.name} is constant and cannot be set")
    if variable.identity not in plan.owned:
        raise NotPossible(f"{variable.name} is not in a file that can be included")
    return variable.name + path


def _value(plan: Plan, memory: Memory, value: Value, singles: set[str]) -> str:
    if value is None:
        return "(void *)0"
    if isinstance(value, Reference):
        place = _place(plan, value.to, value.path, singles)
        if isinstance(memory.type_at(value.to + value.path), ArrayType):
            return f"&{place}[{value.at}]"
        return f"&{place}" if not value.at else f"&{place} + {value.at}"
    if -(1 << 31) < value < 1 << 31:
        return str(value)
    return f"{value}ULL" if value > (1 << 63) - 1 else _number(value)


def _plain(identity: str) -> str:
    return identity.rpartition(":")[2]


def needed_functions(witness: Witness) -> tuple[str, ...]:
    """The identities of the functions that a witness calls, each once."""
    return tuple(dict.fromkeys(call.function for call in witness.calls))


def needed_objects(witness: Witness) -> tuple[str, ...]:
    """The identities of the program's objects that a witness sets, points to or compares, each once."""
    made = {item.name for item in witness.made}
    values: list[Value] = [start.value for start in witness.start]
    for call in witness.calls:
        values.extend((*call.arguments, *(given.value for given in call.outside)))
    named = [start.object for start in witness.start]
    named += [value.to for value in values if isinstance(value, Reference)]
    if witness.ending.place:
        named.append(split_place(witness.ending.place)[0])
    return tuple(dict.fromkeys(name for name in named if name not in made))
