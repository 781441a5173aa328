"""What is held for later: the recent stays, the budget holds."""

from hypothesis import given
from hypothesis import strategies as st

from stepring.read.kept import Kept


def test_the_least_recently_used_goes_first() -> None:
    kept: Kept[str, int] = Kept(10)
    for name, value in (("a", 1), ("b", 2)):
        kept.put(name, value, 5)
    assert kept.get("a") == 1
    kept.put("c", 3, 5)
    assert (kept.get("a"), kept.get("b"), kept.get("c")) == (1, None, 3)


@given(st.lists(st.tuples(st.integers(0, 9), st.integers(0, 40)), min_size=1))
def test_the_budget_holds_and_the_newest_stays(puts: list[tuple[int, int]]) -> None:
    kept: Kept[int, int] = Kept(50)
    sizes: dict[int, int] = {}
    for key, size in puts:
        kept.put(key, size, size)
        sizes[key] = size
        held = [key for key in sizes if kept.get(key) is not None]
        assert key in held
        assert sum(sizes[one] for one in held) <= 50 or len(held) == 1
        assert len(kept) == len(held)
        kept.get(key)
