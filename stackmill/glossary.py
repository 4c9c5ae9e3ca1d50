"""The words of the trade as stackmill uses them: one name, one meaning, one unit.

Code, help, docs and files use exactly these words. docs/glossary.md is generated from this table.
"""

from __future__ import annotations

from stackmill.frozen import frozen


@frozen
class Word:
    """A word, what it means, and the unit it has inside the program ('' where it has none)."""

    name: str
    meaning: str
    unit: str = ""


GLOSSARY: tuple[Word, ...] = (
    Word("stack", "the layers of a die, top down, with their features"),
    Word(
        "layer",
        "one level; has a material (what fills it between features; `none` if nothing) and a thickness",
        "nm",
    ),
    Word("feature", "a line, via or block of another material inside a layer", "nm"),
    Word("liner", "thin film on a feature's sides and bottom, carved inside the drawn outline", "nm"),
    Word(
        "cap",
        "thin film on a feature's top (an anti-reflective coating, say), carved inside the drawn height",
        "nm",
    ),
    Word("base", "thin film under a feature (an underlayer), carved inside the drawn height", "nm"),
    Word(
        "coverage",
        "how a layer covers what is below: planarised (fills and ends flat) or conformal (follows it)",
    ),
    Word("sidewall", "share of a conformal layer's thickness that grows on a vertical wall", "0..1"),
    Word("cell", "the plan rectangle that repeats; one a stack", "nm"),
    Word("region", "a kind of location on the die: absent layers or features, solid layers, a witness piece"),
    Word(
        "column",
        "what lies straight down at one point: segments of material, layer, feature, part, thickness",
    ),
    Word("segment", "one piece of a column", "nm"),
    Word("column map", "all regions with their columns, areas and starting heights"),
    Word("height", "up from the substrate's top; regions are compared by height only", "nm"),
    Word("depth", "a region's highest starting point minus its height now", "nm"),
    Word("gas", "the species of the beam"),
    Word("current density", "of the beam, in the plane normal to it", "mA/cm2"),
    Word("divergence", "half-angle of the cone that holds 63 % (1 - 1/e) of the beam", "deg"),
    Word("doubly charged", "share of the current carried by doubly charged ions", "0..1"),
    Word("incidence", "angle between beam and sample normal; 0 is straight down", "deg"),
    Word("motion", "still, rotating, or rocking by a half-angle"),
    Word("step", "one thing done: a setting held, a strip, a cover or an uncovering", "s"),
    Word("recipe", "steps in order"),
    Word("yield", "atoms leaving for each arriving ion", "atoms/ion"),
    Word("milling rate", "speed of a flat surface at the given incidence", "nm/s; nm/min at borders"),
    Word("selectivity", "ratio of two milling rates"),
    Word(
        "goal",
        "what must be exposed: a layer or a feature in it, where, at which level, how much of it clear",
    ),
    Word("keep", "what must survive, where, at least how thick", "nm"),
    Word("exposed", "in one draw: the moment the goal is met; of a window: its early end", "s"),
    Word("lost", "in one draw: the moment the goal or a keep is spoilt; of a window: its late end", "s"),
    Word("draw", "one die and mill that may be true: a value for every uncertain input"),
    Word("chance", "share of draws in which a stop at that time succeeds", "0..1"),
    Word("confidence", "the chance asked for", "0..1"),
    Word("window", "the stop times whose chance is at least the confidence", "s"),
    Word("latest stop", "the late end of the window", "s"),
    Word("first look", "the latest moment at which the chance of loss is under 5 %", "s"),
    Word("left standing", "share of the goal's area still covered at the stop (stringers, pillars)", "0..1"),
    Word("relief", "highest minus lowest (topography)", "nm"),
    Word("pillar", "a feature standing above its surroundings", "nm"),
    Word("recess", "a feature sunk below its surroundings", "nm"),
    Word("clock", "cumulative beam-on time", "s"),
    Word("leg", "the run from the start, or from a stop by eye, to the next stop by eye", "s"),
    Word("coupon", "a witness piece milled and measured"),
    Word("calibration", "what coupons say about this mill on this day"),
    Word("look", "a stop to see how far it is; a step stopped by eye (`seen`) is one"),
    Word("sd", "standard deviation"),
)
