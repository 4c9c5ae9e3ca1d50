"""Ties the elements' yield laws to measured yields and writes the `fit` blocks of the library.

    python -m tests.published.fit_yields            # writes stackmill/materials/data/*.yaml

Data: data/yields_ar.csv (rows of kind `measured`; a law's own output is no datum) and the circulated 500 eV
rates of data/rates_ar.csv. Such a rate and the 500 eV yield are one datum: the rate is used only where no
500 eV yield is held, divided by 1.10, by which the table exceeds rates that follow from the yield table. Rows
at 100 eV are left out of the ties; they say how fast the sd grows below the rows.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from stackmill.constants import GASES
from stackmill.laws.sputtering import LAWS, yamamura_tawara
from stackmill.materials.library import Library
from stackmill.materials.material import Material
from stackmill.rates.yields import NM_PER_S_PER_MA_CM2
from tests.published.blocks import entry_path, replaced

DATA = Path(__file__).parent / "data"
LOWEST_TIED_EV = 150.0
REFERENCE_EV = 1000.0
RATE_TABLE_EXCESS = 1.10
LEAST_LN_SD = 0.09
"""Seah, Nucl. Instrum. Meth. B 229, 348 (2005), abstract: 9 % for the best law under argon."""
DOUBTFUL_LN_SD = 0.40
"""Rows that the compilation itself suspects (30 to 60 % low from contaminated surfaces)."""
PRIOR_ROWS = 4.0
"""Weight of the scatter pooled over all elements against an element's own, in rows."""
FIT_ONLY_LN_SD = 0.20
"""sd of a law taken as published, with no measured row held (Zn)."""
STAND_IN_EV = (300.0, 1000.0, 3000.0)
STAND_IN_LN_SD = 0.30
"""Yamamura-Tawara for W, Ta and Zn where Eckstein-Preuss knows argon only; its energy dependence differs."""

SOURCE_KEYS = (
    ("Laegreid", "laegreid-wehner-1961"),
    ("Wehner-group", "stuart-wehner-1962"),
    ("handbook compilation", "wehner-anderson-1970"),
    ("globalsino", "rate-table-500ev"),
    ("widely circulated", "rate-table-500ev"),
)


@dataclass(frozen=True)
class Row:
    """One datum of one element: ln = ln(measured/law), doubtful: suspected by its compiler."""

    element: str
    energy_ev: float
    atoms_per_ion: float
    ln: float
    source: str
    seen: bool
    measured: bool
    doubtful: bool

    def sd(self, scatter: float) -> float:
        """sd of its ln."""
        return math.hypot(scatter, DOUBTFUL_LN_SD) if self.doubtful else scatter


@dataclass(frozen=True)
class Tie:
    """ln factor and exponent of one element, the sd of ln yield, and the rows' residuals."""

    ln_factor: float
    exponent: float
    ln_sd: float
    range_ev: tuple[float, float]
    residuals: tuple[float, ...]

    @property
    def rms(self) -> float:
        """rms of the residuals."""
        return float(np.sqrt(np.mean(np.square(self.residuals)))) if self.residuals else 0.0

    def ln_at(self, energy_ev: float) -> float:
        """ln(yield/law) at an energy; the power is held beyond the rows."""
        held = min(max(energy_ev, self.range_ev[0]), self.range_ev[1])
        return self.ln_factor + self.exponent * math.log(held / REFERENCE_EV)


def source_key(text: str) -> str:
    """The library's key for a source named in a table."""
    return next(key for words, key in SOURCE_KEYS if text.startswith(words))


def bare_yield(material: Material, energy_ev: float) -> float:
    """The material's law under argon, before any tie [atoms/ion]."""
    law, argon = LAWS[material.law], GASES["argon"]
    constants = {name: material.constants[name] for name in law.needs}
    return float(law.function(energy_ev=energy_ev, z1=argon.z, m1_u=argon.mass_u, **constants))


