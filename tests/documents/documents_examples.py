# ruff: noqa: E501 - files stand as they are written
"""Sound files with everything in them that a file can have; all invented."""

from __future__ import annotations

STACK = """\
title: two metals (invented)
cell: {x: 4.8 um, y: 4.8 um}
layers:
  - {name: overcoat, material: SiN PECVD, thickness: "600 nm ± 8 %, across die ± 3 %", coverage: conformal, sidewall: 70 %}
  - name: metal 2
    material: none
    thickness: 900 nm ± 5 %
    features:
      - {name: bus, material: AlCu, line: {along: y, centre: 2.4 um, width: 1.6 um}, cap: {material: TiN, thickness: 60 nm}}
      - {name: dot, material: W, via: {x: 1 um, y: 1 um, diameter: 400 nm}, liner: {material: TiN, thickness: 30 nm}}
      - {name: pad, material: W, block: {x: [0 um, 0.8 um], y: [0 um, 0.5 um]}, liner: [{material: Ti, thickness: 15 nm}, {material: TiN, thickness: 30 nm}]}
  - {name: substrate, material: Si, thickness: 300 um}
regions:
  - {name: array, at: {x: 0 mm, y: -1 mm}}
  - {name: bond pad, absent: {layers: [overcoat]}, solid: {metal 2: bus}}
  - {name: field, absent: {features_of: metal 2, layers: overcoat}}
"""

RECIPE = """\
steps:
  - {cover: [bond pad], with: silver paint}
  - {name: nitride strip, rates: {SiN PECVD: 90 nm/min ± 10 %, other: 0 nm/min}, for: 8 min}
  - {strips: [AlCu, TiN]}
  - {name: bulk, energy: 2 keV, incidence: 30 deg, motion: rotating, to: via 1}
  - {energy: 800 eV, incidence: 65 deg, motion: rocking ± 20 deg at 90 deg, current_density: 0.4 mA/cm2, for: 12 min 30 s}
  - {name: touch, energy: 500 eV, incidence: 45 deg, motion: still, seen: {layer: metal 1, in: array, within: ± 20 s}}
  - {name: last, energy: 500 eV, incidence: 0 deg, motion: rotating, to: {layer: metal 1, feature: strap, in: [array, field], area: 60 %}}
  - {uncover: [bond pad]}
"""
