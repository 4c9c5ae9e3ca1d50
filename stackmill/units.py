"""Text to numbers with units and back: the only place that multiplies by 60 or 1e7.

The reader is strict on purpose. It knows the spellings of the trade; any other unit word is looked up with
pint, which is handed the bare word and never a number or an operator. What it cannot read it refuses, with a
cure.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from itertools import pairwise
from types import MappingProxyType
from typing import Any

_LONGEST_TEXT = 120


class UnitsError(ValueError):
    """A text is not a number with a unit of the kind asked for: `what` is wrong, and the `cure`."""

    def __init__(self, what: str, cure: str = "") -> None:
        super().__init__(what)
        self.what = what
        self.cure = cure


@dataclass(frozen=True, slots=True)
class Measure:
    """A number that is not known exactly, in the inside unit of its kind.

    value; sd: standard deviation shared by the whole die; across_sd: the part that differs from region to
    region. All three are absolute and in the same unit.
    """

    value: float
    sd: float = 0.0
    across_sd: float = 0.0

    @property
    def rel_sd(self) -> float:
        """The shared sd as a share of the value; infinite for an uncertain zero."""
        if self.value == 0.0:
            return math.inf if self.sd else 0.0
        return self.sd / abs(self.value)


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of quantity.

    name: in words, for messages; inside: the unit used inside the program; factors: what one of each unit is
    worth in it; usual: the unit to suggest for a bare number; known: units to list; pint: the inside unit as
    pint writes it, empty where no other unit words are taken.
    """

    name: str
    inside: str
    factors: Mapping[str, float]
    usual: str
    known: str
    pint: str = ""


_MICRO = ("u", "\u00b5", "\u03bc")  # the micro sign, and the Greek letter that looks the same
_ANGSTROM = ("A", "\u00c5", "\u212b", "angstrom", "Angstrom", "angstroms")
_LENGTH = {"nm": 1.0, "mm": 1e6, "cm": 1e7, **{f"{m}m": 1e3 for m in _MICRO}, **dict.fromkeys(_ANGSTROM, 0.1)}
_TIME = {
    **{"s": 1.0, "sec": 1.0, "second": 1.0, "seconds": 1.0},
    **{"min": 60.0, "minute": 60.0, "minutes": 60.0},
    **{"h": 3600.0, "hr": 3600.0, "hour": 3600.0, "hours": 3600.0},
}
_CM2 = ("cm2", "cm²", "cm^2")
_CURRENT = {
    **{f"mA/{area}": 1.0 for area in _CM2},
    **{f"{m}A/{area}": 1e-3 for area in _CM2 for m in _MICRO},
    **{f"A/{area}": 0.1 for area in ("m2", "m²", "m^2")},
}
_RATE = {
    f"{length}/{time}": size / _TIME[time]
    for length, size in _LENGTH.items()
    for time in ("s", "sec", "min", "h", "hr")
    if length != "cm"
}
_VOLUME = {
    **dict.fromkeys(("g/cm3", "g/cm³", "g/cm^3", "g/cc"), 1.0),
    **dict.fromkeys(("kg/m3", "kg/m³"), 1e-3),
}
_ANGLE = {
    **dict.fromkeys(("deg", "°", "degree", "degrees"), 1.0),
    **{"rad": 180.0 / math.pi, "mrad": 0.18 / math.pi},
}
_ENERGY = {"eV": 1.0, "keV": 1e3, "MeV": 1e6}
# 1 eV per atom is 96.48533212 kJ/mol: e x N_A, both exact since the SI of 2019.
_BINDING = {"eV": 1.0, "eV/atom": 1.0, "kJ/mol": 1.0 / 96.48533212}
_POWER = {f"{w}/{area}": size for w, size in (("W", 1.0), ("mW", 1e-3)) for area in _CM2}

