"""The coupon file: witness pieces milled and measured, as CSV with the units in its header.

    name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm
    c1,SiO2 PECVD,1000,0,10,402,12

A piece's result is a depth, what remains of a film (film_nm, remaining_nm), or the time to clear a film
(film_nm, cleared: yes), each with its sd. Lines that begin with # are remarks.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path

from stackmill.documents.marks import decode
from stackmill.documents.reading import read_bytes
from stackmill.documents.wording import Sentence, listed, nearest
from stackmill.errors import InputError, InputErrors, Place
from stackmill.frozen import frozen
from stackmill.units import Measure, quoted

_UNITS: Mapping[str, Mapping[str, float]] = {
    "energy": {"ev": 1.0, "kev": 1e3},
    "incidence": {"deg": 1.0},
    "current_density": {"ma_per_cm2": 1.0},
    "time": {"s": 1.0, "min": 60.0, "h": 3600.0},
    "time_sd": {"s": 1.0, "min": 60.0, "h": 3600.0},
    "depth": {"nm": 1.0, "um": 1e3},
    "depth_sd": {"nm": 1.0, "um": 1e3},
    "film": {"nm": 1.0, "um": 1e3},
    "film_sd": {"nm": 1.0, "um": 1e3},
    "remaining": {"nm": 1.0, "um": 1e3},
    "remaining_sd": {"nm": 1.0, "um": 1e3},
}
_TEXTS = ("name", "material", "cleared", "note")
_NEEDED = ("material", "energy", "incidence", "time")
_SPANS: Mapping[str, tuple[float, float, str]] = {
    "energy": (1.0, 1e5, "energies go from 1 to 100000 eV"),
    "incidence": (0.0, 89.0, "incidence goes from 0 to 89 deg from the normal"),
    "current_density": (1e-6, 1e3, "current densities go from 1e-6 to 1000 mA/cm2"),
    "time": (1e-3, 3.6e6, "a time lies between 1 ms and 1000 h"),
}
_EXAMPLE = "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm"


@frozen
class Coupon:
    """One witness piece: its setting and the milling rate it shows.

    energy_ev; incidence_deg from the normal; current_density in mA/cm2, None for the mill's own; rate in nm/s with
    the sd of its measurement; method: how it was measured; place: its line in the file.
    """

    name: str
    material: str
    energy_ev: float
    incidence_deg: float
    current_density: float | None
    rate: Measure
    method: str
    place: Place


@frozen
class _Column:
    """One column of the file: what it holds, and what its numbers are multiplied by (0 for text)."""

    what: str
    times: float


@frozen
class _Cell:
    """One cell: its text, and where it begins (from 1)."""

    text: str
    column: int


def read_coupons(path: Path, *, file: str = "") -> tuple[Coupon, ...]:
    """Read a coupon file. Raises FileAccessError, and InputErrors with every cell at fault."""
    file = file or str(path)
    return coupons_of(decode(read_bytes(path, file=file), file), file)


def coupons_of(text: str, file: str) -> tuple[Coupon, ...]:
    """The coupons of a CSV text. Raises InputErrors."""
    lines = text.split("\n")
    written = [(n, line) for n, line in enumerate(lines, 1) if line.strip() and not line.lstrip().startswith("#")]
    if not written:
        raise InputErrors(
            [InputError("this coupon file is empty", cure=f"begin it with {_EXAMPLE}", place=Place(file))]
        )
    number, header = written[0]
    reader = _Reader(file)
    columns = reader.header(number, header)
    found = [reader.row(n, line, columns) for n, line in written[1:]] if columns else []
    if columns and not found and not reader.errors:
        reader.complain(number, 1, header, Sentence("there are no coupons under this header", "add a line a piece"))
    if reader.errors:
        raise InputErrors(reader.errors)
    return tuple(coupon for coupon in found if coupon is not None)


class _Reader:
    """Collects what is wrong while it reads."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.errors: list[InputError] = []
        self.names: dict[str, int] = {}

    def complain(self, line: int, column: int, text: str, says: Sentence) -> None:
        """Note one mistake."""
        self.errors.append(InputError(says.what, cure=says.cure, place=Place(self.file, line, column, text)))

    def header(self, number: int, line: str) -> list[_Column] | None:
        """The columns, or None where they cannot be used."""
        columns: list[_Column] = []
        before = len(self.errors)
        for cell in _cells(line):
            column = _column(cell.text)
            if isinstance(column, Sentence):
                self.complain(number, cell.column, line, column)
            elif any(column.what == other.what for other in columns):
                says = Sentence(f"{quoted(cell.text)} says again what another column says", "keep one of them")
                self.complain(number, cell.column, line, says)
            else:
                columns.append(column)
        if len(self.errors) > before:
            return None
        for says in _lacking([column.what for column in columns]):
            self.complain(number, 1, line, says)
        return None if len(self.errors) > before else columns

    def row(self, number: int, line: str, columns: Sequence[_Column]) -> Coupon | None:
        """One piece, or None where its line is wrong."""
        cells = _cells(line)
        if len(cells) != len(columns):
            says = Sentence(
                f"this line has {len(cells)} cells, and the header {len(columns)}",
                "leave a cell empty, but keep its comma",
            )
            self.complain(number, 1, line, says)
            return None
        before = len(self.errors)
        at = {column.what: cell for column, cell in zip(columns, cells, strict=True) if cell.text}
        values = self._values(number, line, columns, at)
        self._empty(number, line, at)
        name = self._name(number, line, at)
        if len(self.errors) > before:
            return None
        try:
            rate, method = _rate(values, at)
        except _WrongError as error:
            self.complain(number, 1, line, error.says)
            return None
        return Coupon(
            name=name,
            material=" ".join(at["material"].text.split()),
            energy_ev=values["energy"],
            incidence_deg=values["incidence"],
            current_density=values.get("current_density"),
            rate=rate,
            method=method,
            place=Place(self.file, number, 1, line),
        )

    def _values(self, number: int, line: str, columns: Sequence[_Column], at: Mapping[str, _Cell]) -> dict[str, float]:
        """The numbers of a line that can be used."""
        values = {}
        for column in columns:
            if column.times and column.what in at:
                value = _number(at[column.what].text, column)
                if isinstance(value, Sentence):
                    self.complain(number, at[column.what].column, line, value)
                else:
                    values[column.what] = value
        return values

    def _name(self, number: int, line: str, at: Mapping[str, _Cell]) -> str:
        """The piece's name; its line where it has none. No two are alike."""
        name = at["name"].text if "name" in at else f"line {number}"
        if name in self.names:
            says = Sentence(f"the name {quoted(name)} stands on line {self.names[name]} too", "give each piece its own")
            self.complain(number, at["name"].column if "name" in at else 1, line, says)
        self.names.setdefault(name, number)
        return name

    def _empty(self, number: int, line: str, at: Mapping[str, _Cell]) -> None:
        for what in _NEEDED:
            if what not in at:
                self.complain(number, 1, line, Sentence(f"this piece has no {what}", "fill the cell in"))


