"""The curves and facets behind the draws, held against the laws themselves and dense sums."""

from __future__ import annotations

import numpy as np
import pytest

from stackmill.documents.mill import Mill, Stage
from stackmill.documents.recipe import Beam, Motion
from stackmill.jobs import load_job
from stackmill.materials.library import Library
from stackmill.rates.facets import shadow_multiple, slope_grid, vertical_speed_ratio
from stackmill.rates.model import rate_model
from stackmill.rates.yields import angular_shape, rate_nm_per_s
from stackmill.units import Measure

LIBRARY = Library.load()
ROTATING, CHARGED = Motion("rotating"), Measure(0.03)
W = LIBRARY.get("W")


def mill(zero_error=1.0, charged=CHARGED):
    return Mill(
        gas="argon",
        current_density=Measure(0.5),
        divergence=2.0,
        doubly_charged=charged,
        stage=Stage(zero_error=Measure(0.0, zero_error)),
    )


def beam(incidence, motion=ROTATING, energy=1000.0):
    return Beam(name="mill", energy=energy, incidence=incidence, motion=motion, for_=60.0)


@pytest.mark.independent
@pytest.mark.parametrize(
    ("incidence", "sd", "good_to"),
    [(0.0, 1.0, 2e-4), (1.0, 1.0, 2e-4), (45.0, 1.0, 1e-6), (60.0, 1.0, 1e-6), (75.0, 3.0, 5e-3), (85.0, 1.0, 5e-3)],
)
def test_rates_at_wrong_dials_equal_the_law(incidence, sd, good_to):
    materials = {name: LIBRARY.get(name) for name in ("W", "SiO2 PECVD")}
    model = rate_model(mill(sd), [beam(incidence)], materials)
    errors = np.linspace(-3.0, 3.0, 41) * sd
    parameters = np.zeros((len(model.belief.names), len(errors)))
    parameters[1] = errors
    ours = model.rate_nm_per_s(0, parameters)
    true = np.radians(np.minimum(np.abs(incidence + errors), 89.5))
    for row, material in zip(ours, materials.values(), strict=True):
        law = rate_nm_per_s(
            material,
            energy_ev=1000.0,
            incidence_rad=true,
            current_density_ma_per_cm2=0.5,
            doubly_charged=0.03,
            divergence_rad=np.radians(2.0),
        )
        np.testing.assert_allclose(row, law, rtol=good_to)


@pytest.mark.independent
def test_the_charge_shares_error_is_in_the_sd_and_a_rate_of_the_day_takes_it_out():
    wide, setting = mill(charged=Measure(0.2, 0.1)), {"energy_ev": 1000.0, "incidence_rad": 0.785}
    rates = [float(rate_nm_per_s(W, **setting, current_density_ma_per_cm2=0.5, doubly_charged=d)) for d in (0.19, 0.21)]
    slope = (np.log(rates[1]) - np.log(rates[0])) / 0.02
    plain = rate_model(mill(charged=Measure(0.2)), [beam(45.0)], {"W": W}).ln_rate_sd(0)[0]
    both = rate_model(wide, [beam(45.0)], {"W": W}).ln_rate_sd(0)[0]
    assert both == pytest.approx(np.hypot(plain, 0.1 * slope), rel=0.01)


@pytest.mark.independent
def test_energy_outside_the_rows_widens_the_rate_by_the_librarys_own_slope():
    aluminium = LIBRARY.get("Al")
    top = aluminium.tie.range_ev[1]
    inside, outside = (
        rate_model(mill(), [beam(0.0, energy=e)], {"Al": aluminium}).ln_rate_sd(0)[0] for e in (top, 5000.0)
    )
    grown = aluminium.tie.above_per_efold * np.log(5000.0 / aluminium.tie.range_ev[1])
    assert outside == pytest.approx(np.hypot(inside, grown), rel=0.01)


@pytest.mark.closed_form
def test_a_multiple_of_a_material_learns_from_its_measured_rate():
    told = load_job(
        """
stack: {layers: [{name: film, material: dark, thickness: 100 nm}, {name: substrate, material: Si, thickness: 300 um}]}
mill: {gas: argon, current_density: 0.5 mA/cm2, stage: {zero_error: ± 0 deg}}
materials:
  materials:
    - {name: dark, rate: 0.8 x SiO2 ± 5 %}
    - name: SiO2
      measured_rate: {rate: 40 nm/min ± 3 %, energy: 1 keV, incidence: 45 deg, current_density: 0.5 mA/cm2}
recipe: {steps: [{name: mill, energy: 1 keV, incidence: 45 deg, motion: rotating, for: 1 min}]}
"""
    )
    model = rate_model(told.mill, told.recipe.steps, told.rated_materials)
    assert model.materials == ("dark", "Si", "SiO2")
    assert 60 * model.best_nm_per_s(0)[0] == pytest.approx(32.0, rel=0.01)
    assert model.ln_rate_sd(0)[0] == pytest.approx(np.hypot(0.05, 0.03), rel=0.02)


COUPON = "measured_rate: {rate: 41 nm/min ± 4 %, energy: 1 keV, incidence: 45 deg, current_density: 0.5 mA/cm2}"


