"""Fits the angular shape: constants of their own for W and C, and the rule in the mass ratio for all others.

    python -m tests.published.fit_angular     # prints the rule; writes the constants of W, C and diamond

Data: data/angular_ar_on_w.csv and data/angular_ar_on_c.csv (W. Eckstein, IPP-Report 9/117, 1998) and
the maxima of Cu, Au, Si, Al and Ti near 1 keV in data/angular.csv (ranges from memory, or seen in a citing
paper). The rule's coefficients stand in stackmill/laws/incidence.py; a test compares.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import least_squares

from stackmill.constants import GASES
from stackmill.laws.incidence import MASS_RATIO_POWER, MASS_RULE, NEAR_THRESHOLD
from stackmill.materials.library import Library
from stackmill.rates.yields import threshold_ev
from tests.published.blocks import entry_path

DATA = Path(__file__).parent / "data"
Array = NDArray[np.float64]
LOWEST_EV, LOWEST_DEG, HIGHEST_DEG = 100.0, 15.0, 75.0


@dataclass(frozen=True)
class Curve:
    """ln(Y/Y0) of one element at one energy: incidence_rad (n,), ln_ratio (n,)."""

    element: str
    energy_ev: float
    mass_ratio: float
    closeness: float
    incidence_rad: Array
    ln_ratio: Array

    @property
    def mid(self) -> NDArray[np.bool_]:
        """Which points lie within 15 to 75 degrees."""
        degrees = np.degrees(self.incidence_rad)
        return (degrees > LOWEST_DEG - 0.5) & (degrees < HIGHEST_DEG + 0.5)


@dataclass(frozen=True)
class Maximum:
    """What is told of a maximum near 1 keV: ratio with its sd in ln, angle with its sd."""

    element: str
    energy_ev: float
    ratio: float
    ln_sd: float
    angle_deg: float
    angle_sd: float


MAXIMA = (
    Maximum("Cu", 1050.0, 1.83, 0.06, 67.5, 2.0),
    Maximum("Au", 1050.0, 1.55, 0.07, 64.0, 3.0),
    Maximum("Si", 1000.0, 2.75, 0.06, 68.5, 2.0),
    Maximum("Al", 1000.0, 2.70, 0.10, 71.0, 2.5),
    Maximum("Ti", 1000.0, 2.30, 0.10, 71.0, 3.0),
)
"""Middles of the ranges in data/angular.csv; those of Al and Ti are only told to exceed 2."""


def curves() -> list[Curve]:
    """The computed points of W and C from 100 eV up, 15 to 80 degrees."""
    library = Library.load()
    found = []
    for element, file in (("W", "angular_ar_on_w.csv"), ("C", "angular_ar_on_c.csv")):
        table: dict[float, list[tuple[float, float]]] = {}
        with (DATA / file).open(encoding="utf-8") as lines:
            for line in csv.DictReader(lines):
                point = (float(line["angle_deg_from_normal"]), float(line["yield_atoms_per_ion"]))
                table.setdefault(float(line["energy_eV"]), []).append(point)
        material = library.get(element)
        threshold = threshold_ev(material, "argon")
        for energy, points in table.items():
            if energy < LOWEST_EV:
                continue
            angle, value = np.array(points[:-1]).T
            found.append(
                Curve(
                    element,
                    energy,
                    GASES["argon"].mass_u / material.mean_mass_u,
                    (threshold / energy) ** 0.5,
                    np.radians(angle[1:]),
                    np.log(value[1:] / value[0]),
                )
            )
    return found


def ln_shape(theta: Array, f: float, b: float, c: float) -> Array:
    """ln of the Eckstein-Preuss shape."""
    cosine = np.maximum(np.cos((2.0 * theta / np.pi) ** c * np.pi / 2.0), 1e-9)
    return -f * np.log(cosine) + b * (1.0 - 1.0 / cosine)


def rule_constants(p: Array, mass_ratio: float, closeness: float) -> Array:
    """f, b, c of the rule for its 12 coefficients and the power of the mass ratio."""
    a = np.reshape(p[:12], (3, 4))
    s = min(closeness, NEAR_THRESHOLD)
    return np.asarray(a[:, 0] + a[:, 1] * s + (a[:, 2] + a[:, 3] * s) * mass_ratio ** p[12])


def fit_rule() -> Array:
    """The rule's 13 numbers: least squares over curves and maxima; at high energy these stay below 80 deg."""
    data = curves()
    library = Library.load()
    maxima = []
    for told in MAXIMA:
        material = library.get(told.element)
        maxima.append(
            (
                told,
                GASES["argon"].mass_u / material.mean_mass_u,
                (threshold_ev(material) / told.energy_ev) ** 0.5,
            )
        )

    def residuals(p: Array) -> Array:
        parts = []
        for curve in data:
            weight = np.where(curve.mid, 1.0, 0.25) * (1.0 if curve.energy_ev >= 200.0 else 0.4)
            shape = ln_shape(curve.incidence_rad, *rule_constants(p, curve.mass_ratio, curve.closeness))
            parts.append(weight * (shape - curve.ln_ratio) / 0.06 / np.sqrt(8.0))
        for told, ratio, closeness in maxima:
            f, b, c = rule_constants(p, ratio, closeness)
            top = min(max(b, 1e-3) / max(f, 1e-3), 0.999)
            ln_top = -f * np.log(top) + b * (1.0 - 1.0 / top)
            angle = (np.arccos(top) * 2.0 / np.pi) ** (1.0 / c) * 90.0
            parts.append(
                np.array([(ln_top - np.log(told.ratio)) / told.ln_sd, (angle - told.angle_deg) / told.angle_sd])
            )
        for ratio in (0.19, 0.22, 0.6, 1.4, 2.2, 4.4):
            for closeness in (0.05, 0.1):
                f, b, _ = rule_constants(p, ratio, closeness)
                parts.append(np.array([min(0.0, b / max(f, 0.01) - 0.22) / 0.05]))
        return np.concatenate(parts)

    start = np.array([1.2, 1.0, 0.6, 1.5, 0.4, 0.8, 0.1, 0.2, 0.7, 0.1, 0.1, -0.3, 0.7])
    return np.asarray(least_squares(residuals, start, x_scale="jac", max_nfev=3000).x)


