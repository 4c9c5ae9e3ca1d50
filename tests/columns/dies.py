"""Invented dies to test with, written as an engineer would."""

from __future__ import annotations

import yaml

from stackmill.documents.stack import Stack

SUBSTRATE = "{name: substrate, material: Si, thickness: 5 um}"


def die(layers: str, *, cell: str = "{x: 4.8 um, y: 4.8 um}", regions: str = "") -> Stack:
    """A stack from its layers (YAML list items, top down, without the substrate)."""
    text = f"cell: {cell}\nlayers:\n{layers.rstrip()}\n  - {SUBSTRATE}\n"
    return Stack.model_validate(yaml.safe_load(text + (f"regions:\n{regions}" if regions else "")))


TWO_METALS = """
  - {name: overcoat, material: SiN, thickness: 600 nm, coverage: conformal, sidewall: 70 %}
  - name: metal 2
    material: none
    thickness: 900 nm
    features:
      - {name: bus, material: AlCu, line: {along: y, centre: 2.4 um, width: 1.6 um},
         cap: {material: TiN, thickness: 60 nm}, base: {material: TiN, thickness: 80 nm}}
  - name: via 1
    material: SiO2
    thickness: 700 nm
    features:
      - {name: plug, material: W, via: {x: 2.4 um, y: 2.4 um, diameter: 400 nm},
         liner: [{material: Ti, thickness: 15 nm}, {material: TiN, thickness: 30 nm}]}
  - name: metal 1
    material: SiO2
    thickness: 600 nm
    features:
      - {name: strap, material: AlCu, line: {along: x, centre: 2.4 um, width: 1.2 um},
         cap: {material: TiN, thickness: 60 nm}}
      - {name: pad land, material: AlCu, block: {x: [0 um, 0.8 um], y: [0 um, 0.8 um]}}
  - {name: oxide, material: BPSG, thickness: 800 nm}
"""
TWO_METALS_REGIONS = """
  - {name: array}
  - {name: bond pad, absent: {layers: [overcoat]}, solid: {metal 2: bus}}
  - {name: bare field, absent: {features_of: [metal 2, via 1, metal 1]}}
"""


def two_metals() -> Stack:
    return die(TWO_METALS, regions=TWO_METALS_REGIONS)


CROWDED = """
  - {name: second film, material: SiN, thickness: 150 nm, coverage: conformal, sidewall: 50 %}
  - {name: first film, material: SiO2, thickness: 200 nm, coverage: conformal}
  - name: metal
    material: none
    thickness: 300 nm
    features:
      - {name: post, material: W, via: {x: 500 nm, y: 500 nm, diameter: 400 nm}}
      - {name: block, material: W, block: {x: [0.9 um, 1.5 um], y: [1.0 um, 1.4 um]}}
      - {name: corner, material: W, via: {x: 2.0 um, y: 2.0 um, diameter: 300 nm}}
  - name: vias
    material: SiO2
    thickness: 300 nm
    features:
      - {name: plug, material: W, via: {x: 500 nm, y: 560 nm, diameter: 300 nm},
         liner: {material: TiN, thickness: 40 nm}}
"""


def crowded() -> Stack:
    """Round and square features close together under two films of different sidewall share, across cell edges."""
    return die(CROWDED, cell="{x: 2 um, y: 2 um}")


STEPPED = """
  - {name: film, material: SiN, thickness: 250 nm, coverage: conformal, sidewall: 80 %}
  - name: upper
    material: none
    thickness: 200 nm
    features: [{name: ridge, material: Al, line: {along: x, centre: 1.0 um, width: 500 nm}}]
  - name: lower
    material: none
    thickness: 150 nm
    features: [{name: bar, material: W, block: {x: [0.6 um, 1.3 um], y: [0.2 um, 1.4 um]}}]
"""


def stepped() -> Stack:
    """A line that climbs over a block: four heights under one film."""
    return die(STEPPED, cell="{x: 2 um, y: 2 um}")


BURIED = """
  - {name: top oxide, material: SiO2, thickness: 300 nm}
  - {name: liner film, material: SiN, thickness: 200 nm, coverage: conformal}
  - name: gates
    material: none
    thickness: 250 nm
    features:
      - {name: gate, material: poly, line: {along: y, centre: 0.5 um, width: 300 nm},
         cap: {material: SiN, thickness: 50 nm}}
      - {name: cross, material: poly, line: {along: x, centre: 0.7 um, width: 200 nm},
         cap: {material: SiN, thickness: 50 nm}}
"""


def buried() -> Stack:
    """Crossing lines that merge, a film over them, and a flat layer over that."""
    return die(BURIED, cell="{x: 1.6 um, y: 1.6 um}")
