"""What a ring program is made of: one choice in each dimension, drawn from a seed number, with at most one slip.

The frequencies lean on how firmware writes rings: most wrap by a conditional reset or a remainder, a third keep one
slot empty, a quarter overwrite by design. A slip is only a change of the text; whether it does harm is found by running
the program (see ``truth``).
"""

import random
from dataclasses import dataclass
from typing import Literal


@dataclass(frozen=True, slots=True)
class IntegerType:
    """An integer type as the program spells it, on the host."""

    name: str
    bits: int
    signed: bool

    @property
    def high(self) -> int:
        return (1 << (self.bits - self.signed)) - 1


TYPES = (
    *(IntegerType(name, 8, False) for name in ("uint8_t", "uint8_t", "uint8_t", "unsigned char")),
    *(IntegerType(name, 16, False) for name in ("uint16_t", "uint16_t", "unsigned short")),
    *(IntegerType(name, 32, False) for name in ("uint32_t", "unsigned int", "unsigned")),
    *(IntegerType(name, 64, False) for name in ("size_t", "unsigned long")),
    *(IntegerType(name, 32, True) for name in ("int", "int", "int32_t")),
    IntegerType("int16_t", 16, True),
    IntegerType("short", 16, True),
    *(IntegerType(name, 8, True) for name in ("int8_t", "char", "signed char")),
    IntegerType("long", 64, True),
)


@dataclass(frozen=True, slots=True)
class Element:
    """What a slot holds. ``bits`` of a value survive a store; a structure has two members."""

    name: str
    bits: int
    members: tuple[str, ...] = ()


ELEMENTS = (
    *(Element("uint8_t", 8),) * 5,
    *(Element("uint16_t", 16),) * 3,
    Element("int16_t", 16),
    Element("uint32_t", 32),
    Element("char", 8),
)

Kind = Literal["queue", "history"]
Storage = Literal["static", "embedded", "pointer", "global"]

FORWARD = (
    *("reset", "reset", "reset_equal", "reset_first", "reset_first", "modulo", "modulo", "modulo", "modulo_after"),
    *("choice", "last", "exclusive", "subtract", "local", "helper", "helper", "macro"),
)
BACKWARD = ("down", "down_choice", "down_modulo")
FREE = ("free_modulo", "free_mask")

SLIPS = (
    *("wrap_short", "wrap_long", "wrap_greater", "wrap_to_one", "no_wrap", "two_step", "mask_odd", "mask_whole"),
    *("narrow", "signed_down", "bytes", "sibling", "full_missing", "full_inverted", "full_early", "full_late"),
    *(
        "empty_missing",
        "empty_inverted",
        "count_raw",
        "count_stale",
        "flush_half",
        "tail_wrong",
        "range",
        "signed_free",
    ),
    *("unnormalised", "store_late", "peek_next", "argument_open", "bulk_split", "bulk_narrow", "promoted", "back_raw"),
)


@dataclass(frozen=True, slots=True)
class Plan:
    """The choices for one program. ``site`` is the index (or, for tests, the operation) that a slip is made on."""

    number: int
    kind: Kind
    scheme: str
    storage: Storage
    element: Element
    index: IntegerType
    volatile: bool
    slots: int
    size_form: str
    walk: str
    other_walk: str
    direction: int
    operations: frozenset[str]
    slip: str
    site: str
    sibling: int
    wrapped: bool
    masked_irq: bool


def plan(number: int) -> Plan:
    """The plan of one seed number. A slip that does not fit the drawn ring is drawn again, then left out."""
    dice = random.Random(f"ring {number}")
    slip = "none" if dice.random() < 0.4 else dice.choice(SLIPS)
    for _ in range(400):
        made = _draw(dice, number, slip)
        if made is not None:
            return made
    raise AssertionError(f"no ring has the slip {slip}")


_SLIP_WALK = {
    "mask_odd": ("mask", "free_mask"),
    "mask_whole": ("mask", "free_mask"),
    "range": FREE,
    "signed_free": ("free_modulo",),
    "signed_down": ("down_modulo",),
    "wrap_greater": ("reset", "reset_first", "local", "subtract", "helper"),
    "bytes": ("reset", "reset_first", "modulo", "modulo_after", "subtract", "choice"),
}