def read_rows(elements: Mapping[str, Material]) -> dict[str, list[Row]]:
    """All data of every element, by energy: measured yields, and rates where no 500 eV yield is held."""
    rows: dict[str, list[Row]] = {name: [] for name in elements}
    with (DATA / "yields_ar.csv").open(encoding="utf-8") as file:
        for line in csv.DictReader(file):
            if line["kind"] == "measured":
                name, energy = line["target"], float(line["energy_eV"])
                per_ion = float(line["yield_atoms_per_ion"])
                rows[name].append(_row(elements[name], energy, per_ion, line, measured=True))
    for name, rates in circulated_rates().items():
        if rows.get(name) and not any(row.energy_ev == 500.0 for row in rows[name]):
            material = elements[name]
            per_rate = material.atom_density_1e22 / (60.0 * NM_PER_S_PER_MA_CM2)
            line = {"source": "globalsino", "status": "verified"}
            per_ion = rates[0] / RATE_TABLE_EXCESS * per_rate
            rows[name].append(_row(material, 500.0, per_ion, line, measured=False))
    return {name: sorted(held, key=lambda row: row.energy_ev) for name, held in rows.items()}


def circulated_rates() -> dict[str, list[float]]:
    """Circulated rates at 500 eV, 1 mA/cm2 and normal incidence [nm/min], first source first."""
    rates: dict[str, list[float]] = {}
    with (DATA / "rates_ar.csv").open(encoding="utf-8") as file:
        for line in csv.DictReader(file):
            if line["rate_nm_min"]:
                rates.setdefault(line["material"], []).append(float(line["rate_nm_min"]))
    return rates


def _row(material: Material, energy: float, per_ion: float, line: Mapping[str, str], *, measured: bool) -> Row:
    return Row(
        element=material.name,
        energy_ev=energy,
        atoms_per_ion=per_ion,
        ln=math.log(per_ion / bare_yield(material, energy)),
        source=source_key(line["source"]),
        seen=line["status"] == "verified",
        measured=measured,
        doubtful=measured and line["confidence"] == "low",
    )


