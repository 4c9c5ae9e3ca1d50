"""The strict reader of numbers with units, and its way back to people's times."""

from __future__ import annotations

import contextlib
import functools
import math
import re
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from stackmill.units import (
    KINDS,
    Measure,
    UnitsError,
    clock,
    format_time,
    read_measure,
    read_number,
    read_plus_minus,
)


@pytest.mark.closed_form
@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        ("600 nm", "length", 600.0),
        ("600nm", "length", 600.0),
        (" 0.6 um ", "length", 600.0),
        ("0.6 \u00b5m", "length", 600.0),
        ("0.6 \u03bcm", "length", 600.0),
        ("250 A", "length", 25.0),
        ("250 \u00c5", "length", 25.0),
        ("250 \u212b", "length", 25.0),
        ("1.5e-3 mm", "length", 1500.0),
        ("2 keV", "energy", 2000.0),
        ("45°", "angle", 45.0),
        ("12 min 30 s", "time", 750.0),
        ("1 h 2 min 30 s", "time", 3750.0),
        ("12min", "time", 720.0),
        ("0.5 mA/cm²", "current_density", 0.5),
        ("500 µA/cm2", "current_density", 0.5),
        ("90 nm/min", "rate", 1.5),
        ("600 A/min", "rate", 1.0),
        ("95 %", "fraction", 0.95),
        ("25 degC", "temperature", 298.15),
        ("2330 kg/m3", "density", 2.33),
        ("12", "number", 12.0),
    ],
)
def test_values_in_inside_units(text: str, kind: str, value: float) -> None:
    assert read_number(text, kind) == pytest.approx(value, rel=1e-14)


@pytest.mark.closed_form
@pytest.mark.parametrize(
    ("text", "kind", "measure"),
    [
        ("600 nm ± 8 %", "length", Measure(600.0, 48.0)),
        ("600 nm +/- 8%", "length", Measure(600.0, 48.0)),
        ("600 nm +- 50 nm", "length", Measure(600.0, 50.0)),
        ("0.6 um ± 50 nm", "length", Measure(600.0, 50.0)),
        ("600 nm ± 8 %, across die ± 3 %", "length", Measure(600.0, 48.0, 18.0)),
        ("600 nm, across die ± 20 nm", "length", Measure(600.0, 0.0, 20.0)),
        ("90 nm/min ± 10 %", "rate", Measure(1.5, 0.15)),
        ("12 min 30 s ± 20 s", "time", Measure(750.0, 20.0)),
        ("3 % ± 1 %", "fraction", Measure(0.03, 0.01)),
        ("25 degC ± 2 K", "temperature", Measure(298.15, 2.0)),
    ],
)
def test_measures(text: str, kind: str, measure: Measure) -> None:
    found = read_measure(text, kind)
    assert (found.value, found.sd, found.across_sd) == pytest.approx(
        (measure.value, measure.sd, measure.across_sd), rel=1e-14
    )


@pytest.mark.closed_form
def test_percent_is_exact() -> None:
    assert [read_number(f"{n} %", "fraction") for n in range(101)] == [n / 100 for n in range(101)]


@pytest.mark.parametrize(
    ("text", "kind", "what", "cure"),
    [
        ("600", "length", "600 has no unit", "write 600 nm"),
        ("2", "energy", "2 has no unit", "write 2 keV"),
        ("800", "energy", "800 has no unit", "write 800 eV"),
        ("0.3", "fraction", "0.3 has no unit", "write 30 %"),
        ("1,5 nm", "length", "'1,5 nm' has a comma in its number", "write 1.5 nm"),
        (
            "1,500 nm",
            "length",
            "'1,500 nm' has a comma in its number",
            "write 1.500 nm, or 1500 nm if the comma parts thousands",
        ),
        ("1 000 nm", "length", "'1 000 nm' has a gap in its number", "write 1000 nm"),
        ("1_000 nm", "length", "'1_000 nm' has a gap in its number", "write 1000 nm"),
        ("1e400 nm", "length", "'1e400' is too large a number", "check its exponent"),
        ("nan", "length", "'nan' does not begin with a number", "write a number and its unit, as in 10 nm"),
        (
            "-inf nm",
            "length",
            "'-inf nm' does not begin with a number",
            "write a number and its unit, as in 10 nm",
        ),
        ("", "length", "there is no number here", "write a number and its unit, as in 10 nm"),
        ("9**9**9 nm", "length", "'**9**9 nm' is no unit of length", "use nm, um, mm or A"),
        ("5 eV", "length", "'eV' is no unit of length", "use nm, um, mm or A"),
        ("600 NM", "length", "'NM' is not how this unit is spelled", "write 600 nm"),
        ("2 kV", "energy", "kV is no unit of energy", "write the ions' energy, as in 2 keV"),
        (
            "0.5 mA",
            "current_density",
            "mA is no unit of current density",
            "divide by the beam's area, as in 0.5 mA/cm2",
        ),
        (
            "30 s 12 min",
            "time",
            "'30 s 12 min' has its units out of order",
            "write hours, then minutes, then seconds",
        ),
        ("5 m", "time", "m is no unit of time", "write 5 min"),
        ("600 nm ± 8", "length", "the ± 8 in '600 nm ± 8' has no unit", "write ± 8 % or ± 8 nm"),
        ("600 nm ± -8 %", "length", "'600 nm ± -8 %' has a minus after the ±", "write ± 8 %"),
        (
            "600 nm ± 120 %",
            "length",
            "'600 nm ± 120 %' has a ± larger than its value",
            "give a ± below 100 %",
        ),
        ("600 nm ±", "length", "'600 nm ±' has no number after the ±", "write it like 600 nm ± 8 %"),
        ("600 nm ± 8,5 %", "length", "'8,5 %' has a comma in its number", "write 8.5 %"),
        (
            "600 nm ± 8 % across die ± 3 %",
            "length",
            "'600 nm ± 8 % across die ± 3 %' goes on after its ±",
            "write it like 600 nm ± 8 %, across die ± 3 %",
        ),
        ("12 nm", "number", "'12 nm' has a unit where none belongs", "write 12"),
        ("٣ nm", "length", "'٣ nm' does not begin with a number", "write a number and its unit, as in 10 nm"),
    ],
)
def test_refusals_say_what_and_cure(text: str, kind: str, what: str, cure: str) -> None:
    with pytest.raises(UnitsError) as refused:
        read_measure(text, kind)
    assert (refused.value.what, refused.value.cure) == (what, cure)


