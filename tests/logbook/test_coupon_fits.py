"""Coupons to calibrations: against normal equations and a brute grid, in simulated labs, with wild pieces."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from stackmill.documents.coupons import Coupon, coupons_of
from stackmill.documents.mill import Mill
from stackmill.documents.reading import read_document
from stackmill.errors import Place, StackmillWarning
from stackmill.jobs import load_job
from stackmill.jobs.coupons import read_calibrating
from stackmill.logbook.coupons import fit_coupons
from stackmill.materials.library import Library
from stackmill.rates.model import coupon_evidence, rate_model
from stackmill.units import Measure

ROOT = Path(__file__).parents[2]
MILL = """
title: test mill (invented)
gas: argon
current_density: CURRENT
divergence: 0 deg
doubly_charged: 3 % ± 1 %
stage: {zero_error: ± 1 deg}
"""
NAMES = ("SiO2 PECVD", "AlCu", "W")


def mill(current="0.5 mA/cm2 ± 6 %"):
    return read_document(Mill, MILL.replace("CURRENT", current)).model


def materials(*names):
    library = Library.load([])
    return {name: library.get(name) for name in names or NAMES}


def piece(name, material, rate, *, rel_sd=0.05, energy=1000.0, incidence=45.0):
    return Coupon(name, material, energy, incidence, None, Measure(rate, rel_sd * rate), "depth", Place("x.csv"))


def rows_of(machine, known, coupons):
    model = rate_model(machine, (), known)
    told = fit_coupons(machine, coupons, known)
    rates = told.rates(machine)
    return model.belief, [
        coupon_evidence(
            machine, known[one.material], tuple(known), one.model_copy(update={"weight": 1.0}), len(model.belief.names)
        )
        for one in rates
    ]


THREE = [piece("ox", "SiO2 PECVD", 0.7), piece("al", "AlCu", 0.9), piece("w", "W", 0.42, rel_sd=0.04)]


@pytest.mark.independent
def test_the_posterior_is_that_of_the_normal_equations():
    machine, known = mill(), materials()
    told = fit_coupons(machine, THREE, known)
    assert [fit.weight for fit in told.fits] == [1.0, 1.0, 1.0]
    prior, rows = rows_of(machine, known, THREE)
    design = np.stack([row.design for row in rows])
    residual = np.array([row.residual for row in rows])
    precision = np.diag([row.noise_sd**-2 for row in rows])
    free = np.flatnonzero(np.diag(prior.cov) > 0.0)
    inverse = np.linalg.inv(prior.cov[np.ix_(free, free)])
    cov = np.linalg.inv(inverse + design[:, free].T @ precision @ design[:, free])
    mean = cov @ (design[:, free].T @ precision @ residual)
    np.testing.assert_allclose(told.belief.cov[np.ix_(free, free)], cov, atol=1e-8)
    np.testing.assert_allclose(told.belief.mean[free], mean, atol=1e-8)


@pytest.mark.independent
def test_the_posterior_is_that_of_a_brute_grid():
    """One material and the current only: their joint posterior summed over a fine grid."""
    machine = mill().model_copy(update={"stage": mill().stage.model_copy(update={"zero_error": Measure(0.0, 0.0)})})
    machine = machine.model_copy(update={"doubly_charged": Measure(0.03)})
    known = materials("W")
    coupons = [piece("a", "W", 0.40, incidence=0.0, energy=500.0), piece("b", "W", 0.43, incidence=0.0, energy=500.0)]
    told = fit_coupons(machine, coupons, known)
    prior, rows = rows_of(machine, known, coupons)
    at = [prior.names.index("current density"), prior.names.index("W: rate")]
    sd = prior.sd[at]
    b, c = np.meshgrid(*(np.linspace(-8 * s, 8 * s, 1201) for s in sd), indexing="ij")
    ln = -0.5 * ((b / sd[0]) ** 2 + (c / sd[1]) ** 2)
    for row in rows:
        assert np.allclose(np.delete(row.design * prior.sd, at), 0.0, atol=1e-9)  # nothing else is uncertain
        ln -= 0.5 * ((row.residual - row.design[at[0]] * b - row.design[at[1]] * c) / row.noise_sd) ** 2
    p = np.exp(ln - ln.max())
    p /= p.sum()
    mean = np.array([(p * b).sum(), (p * c).sum()])
    np.testing.assert_allclose(told.belief.mean[at], mean, atol=1e-6)
    cross = (p * (b - mean[0]) * (c - mean[1])).sum()
    assert told.belief.cov[at[0], at[1]] == pytest.approx(cross, abs=1e-7)
    assert told.belief.cov[at[1], at[1]] == pytest.approx((p * (c - mean[1]) ** 2).sum(), rel=1e-4)


def simulated(machine, known, seed, settings, noise=0.05):
    """Coupons of a lab whose hidden factors are drawn from the library's own belief; and those factors."""
    random = np.random.default_rng(seed)
    model = rate_model(machine, (), known)
    truth = model.belief.mean + model.belief.root() @ random.standard_normal(len(model.belief.names))
    coupons = []
    for k, (name, energy, incidence) in enumerate(settings):
        probe = piece(str(k), name, 1.0, rel_sd=noise, energy=energy, incidence=incidence)
        row = rows_of(machine, known, [probe])[1][0]
        ln = -row.residual + row.design @ truth + noise * random.standard_normal()
        coupons.append(piece(str(k), name, float(np.exp(ln)), rel_sd=noise, energy=energy, incidence=incidence))
    return coupons, truth


