"""The text of a ring program: names, declarations, and how one index moves; ``queues`` and ``histories`` do the rest.

A feed barge's controller keeps such rings for commands from shore, for samples of the hopper's weight and for what the
auger reports. Lines are kept with what they are for, so that a verdict on a line can be compared with what the run
showed of it.
"""

import random
from dataclasses import dataclass, field

from tests.rings.parts import FREE, Plan

THEMES = (
    ("shore", "command", ("code", "amount"), ("post", "next")),
    ("hopper", "sample", ("scale", "grams"), ("add", "take")),
    ("auger", "event", ("kind", "value"), ("put", "get")),
    ("feeder", "request", ("pen", "portion"), ("push", "pop")),
    ("barge", "report", ("source", "reading"), ("store", "fetch")),
)
INDEX_NAMES = (
    ("head", "tail"),
    ("in", "out"),
    ("write_at", "read_at"),
    ("next_in", "next_out"),
    ("wr", "rd"),
    ("put", "get"),
)
DATA_NAMES = ("slots", "items", "buffer", "ring", "store", "entries", "data")
COUNT_NAMES = ("count", "used", "stored", "pending", "level")


@dataclass(frozen=True, slots=True)
class Operation:
    """One function of the program: what it is to the driver, its C name, and the shape of its arguments and result."""

    role: str
    name: str
    result: str
    arguments: tuple[tuple[str, str], ...]
    style: str = ""


