"""Work done in a process of its own, so that a crash in it costs only that work.

A solver is a large native library; on rare questions it ends the process that asks. The child is a copy of this process
(fork), so the work needs no sending, only its answer does. Where a system cannot fork, the work is done here.
"""

import multiprocessing
import pickle
from collections.abc import Callable
from multiprocessing.connection import Connection
from typing import Any, TypeVar

Answer = TypeVar("Answer")


class Ended(Exception):
    """The child ended without an answer."""


def aside(work: Callable[[], Answer]) -> Answer:
    """What ``work`` returns, or what it raises; ``Ended`` if its process ended before."""
    if "fork" not in multiprocessing.get_all_start_methods():
        return work()
    context = multiprocessing.get_context("fork")
    here, there = context.Pipe(duplex=False)
    child = context.Process(target=_answer, args=(work, there))
    child.start()
    there.close()
    try:
        good, answer = pickle.loads(here.recv_bytes())
    except EOFError:
        raise Ended from None
    finally:
        here.close()
        child.join()
    if good:
        made: Answer = answer
        return made
    raise answer


def _answer(work: Callable[[], Any], there: Connection) -> None:
    try:
        data = pickle.dumps((True, work()))
    except Exception as trouble:
        data = pickle.dumps((False, RuntimeError(f"{type(trouble).__name__}: {trouble}")))
    there.send_bytes(data)
    there.close()