SETTINGS = [("SiO2 PECVD", 1000.0, 45.0), ("AlCu", 1000.0, 45.0), ("W", 1000.0, 45.0)]


def coverage(seeds):
    """The share of 90 % intervals that hold the hidden truth: of each material's rate and of the current."""
    machine, known = mill(), materials()
    inside, all_ = 0, 0
    for seed in seeds:
        coupons, truth = simulated(machine, known, seed, SETTINGS)
        told = fit_coupons(machine, coupons, known)
        designs = [row.design for row in rows_of(machine, known, coupons)[1]]
        for design in (*designs, np.eye(len(truth))[0]):
            off = design @ (truth - told.belief.mean)
            inside += abs(off) <= 1.6449 * np.sqrt(design @ told.belief.cov @ design)
            all_ += 1
    return inside / all_


@pytest.mark.independent
def test_ninety_per_cent_intervals_hold_the_truth_in_simulated_labs():
    assert coverage(range(1, 121)) == pytest.approx(0.9, abs=0.04)


@pytest.mark.slow
@pytest.mark.independent
def test_ninety_per_cent_intervals_hold_the_truth_in_two_thousand_labs():
    assert 0.87 <= coverage(range(1, 2001)) <= 0.93


@pytest.mark.independent
def test_a_wild_coupon_is_named_and_moves_the_answer_by_less_than_one_sd():
    machine, known = mill(), materials()
    tame = [piece(f"ox {k}", "SiO2 PECVD", rate) for k, rate in enumerate((0.70, 0.72, 0.69, 0.71))]
    wild = [*tame, piece("spilt", "SiO2 PECVD", 1.6)]
    before, after = fit_coupons(machine, tame, known), fit_coupons(machine, wild, known)
    design = rows_of(machine, known, tame)[1][0].design
    sd = np.sqrt(design @ before.belief.cov @ design)
    assert abs(design @ (after.belief.mean - before.belief.mean)) < sd
    assert after.verdict == "doubtful"
    assert "'spilt'" in after.why
    worst = min(after.fits, key=lambda fit: fit.weight)
    assert worst.coupon.name == "spilt"
    assert worst.weight < 0.1
    assert worst.off_sd > 5.0
    assert worst.leverage < 0.1