KINDS: Mapping[str, Kind] = MappingProxyType(
    {
        "length": Kind("a length", "nm", _LENGTH, "nm", "nm, um, mm or A", "nm"),
        "energy": Kind("an energy", "eV", _ENERGY, "eV", "eV or keV", "eV"),
        "angle": Kind("an angle", "deg", _ANGLE, "deg", "deg"),
        "time": Kind("a time", "s", _TIME, "min", "s, min or h", "s"),
        "current_density": Kind("a current density", "mA/cm2", _CURRENT, "mA/cm2", "mA/cm2 or uA/cm2", "mA/cm**2"),
        "rate": Kind("a milling rate", "nm/s", _RATE, "nm/min", "nm/min, A/min or um/h", "nm/s"),
        "fraction": Kind("a share", "1", {"%": 0.01}, "%", "%"),
        "temperature": Kind("a temperature", "K", {"K": 1.0, "degC": 1.0, "°C": 1.0}, "degC", "K or degC"),
        "density": Kind("a density", "g/cm3", _VOLUME, "g/cm3", "g/cm3 or kg/m3", "g/cm**3"),
        "binding_energy": Kind("an energy per atom", "eV", _BINDING, "eV", "eV or kJ/mol", "eV"),
        "mass": Kind("an atomic mass", "u", {"u": 1.0, "amu": 1.0, "g/mol": 1.0}, "u", "u or g/mol", "u"),
        "power_density": Kind("a power per area", "W/cm2", _POWER, "W/cm2", "W/cm2", "W/cm**2"),
        "number": Kind("a plain number", "1", {"": 1.0}, "", "no unit"),
    }
)

_ZERO_CELSIUS_K = 273.15
_OFFSET_K = {"degC": _ZERO_CELSIUS_K, "°C": _ZERO_CELSIUS_K}
# A word that looks like a unit but means something else here, with what is meant instead.
_HINTS = {
    ("energy", "kV"): "write the ions' energy, as in {n} keV",
    ("energy", "V"): "write the ions' energy, as in {n} eV",
    ("current_density", "mA"): "divide by the beam's area, as in {n} mA/cm2",
    ("current_density", "uA"): "divide by the beam's area, as in {n} uA/cm2",
    ("angle", "degC"): "write {n} deg",
    ("time", "m"): "write {n} min",
    ("time", "'"): "write {n} min",
}

_NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_QUANTITY = re.compile(rf"\s*({_NUMBER})\s*(.*?)\s*", re.DOTALL)
_TIME_PIECE = re.compile(r"\s*([0-9]+(?:\.[0-9]+)?)\s*([A-Za-z]+)")
_DECIMAL_COMMA = re.compile(r"([+-]?[0-9]+),([0-9]+)")
_SPACED_DIGITS = re.compile(r"[0-9](?:[ \u00a0\u202f_'][0-9]{3})+(?![0-9])")
_MEASURE = re.compile(r"(?P<value>[^±]*?)\s*(?:±(?P<sd>.*?))?(?:,\s*across (?:the )?die\s*±(?P<across>.*))?", re.DOTALL)
_UNIT_WORD = re.compile(r"([A-Za-zµμ]{1,20})(?:\^?([23]))?(?:/([A-Za-zµμ]{1,20})(?:\^?([23]))?)?")


def quoted(text: str, longest: int = 40) -> str:
    """A text as an error message shows it: one line, in quotes, cut where it is long."""
    line = "".join(c if c.isprintable() else " " for c in " ".join(text.split()))
    return f"'{line[: longest - 3]}...'" if len(line) > longest else f"'{line}'"


def plain(number: float) -> str:
    """A number as people write it: 0.5, 600, 1e-07."""
    return f"{number:.10g}"


def read_number(text: str, kind: str) -> float:
    """A text such as `600 nm` as a number in the inside unit of its kind. Raises UnitsError."""
    text = _tidy(text, kind)
    if "±" in text:
        raise UnitsError(f"{quoted(text)} has a ± where an exact number is needed", "leave the ± part out")
    return _read_value(text, kind)


def read_measure(text: str, kind: str) -> Measure:
    """A text such as `600 nm ± 8 %, across die ± 3 %` as a Measure. Raises UnitsError.

    A ± in % is a share of the value, except for shares, where it is in points: `3 % ± 1 %` is 2 to 4 %.
    """
    text = _tidy(text, kind)
    parts = _MEASURE.fullmatch(text)
    if parts is None:  # pragma: no cover - the pattern takes any text without line breaks
        raise UnitsError(f"{quoted(text)} cannot be read", example(kind))
    value = _read_value(parts["value"], kind)
    return Measure(value, *(_read_sd(parts[name], value, text, kind) for name in ("sd", "across")))


