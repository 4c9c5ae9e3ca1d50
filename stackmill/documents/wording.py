"""Every sentence an error about a file can say.

A complaint is one sentence as a colleague would say it, and a cure: what to write instead.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from stackmill.documents.showing import in_order, report
from stackmill.units import quoted

__all__ = ["in_order", "report"]  # so that one import serves to word and to lay out


@dataclass(frozen=True, slots=True)
class Sentence:
    """What is wrong and what to do. opened: the place to show is where the thing at fault was begun."""

    what: str
    cure: str = ""
    opened: bool = False


class Refusal(ValueError):
    """Raised by a model's checks: the sentence, and the key path inside the model at fault."""

    def __init__(self, says: Sentence, *path: str | int) -> None:
        super().__init__(says.what)
        self.says = says
        self.path = path


class Refusals(ValueError):
    """Several refusals of one model at once."""

    def __init__(self, refusals: Iterable[Refusal]) -> None:
        self.refusals = tuple(refusals)
        super().__init__("; ".join(refusal.says.what for refusal in self.refusals))


def refuse(what: str, cure: str = "", *path: str | int) -> Refusal:
    """A refusal from its words, ready to raise."""
    return Refusal(Sentence(what, cure), *path)


# --- files themselves ---------------------------------------------------------------------------------------

NO_SUCH_FILE = "there is no such file"
IS_A_FOLDER = Sentence("this is a folder, not a file", "name a file in it")


def no_such_file(name: str, neighbours: Sequence[str]) -> Sentence:
    """A file that is not there."""
    near = nearest(name, neighbours, likeness=0.75)
    return Sentence(NO_SUCH_FILE, f"did you mean {near}?" if near else "check its name and folder")


def cannot_open(reason: str) -> Sentence:
    """A file that is there but cannot be opened."""
    return Sentence(f"this file cannot be opened: {reason.lower()}", "check who may read it")


EMPTY_FILE = Sentence("this file is empty", "a job begins with 'stack:', a stack with 'layers:'")


def no_block(what: str, keys: Sequence[str], shape: str) -> Sentence:
    """A file that is not a group of keys at all."""
    if shape == "nothing":
        return Sentence(f"this {what} is empty", f"begin with '{keys[0]}:'")
    return Sentence(f"a {what} is a group of keys, and this is {shape}", f"write its keys: {listed(keys, last='and')}")


# --- the keys and values of a file --------------------------------------------------------------------------


def nearest(word: str, known: Iterable[str], likeness: float = 0.6) -> str | None:
    """The known word most like this one, or None where nothing is like it (likeness 0 to 1)."""
    by_folded = {_folded(k): k for k in known}
    found = difflib.get_close_matches(_folded(word), by_folded, n=1, cutoff=likeness)
    return by_folded[found[0]] if found else None


def _folded(word: str) -> str:
    return " ".join(word.casefold().replace("_", " ").replace("-", " ").split())


def listed(words: Sequence[str], last: str = "or", most: int = 12) -> str:
    """`a, b or c`, cut where the list is long."""
    shown = [*words[:most], f"{len(words) - most} more"] if len(words) > most else list(words)
    return f"{', '.join(shown[:-1])} {last} {shown[-1]}" if len(shown) > 1 else "".join(shown)


def choose(word: str, known: Sequence[str], *, nothing: str = "") -> str:
    """A cure for a name that is not known: the nearest one, or the list."""
    near = nearest(word, known)
    if near:
        return f"did you mean {near}?"
    return f"use {listed(known)}" if known else nothing


def unknown_key(key: str, owner: str, known: Sequence[str]) -> Sentence:
    """A key that its block does not have."""
    if key.startswith("across die"):
        return Sentence(
            "the comma before 'across die' ends the value here",
            'put the value in quotes: "600 nm ± 8 %, across die ± 3 %"',
        )
    near = nearest(key, known)
    cure = f"did you mean '{near}'?" if near else f"known here: {listed(known, last='and', most=20)}"
    return Sentence(f"{owner} has no key {quoted(key)}", cure)


