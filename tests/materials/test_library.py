"""Finding, near names, laziness, lab overlays and what they refuse."""

from __future__ import annotations

import re
import shutil
import time

import pytest
import yaml

from stackmill.documents.material import MaterialsFile
from stackmill.documents.reading import read_document
from stackmill.errors import InputError, InputErrors
from stackmill.materials.library import DATA, Library, UnknownMaterialError
from stackmill.rates.yields import ESTIMATE_LN_SD, ln_yield_sd, normal_yield, trail
from tests.published.blocks import entry_path


def lab(text: str):
    return read_document(MaterialsFile, text).model.materials


def test_names_and_aliases_lead_to_the_same_material():
    library = Library.load()
    assert library.get("copper") is library.get("Cu")
    assert "copper" in library
    assert "unobtainium" not in library


@pytest.mark.parametrize(
    ("wrong", "near"),
    [("SiO2 PECV", "SiO2 PECVD"), ("tungstn", "W"), ("sin pecvd", "SiN PECVD"), ("cu", "Cu")],
)
def test_an_unknown_name_is_met_with_the_nearest(wrong, near):
    with pytest.raises(UnknownMaterialError) as caught:
        Library.load().get(wrong)
    assert near in caught.value.near
    assert f"no material is called '{wrong}'" in str(caught.value)
    assert f"'{near}'" in caught.value.cure
    assert caught.value.exit_code == 3


def test_a_slip_in_a_digit_finds_the_other_digit_first():
    assert Library.load().near("SiO3")[0] == "SiO2"
    assert Library.load().near("SiO3", most=1) == ("SiO2",)


def test_a_name_like_nothing_points_to_the_list():
    with pytest.raises(UnknownMaterialError, match=re.escape("`stackmill materials` lists the names")):
        Library.load().get("xyzzy quux")


def test_only_what_is_asked_for_is_parsed(tmp_path):
    shutil.copytree(DATA, tmp_path / "data")
    broken = tmp_path / "data" / "Zr.yaml"
    broken.write_text("name: Zr\naliases: [zirconium]\nkind: [\n", encoding="utf-8")
    library = Library.load(folder=tmp_path / "data")
    assert library.get("Cu").name == "Cu"
    with pytest.raises(InputErrors, match=re.escape("Zr.yaml")):
        library.get("Zr")


def test_a_file_without_its_head_is_refused(tmp_path):
    (tmp_path / "A.yaml").write_text("title: A\nname: A\n", encoding="utf-8")
    with pytest.raises(InputError, match="begins with its name and its aliases"):
        Library.load(folder=tmp_path)


@pytest.mark.independent
def test_twelve_materials_load_in_a_few_times_what_a_bare_yaml_reader_takes():
    """The reader keeps lines and checks every value, and the library reads the heads of all other files."""
    names = ["Si", "SiO2", "SiO2 PECVD", "BPSG", "SiN PECVD", "SiCN", "SiCOH", "AlCu", "W", "Ti", "TiN", "Cu"]
    files = [entry_path(name) for name in names]
    loader = getattr(yaml, "CSafeLoader", yaml.SafeLoader)

    def by_library():
        library = Library.load()
        for name in names:
            library.get(name)

    def by_yaml():
        for path in files:
            yaml.load(path.read_text(encoding="utf-8"), Loader=loader)

    assert min(map(_seconds, [by_library] * 5)) < 4.0 * min(map(_seconds, [by_yaml] * 5))


def _seconds(work) -> float:
    begin = time.perf_counter()
    work()
    return time.perf_counter() - begin


@pytest.mark.regression
def test_an_overlay_keeps_what_it_does_not_name():
    library = Library.load(
        lab(
            "materials:\n  - {name: plasma oxide, density: 2.1 g/cm3 ± 3 %,"
            " measured_rate: {rate: 41 nm/min ± 4 %,"
            " energy: 1 keV, incidence: 45 deg, current_density: 0.5 mA/cm2, same_day: yes}}\n"
        )
    )
    material, shipped = library.get("SiO2 PECVD"), Library.load().get("SiO2 PECVD")
    assert material.density.value == 2.1
    assert material.density.sd == pytest.approx(0.063)
    assert material.tie == shipped.tie
    assert material.title == shipped.title
    assert "lab" in material.origin
    [rate] = material.measured_rates
    assert rate.rate.value == pytest.approx(41.0 / 60.0)
    assert (rate.energy_ev, rate.incidence_deg, rate.current_density.value, rate.same_day) == (
        1000.0,
        45.0,
        0.5,
        True,
    )


def test_overlays_of_one_library_leave_another_alone():
    Library.load(lab("materials: [{name: Cu, density: 8.5 g/cm3}]"))
    assert Library.load().get("Cu").density.value == 8.96


def test_a_material_like_another_has_its_own_name():
    library = Library.load(lab("materials: [{name: my oxide, like: plasma oxide, density: 2.1 g/cm3 ± 2 %}]"))
    mine, shipped = library.get("my oxide"), library.get("SiO2 PECVD")
    assert (mine.name, mine.like) == ("my oxide", "SiO2 PECVD")
    assert shipped.density.value == 2.2
    assert float(normal_yield(mine, energy_ev=700.0)) == float(normal_yield(shipped, energy_ev=700.0))
    assert "my oxide" in library.names()