def _cells(line: str) -> list[_Cell]:
    """The cells of a line, with where they begin; quotes may hold commas."""
    row = next(csv.reader([line]), [])
    found, start = [], 0
    for text in row:
        while start < len(line) and line[start] in " \t":
            start += 1
        found.append(_Cell(text.strip(), start + 1))
        end = line.find(",", start + (len(text) + 2 if line[start : start + 1] == '"' else 0))
        start = len(line) if end < 0 else end + 1
    return found


def _column(text: str) -> _Column | Sentence:
    name = text.strip().lower()
    if name in _TEXTS:
        return _Column(name, 0.0)
    for what in sorted(_UNITS, key=len, reverse=True):
        unit = name.removeprefix(f"{what}_")
        if unit != name and unit in _UNITS[what]:
            return _Column(what, _UNITS[what][unit])
    if name in _UNITS:
        return Sentence(f"the column {quoted(text)} has no unit", f"write {name}_{next(iter(_UNITS[name]))}")
    known = [*_TEXTS, *(f"{what}_{unit}" for what, units in _UNITS.items() for unit in units)]
    near = nearest(name, known)
    return Sentence(
        f"{quoted(text)} is no column of a coupon file", f"did you mean {near}?" if near else f"as in {_EXAMPLE}"
    )