def regression(rows: Sequence[Row], scatter: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Weighted least squares: coefficients, residuals, weights. An exponent needs rows over a decade."""
    x = np.log([row.energy_ev / REFERENCE_EV for row in rows])
    y = np.array([row.ln for row in rows])
    weight = np.array([row.sd(scatter) ** -2 for row in rows])
    decade = max(row.energy_ev for row in rows) >= 10.0 * min(row.energy_ev for row in rows)
    design = np.stack([np.ones_like(x), x], 1) if decade and len(rows) > 2 else np.ones((len(rows), 1))
    normal = design.T @ (weight[:, None] * design)
    solution = np.linalg.solve(normal, design.T @ (weight * y))
    return solution, y - design @ solution, weight


def pooled_scatter(data: Mapping[str, Sequence[Row]]) -> float:
    """Scatter of ln(measured/tied law) within the elements, pooled over all of them."""
    scatter = 0.1
    for _ in range(30):
        squares, freedom = 0.0, 0
        for rows in data.values():
            if len(rows) < 2:
                continue
            solution, residual, weight = regression(rows, scatter)
            squares += float(np.sum(weight * residual**2)) * scatter**2
            freedom += len(rows) - solution.size
        scatter = math.sqrt(squares / freedom)
    return scatter


def tie(rows: Sequence[Row], scatter: float, disagreement: float = 0.0) -> Tie:
    """The tie of one element. disagreement: half the ln ratio of two sources that differ, added to the sd."""
    solution, residual, weight = regression(rows, scatter)
    freedom = len(rows) - solution.size
    own = PRIOR_ROWS * scatter**2 + float(np.sum(weight * residual**2)) * scatter**2
    spread = max(LEAST_LN_SD, math.sqrt(own / (PRIOR_ROWS + freedom)))
    energies = [row.energy_ev for row in rows]
    return Tie(
        ln_factor=float(solution[0]),
        exponent=float(solution[1]) if solution.size > 1 else 0.0,
        ln_sd=math.hypot(spread * math.sqrt(1.0 + 1.0 / len(rows)), disagreement),
        range_ev=(min(energies), max(energies)),
        residuals=tuple(float(r) for r in residual),
    )


def _rms(values: Sequence[float]) -> float:
    return round(float(np.sqrt(np.mean(np.square(values)))), 2)


def disagreement_of(name: str) -> float:
    """Half the ln ratio of the two circulated rates of one metal; 0 where there is one or none."""
    rates = circulated_rates().get(name, [])
    return 0.5 * abs(math.log(rates[1] / rates[0])) if len(rates) > 1 else 0.0


def growth_outside(data: Mapping[str, Sequence[Row]], everything: Mapping[str, Sequence[Row]]) -> tuple[float, float]:
    """By how much the sd grows for each factor e in energy below and above the rows.

    Below: rms miss of the 100 eV rows by the ties, over the distance. Above: rms miss of the rows beyond
    600 eV by a factor from the rows up to 600 eV, over the distance; doubtful rows left out.
    """
    scatter = pooled_scatter(data)
    below, above = [], []
    for name, rows in data.items():
        if len(rows) < 2:
            continue
        whole = tie(rows, scatter)
        below += [
            (row.ln - whole.ln_at(row.energy_ev)) / math.log(whole.range_ev[0] / row.energy_ev)
            for row in everything[name]
            if row.energy_ev < LOWEST_TIED_EV
        ]
        low = [row for row in rows if row.energy_ev <= 600.0]
        if low:
            base = tie(low, scatter)
            above += [
                (row.ln - base.ln_at(row.energy_ev)) / math.log(row.energy_ev / base.range_ev[1])
                for row in rows
                if row.energy_ev > 600.0 and not row.doubtful
            ]
    return _rms(below), _rms(above)


@dataclass(frozen=True)
class LeftOut:
    """A measured row as foretold by its element's other rows: ln(measured/foretold) and its sd."""

    row: Row
    miss: float
    sd: float

    @property
    def inside(self) -> bool:
        """Whether it lies within the 95 % interval."""
        return abs(self.miss) < 1.96 * self.sd


def sd_at(tied: Tie, energy_ev: float, growth: tuple[float, float]) -> float:
    """sd of ln yield at an energy: the tie's own, and what leaving its rows adds."""
    below = max(math.log(tied.range_ev[0] / energy_ev), 0.0)
    above = max(math.log(energy_ev / tied.range_ev[1]), 0.0)
    return math.hypot(tied.ln_sd, growth[0] * below + growth[1] * above)


def leave_one_out(data: Mapping[str, Sequence[Row]], scatter: float, growth: tuple[float, float]) -> list[LeftOut]:
    """Every measured row foretold without itself. A doubtful row's own sd counts in the interval."""
    found = []
    for name, rows in data.items():
        for left in rows:
            others = [row for row in rows if row is not left]
            if not left.measured or not others:
                continue
            tied = tie(others, scatter, disagreement_of(name))
            own = DOUBTFUL_LN_SD if left.doubtful else 0.0
            sd = math.hypot(sd_at(tied, left.energy_ev, growth), own)
            found.append(LeftOut(left, left.ln - tied.ln_at(left.energy_ev), sd))
    return found


def elements_of(library: Library) -> dict[str, Material]:
    """The library's elements with rows in data/yields_ar.csv, by symbol."""
    with (DATA / "yields_ar.csv").open(encoding="utf-8") as file:
        symbols = dict.fromkeys(line["target"] for line in csv.DictReader(file))
    return {symbol: library.get(symbol) for symbol in symbols}


def fit_block(rows: Sequence[Row], tied: Tie, scatter: float, growth: tuple[float, float]) -> str:
    """The `fit` block of one entry, as YAML text."""
    lines = [
        "fit:",
        f"  factor: {math.exp(tied.ln_factor):.4f}",
        f"  exponent: {tied.exponent:.4f}",
        f"  at: {REFERENCE_EV:g} eV",
        f"  ln_sd: {tied.ln_sd:.3f}",
        f"  range: [{tied.range_ev[0]:g} eV, {tied.range_ev[1]:g} eV]",
        f"  below: {growth[0]:.2f}",
        f"  above: {growth[1]:.2f}",
        f"  rms: {tied.rms:.3f}",
        f"  basis: {_basis(rows)}",
        "  rows:" if rows else "  rows: []",
    ]
    lines += [
        f"    - {{ev: {row.energy_ev:g}, atoms_per_ion: {row.atoms_per_ion:.4g}, ln: {row.ln:.3f},"
        f" sd: {row.sd(scatter):.3f}, source: {row.source}, seen: {'yes' if row.seen else 'no'}}}"
        for row in rows
    ]
    return "\n".join(lines) + "\n"


def _basis(rows: Sequence[Row]) -> str:
    if not rows:
        return "the law as published, a fit to computed yields; no measured row is held"
    rates = sum(not row.measured for row in rows)
    with_rate = f" and {rates} circulated rate" if rates else ""
    return f"{len(rows) - rates} measured yields{with_rate} under argon at normal incidence"


def as_published(range_ev: tuple[float, float]) -> Tie:
    """The tie of a law taken as published."""
    return Tie(0.0, 0.0, FIT_ONLY_LN_SD, range_ev, ())


def other_gases_block(material: Material, tied: Tie, library: Library) -> str:
    """For a law that knows argon only: Yamamura-Tawara, brought to the tied law at STAND_IN_EV."""
    atom, argon = library.atoms()[material.name], GASES["argon"]
    constants = {
        "z2": atom.z,
        "m2_u": atom.m_u,
        "us_ev": atom.us_ev,
        "q": atom.q,
        "w_ev": atom.w_ev,
        "s": atom.s,
    }
    stand_in = yamamura_tawara(energy_ev=STAND_IN_EV, z1=argon.z, m1_u=argon.mass_u, **constants)
    ln = [
        math.log(bare_yield(material, energy)) + tied.ln_at(energy) - math.log(other)
        for energy, other in zip(STAND_IN_EV, stand_in, strict=True)
    ]
    values = ", ".join(f"{name}: {value:g}" for name, value in constants.items())
    return (
        f"other_gases:\n  values: {{{values}}}\n  factor: {math.exp(float(np.mean(ln))):.4f}\n"
        f"  ln_sd: {STAND_IN_LN_SD:.2f}\n  source: {atom.source}\n  seen: {'yes' if atom.seen else 'no'}\n"
    )


@dataclass(frozen=True)
class Evidence:
    """All rows (everything), those that tie (data), their pooled scatter and the growth of the sd outside."""

    elements: Mapping[str, Material]
    everything: Mapping[str, Sequence[Row]]
    data: Mapping[str, Sequence[Row]]
    scatter: float
    growth: tuple[float, float]


def evidence(library: Library) -> Evidence:
    """What the yield table says of all elements together."""
    elements = elements_of(library)
    everything = read_rows(elements)
    data = {name: [row for row in rows if row.energy_ev > LOWEST_TIED_EV] for name, rows in everything.items()}
    return Evidence(elements, everything, data, pooled_scatter(data), growth_outside(data, everything))


def all_texts() -> dict[str, str]:
    """The new text of every element's entry, by name."""
    library = Library.load()
    known = evidence(library)
    texts = {}
    for name, rows in known.data.items():
        tied = tie(rows, known.scatter, disagreement_of(name)) if rows else as_published((204.2, 9802.0))
        text = entry_path(name).read_text(encoding="utf-8")
        text = replaced(text, "fit", fit_block(rows, tied, known.scatter, known.growth))
        if known.elements[name].law == "eckstein_preuss":
            text = replaced(text, "other_gases", other_gases_block(known.elements[name], tied, library))
        texts[name] = text
    return texts


if __name__ == "__main__":
    for entry, new_text in all_texts().items():
        entry_path(entry).write_text(new_text, encoding="utf-8")
        print(f"wrote {entry}")
