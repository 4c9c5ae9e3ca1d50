"""Films told by others: a multiple of another material's rate, and mixtures by volume."""

from __future__ import annotations

import re

import numpy as np
import pytest

from stackmill.documents.film_forms import RelativeRate
from stackmill.documents.material import LabMaterial, MaterialsFile
from stackmill.documents.reading import read_document
from stackmill.errors import InputError, InputErrors
from stackmill.materials.lab import MIXING_LN_SD
from stackmill.materials.library import Library, UnknownMaterialError
from stackmill.rates.yields import angular_shape, ln_yield_sd, normal_yield, outside_ln_sd, rate_nm_per_s, trail

BEAM = {"current_density_ma_per_cm2": 0.5, "doubly_charged": 0.04, "divergence_rad": 0.03}
ANGLES = np.radians([0.0, 30.0, 45.0, 60.0, 75.0])


def library_of(*lines: str) -> Library:
    text = "materials:\n" + "".join(f"  - {line}\n" for line in lines)
    return Library.load(read_document(MaterialsFile, text).model.materials)


def rate(material, energy_ev: float = 1000.0):
    return rate_nm_per_s(material, energy_ev=energy_ev, incidence_rad=ANGLES, **BEAM)


@pytest.mark.parametrize(
    "text",
    ["0.8 x SiO2 PECVD ± 30 %", "0.80 × SiO2 PECVD +/- 30 %", "0.8 times SiO2 PECVD ±30%", ".8x  SiO2  PECVD ± 30.0 %"],
)
def test_a_relative_rate_can_be_written_in_several_ways(text):
    lab = LabMaterial(name="mystery", rate=text)
    assert lab.rate == RelativeRate(0.8, "SiO2 PECVD", 0.3)
    assert str(lab.rate) == "0.8 x SiO2 PECVD ± 30 %"
    assert lab.references == ("SiO2 PECVD",)


@pytest.mark.closed_form
@pytest.mark.parametrize("energy_ev", [150.0, 500.0, 1000.0, 3000.0])
def test_a_relative_rate_holds_at_every_energy_and_angle(energy_ev):
    library = library_of("{name: mystery, rate: 0.8 x SiO2 ± 30 %}")
    mystery, reference = library.get("mystery"), library.get("SiO2")
    assert rate(mystery, energy_ev) == pytest.approx(0.8 * rate(reference, energy_ev), rel=1e-12)
    for gas in ("argon", "xenon"):
        sd, other = (float(ln_yield_sd(m, energy_ev=energy_ev, gas=gas)) for m in (mystery, reference))
        assert sd == pytest.approx(np.hypot(other, 0.3), rel=1e-12)
    assert outside_ln_sd(mystery, energy_ev=energy_ev) == outside_ln_sd(reference, energy_ev=energy_ev)
    assert mystery.density == reference.density


@pytest.mark.closed_form
def test_relative_to_what_is_relative_multiplies():
    library = library_of("{name: a, rate: 0.8 x W ± 30 %}", "{name: b, rate: 0.5 x a ± 40 %}")
    b, w = library.get("b"), library.get("W")
    assert rate(b) == pytest.approx(0.4 * rate(w), rel=1e-12)
    assert float(ln_yield_sd(b, energy_ev=500.0)) == pytest.approx(
        np.hypot(float(ln_yield_sd(w, energy_ev=500.0)), 0.5)
    )


@pytest.mark.closed_form
def test_a_rate_relative_to_an_estimate_stays_one():
    library = library_of(
        "{name: own, composition: {Ti: 1, N: 1}, density: 5.1 g/cm3 ± 5 %}", "{name: mystery, rate: 2 x own ± 10 %}"
    )
    mystery = library.get("mystery")
    assert mystery.estimate
    assert rate(mystery) == pytest.approx(2.0 * rate(library.get("own")), rel=1e-12)


@pytest.mark.closed_form
@pytest.mark.parametrize("energy_ev", [300.0, 1000.0, 4000.0])
def test_a_mixture_takes_the_time_of_its_parts_one_after_the_other(energy_ev):
    library = library_of("{name: mix, mixture: {SiN PECVD: 60 %, W: 40 %}}")
    mix, nitride, w = (library.get(name) for name in ("mix", "SiN PECVD", "W"))
    minutes = 0.6 / rate(nitride, energy_ev) + 0.4 / rate(w, energy_ev)
    assert rate(mix, energy_ev) == pytest.approx(1.0 / minutes, rel=1e-12)


@pytest.mark.independent
def test_the_order_of_thin_layers_does_not_matter_to_a_mixture():
    """A thousand laminae milled one after the other, at 37 degrees."""
    library = library_of("{name: mix, mixture: {Cu: 25 %, Ta: 30 %, SiO2: 45 %}}")
    beam = {"energy_ev": 800.0, "incidence_rad": np.radians(37.0), "current_density_ma_per_cm2": 0.5}
    share = {"Cu": 0.25, "Ta": 0.30, "SiO2": 0.45}
    seconds = 0.0
    for name in np.random.default_rng(3).permutation([n for n in share for _ in range(1000)]):
        seconds += share[name] * 0.1 / float(rate_nm_per_s(library.get(str(name)), **beam))
    assert 100.0 / seconds == pytest.approx(float(rate_nm_per_s(library.get("mix"), **beam)), rel=1e-9)