def _lacking(given: Sequence[str]) -> Iterator[Sentence]:
    """What a header must still have."""
    for what in _NEEDED:
        if what not in given:
            unit = f"_{next(iter(_UNITS[what]))}" if what in _UNITS else ""
            yield Sentence(f"there is no column for the {what}", f"add {what}{unit}")
    if "depth" not in given and "film" not in given:
        yield Sentence(
            "no column says what was measured", "add depth_nm,depth_sd_nm or film_nm,film_sd_nm,remaining_nm"
        )
    for what in ("depth", "film", "remaining"):
        if what in given and f"{what}_sd" not in given:
            yield Sentence(f"nothing says how sure {what} is", f"add {what}_sd_nm")


def _number(text: str, column: _Column) -> float | Sentence:
    try:
        value = float(text) * column.times
    except ValueError:
        return Sentence(f"{quoted(text)} is no number", "write a bare number; its unit stands in the header")
    if not math.isfinite(value):
        return Sentence(f"{quoted(text)} is no number to measure", "write the value that was read")
    if value < 0.0 or (value == 0.0 and column.what.endswith("_sd")):
        return Sentence(f"{quoted(text)} cannot be", "write a value above 0" if value == 0.0 else "leave out the minus")
    low, high, says = _SPANS.get(column.what, (0.0, 1e9, "a length is at most a meter"))
    if not low <= value <= high:
        return Sentence(f"{quoted(text)} cannot be: {says}", "check the unit in the header")
    return value


class _WrongError(Exception):
    """A piece that tells no rate."""

    def __init__(self, what: str, cure: str) -> None:
        super().__init__(what)
        self.says = Sentence(what, cure)


_RESULTS: Mapping[str, tuple[tuple[str, ...], str]] = {
    "depth": (("depth",), "depth"),
    "remaining": (("film", "remaining"), "remaining film"),
    "cleared": (("film",), "time to clear a film"),
}
"""What each result needs beside it, with its sd, and what it is called."""


def _rate(values: Mapping[str, float], at: Mapping[str, _Cell]) -> tuple[Measure, str]:
    """A piece's milling rate (nm/s), and how it was told. Raises _WrongError."""
    result = _result(values, at)
    needs, method = _RESULTS[result]
    for need in (need for what in needs for need in (what, f"{what}_sd")):
        if need not in values:
            raise _WrongError(f"this piece has no {need}", "fill the cell in")
    depth = values[needs[0]] - (values["remaining"] if result == "remaining" else 0.0)
    if depth <= 0.0:
        raise _WrongError("nothing was milled off this piece", "a piece that shows no rate cannot calibrate one")
    if result == "cleared" and "time_sd" not in values:
        raise _WrongError("this piece does not say how sharp its clearing was", "add time_sd_s: how sure the moment is")
    of_depth = math.hypot(*(values[f"{what}_sd"] for what in needs)) / depth
    relative = math.hypot(of_depth, values.get("time_sd", 0.0) / values["time"])
    if relative > 1.0:
        raise _WrongError("this piece is known to no better than its whole depth", "measure it better, or leave it out")
    rate = depth / values["time"]
    return Measure(rate, relative * rate), method


def _result(values: Mapping[str, float], at: Mapping[str, _Cell]) -> str:
    """Which of the results a piece has: exactly one. Raises _WrongError."""
    cleared = at["cleared"].text.lower() if "cleared" in at else "no"
    if cleared not in ("yes", "no"):
        raise _WrongError(f"{quoted(cleared)} is neither yes nor no", "write yes if the film was milled through")
    told = [what for what in ("depth", "remaining") if what in values] + ["cleared"] * (cleared == "yes")
    if len(told) > 1:
        raise _WrongError(f"{listed(told, last='and')} stand together", "keep the one that was measured")
    if not told:
        raise _WrongError("this piece has no result", "fill in depth, or remaining, or cleared: yes")
    return told[0]