def missing_key(key: str, owner: str, example: str = "") -> Sentence:
    """A key that has to be there."""
    return Sentence(f"{owner} has no {key}", f"add {example or key + ': ...'}")


def empty(key: str) -> Sentence:
    """A key with nothing after it."""
    return Sentence(f"nothing stands after '{key}:'", "write its value, or leave the key out")


def nothing_in(key: str) -> Sentence:
    """An empty list where something is needed."""
    return Sentence(f"the list of '{key}' is empty", "name at least one")


def wrong_shape(key: str, wanted: str, found: str, example: str) -> Sentence:
    """A list where a text belongs, and the like."""
    return Sentence(f"{key} has to be {wanted}, and this is {found}", f"write {example or wanted}")


def not_a_choice(key: str, text: str, choices: Sequence[str]) -> Sentence:
    """A word outside a short list."""
    near = nearest(text, choices)
    cure = f"did you mean {near}?" if near else f"write {listed(choices)}"
    return Sentence(f"{key} cannot be {quoted(text)}", cure)


def no_such(what: str, name: str, known: Sequence[str]) -> Sentence:
    """A name that points to nothing. what: `layer`, `region`."""
    return Sentence(f"there is no {what} called {quoted(name)}", choose(name, known, nothing="leave it out"))


def no_such_feature(layer: str, name: str, known: Sequence[str]) -> Sentence:
    """A feature that its layer does not have."""
    cure = choose(name, known, nothing="this layer has no features")
    return Sentence(f"layer {quoted(layer)} has no feature called {quoted(name)}", cure)


# --- values given on the command line -----------------------------------------------------------------------

SET_EXAMPLE = "write --set 'mill.current_density=0.4 mA/cm2'"


def leads_nowhere(before: str, key: str) -> Sentence:
    """A key path that goes on below a text."""
    return Sentence(f"{before} is a single value and has no {quoted(key)}", "end the path there")


def no_such_item(key: str, count: int, names: Sequence[str]) -> Sentence:
    """A list item that is not there."""
    known = f", or a name: {listed(names)}" if names else ""
    return Sentence(f"there is no item {quoted(key)} in this list", f"count from 1 to {count}{known}")


# --- one file against another -------------------------------------------------------------------------------


def needs_a_job(kind: str) -> Sentence:
    """A file of another kind where a job is asked for."""
    return Sentence(f"this is a {kind} file", f"give a job file that names it as '{kind}:', or a stack file")


def wrong_kind(path: str, found: str, wanted: str) -> Sentence:
    """A path that leads to another kind of file."""
    return Sentence(f"{path} is a {found} file, not a {wanted} file", f"name a {wanted} file")


def binds_back(path: str) -> Sentence:
    """A path that leads back to the file it stands in."""
    return Sentence(f"{path} is this job file itself", "name the other file")


def cannot_bind(path: str, why: str, cure: str) -> Sentence:
    """A bound file that cannot be read. why: as where it is opened by itself."""
    if why == NO_SUCH_FILE:
        return Sentence(f"there is no file {quoted(path)}", cure or "its path counts from the folder of this file")
    return Sentence(f"{quoted(path)} cannot be read: {why}", cure)


def unknown_material(name: str, near: Sequence[str]) -> Sentence:
    """A material neither the library nor the lab's overlay knows."""
    cure = (
        f"did you mean {listed(near)}?"
        if near
        else "'stackmill materials' lists them; a lab's own go in a materials file"
    )
    return Sentence(f"no material is called {quoted(name)}", cure)


def absent_from(what: str, region: str, where: Sequence[str]) -> Sentence:
    """A layer or feature that a region lacks."""
    cure = f"it is in {listed(where, last='and')}" if where else "no region has it"
    return Sentence(f"region {quoted(region)} has no {what}", cure)


def nowhere(what: str) -> Sentence:
    """A layer or feature that no region has."""
    return Sentence(f"no region has {what}", "check what the regions leave out")


def too_slow(energy: str, gas: str, material: str, threshold: str) -> Sentence:
    """An energy that sputters nothing."""
    return Sentence(f"{energy} {gas} is below the {threshold} it takes to sputter {material}", "use more energy")