@pytest.mark.independent
def test_coupons_that_contradict_each_other_are_refused():
    machine, known = mill(), materials()
    told = fit_coupons(machine, [piece("a", "W", 0.3, rel_sd=0.02), piece("b", "W", 0.6, rel_sd=0.02)], known)
    assert told.verdict == "refused"
    assert "contradict each other" in told.why


@pytest.mark.closed_form
def test_materials_never_measured_gain_from_the_current_and_fall_back_to_it():
    """With a wide prior on the current, one coupon of a well known material tells the current to others."""
    machine = mill("0.5 mA/cm2 ± 40 %")
    known = materials("W", "Cu")
    told = fit_coupons(machine, [piece("w", "W", 0.5, incidence=0.0, energy=500.0)], known)
    copper = next(one for one in told.learnt if one.what == "Cu")
    assert copper.sd_after < 0.75 * copper.sd_before
    current = next(one for one in told.learnt if one.what == "current density")
    # both posteriors by hand: b and c share the residual by their prior variances
    prior, rows = rows_of(machine, known, [piece("w", "W", 0.5, incidence=0.0, energy=500.0)])
    b, whole = prior.cov[0, 0], rows[0].design @ prior.cov @ rows[0].design + rows[0].noise_sd ** 2
    assert current.factor == pytest.approx(np.exp(rows[0].residual * (prior.cov @ rows[0].design)[0] / whole))
    assert current.sd_after**2 == pytest.approx(b - (prior.cov @ rows[0].design)[0] ** 2 / whole)


@pytest.mark.closed_form
def test_a_current_from_coupons_is_what_the_coupons_say():
    machine, known = mill("from coupon"), materials()
    assert machine.from_coupon
    told = fit_coupons(machine, THREE, known)
    for fit in told.fits:
        assert fit.fitted_nm_per_s == pytest.approx(fit.rate_nm_per_s.value, rel=0.02)
    assert 0.1 < told.learnt[0].factor < 2.0
    assert told.learnt[0].sd_after < 0.3


@pytest.mark.closed_form
def test_a_job_that_binds_the_written_file_believes_what_the_fit_believes():
    told = read_calibrating(ROOT / "stacks/unknown/coupons.csv", ROOT / "stacks/unknown/mill-from-coupon.yaml")
    fit = fit_coupons(told.mill, told.coupons, told.materials)
    job = load_job(ROOT / "stacks/unknown/from-coupon.yaml")
    model = rate_model(job.mill, job.recipe.steps, job.rated_materials, job.coupons)
    for name in fit.belief.names:
        mine, other = fit.belief.names.index(name), model.belief.names.index(name)
        assert model.belief.mean[other] == pytest.approx(fit.belief.mean[mine], abs=1e-9)
        assert model.belief.cov[other, other] == pytest.approx(fit.belief.cov[mine, mine], abs=1e-9)


@pytest.mark.closed_form
def test_a_result_may_be_a_depth_a_remaining_film_or_the_time_to_clear_one():
    """The last is how ISO 17109 rates a sputter depth profile: a film of known thickness, timed through."""
    told = coupons_of(
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,"
        "remaining_nm,remaining_sd_nm,cleared\n"
        "a,W,1000,0,10,,300,15,,,,,\n"
        "b,W,1000,0,10,,,,500,12,200,9,no\n"
        "c,W,1000,0,10,30,,,300,12,,,yes\n",
        "x.csv",
    )
    assert [one.rate.value for one in told] == pytest.approx([0.5, 0.5, 0.5])
    assert [one.rate.rel_sd for one in told] == pytest.approx([0.05, 0.05, np.hypot(12 / 300, 30 / 600)])
    assert [one.method for one in told] == ["depth", "remaining film", "time to clear a film"]


def test_steps_far_from_every_coupon_are_warned_of():
    with pytest.warns(StackmillWarning, match="far from every coupon"):
        load_job(ROOT / "stacks/copper/job.yaml", calibration=ROOT / "stacks/unknown/today.yaml")
