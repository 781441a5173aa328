"""What the values engine settles of a ring's subscripts: guards in one function, nothing assumed of its start."""

from tests.support import lower_text

from stepring.places import Origin, Position
from stepring.shapes.ring_ranges import with_ranges
from stepring.shapes.ring_types import CheckedAccess
from stepring.shapes.types import Ring

TEXT = """
static short tray[8];
int guarded(unsigned char slot) { if (slot < 8) return tray[slot]; return 0; }
int unguarded(unsigned char slot) { return tray[slot]; }
int masked(unsigned slot) { return tray[slot & 7u]; }
int one_too_many(unsigned char slot) { if (slot <= 8) return tray[slot]; return 0; }
int swept(void) { int sum = 0; for (int n = 0; n < 8; n++) sum += tray[n]; return sum; }
"""


def origin(position: Position) -> Origin:
    return Origin(position.file, position.line, 1, 2)


def settled(line: int) -> CheckedAccess:
    """The access on a line of the text, after the values engine has looked at it."""
    where = Origin("feeder.c", line, 1, 2)
    access = CheckedAccess("take", where, "slot", "load", None, None, "none", None, doubt="not followed")
    ring = Ring("tray", "tray", "variable", where, 8, 2, (), (access,), "unknown", "none")
    (again,) = with_ranges((ring,), lower_text(TEXT).functions, origin)
    (found,) = again.accesses
    assert isinstance(found, CheckedAccess)
    return found


def test_a_guard_in_the_function_settles_an_access() -> None:
    for line in (3, 5, 7):
        access = settled(line)
        assert access.settled, line
        assert access.range is not None
        assert (access.range.low, access.range.high) == (0, 7), line


def test_what_is_not_guarded_stays_open() -> None:
    for line, high in ((4, 255), (6, 8)):
        access = settled(line)
        assert not access.settled, line
        assert access.range is not None
        assert access.range.high == high, line
