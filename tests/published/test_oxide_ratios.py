"""Milling rates of nine oxides relative to thermal SiO2.

Source: Baer et al., J. Vac. Sci. Technol. A 28, 1060 (2010), abstract: all nine within a factor 2 of thermal SiO2,
usually below it, nearly independent of energy from 1 to 4 kV and of angle below 50 degrees.
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from stackmill.materials.library import Library
from stackmill.rates.yields import ln_yield_sd, rate_nm_per_s
from tests.published.fit_compounds import RULED_RATIOS

DATA = Path(__file__).parent / "data" / "oxide_ratios.csv"
LIBRARY = Library.load()
pytestmark = pytest.mark.published


def lines() -> list[dict[str, str]]:
    with DATA.open(encoding="utf-8") as file:
        return list(csv.DictReader(file))


LINES = {line["material"]: line for line in lines()}


def ratio(name: str, energy_ev: float, degrees: float) -> float:
    oxide, reference = (
        float(
            rate_nm_per_s(
                LIBRARY.get(material),
                energy_ev=energy_ev,
                incidence_rad=np.radians(degrees),
                current_density_ma_per_cm2=1.0,
            )
        )
        for material in (name, "SiO2")
    )
    return oxide / reference


def test_the_nine_oxides_of_the_abstract_are_there():
    assert set(LINES) == {"Al2O3", "HfO2", "Ta2O5", "TiO2", "ITO", "Cr2O3", "CeO2", "Fe2O3", "ZnO"}
    assert set(RULED_RATIOS) == set(LINES) - {"Al2O3"}


@pytest.mark.parametrize("name", list(LINES))
@pytest.mark.parametrize("energy_ev", [1000.0, 2000.0, 4000.0])
@pytest.mark.parametrize("degrees", [0.0, 30.0, 45.0])
def test_every_ratio_lies_within_a_factor_2(name, energy_ev, degrees):
    line = LINES[name]
    assert float(line["energy_low_ev"]) <= energy_ev <= float(line["energy_high_ev"])
    assert degrees < float(line["highest_angle_deg"])
    assert float(line["ratio_low"]) <= ratio(name, energy_ev, degrees) <= float(line["ratio_high"])


def test_the_oxides_are_usually_slower_than_thermal_oxide():
    assert sum(ratio(name, 2000.0, 0.0) < 1.0 for name in LINES) > len(LINES) / 2


@pytest.mark.parametrize("name", list(LINES))
def test_a_ratio_hardly_depends_on_energy_and_angle(name):
    every = [ratio(name, energy, angle) for energy in (1000.0, 4000.0) for angle in (0.0, 45.0)]
    assert max(every) / min(every) < 1.10


@pytest.mark.parametrize("name", list(LINES))
def test_the_ratio_is_among_the_rows_with_its_sd_and_that_of_the_oxide_it_is_told_by(name):
    [row] = [row for row in LIBRARY.get(name).tie.rows if row.source == "baer-2010"]
    assert row.seen
    sio2 = LIBRARY.get("SiO2")
    own = float(ln_yield_sd(sio2, energy_ev=row.energy_ev))
    assert row.ln_sd == pytest.approx(np.sqrt((np.log(2.0) / 2.0) ** 2 + own**2 + sio2.density_rel_sd**2), abs=1e-3)
    assert LIBRARY.get(name).tie.ln_sd < row.ln_sd
    assert any("baer-2010" in clash.sources for clash in LIBRARY.get(name).disagreements)