@pytest.mark.closed_form
def test_the_yield_of_a_mixture_is_that_of_its_steady_state():
    """Y = 1/sum(c_i/Y_i), c_i the share of the atoms: mass balance."""
    library = library_of("{name: mix, mixture: {Au: 30 %, Si: 70 %}}")
    mix, au, si = (library.get(name) for name in ("mix", "Au", "Si"))
    atoms = np.array([0.3 * au.atom_density_1e22, 0.7 * si.atom_density_1e22])
    yields = [float(normal_yield(m, energy_ev=900.0)) for m in (au, si)]
    assert mix.atom_density_1e22 == pytest.approx(atoms.sum(), rel=1e-9)
    assert float(normal_yield(mix, energy_ev=900.0)) == pytest.approx(atoms.sum() / np.sum(atoms / yields), rel=1e-9)
    gold = mix.composition["Au"] / sum(mix.composition.values())
    assert gold == pytest.approx(atoms[0] / atoms.sum(), rel=1e-9)
    assert mix.density.value == pytest.approx(0.3 * 19.3 + 0.7 * si.density.value, rel=1e-3)


@pytest.mark.closed_form
def test_the_sd_of_a_mixture_is_that_of_its_parts_by_time_and_what_mixing_is_worth():
    library = library_of("{name: mix, mixture: {SiN PECVD: 60 %, SiCN: 40 %}}")
    mix, parts = library.get("mix"), [library.get(name) for name in ("SiN PECVD", "SiCN")]
    straight = {"energy_ev": 500.0, "incidence_rad": 0.0, "current_density_ma_per_cm2": 1.0}
    time = np.array([s / float(rate_nm_per_s(m, **straight)) for s, m in zip((0.6, 0.4), parts, strict=True)])
    time /= time.sum()
    sd = float(time @ [m.tie.ln_sd for m in parts])
    assert MIXING_LN_SD == 0.20
    assert float(ln_yield_sd(mix, energy_ev=500.0)) == pytest.approx(np.hypot(sd, 0.20), rel=1e-6)
    assert mix.estimate  # one of its parts is


@pytest.mark.closed_form
def test_a_material_mixed_with_itself_is_itself_but_for_the_sd():
    library = library_of("{name: twin, like: Cu}", "{name: mix, mixture: {Cu: 50 %, twin: 50 %}}")
    mix, cu = library.get("mix"), library.get("Cu")
    assert rate(mix) == pytest.approx(rate(cu), rel=1e-12)
    assert float(normal_yield(mix, energy_ev=500.0)) == pytest.approx(float(normal_yield(cu, energy_ev=500.0)))
    shapes = [angular_shape(m, energy_ev=500.0).ratio(ANGLES) for m in (mix, cu)]
    assert shapes[0] == pytest.approx(shapes[1], rel=1e-12)


@pytest.mark.closed_form
def test_the_shape_told_of_a_mixture_is_close_to_what_its_rate_takes():
    library = library_of("{name: mix, mixture: {SiO2: 50 %, Al: 50 %}}")
    mix = library.get("mix")
    flat = {"energy_ev": 1000.0, "current_density_ma_per_cm2": 1.0}
    angles = np.radians([0.0, 20.0, 45.0, 60.0, 70.0])
    exact = rate_nm_per_s(mix, incidence_rad=angles, **flat) / np.cos(angles)
    told = angular_shape(mix, energy_ev=1000.0).ratio(angles)
    assert told == pytest.approx(exact / exact[0], rel=0.05)


@pytest.mark.closed_form
def test_mixtures_and_multiples_nest():
    library = library_of(
        "{name: a, mixture: {SiO2: 50 %, SiN PECVD: 50 %}}",
        "{name: b, rate: 1.5 x a ± 20 %}",
        "{name: c, mixture: {b: 50 %, Cu: 50 %}}",
        "{name: d, like: b, aliases: [dd]}",
    )
    assert rate(library.get("b")) == pytest.approx(1.5 * rate(library.get("a")))
    assert rate(library.get("dd")) == pytest.approx(rate(library.get("b")))
    assert 1.0 / rate(library.get("c")) == pytest.approx(0.5 / rate(library.get("b")) + 0.5 / rate(library.get("Cu")))


def test_the_trail_says_what_a_film_is_told_by():
    library = library_of(
        "{name: mystery, rate: 0.8 x SiO2 ± 30 %}", "{name: mix, mixture: {SiN PECVD: 60 %, SiCN: 40 %}}"
    )
    text = "\n".join(trail(library.get("mystery"), energy_ev=500.0, citation=library.citation))
    assert "relative: mills as 0.8 x SiO2 ± 30 %, at every energy and angle (this lab's materials file)" in text
    assert "Fused silica" in text
    text = "\n".join(trail(library.get("mix"), energy_ev=500.0, citation=library.citation))
    for words in (
        "60 % SiN PECVD",
        "40 % SiCN",
        "1/rate = sum of share/rate",
        "20 % for mixing",
        "part SiN PECVD: ",
        "part SiCN: ",
        "ESTIMATE",
    ):
        assert words in text
    assert library.get("mix").source_keys[0] == "this lab's materials file"


