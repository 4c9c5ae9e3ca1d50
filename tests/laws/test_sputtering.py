"""The yield laws as functions: registry, refusals, warnings, limits."""

from __future__ import annotations

import inspect
import warnings

import numpy as np
import pytest

from stackmill.constants import GASES
from stackmill.errors import StackmillWarning
from stackmill.laws import sputtering
from stackmill.laws.sputtering import LAWS

COPPER = {"z2": 29, "m2_u": 63.546, "us_ev": 3.49, "q": 1.0, "w_ev": 0.73, "s": 2.5}
TUNGSTEN = {"z2": 74, "m2_u": 183.84, "lam": 0.2113, "q": 5.948, "mu": 2.386, "eth_ev": 27.05}
ARGON = {"z1": 18, "m1_u": 39.948}
CONSTANTS = {"yamamura_tawara": COPPER, "eckstein_preuss": TUNGSTEN}


@pytest.mark.parametrize("name", list(LAWS))
def test_the_registry_dispatches_to_the_function_of_that_name(name):
    assert LAWS[name].function is getattr(sputtering, name)
    assert LAWS[name].threshold is getattr(sputtering, f"threshold_{name}")


@pytest.mark.parametrize("law", LAWS.values(), ids=list(LAWS))
def test_the_registry_says_what_each_law_needs(law):
    taken = set(inspect.signature(law.function).parameters)
    assert taken == {"energy_ev", "z1", "m1_u", *law.needs}
    assert set(inspect.signature(law.threshold).parameters) == set(law.threshold_needs)
    assert set(law.gases) <= set(GASES)
    assert law.range_ev[0] < law.range_ev[1]
    assert any(year in law.citation for year in ("1996", "2003"))
    assert law.checked


@pytest.mark.parametrize("law", LAWS.values(), ids=list(LAWS))
def test_every_argument_is_keyword_only(law):
    kinds = {p.kind for p in inspect.signature(law.function).parameters.values()}
    assert kinds == {inspect.Parameter.KEYWORD_ONLY}


@pytest.mark.parametrize("name", list(LAWS))
def test_a_scalar_equals_the_same_number_in_an_array(name):
    energies = np.array([[100.0, 500.0], [1000.0, 10000.0]])
    law = LAWS[name].function
    table = law(energy_ev=energies, **ARGON, **CONSTANTS[name])
    assert table.shape == (2, 2)
    for at in np.ndindex(2, 2):
        assert float(law(energy_ev=energies[at], **ARGON, **CONSTANTS[name])) == table[at]


@pytest.mark.closed_form
def test_nothing_leaves_at_or_below_threshold():
    threshold = float(sputtering.threshold_yamamura_tawara(m1_u=200.0, m2_u=12.0, us_ev=7.4))
    assert threshold > 60.0
    heavy = {"z1": 80, "m1_u": 200.0, "z2": 6, "m2_u": 12.0, "us_ev": 7.4, "q": 1.0, "w_ev": 1.0, "s": 2.5}
    energies = [threshold - 5.0, threshold, threshold + 5.0]
    below, at, above = sputtering.yamamura_tawara(energy_ev=energies, **heavy)
    assert below == 0.0
    assert at == pytest.approx(0.0, abs=1e-15)
    assert above > 0.0
    pair = {**TUNGSTEN, "eth_ev": 60.0}
    assert sputtering.eckstein_preuss(energy_ev=[55.0, 60.0], **ARGON, **pair) == pytest.approx([0.0, 0.0])


@pytest.mark.closed_form
def test_both_branches_of_the_mass_ratio_meet_where_they_change():
    either = [
        float(sputtering.yamamura_tawara(energy_ev=500.0, z1=18, m1_u=40.0, **{**COPPER, "m2_u": m}))
        for m in (40.0 * (1 - 1e-9), 40.0 * (1 + 1e-9))
    ]
    assert either[0] == pytest.approx(either[1], rel=3e-3)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("name", ["energy_ev", "us_ev", "m1_u", "w_ev"])
def test_what_is_no_number_is_refused_by_name(bad, name):
    arguments = {"energy_ev": 500.0, **ARGON, **COPPER, name: bad}
    with pytest.raises(ValueError, match=f"{name} holds a value that is not a finite number"):
        sputtering.yamamura_tawara(**arguments)


def test_a_negative_energy_is_refused():
    with pytest.raises(ValueError, match="energy_ev must be above zero, but its smallest value is -5"):
        sputtering.yamamura_tawara(energy_ev=[500.0, -5.0], **ARGON, **COPPER)


@pytest.mark.parametrize("name", list(LAWS))
def test_outside_its_range_a_law_computes_and_warns_once(name):
    law = LAWS[name]
    outside = [law.range_ev[0] * 0.9, law.range_ev[1] * 1.1]
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        found = law.function(energy_ev=outside, **ARGON, **CONSTANTS[name])
    assert np.all(found > 0.0)
    [only] = caught
    assert only.category is StackmillWarning
    for piece in ("energy_ev = 45", "50 to 100000", law.citation[:10]):
        assert piece in str(only.message)


@pytest.mark.closed_form
def test_a_yield_is_inverse_in_the_binding_energy_far_above_threshold():
    soft, hard = (
        float(sputtering.yamamura_tawara(energy_ev=9e4, **ARGON, **{**COPPER, "us_ev": us})) for us in (1e-4, 2e-4)
    )
    assert soft / hard == pytest.approx(2.0, rel=1e-2)
