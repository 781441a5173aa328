"""The host's compiler as the judge: C functions are built with its own checks for undefined behaviour and called.

Each call gives the value, or None where a check stopped it. The checks trap, and the trap brings control back, so that
one program can hold many calls. Nothing is optimised: an optimiser may drop a computation whose result is not used,
and its check with it. Even so a compiler narrows ``(char)(a * b)`` before it checks; ``KEEP(a * b)`` in a text prevents
that by storing the value first.
"""

import subprocess
from collections.abc import Sequence
from pathlib import Path

CHECKS = ("undefined", "float-cast-overflow", "bounds-strict")
FLAGS = ("-std=gnu11", "-O0", "-w", *(f"-fsanitize={check}" for check in CHECKS), "-fsanitize-undefined-trap-on-error")

KINDS = (
    *("_Bool", "char", "signed char", "unsigned char", "short", "unsigned short", "int", "unsigned int"),
    *("long", "unsigned long", "long long", "unsigned long long"),
)
"""The integer types by number, as ``KIND`` gives them in the text that is built."""

KEEP = "#define KEEP(x) ({ __auto_type k_ = (x); k_; })\n"

_HEAD = """
#include <setjmp.h>
#include <signal.h>
#include <stdio.h>
static sigjmp_buf back_;
static void caught_(int number) { (void)number; siglongjmp(back_, 1); }
#define KIND(x) _Generic((x), %s)
#define CALL(kind, call) do { \\
    if (sigsetjmp(back_, 1) == 0) { long long value_ = (long long)(call); printf("%%d %%lld\\n", kind, value_); } \\
    else puts("stopped"); } while (0)
int main(void) {
    signal(SIGILL, caught_); signal(SIGTRAP, caught_); signal(SIGFPE, caught_);
    signal(SIGSEGV, caught_); signal(SIGBUS, caught_);
"""


def call_all(folder: Path, text: str, calls: Sequence[tuple[str, str]]) -> list[tuple[int, int] | None]:
    """(kind, value) of each call, None where it was stopped. ``calls`` are pairs of an expression for the kind
    (``0`` if it is of no interest) and the call."""
    kinds = ", ".join(f"{name}: {number}" for number, name in enumerate(KINDS))
    lines = [f"    CALL({f'KIND({kind})' if kind != '0' else '0'}, {call});" for kind, call in calls]
    source = folder / "host.c"
    source.write_text(KEEP + text + _HEAD % kinds + "\n".join(lines) + "\n    return 0;\n}\n", "utf-8")
    built = folder / "host"
    subprocess.run(["gcc", *FLAGS, str(source), "-o", str(built)], check=True)
    done = subprocess.run([str(built)], check=True, capture_output=True, text=True, timeout=60)
    found: list[tuple[int, int] | None] = []
    for line in done.stdout.splitlines():
        if line == "stopped":
            found.append(None)
        else:
            kind, value = line.split()
            found.append((int(kind), int(value)))
    assert len(found) == len(calls)
    return found