@dataclass(slots=True)
class Writer:
    """A program being written. ``moves`` are (line, index, function) of every advance."""

    plan: Plan
    dice: random.Random
    lines: list[str] = field(default_factory=list)
    operations: list[Operation] = field(default_factory=list)
    moves: list[tuple[int, str, str]] = field(default_factory=list)
    functions: dict[str, set[str]] = field(default_factory=dict)
    objects: list[str] = field(default_factory=list)
    now: str = ""

    prefix: str = ""
    what: str = ""
    verbs: tuple[str, str] = ("", "")
    element: str = ""
    members: tuple[str, ...] = ()
    own: str = ""
    pointer: str = ""
    data: str = ""
    head: str = ""
    tail: str = ""
    count: str = ""
    full: str = ""
    size: str = ""
    mask: str = ""

    # ------------------------------------------------------------------------------------------------------ lines

    def add(self, *lines: str, move: str = "") -> None:
        """Lines of code; ``move`` names the index that they advance."""
        for line in lines:
            self.lines.append(line)
            if move:
                self.moves.append((len(self.lines), move, self.now))

    def has(self, operation: str) -> bool:
        return operation in self.plan.operations

    def slipped(self, slip: str, role: str = "") -> bool:
        """Whether this is where the slip is made."""
        plan = self.plan
        if plan.slip != slip:
            return False
        return not role or plan.kind == "history" or plan.site in (role, "both") or self.plan.scheme == "derived"

    # ------------------------------------------------------------------------------------------------- declarations

    def begin(self) -> None:
        """Names, includes, sizes, the element's type, the ring's own objects."""
        plan, dice = self.plan, self.dice
        prefix, what, members, self.verbs = dice.choice(THEMES)
        self.prefix, self.what = prefix, what
        self.add(f"/* {prefix.capitalize()}: {'the last' if plan.kind == 'history' else 'a queue of'} {what}s. */")
        self.add("#include <stdbool.h>", "#include <stddef.h>", "#include <stdint.h>", "#include <string.h>", "")
        self.members = members if plan.element.members else ()
        self.element = plan.element.name
        if self.members:
            self.element = f"struct {what}"
            self.add(f"struct {what} {{", f"    uint8_t {members[0]};", f"    int16_t {members[1]};", "};", "")
        data = dice.choice(DATA_NAMES)
        head, tail = dice.choice(INDEX_NAMES)
        count = dice.choice(COUNT_NAMES)
        if plan.storage in ("static", "global"):
            head, tail = f"{what}_{head}", f"{what}_{tail}"
        if plan.storage == "static":
            data, count = f"{what}_{data}", f"{what}_{count}"
        self._sizes(data)
        self._objects(data, head, tail, count)
        if plan.masked_irq:
            self.add("void barge_irq_off(void);", "void barge_irq_on(void);", "")
        if plan.slip == "sibling" or dice.random() < 0.12:
            self._sibling()

    def _sizes(self, data: str) -> None:
        plan, name = self.plan, f"{self.what.upper()}_{self.dice.choice(('SLOTS', 'MAX', 'COUNT', 'DEPTH'))}"
        n = plan.slots
        match plan.size_form:
            case "macro" | "sizeof":
                self.add(f"#define {name} {n}")
                self.size = name
            case "macro_unsigned":
                self.add(f"#define {name} {n}u")
                self.size = name
            case "enum":
                self.add(f"enum {{ {name} = {n} }};")
                self.size = name
            case "plus_one":
                self.add(f"#define {name}_USABLE {n - 1}", f"#define {name} ({name}_USABLE + 1)")
                self.size = name
            case "literal":
                self.size = str(n)
            case _:
                self.size = "q->size"
        if plan.slip == "sibling":
            self.add(f"#define LOG_{name} {plan.sibling}")

    def _objects(self, data: str, head: str, tail: str, count: str) -> None:
        plan = self.plan
        often = "volatile " if plan.volatile else ""
        # often only the side that the other context reads is volatile
        other = often if self.dice.random() < 0.6 else ""
        kind = plan.index.name
        declared = self.size
        walks = plan.walk == "pointer"
        index = f"{self.element} *" if walks else f"{kind} "
        members = [f"{index}{often}{head};" if walks else f"{often}{index}{head};"]
        two = plan.kind == "queue" and plan.scheme != "derived"
        if two:
            members.append(f"{index}{other}{tail};" if walks else f"{other}{index}{tail};")
        counted = plan.scheme in ("count", "derived", "overwrite") or (plan.kind == "history" and self.has("at"))
        if counted:
            counter = kind if plan.index.high >= plan.slots and plan.walk != "pointer" else "uint16_t"
            members.append(f"{often}{counter} {count};")
        if plan.scheme == "flag":
            members.append(f"{often}bool {'full' if plan.storage != 'static' else self.what + '_full'};")
        if plan.kind == "history" and self.has("total") and self.dice.random() < 0.3:
            members.append(f"uint32_t {self.what}_sum;")
        if plan.storage == "static":
            start = {
                f"{index}{often}{head};" if walks else "": f" = {data}",
                f"{index}{other}{tail};" if walks else "": f" = {data}",
            }
            self.add("", f"static {self.element} {data}[{declared}];")
            for member in members:
                first = start.get(member, "") if walks else ""
                self.add(f"static {member[:-1]}{first};")
            self.add("")
            self.objects = [data, *(member[:-1].split()[-1].lstrip("*") for member in members)]
        else:
            tag = f"{self.prefix}_{'queue' if plan.kind == 'queue' else 'history'}"
            self.pointer = f"struct {tag}"
            fields = [f"{self.element} *{data};", f"{kind if plan.index.bits > 8 else 'uint16_t'} size;"]
            if plan.storage != "pointer":
                fields = [f"{self.element} {data}[{declared}];"]
            order = fields + members if self.dice.random() < 0.7 else members + fields
            self.add("", f"struct {tag} {{", *(f"    {item}" for item in order), "};", "")
            if plan.storage == "global" or (plan.wrapped and plan.storage == "embedded"):
                self.add(f"static struct {tag} {self.prefix}_ring;", "")
                self.objects = [f"{self.prefix}_ring"]
            self.own = f"{self.prefix}_ring." if plan.storage == "global" else "q->"
        own = self.own
        self.data, self.head, self.tail = own + data, own + head, own + tail if two else ""
        if plan.scheme == "derived":
            self.head, self.tail = "", own + head
        self.count = own + count if counted else ""
        self.full = own + ("full" if plan.storage != "static" else self.what + "_full") if plan.scheme == "flag" else ""
        if plan.size_form == "sizeof":
            self.size = self.dice.choice((f"(sizeof({self.data}) / sizeof({self.data}[0]))", self.size))
        self.mask = self.size if plan.slip == "mask_whole" else f"({self.size} - 1)"

    def _sibling(self) -> None:
        name, n = "barge_log", self.plan.sibling
        size = str(n)
        for line in self.lines:
            if line.startswith("#define LOG_"):
                size = line.split()[1]
        self.add(f"static uint8_t {name}_bytes[{size}];", f"static uint8_t {name}_at;", "")
        self.add(f"void {name}_note(uint8_t code)", "{", f"    {name}_bytes[{name}_at] = code;")
        self.add(f"    {name}_at++;", f"    if ({name}_at >= {size}) {{", f"        {name}_at = 0;", "    }", "}", "")
        self.objects += [f"{name}_bytes", f"{name}_at"]
        self.operations.append(Operation("side", f"{name}_note", "void", (("uint8_t", "code"),)))

    @property
    def other_size(self) -> str:
        """The neighbour's size."""
        return next((line.split()[1] for line in self.lines if line.startswith("#define LOG_")), self.size)

    # ------------------------------------------------------------------------------------------------ how it moves

    def limit(self, role: str) -> str:
        """The number that the wrap compares with."""
        if self.slipped("wrap_short", role):
            return f"({self.size} - 1)"
        if self.slipped("wrap_long", role):
            return f"({self.size} + 1)"
        if self.slipped("bytes", role):
            return f"sizeof({self.data})"
        if self.slipped("sibling", role):
            return self.other_size
        return self.size

    def walk(self, role: str) -> str:
        return self.plan.walk if role == "head" else self.plan.other_walk

    def subscript(self, role: str, name: str = "") -> str:
        """The subscript that an index stands for."""
        name = name or (self.head if role == "head" else self.tail)
        if self.plan.walk == "free_modulo":
            return f"{name} % {self.size}"
        return f"{name} & {self.mask}" if self.plan.walk == "free_mask" else name

    def slot(self, role: str) -> str:
        """The slot itself, as a place."""
        name = self.head if role == "head" else self.tail
        return f"*{name}" if self.plan.walk == "pointer" else f"{self.data}[{self.subscript(role)}]"

    def placed(self, line: str, role: str) -> str:
        """A statement in which ``@`` stands for the slot."""
        if self.plan.walk == "pointer":
            line = line.replace("@.", f"{self.head if role == 'head' else self.tail}->")
        return line.replace("@", self.slot(role))

    def advance(self, role: str, name: str = "") -> list[str]:
        """The statements that bring an index (or a copy of it called ``name``) to the next slot."""
        i = name or (self.head if role == "head" else self.tail)
        n, walk = self.limit(role), self.walk(role)
        above = ">" if self.slipped("wrap_greater", role) else ">="
        zero = "1" if self.slipped("wrap_to_one", role) else "0"
        step = "2" if self.slipped("two_step", role) else "1"
        more = f"{i}++;" if step == "1" else f"{i} += 2;"
        if self.slipped("no_wrap", role):
            return [f"{i}--;" if walk.startswith("down") else f"{i}++;"]
        match walk:
            case "reset" | "reset_equal" if step == "1":
                test = "==" if walk == "reset_equal" and above == ">=" else above
                return [more, f"if ({i} {test} {n}) {{", f"    {i} = {zero};", "}"]
            case "reset_first" if step == "1":
                return [f"if (++{i} {above} {n}) {{", f"    {i} = {zero};", "}"]
            case "reset" | "reset_equal" | "reset_first":
                return [more, f"if ({i} >= {n}) {{", f"    {i} = {zero};", "}"]
            case "modulo":
                return [f"{i} = ({i} + {step}) % {n};"]
            case "modulo_after":
                return [more, f"{i} %= {n};"]
            case "choice":
                return [f"{i} = {i} + {step} < {n} ? {i} + {step} : {zero};"]
            case "last":
                return [f"{i} = ({i} == {n} - 1) ? {zero} : {i} + {step};"]
            case "exclusive":
                return [f"if ({i} == {n} - 1) {{", f"    {i} = {zero};", "} else {", f"    {more}", "}"]
            case "subtract":
                return [f"{i} += {step};", f"if ({i} {above} {n}) {{", f"    {i} -= {n};", "}"]
            case "local":
                local = f"{self.plan.index.name} after = {i} + {step};"
                return [local, f"if (after {above} {n}) {{", f"    after = {zero};", "}", f"{i} = after;"]
            case "helper":
                return [f"{i} = {self.what}_after({'q, ' if 'q->' in self.limit('head') else ''}{i});"]
            case "macro":
                return [f"{i} = {self.what.upper()}_AFTER({i});"]
            case "mask":
                return [f"{i} = ({i} + {step}) & {self.mask};"]
            case "down":
                return [
                    f"if ({i} {'<= 0' if self.dice.random() < 0.1 else '== 0'}) {{",
                    f"    {i} = {n};",
                    "}",
                    f"{i}--;",
                ]
            case "down_choice":
                return [f"{i} = ({i} == 0 ? {n} : {i}) - 1;"]
            case "down_modulo" if self.slipped("signed_down", role):
                return [f"{i} = ({i} - 1) % {n};"]
            case "down_modulo":
                return [f"{i} = ({i} + {n} - 1) % {n};"]
            case "pointer":
                test = self.dice.choice(("==", ">="))
                return [f"{i}++;", f"if ({i} {test} {self.data} + {n}) {{", f"    {i} = {self.data};", "}"]
        return [f"{i}++;"]

    def helpers(self) -> None:
        """The functions and macros that advances use."""
        walks = {self.plan.walk, self.plan.other_walk}
        kind, n = self.plan.index.name, self.limit("head")
        zero = "1" if self.plan.slip == "wrap_to_one" else "0"
        step = "2" if self.plan.slip == "two_step" else "1"
        if "macro" in walks:
            form = self.dice.choice((f"(((i) + {step}) % {n})", f"((i) + {step} >= {n} ? {zero} : (i) + {step})"))
            self.add(f"#define {self.what.upper()}_AFTER(i) {form}", "")
        if "helper" in walks:
            above = ">" if self.plan.slip == "wrap_greater" else ">="
            first = f"const {self.pointer} *q, " if "q->" in n else ""
            self.now = f"{self.what}_after"
            self.add(f"static {kind} {self.now}({first}{kind} i)", "{")
            self.add(f"    i += {step};", f"    if (i {above} {n}) {{", f"        i = {zero};", "    }", move="both")
            self.add("    return i;", "}", "")

    # --------------------------------------------------------------------------------------------------- functions

    def function(
        self,
        role: str,
        name: str,
        result: str,
        arguments: tuple[tuple[str, str], ...],
        body: list[object],
        style: str = "",
    ) -> None:
        """A function; ``body`` holds lines and (lines, index) for advances."""
        own = f"{self.pointer} *q" if self.own == "q->" else ""
        inner = self.plan.wrapped and self.plan.storage == "embedded"
        full_name = f"{self.prefix}_{name}"
        called = f"ring_{name}" if inner else full_name
        shown = ", ".join([own] * bool(own) + [_declared(kind, called_) for kind, called_ in arguments]) or "void"
        self.functions.setdefault(role, set()).update({called, full_name})
        self.now = called
        self.add(f"{'static ' if inner else ''}{result} {called}({shown})", "{")
        irq = self.plan.masked_irq and role in ("put", "get") and result == "void"
        if irq:
            self.add("    barge_irq_off();")
        for item in body:
            if isinstance(item, tuple):
                self.add(*(f"    {line}" for line in item[0]), move=item[1])
            else:
                self.add(f"    {item}" if item else "")
        if irq:
            self.add("    barge_irq_on();")
        self.add("}", "")
        if inner:
            outer = ", ".join(_declared(kind, called_) for kind, called_ in arguments) or "void"
            passed = ", ".join([f"&{self.prefix}_ring", *(called_ for _, called_ in arguments)])
            self.add(f"{result} {full_name}({outer})", "{")
            self.add(f"    {'' if result == 'void' else 'return '}{called}({passed});", "}", "")
        self.operations.append(Operation(role, full_name, result, arguments, style))


def _declared(kind: str, name: str) -> str:
    return f"{kind}{name}" if kind.endswith("*") else f"{kind} {name}"


def counted_type(plan: Plan) -> str:
    """A type for numbers of slots."""
    return plan.index.name if plan.index.high >= 2 * plan.slots and not plan.index.signed else "uint16_t"


def is_free(plan: Plan) -> bool:
    """Whether indices run freely and are reduced on access."""
    return plan.walk in FREE