def never_reached(step: str, target: str) -> Sentence:
    """A step that would go on for ever."""
    return Sentence(
        f"step {quoted(step)} never reaches {target}", "is it covered, or is something in its way not milled?"
    )


def already_passed(step: str, target: str) -> Sentence:
    """A step whose end lies behind it."""
    return Sentence(f"{target} has been reached before step {quoted(step)} begins", "aim deeper, or leave the step out")


NEEDS_COUPONS = Sentence(
    "a current density 'from coupon' needs a calibration",
    "add calibration: FILE to the job, as stackmill calibrate writes it, or the current you measured",
)


def other_gas(calibrated: str, mill: str) -> Sentence:
    """A calibration made with another gas."""
    return Sentence(
        f"this calibration was made with {calibrated}, and the mill runs on {mill}", "calibrate with that gas"
    )


def no_rate(step: str, materials: Sequence[str]) -> Sentence:
    """A process that does not say what it does to some of the stack."""
    what = listed(materials, last="and")
    return Sentence(f"step {quoted(step)} gives no rate for {what}", "add it, or other: 0 nm/min")


def touches_nothing(step: str) -> Sentence:
    """A strip or process whose materials the stack does not have."""
    return Sentence(f"step {quoted(step)} names no material of this stack", "check the names, or leave the step out")


def covered_already(region: str, step: str) -> Sentence:
    """A region covered twice."""
    return Sentence(f"region {quoted(region)} is covered already, by step {quoted(step)}", "uncover it first")


def not_covered(region: str) -> Sentence:
    """A region uncovered that is bare."""
    return Sentence(f"region {quoted(region)} is not covered here", "cover it in an earlier step, or leave it out")


def band_leaves_its_layer(band: str, layer: str, thickness: str) -> Sentence:
    """A goal's band that reaches past its layer."""
    return Sentence(f"the band {band} reaches past {layer}, which is {thickness} thick", "narrow it, or move it inward")


def keeps_more_than_there_is(what: str, thickness: str) -> Sentence:
    """A keep thicker than what it keeps."""
    return Sentence(f"{what} is only {thickness} thick to begin with", "ask for less")


def off_the_map(region: str) -> Sentence:
    """A region where the beam was not measured."""
    return Sentence(f"region {quoted(region)} lies outside the mill's beam map", "move it, or measure a larger map")


def out_of_beam(region: str) -> Sentence:
    """A region that the beam's formula leaves without current."""
    what = f"region {quoted(region)} lies where the mill's profile leaves no beam"
    return Sentence(what, "check the region's 'at' and the profile")


def overlapping(first: str, second: str, layer: str, *, passing: bool) -> Sentence:
    """Two features in one place of a layer. passing: one of them goes through several layers."""
    what = f"features {quoted(first)} and {quoted(second)} overlap"
    if passing:
        return Sentence(f"{what} in {quoted(layer)}", "move one: a feature through several layers is there alone")
    return Sentence(what, "move one, or give both the same material and films")


def outside_cell(feature: str) -> Sentence:
    """A feature with its centre outside the cell."""
    return Sentence(f"feature {quoted(feature)} lies outside the cell", "move it, or make the cell larger")


def wider_than_cell(feature: str, axis: str) -> Sentence:
    """A feature that would lie on itself."""
    what = f"feature {quoted(feature)} is wider than the cell in {axis}"
    return Sentence(what, "make the cell larger, or the feature 'solid' in a region")


def films_across(feature: str, films: str, room: str) -> Sentence:
    """A liner that fills its feature from side to side."""
    what = f"the liner of feature {quoted(feature)} takes {films} from side to side, and it is {room} wide"
    return Sentence(what, "make the liner thinner, or name its material as the feature's")


def films_in_height(feature: str, films: str, room: str) -> Sentence:
    """Cap, base and liner that fill their feature from top to bottom."""
    what = f"the films of feature {quoted(feature)} are {films} thick together, and its layer {room}"
    return Sentence(what, "make them thinner; sizes are outer, films are carved inside")