def read_plus_minus(text: str, kind: str) -> float:
    """A text such as `± 1 deg` as an sd in the inside unit of its kind. Raises UnitsError."""
    text = _tidy(text, kind)
    if not text.startswith("±") or text.count("±") > 1:
        if "±" not in text:
            raise UnitsError(f"{quoted(text)} has no ± before it", f"write ± {text}")
        cure = f"write only the ± part, as in ± 1 {KINDS[kind].usual}"
        raise UnitsError(f"{quoted(text)} has more than a ± part", cure)
    if text.endswith("%") and kind != "fraction":
        raise UnitsError(f"{quoted(text)} is a share of nothing", f"write it in {KINDS[kind].known}")
    sd = _read_value(text[1:], kind)
    if sd < 0.0:
        raise UnitsError(f"{quoted(text)} has a minus after the ±", f"write ± {text[1:].strip(' -')}")
    return sd


def format_time(seconds: float) -> str:
    """A time as people read it: `12 min 30 s`."""
    if not math.isfinite(seconds):
        return "never"
    sign = "-" if seconds < 0 else ""
    size = abs(seconds)
    if size < 9.95:
        return f"{sign}{size:.1f} s"
    minutes, s = divmod(round(size), 60)
    h, m = divmod(minutes, 60)
    pieces = [f"{n} {unit}" for n, unit in ((h, "h"), (m, "min"), (s, "s")) if n]
    return sign + " ".join(pieces)


def clock(seconds: float) -> str:
    """A time as a clock shows it: `12:30`, past the hour `1:02:30`."""
    if not math.isfinite(seconds):
        return "never"
    sign = "-" if round(seconds) < 0 else ""
    minutes, s = divmod(abs(round(seconds)), 60)
    h, m = divmod(minutes, 60)
    return f"{sign}{h}:{m:02d}:{s:02d}" if h else f"{sign}{m}:{s:02d}"


def _tidy(text: str, kind: str) -> str:
    if len(text) > _LONGEST_TEXT:
        raise UnitsError(f"{quoted(text)} is too long to be a number", example(kind))
    return text.replace("+/-", "±").replace("+-", "±").replace("−", "-").strip()


def example(kind: str) -> str:
    """What a value of this kind looks like, for a cure."""
    number = {"current_density": "0.5", "energy": "800", "angle": "45", "density": "2.2"}.get(kind, "10")
    usual = KINDS[kind].usual
    return f"write a number and its unit, as in {number} {usual}" if usual else f"write a number, as in {number}"


def _read_value(text: str, kind: str) -> float:
    if kind == "time" and (together := _read_compound_time(text)) is not None:
        return together
    found = _QUANTITY.fullmatch(text)
    if found is None:
        raise _no_number(text, kind)
    number, unit = _finite(found[1]), found[2]
    _refuse_split_number(text, unit)
    if "," in unit or "across" in unit:
        raise UnitsError(f"{quoted(text)} goes on after its unit", "write it like 600 nm ± 8 %, across die ± 3 %")
    offset = _OFFSET_K.get(unit, 0.0) if kind == "temperature" else 0.0
    return _scaled(number, _factor(found[1], unit, kind)) + offset


def _scaled(number: float, factor: float) -> float:
    """A number times a factor, dividing by whole numbers so that 95 % is 0.95 to the last digit."""
    divisor = round(1.0 / factor)
    return number / divisor if divisor > 1 and math.isclose(divisor * factor, 1.0, rel_tol=1e-15) else number * factor


def _read_compound_time(text: str) -> float | None:
    """`12 min 30 s` in seconds; None where the text is no run of several numbers and units."""
    pieces = [(m[1], m[2]) for m in _TIME_PIECE.finditer(text)]
    if len(pieces) < 2 or _TIME_PIECE.sub("", text).strip():
        return None
    sizes = [_factor(number, unit, "time") for number, unit in pieces]
    if any(small >= large for large, small in pairwise(sizes)):
        raise UnitsError(f"{quoted(text)} has its units out of order", "write hours, then minutes, then seconds")
    return sum(float(number) * size for (number, _), size in zip(pieces, sizes, strict=True))


def _no_number(text: str, kind: str) -> UnitsError:
    if not text.strip():
        return UnitsError("there is no number here", example(kind))
    return UnitsError(f"{quoted(text)} does not begin with a number", example(kind))


def _finite(text: str) -> float:
    number = float(text)
    if not math.isfinite(number):
        raise UnitsError(f"{quoted(text)} is too large a number", "check its exponent")
    return number


