"""Facts of the trade that the best values must show. Common practice, from memory."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.laws.ions import ion_speed_m_per_s
from stackmill.materials.library import Library
from stackmill.rates.yields import rate_nm_per_s

LIBRARY = Library.load()
pytestmark = pytest.mark.common_practice


def _rate(name: str, energy: float, degrees: float) -> float:
    return 60.0 * float(
        rate_nm_per_s(
            LIBRARY.get(name),
            energy_ev=energy,
            incidence_rad=np.radians(degrees),
            current_density_ma_per_cm2=1.0,
        )
    )


@pytest.mark.parametrize("energy", [500.0, 1000.0, 2000.0, 5000.0, 10000.0])
@pytest.mark.parametrize("degrees", [0.0, 20.0, 40.0, 60.0, 80.0])
def test_tungsten_is_slower_than_aluminium(energy, degrees):
    assert _rate("W", energy, degrees) < _rate("Al", energy, degrees)


@pytest.mark.parametrize("energy", [500.0, 1000.0, 2000.0])
@pytest.mark.parametrize("degrees", [45.0, 60.0, 70.0, 80.0])
def test_tilted_tungsten_is_slower_than_silicon(energy, degrees):
    assert _rate("W", energy, degrees) < _rate("Si", energy, degrees)


@pytest.mark.parametrize("energy", [500.0, 750.0, 1000.0])
def test_the_rate_of_oxide_peaks_near_40_to_55_degrees_at_1_2_to_1_6(energy):
    degrees = np.arange(0.0, 90.0, 1.0)
    rates = np.array([_rate("SiO2", energy, angle) for angle in degrees])
    assert 40.0 <= degrees[rates.argmax()] <= 55.0
    assert 1.2 <= rates.max() / rates[0] <= 1.6


def test_diamond_loses_a_few_microns_in_an_hour_and_a_half():
    assert 1000.0 <= 90.0 * _rate("diamond", 5000.0, 45.0) <= 3000.0


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [("SiN PECVD", 20.0, 40.0), ("novolac resist", 20.0, 60.0), ("diamond", 3.0, 8.0), ("SiO2", 25.0, 60.0)],
)
def test_rates_at_500_ev_and_1_ma_lie_where_the_trade_finds_them(name, low, high):
    assert low <= _rate(name, 500.0, 0.0) <= high


def test_gold_and_copper_mill_faster_than_the_refractory_metals():
    for slow in ("W", "Ta", "Ti", "TiN"):
        for fast in ("Au", "Cu"):
            assert _rate(fast, 500.0, 0.0) > 1.5 * _rate(slow, 500.0, 0.0)


@pytest.mark.common_practice
@pytest.mark.parametrize("energy_ev", [2000.0, 5000.0, 10_000.0])
def test_an_ion_crosses_the_chamber_in_under_50_us(energy_ev):
    speed = float(ion_speed_m_per_s(energy_ev=energy_ev, mass_u=39.948))
    assert speed == pytest.approx(np.sqrt(2 * energy_ev * 1.602176634e-19 / (39.948 * 1.66053906892e-27)))
    for chamber_m in (0.1, 0.5, 1.0):
        assert chamber_m / speed < 50e-6
