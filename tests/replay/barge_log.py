"""A small project on disk (a feed barge's queue, weight filter and shore link) and a log with witnesses for it."""

import json
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from stepring.paths.types import Fault
from stepring.paths.witness import Ending, Made, OutsideValue, Reference, StartValue, Value, Witness, WitnessCall
from stepring.pipeline import Options, inspect
from stepring.places import Origin
from stepring.report.sarif import sarif_log
from stepring.report.serialise import to_bytes
from stepring.rule import Obligation

QUEUE_H = """\
#ifndef QUEUE_H
#define QUEUE_H
#include <stdint.h>
struct feed_command { uint8_t auger; uint16_t grams; };
struct feed_queue { struct feed_command slots[SLOTS]; uint8_t head, tail; };
int feed_put(struct feed_queue *q, uint16_t grams);
int feed_count(const struct feed_queue *q);
uint8_t shore_level(void);
extern uint8_t weight_at;
#endif
"""

QUEUE_C = """\
#include "queue.h"
#include <string.h>

int shore_ready(void);
uint8_t *shore_buffer(void);
void shore_ack(int code, ...);
void panel_draw(const struct feed_queue *q);
extern volatile uint8_t lamp;

static uint16_t weights[8];
uint8_t weight_at;
static int rounds;

int feed_put(struct feed_queue *q, uint16_t grams)
{
    q->slots[q->head].grams = grams;
    q->head = q->head + 1;
    return 1;
}

int feed_count(const struct feed_queue *q) { return q->head - q->tail; }

static int weight_add(uint16_t value)
{
    weights[weight_at & 15] = value;
    weight_at++;
    return weight_at;
}

int weight_poll(void)
{
    int added = 0;
    while (shore_ready()) {
        weight_add(7);
        shore_ack(added, added);
        added++;
    }
    return added;
}

uint8_t shore_first(void) { return shore_buffer()[0]; }

void feed_load(uint8_t *to, const uint8_t *from, unsigned n) { memcpy(to, from, n); }

int feed_scale(int grams) { return grams * 1000; }

int feed_wait(void)
{
    while (rounds < 10) { rounds &= 7; }
    return rounds;
}

int scale_raw(void) { return *(volatile uint8_t *)0xc6; }

int counted(void) { static uint8_t calls; calls++; return calls; }

int level_of(int percent) { return shore_level() * percent / (percent - 50); }

void show(const struct feed_queue *q) { panel_draw(q); lamp = 1; }

int main(void) { return weight_poll(); }
"""

LEVEL_C = """\
#include "queue.h"
static uint8_t scaled(uint8_t at) { return (uint8_t)(at * SCALE); }
uint8_t shore_level(void) { return scaled(weight_at); }
int main(void) { return 0; }
"""

QUEUE = "src/queue.c"
MADE = Made("q", "struct feed_queue", 1)


def write_project(root: Path) -> None:
    """The project, with its compile database."""
    for name, text in (("include/queue.h", QUEUE_H), (QUEUE, QUEUE_C), ("src/level.c", LEVEL_C)):
        path = root / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    entries = [
        {
            "directory": ".",
            "arguments": ["cc", "-std=c11", "-O2", "-DSLOTS=4", "-DSCALE=3", "-Iinclude", "-c", f"src/{name}.c"],
            "file": f"src/{name}.c",
        }
        for name in ("queue", "level")
    ]
    (root / "compile_commands.json").write_text(json.dumps(entries), encoding="utf-8")


def at(root: Path, text: str, file: str = QUEUE) -> Origin:
    """The place of the first line of a file that holds a text."""
    lines = (root / file).read_text(encoding="utf-8").splitlines()
    number, line = next((number, line) for number, line in enumerate(lines, 1) if text in line)
    column = line.index(text) + 1
    return Origin(str(root / file), number, column, column + len(text), text)


def undefined(root: Path, text: str, fault: Fault) -> Ending:
    return Ending("undefined", at(root, text), fault)


def witness(ending: Ending, *calls: tuple[str, tuple[Value, ...]], **more: Any) -> Witness:
    """A witness for the host's usual data model."""
    made = tuple(WitnessCall(function, arguments) for function, arguments in calls)
    return replace(Witness("LP64", (), (), made, ending), **more)


def bounds(root: Path) -> Witness:
    """The fifth command goes past the end of the queue."""
    return witness(
        undefined(root, "q->slots[q->head].grams", "bounds"),
        *(("feed_put", (Reference("q"), grams)) for grams in (10, 20, 30)),
        made=(MADE,),
        start=(StartValue("q", ".head", 2), StartValue("q", ".tail", 2)),
        watched=(("head", "q", ".head"),),
        assumed=("the caller's queue is its own */ #error",),
    )


def witnesses(root: Path) -> dict[str, Witness]:
    """Witnesses of every kind, by name; all of them hold."""
    queue = f"{root}/{QUEUE}"
    outside = (
        *(OutsideValue(name, value) for name, value in 2 * (("shore_ready", 1), ("shore_ack", None))),
        OutsideValue("shore_ready", 0),
    )
    return {
        "bounds": bounds(root),
        "result": witness(
            Ending("result", at(root, "q->head - q->tail"), None, "", "-2", "2"),
            ("feed_count", (Reference("q"),)),
            made=(MADE,),
            start=(StartValue("q", ".head", 1), StartValue("q", ".tail", 3)),
        ),
        "static": witness(
            undefined(root, "weights[weight_at & 15]", "bounds"),
            (f"{queue}:weight_add", (5,)),
            start=(StartValue("weight_at", "", 8),),
        ),
        "value": witness(
            Ending("value", at(root, "weight_at++"), None, "weight_at", "8", "0 to 7"),
            ("weight_poll", ()),
            start=(StartValue("weight_at", "", 6), StartValue(f"{queue}:weights", "[3]", 70)),
            calls=(WitnessCall("weight_poll", (), outside),),
        ),
        "pointer from outside": witness(
            undefined(root, "shore_buffer()[0]", "null"),
            calls=(WitnessCall("shore_first", (), (OutsideValue("shore_buffer", None),)),),
        ),
        "copy": witness(
            undefined(root, "memcpy", "bounds"),
            ("feed_load", (Reference("goal", 1), Reference("source"), 8)),
            made=(Made("goal", "unsigned char", 8), Made("source", "unsigned char", 8)),
        ),
        "overflow": witness(undefined(root, "grams * 1000", "overflow"), ("feed_scale", (2147484,))),
        "endless": witness(Ending("endless", at(root, "while (rounds")), ("feed_wait", ())),
        "two units": witness(
            undefined(root, "percent / (percent", "division"),
            ("level_of", (50,)),
            start=(StartValue("weight_at", "", 4),),
        ),
    }


def log_of(root: Path, given: Sequence[Witness], **options: Any) -> Path:
    """Inspect the project and write a log in which each witness is a finding's."""
    outcome = inspect((root,), Options(**options))
    found = tuple(
        Obligation(
            "RB01",
            "fail",
            one.ending.where,
            f"Finding {number} is *made* up",
            "error",
            "Because a test needs it",
            evidence=one,
        )
        for number, one in enumerate(given)
    )
    path = root / "log.sarif"
    path.write_bytes(to_bytes(sarif_log(replace(outcome, obligations=found), ("fail",), 1)))
    return path
