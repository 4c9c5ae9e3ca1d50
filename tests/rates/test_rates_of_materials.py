"""Where laws meet materials: yields, shapes, milling rates, sds, trails."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from stackmill.constants import NM_PER_S_PER_MA_CM2
from stackmill.laws.sputtering import yamamura_tawara
from stackmill.materials.library import Library
from stackmill.rates.yields import (
    OTHER_GAS_LN_SD,
    angular_leverage,
    angular_shape,
    ln_yield_sd,
    normal_yield,
    outside_ln_sd,
    rate_nm_per_s,
    threshold_ev,
    trail,
)

LIBRARY = Library.load()
CU, W, SI, SIO2 = (LIBRARY.get(name) for name in ("Cu", "W", "Si", "SiO2"))
BEAM = {"energy_ev": 800.0, "current_density_ma_per_cm2": 0.5}


@pytest.mark.closed_form
def test_the_constant_of_the_rate_equation():
    """6.2415 nm/s, 374.5 nm/min: 1 mA/cm2 is 1e-3/1.602177e-19 ions; 1e22 atoms/cm3 of them fill 1 cm."""
    assert pytest.approx(1e-3 / 1.602176634e-19 * 1e7 / 1e22, rel=1e-12) == NM_PER_S_PER_MA_CM2
    assert round(60.0 * NM_PER_S_PER_MA_CM2, 1) == 374.5


@pytest.mark.independent
def test_a_rate_worked_out_by_mass_instead_of_atoms():
    """R = 6.219 J Y M/rho nm/min: the same law in grams."""
    y = float(normal_yield(CU, energy_ev=500.0))
    by_mass = 6.219 * 0.5 * y * 63.546 / 8.96
    found = rate_nm_per_s(CU, energy_ev=500.0, incidence_rad=0.0, current_density_ma_per_cm2=0.5)
    assert 60.0 * float(found) == pytest.approx(by_mass, rel=2e-4)


@pytest.mark.closed_form
def test_yield_is_law_times_factor_times_power():
    bare = yamamura_tawara(energy_ev=[400.0, 3000.0], z1=18, m1_u=39.948, **CU.constants)
    expected = bare * CU.tie.factor * (np.array([400.0, 3000.0]) / 1000.0) ** CU.tie.exponent
    assert normal_yield(CU, energy_ev=[400.0, 3000.0]) == pytest.approx(expected, rel=1e-12)


@pytest.mark.closed_form
def test_the_power_is_held_beyond_the_rows():
    low, high = CU.tie.range_ev
    bare = yamamura_tawara(energy_ev=[low, low / 2, high, high * 2], z1=18, m1_u=39.948, **CU.constants)
    ratio = normal_yield(CU, energy_ev=[low, low / 2, high, high * 2]) / bare
    assert ratio[0] == pytest.approx(ratio[1], rel=1e-12)
    assert ratio[2] == pytest.approx(ratio[3], rel=1e-12)
    assert ratio[0] != pytest.approx(ratio[2], rel=1e-3)


@pytest.mark.closed_form
def test_the_sd_grows_outside_the_rows_only():
    low, high = SI.tie.range_ev
    assert outside_ln_sd(SI, energy_ev=[low, 700.0, high]) == pytest.approx([0.0, 0.0, 0.0])
    assert ln_yield_sd(SI, energy_ev=700.0) == pytest.approx(SI.tie.ln_sd)
    below, above = ln_yield_sd(SI, energy_ev=[low / np.e, high * np.e])
    assert below == pytest.approx(np.hypot(SI.tie.ln_sd, SI.tie.below_per_efold))
    assert above == pytest.approx(np.hypot(SI.tie.ln_sd, SI.tie.above_per_efold))


@pytest.mark.closed_form
def test_a_parallel_beam_mills_as_yield_times_shape_times_cosine():
    for degrees in (0.0, 35.0, 70.0):
        theta = np.radians(degrees)
        y = float(normal_yield(SI, energy_ev=800.0)) * float(angular_shape(SI, energy_ev=800.0).ratio(theta))
        expected = NM_PER_S_PER_MA_CM2 * 0.5 * y * np.cos(theta) / SI.atom_density_1e22
        assert float(rate_nm_per_s(SI, incidence_rad=theta, **BEAM)) == pytest.approx(expected, rel=1e-12)


@pytest.mark.closed_form
def test_doubly_charged_ions_are_half_as_many_at_twice_the_energy():
    theta = np.radians(50.0)
    single = float(rate_nm_per_s(SI, incidence_rad=theta, **BEAM))
    double = float(rate_nm_per_s(SI, incidence_rad=theta, **{**BEAM, "energy_ev": 1600.0}))
    found = float(rate_nm_per_s(SI, incidence_rad=theta, doubly_charged=0.2, **BEAM))
    assert found == pytest.approx(0.8 * single + 0.1 * double, rel=1e-12)


@pytest.mark.closed_form
def test_rates_follow_current_and_density():
    one, two = (
        float(rate_nm_per_s(SI, energy_ev=800.0, incidence_rad=0.3, current_density_ma_per_cm2=j)) for j in (1, 2)
    )
    assert two == pytest.approx(2.0 * one)
    light = replace(SI, density=replace(SI.density, value=SI.density.value / 2))
    found = float(rate_nm_per_s(light, energy_ev=800.0, incidence_rad=0.3, current_density_ma_per_cm2=1))
    assert found == pytest.approx(2.0 * one)


def test_shapes_of_arrays_are_kept():
    table = rate_nm_per_s(SI, incidence_rad=np.radians([[0.0, 30.0, 60.0], [10.0, 45.0, 80.0]]), **BEAM)
    assert table.shape == (2, 3)
    assert table[1, 1] == float(rate_nm_per_s(SI, incidence_rad=np.radians(45.0), **BEAM))


@pytest.mark.closed_form
def test_an_angular_deviation_acts_as_its_sd_says():
    theta = np.radians(60.0)
    ratio = rate_nm_per_s(SIO2, incidence_rad=theta, angular_deviation=1.0, **BEAM) / rate_nm_per_s(
        SIO2, incidence_rad=theta, **BEAM
    )
    assert np.log(float(ratio)) == pytest.approx(SIO2.angular_sd)
    assert angular_leverage([0.0, np.radians(30.0), theta]) == pytest.approx([0.0, 1.0 / 3.0, 1.0])
    straight = [float(rate_nm_per_s(SIO2, incidence_rad=0.0, angular_deviation=d, **BEAM)) for d in (0.0, 2.0)]
    assert straight[0] == straight[1]


@pytest.mark.closed_form
def test_own_constants_step_from_argon_to_another_gas_as_the_rule_does():
    own = {gas: angular_shape(W, energy_ev=700.0, gas=gas) for gas in ("argon", "neon")}
    rule_material = replace(W, angular=replace(W.angular, f=(), b=(), c=()))
    rule = {gas: angular_shape(rule_material, energy_ev=700.0, gas=gas) for gas in ("argon", "neon")}
    for letter in "fbc":
        step = getattr(own["neon"], letter) - getattr(own["argon"], letter)
        assert step == pytest.approx(getattr(rule["neon"], letter) - getattr(rule["argon"], letter), abs=1e-12)
        assert abs(float(step)) > 1e-4


@pytest.mark.closed_form
def test_a_shape_vanishes_at_grazing_however_its_constants_extrapolate():
    wild = replace(W, angular=replace(W.angular, b=(-0.5, 0.1, 0.0)))
    ratio = angular_shape(wild, energy_ev=[200.0, 5000.0]).ratio(np.radians([[60.0], [89.99], [90.0]]))
    assert np.all(np.isfinite(ratio))
    assert ratio[-1] == pytest.approx([0.0, 0.0])


@pytest.mark.independent
def test_divergence_and_rocking_reach_the_rate():
    theta = np.radians(60.0)
    plain = float(rate_nm_per_s(SI, incidence_rad=theta, **BEAM))
    assert float(rate_nm_per_s(SI, incidence_rad=theta, divergence_rad=0.1, **BEAM)) != pytest.approx(plain, rel=1e-3)
    assert float(rate_nm_per_s(SI, incidence_rad=theta, rocking_rad=0.3, **BEAM)) != pytest.approx(plain, rel=1e-3)


@pytest.mark.common_practice
def test_heavier_gases_sputter_heavy_targets_more():
    yields = [float(normal_yield(W, energy_ev=1000.0, gas=gas)) for gas in ("neon", "argon", "krypton", "xenon")]
    assert yields == sorted(yields)


@pytest.mark.regression
def test_another_gas_is_less_sure():
    for material, added in ((CU, OTHER_GAS_LN_SD), (W, W.other_gases.ln_sd)):
        argon, xenon = (float(ln_yield_sd(material, energy_ev=500.0, gas=gas)) for gas in ("argon", "xenon"))
        assert xenon == pytest.approx(np.hypot(argon, added))


@pytest.mark.independent
def test_for_argon_the_stand_in_for_other_gases_agrees_with_the_law_that_knows_argon():
    """W, Ta and Zn: Yamamura-Tawara with its own factor against Eckstein-Preuss, 300 eV to 2 keV."""
    for name in ("W", "Ta", "Zn"):
        material = LIBRARY.get(name)
        other = material.other_gases
        energies = [300.0, 600.0, 1000.0, 2000.0]
        stand_in = other.factor * yamamura_tawara(energy_ev=energies, z1=18, m1_u=39.948, **other.constants)
        assert np.abs(np.log(stand_in / normal_yield(material, energy_ev=energies))).max() < 0.35


def test_the_threshold_is_where_the_yield_ends():
    for material in (CU, W):
        eth = threshold_ev(material)
        found = yamamura_tawara(energy_ev=600.0, z1=18, m1_u=39.948, **CU.constants)
        assert found > 0.0
        with pytest.warns(match="lies outside"):
            below, above = normal_yield(material, energy_ev=[0.99 * eth, 1.05 * eth])
        assert below == 0.0
        assert above > 0.0


def test_unknown_gases_and_shares_are_refused():
    with pytest.raises(ValueError, match="'helium' is no beam gas known here; use one of neon, argon"):
        normal_yield(CU, energy_ev=500.0, gas="helium")
    with pytest.raises(ValueError, match="doubly_charged must be a share of the current"):
        rate_nm_per_s(CU, incidence_rad=0.0, doubly_charged=1.0, **BEAM)


def test_the_trail_names_law_values_sources_and_both_sides_of_a_disagreement():
    text = "\n".join(trail(SIO2, energy_ev=500.0, citation=LIBRARY.citation))
    for piece in (
        "Yamamura & Tawara",
        "3 rows",
        "2.2 ± 0.022 g/cm3",
        "sources differ on yield of SiO2",
        "from memory",
    ):
        assert piece in text
    assert "atoms/ion ± 32 %" in text
