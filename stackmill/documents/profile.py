"""How the beam's current density changes across the die: by a formula, or by a measured map."""

from __future__ import annotations

import math
from bisect import bisect_right
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, ClassVar

from pydantic import Field, PlainValidator, PrivateAttr, WithJsonSchema, model_validator

from stackmill.documents import wording
from stackmill.documents.fields import DiePosition, Distance, PatternDensity
from stackmill.documents.reading import Record, read_bytes
from stackmill.documents.wording import Refusal, Sentence, refuse
from stackmill.errors import FileAccessError, InputError, InputErrors, Place
from stackmill.frozen import frozen
from stackmill.units import quoted

if TYPE_CHECKING:
    from stackmill.documents.mill import Mill
    from stackmill.documents.reading import Document

HEADER = "x_mm,y_mm,relative"
_NM_PER_MM = 1e6
_MOST_TIMES = 10.0  # a place with ten times the current of the centre is a slip of the pen


@frozen
class BeamMap:
    """Measured current density on a rectangular grid: x_nm (X,), y_nm (Y,) rising, relative[y][x] to the stated one."""

    x_nm: tuple[float, ...]
    y_nm: tuple[float, ...]
    relative: tuple[tuple[float, ...], ...]

    def at(self, x_nm: float, y_nm: float) -> float | None:
        """Interpolated bilinearly; None outside the grid."""
        i, u = _between(self.x_nm, x_nm)
        j, v = _between(self.y_nm, y_nm)
        if not (0.0 <= u <= 1.0 and 0.0 <= v <= 1.0):
            return None
        low, high = self.relative[j], self.relative[j + 1]
        return (low[i] * (1 - u) + low[i + 1] * u) * (1 - v) + (high[i] * (1 - u) + high[i + 1] * u) * v


def _between(grid: Sequence[float], at: float) -> tuple[int, float]:
    """Which piece of a grid a place lies in, and how far along it (outside 0..1 beyond the ends)."""
    k = min(max(bisect_right(grid, at) - 1, 0), len(grid) - 2)
    return k, (at - grid[k]) / (grid[k + 1] - grid[k])


class Centre(Record):
    """Where the beam's middle meets the die (nm)."""

    what: ClassVar[str] = "centre"
    x: DiePosition = Field(examples=["0 mm"])
    y: DiePosition = Field(examples=["0 mm"])


def _path(value: object) -> str:
    if not isinstance(value, str) or not value.strip():
        raise refuse("this names no file", "write its path")
    return value


class Profile(Record):
    """Current density across the die, relative to the stated one, at a distance r from the centre.

    Exactly one of: falls, at: 1 - falls (r / at)²; gaussian: exp(-r² / (2 gaussian²)); map: a CSV file with the
    header x_mm,y_mm,relative on a rectangular grid, x and y counted from the centre.
    """

    what: ClassVar[str] = "profile"
    falls: PatternDensity | None = None
    at: Distance | None = None
    gaussian: Distance | None = None
    map: Annotated[str, PlainValidator(_path), WithJsonSchema({"type": "string"})] | None = None
    centre: Centre = Centre(x=0.0, y=0.0)
    _grid: BeamMap | None = PrivateAttr(default=None)

    @model_validator(mode="after")
    def _one_form(self) -> Profile:
        given = [key for key in ("falls", "gaussian", "map") if getattr(self, key) is not None]
        if not given:
            says = Sentence(
                "this profile has no shape", "write {falls: 3 %, at: 10 mm}, {gaussian: 20 mm} or {map: FILE}"
            )
            raise Refusal(says, *(("at",) if self.at is not None else ()))
        if len(given) > 1:
            raise Refusal(
                Sentence(f"a profile with {given[0]} cannot have {given[1]} too", "keep one of them"), given[1]
            )
        if (self.at is not None) != (self.falls is not None):
            if self.falls is not None:
                raise Refusal(
                    Sentence("this profile does not say where it has fallen that far", "add at: 10 mm"), "falls"
                )
            raise Refusal(Sentence(f"a profile with {given[0]} has no 'at'", "leave it out"), "at")
        return self

    def with_map(self, grid: BeamMap) -> Profile:
        """The same with its map read."""
        made = self.model_copy()
        made._grid = grid
        return made

    @property
    def grid(self) -> BeamMap | None:
        """The map, once it has been read."""
        return self._grid

    def relative(self, x_nm: float, y_nm: float) -> float | None:
        """Current density at a place on the die as a share of the stated one; None where nothing is known of it.

        0 or less where the parabola says that the beam has ended.
        """
        x, y = x_nm - self.centre.x, y_nm - self.centre.y
        if self.map is not None:
            return None if self._grid is None else self._grid.at(x, y)
        if self.gaussian is not None:
            return math.exp(-(x * x + y * y) / (2.0 * self.gaussian**2))
        assert self.falls is not None
        assert self.at is not None
        return 1.0 - self.falls * (x * x + y * y) / self.at**2


