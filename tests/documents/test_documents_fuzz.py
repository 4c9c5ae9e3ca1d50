# ruff: noqa: E501 - files stand as they are written
"""Whatever a file holds, reading it gives a document or says what is wrong with it."""

from __future__ import annotations

import contextlib

import pytest
from documents_examples import RECIPE, STACK
from hypothesis import given, settings
from hypothesis import strategies as st

from stackmill.documents import read_job, read_mill, read_recipe, read_stack
from stackmill.documents.marks import read_tree
from stackmill.documents.showing import report
from stackmill.errors import InputErrors

MILL = "gas: argon\ncurrent_density: 0.5 mA/cm2 ± 6 %\nstage: {dial: from surface, zero_error: ± 1 deg}\n"
MILL += "profile: {falls: 3 %, at: 10 mm, centre: {x: 0 mm, y: 1 mm}}\nuniformity: ± 3 %\n"
FORMS = """\
measured: {scale: ± 2 %}
cell: {x: 1 um, y: 1 um}
layers:
  - {name: upper, material: SiO2, top: 600 nm ± 20 nm, level: die, features: [{name: fill, material: Al, pattern_density: 20 %}]}
  - {name: lower, material: SiO2, top: 250 nm, features: [{name: post, material: W, via: {x: 3 nm, y: 3 nm, diameter: 9 nm}, through: [upper, lower]}]}
  - {name: substrate, material: Si, thickness: 300 um}
regions: [{name: array, solid: {lower: post}}]
"""
JOB = "stack: a.yaml\nrecipe: b.yaml\ngoal: {layer: metal 1, feature: strap, at: 50 % ± 30 nm}\nkeep: [{layer: a, at_least: 3 nm}]\n"
READERS = {STACK: read_stack, FORMS: read_stack, RECIPE: read_recipe, MILL: read_mill, JOB: read_job}
PIECES = [
    "\n",
    "  ",
    "- ",
    ": ",
    "{",
    "}",
    "[",
    "]",
    ",",
    "'",
    '"',
    "#",
    "&a ",
    "*a",
    "!t ",
    "|",
    ">",
    "? ",
    "---\n",
    "\t",
]
PIECES += [
    "± 8 %",
    "1e999",
    "-5 nm",
    "nan",
    "none",
    "0",
    "\x00",
    "\ufeff",
    "\u2028",
    "é",
    "😀",
    "across die ± 3 %",
    "<<",
]


def read_or_refuse(read: object, source: str | bytes) -> None:
    try:
        assert callable(read)
        read(source)
    except InputErrors as refused:
        text = report(refused)
        assert text
        assert "\x1b" not in text


@given(st.binary(max_size=300))
def test_random_bytes(source: bytes) -> None:
    for read in READERS.values():
        read_or_refuse(read, source)


@given(st.lists(st.sampled_from(PIECES) | st.text(max_size=6), max_size=40).map("".join))
def test_random_yaml(source: str) -> None:
    with contextlib.suppress(InputErrors):
        read_tree(source, "f")
    read_or_refuse(read_stack, source)


@given(st.data())
@settings(max_examples=150, deadline=None)
def test_mutated_files(data: st.DataObject) -> None:
    """A piece of a good file is cut out, doubled, or replaced."""
    text = data.draw(st.sampled_from(sorted(READERS)))
    read = READERS[text]
    for _ in range(data.draw(st.integers(1, 3))):
        start = data.draw(st.integers(0, len(text)))
        end = data.draw(st.integers(start, min(len(text), start + 30)))
        piece = data.draw(st.sampled_from(["", text[start:end] * 2, *PIECES]))
        text = text[:start] + piece + text[end:]
    read_or_refuse(read, text)


@given(st.data())
def test_mutated_values(data: st.DataObject) -> None:
    """One value of a good file is replaced by a value of any other shape."""
    text = data.draw(st.sampled_from(sorted(READERS)))
    lines = text.split("\n")
    spots = [(k, part) for k, line in enumerate(lines) for part in line.split(", ") if ": " in part]
    k, part = data.draw(st.sampled_from(spots))
    key = part.split(": ")[0]
    value = data.draw(
        st.sampled_from(["", "[]", "{}", "[[1]]", "{a: {b: c}}", "0", "-1 nm", "''", "x", "[a, a]", "1e300 mm"])
    )
    lines[k] = lines[k].replace(part, f"{key}: {value}")
    read_or_refuse(READERS[text], "\n".join(lines))


@pytest.mark.parametrize("text", sorted(READERS))
def test_the_files_to_mutate_are_sound(text: str) -> None:
    assert READERS[text](text).model