def _draw(dice: random.Random, number: int, slip: str) -> Plan | None:
    kind: Kind = "history" if dice.random() < 0.28 else "queue"
    scheme = "history"
    if kind == "queue":
        scheme = dice.choice(
            ("one_slot",) * 5
            + ("count",) * 3
            + ("derived", "difference", "difference", "flag", "overwrite", "overwrite")
        )
    storage: Storage = dice.choice(
        ("static", "static", "static", "embedded", "embedded", "embedded", "pointer", "pointer", "global")
    )
    walk = _walk(dice, scheme, slip)
    if walk == "pointer" and (storage in ("embedded", "global") or kind == "history"):
        return None
    other = walk
    if dice.random() < 0.2 and walk not in (*FREE, *BACKWARD, "pointer", "natural", "mask", "lazy"):
        other = dice.choice(FORWARD)
    element = dice.choice(ELEMENTS)
    if dice.random() < 0.22:
        element = Element("struct", 24, ("code", "amount"))
    slots = _slots(dice, walk, slip)
    index = IntegerType("uint8_t", 8, False) if walk == "natural" else _index(dice, scheme, walk, slots, slip)
    if index is None or (walk == "natural" and scheme in ("overwrite", "derived")):
        return None
    size_form = dice.choice(("macro", "macro", "macro", "macro_unsigned", "enum", "literal", "sizeof", "plus_one"))
    if storage == "pointer":
        size_form = "field"
    if size_form == "plus_one" and scheme != "one_slot":
        size_form = "macro"
    made = Plan(
        number, kind, scheme, storage, element, index, dice.random() < 0.25, slots, size_form, walk, other,
        -1 if walk.startswith("down") else 1, _operations(dice, kind, scheme, slip), slip,
        dice.choice(("head", "tail", "both")), dice.choice([n for n in (4, 6, 9, 16, 40) if n != slots]),
        dice.random() < 0.3, dice.random() < 0.05,
    )  # fmt: skip
    return made if _fits(made) else None


def _walk(dice: random.Random, scheme: str, slip: str) -> str:
    choices = _SLIP_WALK.get(slip)
    if choices is None:
        if scheme == "difference":
            choices = FREE
        elif scheme == "derived":
            choices = ("reset", "modulo", "reset_first", "subtract", "last", "helper")
        else:
            choices = (*FORWARD, *FORWARD, "mask", "mask", "mask", "mask", *BACKWARD)
            if slip in (
                "none",
                "full_missing",
                "empty_missing",
                "narrow",
                "flush_half",
                "no_wrap",
                "wrap_long",
                "wrap_short",
            ):
                choices += ("natural", "pointer", "pointer", "pointer", "pointer")
            if scheme in ("history", "count"):
                choices += ("free_modulo", "free_mask", "free_mask", "lazy")
    return dice.choice(choices)


def _power(number: int) -> bool:
    return number & (number - 1) == 0


def _slots(dice: random.Random, walk: str, slip: str) -> int:
    if walk == "natural":
        return 256
    sizes = [2, 3, 4, 5, 6, 7, 8, 8, 10, 12, 16, 16, 20, 24, 30, 32, 48, 64, 100, 128, 150, 200, 256, 300]
    if slip in ("mask_odd", "range"):
        return dice.choice([n for n in sizes if not _power(n)])
    if walk in ("mask", *FREE):
        return dice.choice([n for n in sizes if _power(n)])
    if slip == "bulk_narrow":
        return dice.choice((100, 128, 150, 200))
    if slip == "narrow":
        return dice.choice([128, 150, 200, 256, 300])
    return dice.choice(sizes)