def test_an_exact_number_takes_no_sd() -> None:
    with pytest.raises(UnitsError, match="has a ± where an exact number is needed"):
        read_number("45 deg ± 1 deg", "angle")


@pytest.mark.closed_form
@pytest.mark.parametrize(
    ("text", "kind", "sd"),
    [("± 1 deg", "angle", 1.0), ("+/- 20 s", "time", 20.0), ("±1 %", "fraction", 0.01)],
)
def test_sd_alone(text: str, kind: str, sd: float) -> None:
    assert read_plus_minus(text, kind) == sd


@pytest.mark.parametrize(
    ("text", "cure"),
    [
        ("1 deg", "write ± 1 deg"),
        ("5 deg ± 1 deg", "write only the ± part, as in ± 1 deg"),
        ("± 5 %", "write it in deg"),
        ("± -1 deg", "write ± 1 deg"),
        ("± 1", "write 1 deg"),
    ],
)
def test_sd_alone_refusals(text: str, cure: str) -> None:
    with pytest.raises(UnitsError) as refused:
        read_plus_minus(text, "angle")
    assert refused.value.cure == cure


_FOR_PINT = {
    **dict.fromkeys(("A", "\u00c5", "\u212b", "Angstrom"), "angstrom"),
    "°C": "degC",
    "eV/atom": "eV",
}


def _pint_word(unit: str, kind: str) -> str:
    unit = _FOR_PINT.get(unit, unit)
    above, _, below = unit.partition("/")
    if kind in ("length", "rate"):
        above = _FOR_PINT.get(above, above)
    below = re.sub(r"(?<=m)\^?([23])", r"**\1", below.replace("²", "2").replace("³", "3"))
    return f"{above}/{below}" if below else above


def _tabled() -> list[tuple[str, str]]:
    return [(name, unit) for name, kind in KINDS.items() for unit in kind.factors if unit]


@functools.cache
def _registry() -> Any:
    import pint

    return pint.UnitRegistry()


@pytest.mark.independent
@pytest.mark.parametrize(("kind", "unit"), _tabled())
def test_pint_agrees_with_the_whole_table(kind: str, unit: str) -> None:
    """pint (its own tables of units) is the judge of every spelling in ours."""
    registry = _registry()
    inside = {"1": "dimensionless"}.get(KINDS[kind].inside, _pint_word(KINDS[kind].inside, kind))
    if unit == "kJ/mol":
        theirs = registry.Quantity(2.0, "kJ") / registry.Quantity(6.02214076e23, "")
    elif unit == "g/mol":
        theirs = registry.Quantity(2.0, "g") / registry.Quantity(6.02214076e23, "")
    else:
        theirs = registry.Quantity(2.0, _pint_word(unit, kind).replace("%", "percent"))
    assert read_number(f"2 {unit}", kind) == pytest.approx(theirs.to(inside).magnitude, rel=1e-8)


@pytest.mark.independent
def test_other_words_are_left_to_pint() -> None:
    assert read_number("2 inch", "length") == pytest.approx(50.8e6)
    assert read_number("1 inch/hour", "rate") == pytest.approx(25.4e6 / 3600.0)
    assert read_number("3 day", "time") == pytest.approx(3 * 86400.0)
    with pytest.raises(UnitsError, match="'pct' is no unit of length"):
        read_number("5 pct", "length")


@pytest.mark.closed_form
@pytest.mark.parametrize(
    ("seconds", "words", "digits"),
    [
        (0.0, "0.0 s", "0:00"),
        (4.24, "4.2 s", "0:04"),
        (59.4, "59 s", "0:59"),
        (59.6, "1 min", "1:00"),
        (750.0, "12 min 30 s", "12:30"),
        (3600.0, "1 h", "1:00:00"),
        (3750.0, "1 h 2 min 30 s", "1:02:30"),
        (-90.0, "-1 min 30 s", "-1:30"),
        (math.inf, "never", "never"),
    ],
)
def test_times_for_people(seconds: float, words: str, digits: str) -> None:
    assert (format_time(seconds), clock(seconds)) == (words, digits)


@pytest.mark.closed_form
@given(st.integers(min_value=10, max_value=10**6))
def test_times_come_back(seconds: int) -> None:
    assert read_number(format_time(seconds), "time") == seconds


@given(st.text(max_size=60), st.sampled_from(sorted(set(KINDS) - {"length"})))
def test_any_text_is_read_or_refused(text: str, kind: str) -> None:
    for read in (read_measure, read_number, read_plus_minus):
        with contextlib.suppress(UnitsError):
            read(text, kind)


def test_relative_sd() -> None:
    assert Measure(-200.0, 10.0).rel_sd == 0.05
    assert Measure(0.0).rel_sd == 0.0
    assert Measure(0.0, 1.0).rel_sd == math.inf
