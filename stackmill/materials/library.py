"""The library of materials: finds entries by name, parses only those asked for, lays a lab's own over."""

from __future__ import annotations

import difflib
import re
import warnings
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel

from stackmill.documents.material import AtomsFile, CautionsFile, LabMaterial, LibraryEntry, SourcesFile
from stackmill.documents.reading import read_document
from stackmill.errors import InputError, Place, StackmillWarning
from stackmill.materials.lab import estimated, mixed, overlay, relative
from stackmill.materials.material import Atom, Caution, Material
from stackmill.materials.reading import material_from_entry
from stackmill.units import quoted

DATA = Path(__file__).parent / "data"
_Model = TypeVar("_Model", bound=BaseModel)


class UnknownMaterialError(InputError):
    """No material of that name. near: the names most like it."""

    def __init__(self, name: str, near: Sequence[str]) -> None:
        listed = " or ".join(f"'{item}'" for item in near)
        cure = f"did you mean {listed}?" if near else "`stackmill materials` lists the names"
        super().__init__(f"no material is called {quoted(name)}", cure=cure, key=name)
        self.name = name
        self.near = tuple(near)


class Library:
    """Materials by name or alias. `load` reads only the names; `get` parses the one entry asked for."""

    def __init__(self, files: Mapping[str, Path], known: Mapping[str, str], folder: Path) -> None:
        self._files = dict(files)
        self._known = dict(known)
        self._folder = folder
        self._read: dict[str, Material] = {}
        self._atoms: dict[str, Atom] | None = None
        self._citations: dict[str, str] | None = None

    @classmethod
    def load(cls, overlays: Sequence[LabMaterial] = (), *, folder: Path = DATA) -> Library:
        """The library in `folder` with a lab's materials over it, first to last.

        Raises UnknownMaterialError for a lab material that is neither known, nor `like` a known one, nor
        given by a composition; InputError for a composition of unknown elements.
        """
        files: dict[str, Path] = {}
        known: dict[str, str] = {}
        for path in sorted(folder.glob("*.yaml")):
            name, aliases = _head(path)
            files[name] = path
            known[name] = name
            known.update(dict.fromkeys(aliases, name))
        library = cls(files, known, folder)
        for lab in overlays:
            library.lay(lab)
        return library

    def names(self) -> tuple[str, ...]:
        """The names of all materials, sorted."""
        return tuple(sorted({*self._files, *self._read}, key=str.casefold))

    def __contains__(self, name: object) -> bool:
        return name in self._known

    def near(self, name: str, most: int = 3) -> tuple[str, ...]:
        """The names most like `name`, best first."""
        folded = {key.casefold(): target for key, target in self._known.items()}
        wanted = name.casefold()
        hits = difflib.get_close_matches(wanted, list(folded), n=4 * most, cutoff=0.6)
        hits.sort(key=lambda hit: (_likeness(wanted, hit), _likeness(_plain(wanted), _plain(hit))), reverse=True)
        return tuple(dict.fromkeys(folded[hit] for hit in hits))[:most]

    def get(self, name: str) -> Material:
        """The material of that name or alias. Raises UnknownMaterialError with the nearest names."""
        if name not in self._known:
            raise UnknownMaterialError(name, self.near(name))
        name = self._known[name]
        if name not in self._read:
            entry = _read(LibraryEntry, self._files[name])
            self._read[name] = material_from_entry(entry)
        return self._read[name]

    def atoms(self) -> Mapping[str, Atom]:
        """Every element as a constituent, by symbol."""
        if self._atoms is None:
            table = _read(AtomsFile, self._folder / "tables" / "atoms.yaml").atoms
            self._atoms = {
                symbol: Atom(symbol, a.z, a.m_u, a.us_ev, a.q, a.w_ev, a.s, a.source, a.seen)
                for symbol, a in table.items()
            }
        return self._atoms

    def citation(self, key: str) -> str:
        """The full citation behind a source key; the key itself for a lab's own file."""
        if self._citations is None:
            table = _read(SourcesFile, self._folder / "tables" / "sources.yaml").sources
            self._citations = {name: source.citation for name, source in table.items()}
        return self._citations.get(key, key)

    def cautions(self) -> Mapping[str, Caution]:
        """Cautions an element brings into any compound of it, by symbol."""
        table = _read(CautionsFile, self._folder / "tables" / "cautions.yaml").cautions
        return {symbol: Caution(item.note, item.source, item.seen) for symbol, item in table.items()}

    def lay(self, lab: LabMaterial) -> Material:
        """Lay one of a lab's materials over this library; `get` finds it from then on by name and aliases.

        Raises UnknownMaterialError, with near names, where it leads to a material that is not known.
        """
        if not lab.references and lab.composition is None and lab.name not in self._known:
            raise UnknownMaterialError(lab.name, self.near(lab.name))
        if lab.composition is not None:
            material = estimated(lab, self.atoms(), self.cautions())
        elif lab.mixture is not None:
            material = mixed(lab, {name: self.get(name) for name in lab.mixture})
        elif lab.rate is not None:
            material = relative(lab, self.get(lab.rate.material))
        else:
            base = self.get(lab.like or lab.name)
            if lab.like and base.measured_rates and not lab.measured_rate:
                _warn_of_unused(lab.name, base.name)
            material = overlay(lab, base)
        name = lab.name if lab.references else self._known.get(lab.name, lab.name)
        self._read[name] = material
        self._known[name] = name
        self._known.update(dict.fromkeys(lab.aliases, name))
        return material


def _warn_of_unused(name: str, measured: str) -> None:
    warnings.warn(
        f"{measured} was measured, but {quoted(name)} is only like it and keeps the library's rate"
        f" (write rate: 1 x {measured} ± 10 % to use what was measured)",
        StackmillWarning,
        stacklevel=4,
    )


def _head(path: Path) -> tuple[str, tuple[str, ...]]:
    """Name and aliases from the first two lines of an entry, without parsing the rest."""
    with path.open(encoding="utf-8") as file:
        first, second = file.readline(), file.readline()
    if not first.startswith("name: ") or not second.startswith("aliases: ["):
        raise InputError(
            "a library entry begins with its name and its aliases",
            cure="write `name: ...` in line 1 and `aliases: [...]` in line 2",
            place=Place(str(path), 1, 1, first.rstrip()),
        )
    inside = second.split("[", 1)[1].rsplit("]", 1)[0]
    return first[6:].strip(), tuple(alias.strip() for alias in inside.split(",") if alias.strip())


def _likeness(one: str, other: str) -> float:
    return difflib.SequenceMatcher(None, other, one).ratio()


def _plain(name: str) -> str:
    """A name with all digits alike: SiO3 is more likely meant for SiO2 than for SiON."""
    return re.sub("[0-9]", "0", name)


def _read(model: type[_Model], path: Path) -> _Model:
    return read_document(model, path, file=path.name).model