def fit_own(element: str) -> tuple[Array, Array, Array]:
    """f, b, c of one tabulated element as quadratics in s = sqrt(Eth/E), lowest power first."""
    data = [curve for curve in curves() if curve.element == element]

    def constants(p: Array, s: float) -> Array:
        return np.asarray(np.reshape(p, (3, 3)) @ np.array([1.0, s, s * s]))

    def residuals(p: Array) -> Array:
        parts = [
            np.where(curve.mid, 1.0, 0.25)
            * (1.0 if curve.energy_ev >= 200.0 else 0.3)
            * (ln_shape(curve.incidence_rad, *constants(p, min(curve.closeness, NEAR_THRESHOLD))) - curve.ln_ratio)
            for curve in data
        ]
        # the extrapolation to high energy is tied to the rule's, with little weight
        for s in (0.05, 0.1):
            rule = rule_constants(np.append(MASS_RULE.ravel(), MASS_RATIO_POWER), data[0].mass_ratio, s)
            parts.append(0.5 * (constants(p, s) - rule))
        return np.concatenate(parts)

    start = np.array([1.0, 2.0, 0.0, 0.3, 1.5, 0.0, 0.7, -0.1, 0.0])
    solution = least_squares(residuals, start, x_scale="jac", max_nfev=3000).x
    f, b, c = np.reshape(np.round(solution, 4), (3, 3))
    return f, b, c


def new_texts() -> dict[str, str]:
    """The new text of the entries that carry constants of their own from the tables."""
    texts = {}
    for name, element in (("W", "W"), ("C", "C"), ("diamond", "C")):
        lines = []
        for key, values in zip("fbc", fit_own(element), strict=True):
            lines.append(f"  {key}: [{', '.join(f'{value:.4g}' for value in values)}]")
        kept = entry_path(name).read_text(encoding="utf-8").split("\n")
        start = kept.index("angular:") + 1
        kept[start:] = [line for line in kept[start:] if not line.startswith(("  f: [", "  b: [", "  c: ["))]
        texts[name] = "\n".join([*kept[:start], *lines, *kept[start:]])
    return texts


if __name__ == "__main__":
    rule = fit_rule()
    print(np.round(np.reshape(rule[:12], (3, 4)), 3).tolist(), round(float(rule[12]), 3))
    for entry, text in new_texts().items():
        entry_path(entry).write_text(text, encoding="utf-8")
        print(f"wrote {entry}")