def test_a_labs_own_aliases_are_found():
    library = Library.load(lab("materials: [{name: my oxide, like: plasma oxide, aliases: [cap oxide]}]"))
    assert library.get("cap oxide") is library.get("my oxide")
    assert library.get("plasma oxide").name == "SiO2 PECVD"


def test_later_overlays_may_build_on_earlier_ones():
    library = Library.load(lab("materials:\n  - {name: a, like: W, density: 18 g/cm3 ± 1 %}\n  - {name: b, like: a}"))
    assert library.get("b").density.value == 18.0


@pytest.mark.regression
def test_a_density_without_an_sd_gets_one_and_says_so():
    material = Library.load(lab("materials: [{name: Cu, density: 8.5 g/cm3}]")).get("Cu")
    assert material.density_rel_sd == pytest.approx(0.05)
    assert "no ± given" in material.density.conditions


@pytest.mark.independent
def test_a_composition_alone_gives_an_estimate_that_says_so():
    library = Library.load(
        lab(
            "materials: [{name: titanium nitride of ours, composition: {Ti: 1, N: 1},"
            " density: 5.1 g/cm3 ± 5 %,"
            " formation: 337.65 kJ/mol}]"
        )
    )
    mine, shipped = library.get("titanium nitride of ours"), library.get("TiN")
    assert mine.estimate
    assert trail(mine, energy_ev=500.0)[1].startswith("ESTIMATE")
    # averaged when asked for against averaged by the fit script: five digits are written down
    assert float(normal_yield(mine, energy_ev=500.0)) == pytest.approx(
        float(normal_yield(shipped, energy_ev=500.0)), rel=1e-3
    )
    assert float(ln_yield_sd(mine, energy_ev=500.0)) == pytest.approx(ESTIMATE_LN_SD)
    assert mine.atom_density_1e22 == pytest.approx(shipped.atom_density_1e22, rel=1e-3)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("{name: mystery}", "no material is called 'mystery'"),
        ("{name: mystery, density: 2 g/cm3}", "no material is called 'mystery'"),
        ("{name: mine, like: copperr}", "no material is called 'copperr' (did you mean 'Cu'?)"),
        (
            "{name: mine, composition: {Xx: 1}, density: 2 g/cm3}",
            "the composition of 'mine' names Xx, of which no atomic data are held (use `like:`",
        ),
    ],
)
def test_overlays_that_lead_nowhere(text, says):
    with pytest.raises(InputError, match=re.escape(says)):
        Library.load(lab(f"materials: [{text}]"))


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("{name: a, compositon: {Si: 1}}", "1:23: error: material 'a' has no key 'compositon'"),
        ("{like: W}", "error: this material has no name"),
        (
            "{name: a, composition: {Si: x}, density: 2 g/cm3}",
            "'x' is no number of atoms (write it like {Si: 1",
        ),
        ("{name: a, composition: {Si: 1}, density: -2 g/cm3}", "'-2 g/cm3' is not above zero"),
        ("{name: a, composition: {Si: 1}}", "a composition needs a density beside it (add density"),
        ("{name: a, density: 2}", "2 has no unit (write 2 g/cm3)"),
        ("{name: a, like: W, composition: {Si: 1}, density: 2 g/cm3}", "like and composition stand together"),
        ("{name: a, like: W, formation: 3 eV}", "a formation heat needs the composition it belongs to"),
        ("{name: a, kind: plastic}", "'plastic' is no kind of material (write one of metal, semiconductor"),
        (
            "{name: W, measured_rate: {rate: 0 nm/min, energy: 1 keV, incidence: 0 deg, current_density: 1 mA/cm2}}",
            "a measured rate has to be above zero",
        ),
        (
            "{name: W, measured_rate: {rate: 9 nm/min, energy: 1 keV, incidence: 0 deg, current_density: 1 mA/cm2}}",
            "a measured rate needs its error (write it like 41 nm/min ± 4 %)",
        ),
        (
            "{name: W, measured_rate: {rate: 9 nm/min ± 4 %, energy: 1 keV, incidence: 0 deg}}",
            "has no current_density",
        ),
        (
            "{name: W, measured_rate: {rate: 9 nm/min ± 4 %, energy: 1 keV, incidence: 95 deg,"
            " current_density: 1 mA/cm2}}",
            "95 deg does not hit the surface",
        ),
        (
            "{name: W, measured_rate: {rate: 9 nm/min ± 4 %, energy: 1 keV, incidence: 5 deg,"
            " same_day: maybe,"
            " current_density: 1 mA/cm2}}",
            "'maybe' is neither yes nor no (write yes or no)",
        ),
    ],
)
def test_what_a_materials_file_refuses(text, says):
    with pytest.raises(InputErrors, match=re.escape(says)):
        lab(f"materials: [{text}]")


def test_mistakes_come_all_at_once():
    with pytest.raises(InputErrors) as caught:
        lab("materials:\n  - {name: a, density: 2}\n  - {name: b, kind: plastic}\n")
    assert [error.line for error in caught.value.errors] == [2, 3]