def test_cautions_and_alarms_come_along():
    library = library_of(
        "{name: mix, mixture: {GaAs: 50 %, novolac resist: 50 %}}",
        "{name: other, rate: 0.5 x GaAs ± 20 %}",
        "{name: own, composition: {Pb: 1, Se: 1}, density: 8.1 g/cm3}",
        "{name: known, composition: {Pb: 1, Te: 1}, density: 8.1 g/cm3, toxicity: see the sheet}",
    )
    assert "arsenic" in library.get("mix").toxicity.note
    assert [alarm.what.split(":")[0] for alarm in library.get("mix").alarms] == ["loses arsenic", "reticulates"]
    assert "arsenic" in library.get("other").toxicity.note
    assert "lead" in library.get("own").toxicity.note
    assert "selenium" in library.get("own").toxicity.note
    assert library.get("known").toxicity.note == "see the sheet"


def test_a_film_can_be_laid_over_a_library_that_is_in_use():
    library = Library.load()
    lab = LabMaterial(name="mystery", rate="0.8 x thermal oxide ± 30 %")
    assert library.lay(lab) is library.get("mystery")
    assert library.get("mystery").like == "SiO2"
    assert "mystery" not in Library.load()


@pytest.mark.closed_form
def test_a_library_material_can_be_scaled_under_its_own_name():
    shipped = Library.load().get("SiO2")
    scaled = library_of("{name: SiO2, rate: 0.8 x SiO2 ± 10 %}").get("thermal oxide")
    assert rate(scaled) == pytest.approx(0.8 * rate(shipped), rel=1e-12)


@pytest.mark.parametrize(
    ("text", "near"),
    [
        ("{name: a, rate: 0.8 x SiO2 PECV ± 3 %}", "SiO2 PECVD"),
        ("{name: a, mixture: {SiO2: 40 %, tungstn: 60 %}}", "W"),
    ],
)
def test_unknown_references_are_met_with_near_names(text, near):
    with pytest.raises(UnknownMaterialError) as caught:
        library_of(text)
    assert near in caught.value.near


@pytest.mark.parametrize(
    "first", ["{name: film, rate: 0.8 x SiO2 ± 30 %}", "{name: film, mixture: {SiO2: 40 %, W: 60 %}}"]
)
@pytest.mark.parametrize("second", ["{name: film, density: 2 g/cm3}", "{name: b, like: film, density: 2 g/cm3}"])
def test_a_density_laid_over_such_a_film_is_refused(first, second):
    with pytest.raises(InputError, match=re.escape("would be ignored: the rate of 'film' is")):
        library_of(first, second)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("rate: 0.8 x SiO2", "'0.8 x SiO2' does not say how well it is known (write 0.8 x SiO2 ± 30 %)"),
        ("rate: 41 nm/min", "'41 nm/min' is no rate relative to another material (write it like 0.8 x SiO2 ± 30 %; a"),
        ("rate: 0.8 x SiO2 ± 3 nm", "is no rate relative to another material"),
        ("rate: 0 x SiO2 ± 3 %", "0 times another material's rate is no likely rate (check the factor)"),
        ("rate: 800 x SiO2 ± 3 %", "800 times another material's rate"),
        ("rate: 1 x SiO2 ± 0 %", "± 0 % of a rate cannot be used (give a ± above 0 and up to 100 %)"),
        ("rate: 1 x SiO2 ± 130 %", "± 130 % of a rate cannot be used"),
        ("rate: [1]", "is no rate relative to another material"),
        ("mixture: {SiO2: 40 %, W: 50 %}", "the shares of this mixture add up to 90 % (make them 100 %)"),
        ("mixture: {SiO2: 40, W: 60 %}", "40 has no unit (write 40 %)"),
        ("mixture: {SiO2: 100 %}", "a mixture is made of two materials or more"),
        ("mixture: {SiO2: 100 %, W: 0 %}", "100 % of 'SiO2' is no share of a mixture (write between 0 and 100 %)"),
        ("mixture: SiO2", "a mixture names its materials and their shares of the volume (write it like {SiN PECVD"),
        ("rate: 1 x W ± 3 %, like: Cu", "like and rate stand together; one of them would be ignored"),
        ("rate: 1 x W ± 3 %, mixture: {SiO2: 50 %, W: 50 %}", "rate and mixture stand together"),
        ("rate: 1 x W ± 3 %, density: 2 g/cm3", "a density beside rate would be ignored (leave it out)"),
        ("mixture: {SiO2: 50 %, W: 50 %}, density: 2 g/cm3", "a density beside mixture would be ignored"),
    ],
)
def test_what_is_refused(text, says):
    with pytest.raises(InputErrors, match=re.escape(says)):
        library_of(f"{{name: a, {text}}}")