def _refuse_split_number(text: str, rest: str) -> None:
    """Refuse `1,5 nm` and `1 000 nm`, where a half-read number would be off by a factor."""
    comma = _DECIMAL_COMMA.search(text)
    if comma and rest.startswith(","):
        as_point = text.replace(comma[0], f"{comma[1]}.{comma[2]}", 1).strip()
        cure = f"write {as_point}"
        if len(comma[2]) == 3:
            cure += f", or {text.replace(',', '', 1).strip()} if the comma parts thousands"
        raise UnitsError(f"{quoted(text)} has a comma in its number", cure)
    if rest[:1].isdigit() or rest[:1] in ("_", "'"):
        joined = _SPACED_DIGITS.sub(lambda m: re.sub("[^0-9]", "", m[0]), text.strip())
        cure = f"write {joined}" if joined != text.strip() else "write one number and one unit"
        raise UnitsError(f"{quoted(text)} has a gap in its number", cure)


def _factor(number: str, unit: str, kind: str) -> float:
    """What one of `unit` is worth in the inside unit of this kind. Raises UnitsError, quoting the number."""
    known = KINDS[kind]
    if unit in known.factors:
        return known.factors[unit]
    if not unit:
        raise UnitsError(f"{number} has no unit", _bare_cure(number, kind))
    if kind == "number":
        raise UnitsError(f"{quoted(f'{number} {unit}')} has a unit where none belongs", f"write {number}")
    hint = _HINTS.get((kind, unit))
    if hint:
        raise UnitsError(f"{unit} is no unit of {known.name.split(' ', 1)[1]}", hint.format(n=number))
    for spelling in known.factors:
        if spelling.lower() == unit.lower().replace(" ", ""):
            raise UnitsError(f"{quoted(unit)} is not how this unit is spelled", f"write {number} {spelling}")
    factor = _pint_factor(unit, known.pint) if known.pint else None
    if factor is None:
        raise UnitsError(f"{quoted(unit)} is no unit of {known.name.split(' ', 1)[1]}", f"use {known.known}")
    return factor


def _bare_cure(number: str, kind: str) -> str:
    value, usual = float(number), KINDS[kind].usual
    if kind == "energy" and 0 < abs(value) < 30:
        usual = "keV"
    if kind == "fraction" and 0 < abs(value) < 1:
        number = plain(100 * value)
    if kind == "time":
        return f"write {number} s, or {number} min"
    return f"write {number} {usual}"


def _read_sd(text: str | None, value: float, whole: str, kind: str) -> float:
    if text is None:
        return 0.0
    found = _QUANTITY.fullmatch(text)
    if found is None:
        raise UnitsError(f"{quoted(whole)} has no number after the ±", "write it like 600 nm ± 8 %")
    _refuse_split_number(text, found[2])
    number, unit = _finite(found[1]), found[2]
    if not unit:
        usual = KINDS[kind].usual
        raise UnitsError(
            f"the ± {number:g} in {quoted(whole)} has no unit",
            f"write ± {found[1]} %" + (f" or ± {found[1]} {usual}" if usual not in ("%", "") else ""),
        )
    if number < 0.0:
        raise UnitsError(f"{quoted(whole)} has a minus after the ±", f"write ± {found[1][1:]} {unit}")
    if "across" in unit or "±" in unit:
        raise UnitsError(f"{quoted(whole)} goes on after its ±", "write it like 600 nm ± 8 %, across die ± 3 %")
    relative = unit == "%" and kind != "fraction"
    if relative and kind == "temperature":
        raise UnitsError(f"{quoted(whole)} has a share of a temperature after the ±", "write it in K")
    sd = number * abs(value) / 100.0 if relative else _scaled(number, _factor(found[1], unit, kind))
    if kind != "temperature" and value and sd > abs(value):
        raise UnitsError(f"{quoted(whole)} has a ± larger than its value", "give a ± below 100 %")
    return sd


def _pint_factor(unit: str, inside: str) -> float | None:
    """What one of any other unit is worth, from pint; None where it is no unit of this kind."""
    word = _UNIT_WORD.fullmatch(unit)
    if word is None:
        return None
    pieces = [f"{w}**{p}" if p else w for w, p in ((word[1], word[2]), (word[3], word[4])) if w]
    import pint

    try:
        return float(_registry().Quantity(1.0, "/".join(pieces)).to(inside).magnitude)
    except (pint.errors.PintError, ValueError, AttributeError, TypeError):
        return None


@cache
def _registry() -> Any:  # pint's registry class is built at run time and has no useful static type
    import pint

    return pint.UnitRegistry()
