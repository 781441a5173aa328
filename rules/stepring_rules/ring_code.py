"""What RB01 to RB07 say of a program from its code alone: asked once a program by all rules that must not repeat it."""

from functools import lru_cache
from importlib import import_module

from stepring.rule import Obligation
from stepring.shapes.types import Program

_MODULES = (
    "past_the_end",
    "below_zero",
    "skips_slots",
    "counter_overflow",
    "mask_capacity",
    "wrap_limit",
    "narrow_index",
)


@lru_cache(maxsize=1)
def explained(program: Program) -> tuple[Obligation, ...]:
    """Every obligation of RB01 to RB07 that code alone decides, before runs are looked for."""
    # By name: two of these modules need what stands here.
    modules = [import_module(f"stepring_rules.{name}") for name in _MODULES]
    return tuple(item for module in modules for item in module.from_code(program))
