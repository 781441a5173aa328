"""Work in a process of its own: its answer, its exception, its end."""

import os
import signal

import pytest

from stepring.paths.aside import Ended, aside


def test_the_answer_comes_back() -> None:
    kept = [3, 4]
    assert aside(lambda: (os.getpid() != parent, sum(kept))) == (True, 7)


parent = os.getpid()


def test_what_is_raised_is_raised_here() -> None:
    with pytest.raises(RuntimeError, match="ZeroDivisionError"):
        aside(lambda: 1 // 0)


@pytest.mark.parametrize("ending", [signal.SIGSEGV, signal.SIGKILL])
def test_an_abrupt_end_is_told(ending: signal.Signals) -> None:
    with pytest.raises(Ended):
        aside(lambda: os.kill(os.getpid(), ending))


def test_a_large_answer_comes_back_whole() -> None:
    assert len(aside(lambda: b"x" * 5_000_000)) == 5_000_000
