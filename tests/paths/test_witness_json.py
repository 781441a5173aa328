"""Witnesses through JSON and back, and JSON that is none."""

import copy
import json
from typing import Any, get_args

import pytest
from hypothesis import given
from hypothesis import strategies as st

from stepring.paths.types import Fault
from stepring.paths.witness import Ending, Made, OutsideValue, Reference, StartValue, Value, Witness, WitnessCall
from stepring.paths.witness_json import BadWitness, with_root, without_root, witness_from_json, witness_to_json
from stepring.places import Origin

ROOT = "/barge/firmware"

names = st.from_regex(r"[a-z_][a-z0-9_]{0,8}", fullmatch=True)
files = st.builds(lambda folder, name: f"{folder}{name}.c", st.sampled_from(("src/", "")), names)
objects = st.one_of(
    names,
    st.builds(lambda file, name: f"{ROOT}/{file}:{name}", files, names),
    st.builds(lambda file, outer, name: f"{ROOT}/{file}:{outer}:{name}@12.5", files, names, names),
    st.builds(lambda name: f"/usr/include/{name}.h:{name}", names),
)
types = st.one_of(
    st.sampled_from(("unsigned char", "long long")),
    st.builds(lambda tag: f"struct {tag}", names),
    st.builds(lambda tag, file: f"struct {tag}@{ROOT}/{file}:3:8", names, files),
)
paths = st.sampled_from(("", ".head", "[3].length", ".slots[2].grams"))
values: st.SearchStrategy[Value] = st.one_of(
    st.none(),
    st.integers(-(2**64), 2**64),
    st.builds(Reference, objects, st.integers(0, 300), st.sampled_from(("", ".slots"))),
)
places = st.builds(
    Origin,
    st.builds(lambda file: f"{ROOT}/{file}", files),
    st.integers(1, 9999),
    st.integers(1, 200),
    st.integers(1, 200),
    st.text(max_size=12),
)
endings = st.builds(
    Ending,
    st.sampled_from(("undefined", "result", "value", "endless")),
    places,
    st.none() | st.sampled_from(get_args(Fault)),
    objects | st.just(""),
    st.text(max_size=8),
    st.text(max_size=8),
)
witnesses = st.builds(
    Witness,
    st.sampled_from(("LP64", "IP16")),
    st.lists(st.builds(Made, names, types, st.integers(1, 4000)), max_size=3).map(tuple),
    st.lists(st.builds(StartValue, objects, paths, values), max_size=4).map(tuple),
    st.lists(
        st.builds(
            WitnessCall,
            objects,
            st.lists(values, max_size=3).map(tuple),
            st.lists(st.builds(OutsideValue, names | st.just("0xc6"), values), max_size=3).map(tuple),
        ),
        max_size=5,
    ).map(tuple),
    endings,
    st.lists(st.tuples(names, objects, paths), max_size=3).map(tuple),
    st.lists(st.text(max_size=20), max_size=2).map(tuple),
)


@given(witnesses)
def test_a_witness_comes_back_as_it_was(witness: Witness) -> None:
    text = json.dumps(witness_to_json(witness, ROOT))
    assert ROOT not in text
    assert witness_from_json(json.loads(text), ROOT) == witness


@given(witnesses)
def test_every_number_is_one_that_all_readers_keep(witness: Witness) -> None:
    def numbers(data: Any) -> list[int]:
        if isinstance(data, dict):
            return [number for item in data.values() for number in numbers(item)]
        if isinstance(data, list):
            return [number for item in data for number in numbers(item)]
        return [data] if isinstance(data, int) else []

    assert all(abs(number) < 2**53 for number in numbers(witness_to_json(witness, ROOT)))


@given(objects | types)
def test_a_root_is_taken_off_and_put_back(identity: str) -> None:
    assert ROOT not in without_root(identity, ROOT)
    assert with_root(without_root(identity, ROOT), ROOT) == identity


GOOD = witness_to_json(
    Witness(
        "LP64",
        (Made("q", "struct feed_queue", 1),),
        (StartValue("q", ".head", 3),),
        (WitnessCall("feed_put", (Reference("q"), 5), (OutsideValue("shore_byte", 1),)),),
        Ending("undefined", Origin("src/feed.c", 9, 5, 12, "q->head"), "bounds"),
        (("head", "q", ".head"),),
        ("the caller's queue is its own",),
    )
)


@pytest.mark.parametrize(
    ("way", "value", "words"),
    [
        ((), [], "the witness must be an object"),
        ((), {}, "the witness has no member 'model'"),
        (("model",), 3, "model must be text"),
        (("model",), "", "model must be text that is not empty"),
        (("colour",), 1, "has the member 'colour', which is not known"),
        (("made",), {}, "made must be an array, and is an object"),
        (("made", 0, "elements"), 0, "made[0].elements must be an integer from 1"),
        (("made", 0, "elements"), True, "made[0].elements must be an integer"),
        (("made", 0, "elements"), 10**12, "made[0].elements must be an integer"),
        (("made", 0, "name"), "q; x", "made[0].name must be a name"),
        (("start", 0, "value"), 1.5, "start[0].value must be an integer, null or a pointer's object, and is 1.5"),
        (("start", 0, "value"), "0x10", "start[0].value must be an integer"),
        (("start", 0, "value"), {"to": "q"}, "start[0].value has no member 'at'"),
        (("calls", 0, "outside"), None, "calls[0].outside must be an array, and is null"),
        (("calls", 0, "outside", 0, "name"), "", "calls[0].outside[0].name must be text"),
        (("calls", 0), "feed_put", "calls[0] must be an object, and is 'feed_put'"),
        (("ending", "kind"), "sad", "ending.kind must be one of undefined, result, value, endless, and is 'sad'"),
        (("ending", "fault"), [1], "ending.fault must be null or one of"),
        (("ending", "where", "line"), -1, "ending.where.line must be an integer from 0"),
        (("ending", "where"), None, "ending.where must be an object, and is null"),
        (("watched", 0, "path"), None, "watched[0].path must be text"),
        (("assumed", 0), 4, "assumed[0] must be text, and is 4"),
    ],
)
def test_what_is_no_witness_is_refused_with_the_place(way: tuple[Any, ...], value: Any, words: str) -> None:
    data = copy.deepcopy(GOOD)
    if not way:
        data = value
    else:
        holder: Any = data
        for step in way[:-1]:
            holder = holder[step]
        holder[way[-1]] = value
    with pytest.raises(BadWitness) as caught:
        witness_from_json(data)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)
