"""A small outcome with one of everything, on files that really exist: a feed barge's auger and its command queue."""

from dataclasses import replace
from pathlib import Path

from stepring.places import Notice, Origin
from stepring.report.types import Coverage, Outcome
from stepring.rule import Obligation, Related, Rule, WitnessStep
from stepring.shapes.types import (
    Access,
    Dispatch,
    Index,
    Label,
    Machine,
    Program,
    Ring,
    State,
    StateStore,
    Step,
    Transition,
)

AUGER_C = """\
/* The auger. */
enum auger { AUGER_IDLE, AUGER_FEEDING, AUGER_JAM };
static enum auger auger_state = AUGER_IDLE;

void auger_poll(void)
{
\tswitch (auger_state) {
\tcase AUGER_IDLE:
\t\tif (wanted[0] > 2) { auger_state = AUGER_FEEDING; }
\t\tbreak;
\tcase AUGER_FEEDING:
\t\tif (stalled()) auger_state = AUGER_JAM;
\t\tbreak;
\tcase AUGER_JAM:
\t\tbreak;
\t}
}
"""

QUEUE_C = """\
struct queue { unsigned char slots[10]; unsigned char head; unsigned char tail; };

void queue_put(struct queue *q, unsigned char command)
{
    q->slots[q->head++ % 10] = command;
}
"""


def no_findings(_: Program) -> tuple[Obligation, ...]:
    """The check of a rule that these tests never run."""
    return ()


RULES = (
    Rule("SM01", "NoDefault", "A switch over a state has no default", "warning", no_findings, (478,)),
    Rule("SM04", "NeverLeft", "A state, or a group of states, is never left.", "error", no_findings, (835, 1245)),
    Rule(
        "RB04",
        "CounterOverflow",
        "A free-running counter's overflow breaks the sequence {a}.",
        "error",
        no_findings,
        (128,),
    ),
)


def spot(file: Path | str, line: int, text: str, occurrence: int = 1) -> Origin:
    """The place of some text in a line of a file."""
    content = Path(file).read_text(encoding="utf-8").split("\n")[line - 1]
    column = -1
    for _ in range(occurrence):
        column = content.index(text, column + 1)
    return Origin(str(file), line, column + 1, column + 1 + len(text), text)


def write_barge(root: Path) -> tuple[Path, Path]:
    """Write the two files below ``root``."""
    auger, queue = root / "feed" / "auger.c", root / "shore commands#1.c"
    auger.parent.mkdir(parents=True, exist_ok=True)
    auger.write_text(AUGER_C, encoding="utf-8")
    queue.write_text(QUEUE_C, encoding="utf-8")
    return auger, queue


def auger_machine(auger: Path) -> Machine:
    """The auger's machine; ``AUGER_JAM`` is a trap."""

    def state(number: int, name: str, initial: bool = False) -> State:
        return State(name, number, spot(auger, 2, name), True, True, False, True, initial)

    def label(line: int, name: str, value: int) -> Label:
        return Label((name,), value, value, value, spot(auger, line, "case"), spot(auger, line, name))

    dispatch = Dispatch(
        "auger_poll",
        "auger_state",
        spot(auger, 7, "switch"),
        (label(8, "AUGER_IDLE", 0), label(11, "AUGER_FEEDING", 1), label(14, "AUGER_JAM", 2)),
        None,
        "none",
        (),
        0,
        255,
    )
    stay = [
        Transition(name, name, "auger_poll", "", spot(auger, line, name))
        for line, name in ((8, "AUGER_IDLE"), (11, "AUGER_FEEDING"), (14, "AUGER_JAM"))
    ]
    return Machine(
        identity="auger.c:auger_state",
        variable="auger_state",
        kind="variable",
        where=spot(auger, 3, "auger_state"),
        form="switch",
        states=(state(0, "AUGER_IDLE", True), state(1, "AUGER_FEEDING"), state(2, "AUGER_JAM")),
        dispatches=(dispatch,),
        stores=(
            StateStore("", spot(auger, 3, "auger_state"), (("AUGER_IDLE", 0),), initial=True),
            StateStore("auger_poll", spot(auger, 9, "auger_state"), (("AUGER_FEEDING", 1),)),
            StateStore("auger_poll", spot(auger, 12, "auger_state"), (("AUGER_JAM", 2),)),
        ),
        transitions=(
            stay[0],
            Transition("AUGER_IDLE", "AUGER_FEEDING", "auger_poll", "wanted[0] > 2", spot(auger, 9, "auger_state")),
            stay[1],
            Transition("AUGER_FEEDING", "AUGER_JAM", "auger_poll", "stalled()", spot(auger, 12, "auger_state")),
            stay[2],
        ),
        initial=("AUGER_IDLE",),
        complete=False,
        why_incomplete=("The address of auger_state leaves the code that was read",),
        family="enum auger",
    )