def _index(dice: random.Random, scheme: str, walk: str, slots: int, slip: str) -> IntegerType | None:
    """A type that can hold what the index must hold, or cannot where that is the slip."""
    need = slots - 1 if walk in ("mask", "modulo", "choice", "last", "exclusive") else slots
    if walk in FREE:
        need = 2 * slots - 1 if scheme == "difference" else slots - 1
    fitting = [item for item in TYPES if (item.high < need) == (slip == "narrow")]
    if walk in FREE:
        fitting = [item for item in fitting if item.signed == (slip == "signed_free")]
        if slip == "signed_free":
            fitting = [item for item in fitting if item.bits < 64]
    elif slip == "signed_free":
        return None
    if slip == "bulk_narrow":
        fitting = [item for item in fitting if item.bits == 8]
    return dice.choice(fitting) if fitting else None


def _operations(dice: random.Random, kind: str, scheme: str, slip: str) -> frozenset[str]:
    names = {
        "queue": ("peek", "count", "count", "room", "empty", "full", "flush", "put_n", "get_n", "skip", "at"),
        "history": ("at", "at", "total", "total", "latest", "oldest", "flush"),
    }[kind]
    some = set(dice.sample(names, dice.randint(1, min(6, len(names)))))
    needs = {
        "count_raw": "count", "flush_half": "flush", "peek_next": "peek", "argument_open": "at", "bulk_split": "put_n",
        "bulk_narrow": "put_n", "unnormalised": "skip", "back_raw": "at", "promoted": "count",
    }  # fmt: skip
    if slip in needs and needs[slip] in names:
        some.add(needs[slip])
    if scheme == "difference" and slip == "promoted":
        some.add("room")
    return frozenset(some)


def _fits(made: Plan) -> bool:
    """Whether the slip, if any, can be made in this program."""
    queue = made.kind == "queue"
    normal = made.walk not in (*FREE, "pointer", "natural", "lazy")
    match made.slip:
        case "none":
            return True
        case "wrap_short" | "wrap_long" | "no_wrap":
            return made.walk not in ("natural", "mask", *FREE) and made.slots > 3
        case "wrap_to_one":
            resets = ("reset", "reset_equal", "reset_first", "choice", "last", "exclusive", "local", "helper")
            return made.walk in resets and made.other_walk in resets and made.slots > 3
        case "two_step":
            return normal and made.walk != "mask" and made.slots > 3 and made.direction > 0
        case "wrap_greater":
            return made.walk != "pointer" and made.walk != "down"
        case "narrow" | "mask_odd" | "mask_whole" | "range" | "signed_free":
            return made.walk != "pointer"
        case "signed_down":
            return made.walk == "down_modulo"
        case "bytes":
            return made.storage != "pointer" and made.element.bits > 8
        case "sibling":
            return normal and made.storage != "pointer" and made.walk not in ("mask", "macro", "helper")
        case "full_missing" | "full_inverted":
            return queue and made.scheme != "overwrite"
        case "full_early" | "full_late":
            return queue and made.scheme in ("count", "difference", "derived")
        case "empty_missing" | "empty_inverted":
            return queue
        case "count_raw":
            return queue and made.scheme in ("one_slot", "flag") and normal
        case "promoted":
            return queue and (
                (made.scheme == "difference" and made.index.bits < 32)
                or (made.scheme == "one_slot" and normal and made.direction > 0)
            )
        case "count_stale":
            return (
                queue
                and made.scheme in ("count", "derived")
                and bool(made.operations & {"flush", "skip", "put_n", "get_n"})
            )
        case "flush_half":
            return queue and made.scheme not in ("derived",)
        case "tail_wrong":
            return made.scheme == "overwrite"
        case "unnormalised":
            return queue and normal and made.direction > 0
        case "store_late":
            return queue and normal and made.scheme != "derived"
        case "peek_next":
            return queue and made.walk != "pointer"
        case "argument_open":
            return made.walk not in ("pointer", "natural") and (queue or made.walk not in (*FREE, "mask"))
        case "back_raw":
            return not queue and made.direction > 0 and made.walk not in (*FREE, "mask", "natural", "lazy")
        case "bulk_split" | "bulk_narrow":
            return queue and normal and made.direction > 0 and made.scheme not in ("derived", "overwrite")
    return False