def with_map(document: Document[Mill], folder: Path) -> tuple[Document[Mill], list[InputError]]:
    """A mill with the map its profile names, a path beside the mill file; and what is wrong with that file."""
    from stackmill.documents.reading import Document

    mill = document.model
    profile = mill.profile
    if profile is None or profile.map is None:
        return document, []
    try:
        grid = read_map(folder / Path(profile.map).expanduser())
    except FileAccessError as error:
        return document, [document.error(wording.cannot_bind(profile.map, error.what, error.cure), "profile", "map")]
    except InputErrors as error:
        return document, list(error.errors)
    return Document(mill.model_copy(update={"profile": profile.with_map(grid)}), document.tree, document.healed), []


def read_map(path: Path, *, file: str = "") -> BeamMap:
    """Read a measured map. Raises FileAccessError, and InputErrors with every line at fault."""
    from stackmill.documents.marks import decode

    file = file or str(path)
    lines = decode(read_bytes(path, file=file), file).split("\n")
    errors: list[InputError] = []
    rows: dict[tuple[float, float], float] = {}
    written = [(n, line) for n, line in enumerate(lines, 1) if line.strip() and not line.lstrip().startswith("#")]
    number, header = written[0] if written else (0, "")
    if header.replace(" ", "") != HEADER:
        what = f"a beam map begins with a header, and this one with {quoted(header)}"
        errors.append(InputError(what, cure=f"write {HEADER}", place=Place(file, number, 1, header)))
    for number, line in written[1:]:
        found = _row(line)
        if not isinstance(found, Sentence) and found[:2] in rows:
            found = Sentence("this place stands here for the second time", "keep one")
        if isinstance(found, Sentence):
            errors.append(InputError(found.what, cure=found.cure, place=Place(file, number, 1, line)))
        else:
            rows[found[:2]] = found[2]
    return _grid(rows, file, errors)


def _row(line: str) -> tuple[float, float, float] | Sentence:
    """X and y in mm and the relative current density of a line, or what is wrong with it."""
    try:
        x, y, relative = map(float, line.split(","))
    except ValueError:
        return Sentence(f"{quoted(line)} is not three numbers", "write them like 2.5,-1,0.98")
    if not (math.isfinite(x) and math.isfinite(y) and 0.0 < relative <= _MOST_TIMES):
        return Sentence(f"{quoted(line)} cannot be a beam", "write a place in mm and a share of the stated current")
    return x, y, relative


def _grid(rows: dict[tuple[float, float], float], file: str, errors: list[InputError]) -> BeamMap:
    x, y = (sorted({place[k] for place in rows}) for k in (0, 1))
    if not errors and (len(x) < 2 or len(y) < 2 or len(rows) != len(x) * len(y)):
        what = f"this map has {len(rows)} places, and {len(x)} different x by {len(y)} different y"
        errors.append(InputError(what, cure="measure on a full rectangular grid, at least 2 by 2", place=Place(file)))
    if errors:
        raise InputErrors(errors)
    relative = tuple(tuple(rows[at, row] for at in x) for row in y)
    return BeamMap(tuple(v * _NM_PER_MM for v in x), tuple(v * _NM_PER_MM for v in y), relative)