def queue_ring(queue: Path) -> Ring:
    """The queue from shore: ten slots, a free-running head of eight bits."""
    advance = Step("queue_put", spot(queue, 5, "q->head++"), "free-running", None, None, ((0, 1), (255, 0)))
    head = Index(
        "head", "struct queue.head", "unsigned char", 0, 255, "write", (advance,), None, 0, spot(queue, 1, "head")
    )
    tail = replace(head, name="tail", identity="struct queue.tail", role="read", steps=(), where=spot(queue, 1, "tail"))
    access = Access("queue_put", spot(queue, 5, "q->slots"), "head", "store", None, None, "modulo", 10)
    return Ring(
        "struct queue.slots",
        "struct queue.slots",
        "member",
        spot(queue, 1, "slots"),
        10,
        1,
        (head, tail),
        (access,),
        "difference",
        "free-running",
        ("tail is never advanced",),
    )


def barge(root: Path) -> Outcome:
    """The whole outcome; ``root`` is filled with the files it speaks of."""
    auger, queue = write_barge(root)
    jam = Obligation(
        rule="SM04",
        kind="fail",
        where=spot(auger, 14, "AUGER_JAM"),
        what="The state AUGER_JAM of auger_state is never left",
        level="error",
        why="Once the auger has jammed, the barge feeds no more",
        advice="Store another state in the case of AUGER_JAM, or say why none is wanted",
        function="auger_poll",
        subject="auger_state",
        shape="auger.c:auger_state",
        states=("AUGER_JAM",),
        related=(Related(spot(auger, 12, "auger_state"), "Here the state is entered, at wanted[0] = {1}."),),
    )
    overflow = Obligation(
        rule="RB04",
        kind="fail",
        where=spot(queue, 5, "q->head++"),
        what="After head passes 255, q->slots[head % 10] goes from slot 5 to slot 0",
        level="error",
        why="256 is no multiple of 10, so commands 6 to 9 of that round are overwritten early",
        advice="Make the capacity a power of two, or wrap the index itself",
        function="queue_put",
        subject="struct queue.slots",
        subject_kind="member",
        shape="struct queue.slots",
        initial=(("q->head", "255"),),
        witness=(
            WitnessStep(spot(queue, 5, "q->slots"), "The command goes to slot 5", (("q->head", "255"), ("slot", "5"))),
            WitnessStep(spot(queue, 5, "q->head++"), "head wraps to 0", (("q->head", "0"),)),
            WitnessStep(
                spot(queue, 5, "q->slots"), "The next command goes to slot 0", (("q->head", "0"), ("slot", "0"))
            ),
        ),
    )
    left_open = replace(
        overflow,
        kind="open",
        level=None,
        what="head stays below its limit",
        reason="A caller of queue_put was not read",
        witness=(),
        where=spot(queue, 3, "queue_put"),
    )
    held = replace(jam, kind="pass", level=None, states=(), related=(), what="The dispatch is total", rule="SM01")
    judged = replace(jam, kind="review", level=None, what="A person has to say whether AUGER_JAM may last", states=())
    return Outcome(
        root=root,
        rules=RULES,
        program=Program((auger_machine(auger),), (queue_ring(queue),)),
        obligations=(overflow, jam, left_open, held, judged),
        notices=(
            Notice("skipped-declaration", "warning", "A declaration could not be parsed", str(auger), 3, 8),
            Notice("missing-compiler", "warning", f"The compiler of {auger} is not on PATH"),
            Notice("missing-header", "note", "barge{1}.h was not found", str(queue), 1),
        ),
        coverage=Coverage(2, 2, 3, 2),
        models=("ILP32",),
    )