def forecast_rate(films, mill="{gas: argon, current_density: 0.5 mA/cm2, stage: {zero_error: ± 0 deg}}", step=""):
    """Best rate [nm/min] and its sd of the material `top` of a one-film job."""
    told = load_job(
        "stack: {layers: [{name: film, material: top, thickness: 100 nm}, "
        f"{{name: substrate, material: Si, thickness: 300 um}}]}}\nmill: {mill}\nmaterials:\n  materials:\n"
        + "".join(f"    - {{{film}}}\n" for film in films)
        + f"recipe: {{steps: [{{energy: 1 keV, incidence: 45 deg, motion: rotating, for: 1 min{step}}}]}}\n"
    )
    model = rate_model(told.mill, told.recipe.steps, told.rated_materials)
    return 60 * float(model.best_nm_per_s(0)[0]), float(model.ln_rate_sd(0)[0])


@pytest.mark.closed_form
def test_a_multiple_of_a_multiple_learns_from_the_one_it_names():
    films = ["name: middle, rate: 0.8 x SiO2 ± 30 %, " + COUPON, "name: top, rate: 0.5 x middle ± 10 %"]
    rate, sd = forecast_rate(films)
    assert rate == pytest.approx(20.5, rel=0.02)
    assert sd == pytest.approx(np.hypot(0.04, 0.1), rel=0.02)


@pytest.mark.closed_form
def test_a_mixture_learns_from_its_measured_parts():
    films = [f"name: SiO2, {COUPON}", f"name: SiN PECVD, {COUPON}", "name: top, mixture: {SiO2: 50 %, SiN PECVD: 50 %}"]
    rate, sd = forecast_rate(films)
    assert rate == pytest.approx(41.0, rel=0.06)  # to first order about the library's rates
    assert sd == pytest.approx(np.sqrt(0.2**2 + 0.04**2 / 2), rel=0.05)


@pytest.mark.closed_form
def test_a_rate_of_the_day_tells_of_the_current_it_was_milled_with():
    films = [f"name: top, like: SiO2, {COUPON[:-1]}, same_day: yes}}"]
    mill = "{gas: argon, current_density: 0.5 mA/cm2 ± 10 %, stage: {zero_error: ± 0 deg}}"
    assert forecast_rate(films, mill)[1] == pytest.approx(0.04, rel=0.01)
    assert forecast_rate(films, mill, ", current_density: 0.5 mA/cm2 ± 10 %")[1] == pytest.approx(0.04, rel=0.01)
    other = forecast_rate(films, mill, ", current_density: 0.7 mA/cm2 ± 10 %")[1]
    assert other == pytest.approx(np.sqrt(0.04**2 + 2 * 0.1**2), rel=0.03)


def dense(shape, incidences, shares, azimuths, slope):
    """Vertical speed of one slope over flat ground's, by plain sums."""
    b = np.arctan(slope)

    def speed(tilt):
        total = 0.0
        for th, share in zip(incidences, shares, strict=True):
            for p in azimuths:
                g = np.cos(tilt) * np.cos(th) + np.sin(tilt) * np.sin(th) * np.cos(p)
                if g > 0:
                    total += share / len(azimuths) * float(shape.ratio(np.arccos(min(g, 1.0)))) * g / np.cos(tilt)
        return total

    return speed(b) / speed(0.0)


@pytest.mark.independent
@pytest.mark.parametrize("incidence", [0.0, 30.0, 60.0])
def test_rotating_facets_against_a_dense_sum_over_azimuth(incidence):
    shape = angular_shape(LIBRARY.get("SiO2"), energy_ev=1000.0)
    ours = vertical_speed_ratio(shape, beam(incidence), slope_grid())[0]
    for k in (20, 60, 110):
        azimuths = 2 * np.pi * (np.arange(720) + 0.5) / 720
        assert ours[k] == pytest.approx(
            dense(shape, [np.radians(incidence)], [1.0], azimuths, slope_grid()[k]), rel=5e-3
        )


@pytest.mark.independent
@pytest.mark.parametrize(("incidence", "half"), [(0.0, 20.0), (60.0, 25.0)])
def test_rocking_facets_against_a_dense_sum_over_the_swing(incidence, half):
    shape = angular_shape(LIBRARY.get("SiO2"), energy_ev=1000.0)
    ours = vertical_speed_ratio(shape, beam(incidence, Motion("rocking", half)), slope_grid())
    swing = np.radians(incidence + half * (2 * (np.arange(400) + 0.5) / 400 - 1))
    for side, p in enumerate((0.0, np.pi)):
        for k in (20, 60):
            want = dense(shape, swing, np.full(400, 1 / 400), [p], slope_grid()[k])
            assert ours[side, k] == pytest.approx(want, rel=0.02)


@pytest.mark.closed_form
def test_shadows_reach_by_the_tangent_of_the_lowest_ray():
    assert shadow_multiple(beam(45.0), 0.0) == pytest.approx(1.0)
    assert shadow_multiple(beam(30.0, Motion("rocking", 15.0)), 5.0) == pytest.approx(np.tan(np.radians(50.0)))
    assert shadow_multiple(beam(0.0), 2.0) == 0.0
