"""What a calibration is made from: coupons, mill and materials, checked against each other."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, TypeVar

from stackmill.documents import wording
from stackmill.documents.coupons import Coupon, read_coupons
from stackmill.documents.material import LabMaterial, MaterialsFile
from stackmill.documents.mill import Mill
from stackmill.documents.reading import read_document
from stackmill.documents.wording import Sentence
from stackmill.errors import InputError, InputErrors
from stackmill.frozen import frozen
from stackmill.jobs.materials import with_told

if TYPE_CHECKING:
    from stackmill.materials.library import Library
    from stackmill.materials.material import Material


@frozen
class Calibrating:
    """Coupons (their materials under their own names), the mill, and every material they need, by name."""

    mill: Mill
    coupons: tuple[Coupon, ...]
    materials: Mapping[str, Material]


def read_calibrating(coupons: Path, mill: Path, materials: Sequence[Path] = ()) -> Calibrating:
    """Read and check all of it. Raises InputErrors with everything that is wrong, FileAccessError."""
    from stackmill.materials.library import Library

    errors: list[InputError] = []
    read_mill = _read(lambda: read_document(Mill, mill, what="mill file").model, errors)
    labs: list[LabMaterial] = []
    for path in materials:
        file = _read(partial(read_document, MaterialsFile, path, what="materials file"), errors)
        labs += file.model.materials if file else ()
    found = _read(lambda: read_coupons(coupons), errors)
    if errors or read_mill is None or found is None:
        raise InputErrors(errors)
    library = Library.load(labs)
    known: dict[str, Material] = {}
    named = []
    for coupon in found:
        says = _misfit(coupon, library, read_mill)
        if says is not None:
            errors.append(InputError(says.what, cure=says.cure, place=coupon.place))
            continue
        material = library.get(coupon.material)
        known[material.name] = material
        named.append(replace(coupon, material=material.name))
    if errors:
        raise InputErrors(errors)
    return Calibrating(read_mill, tuple(named), with_told(known, library))


T = TypeVar("T")


def _read(read: Callable[[], T], errors: list[InputError]) -> T | None:
    """What is read, or None and its errors noted."""
    try:
        return read()
    except InputErrors as error:
        errors += error.errors
        return None


def _misfit(coupon: Coupon, library: Library, mill: Mill) -> Sentence | None:
    """What keeps a coupon from telling a rate of a known material."""
    from stackmill.rates.yields import threshold_ev

    if coupon.material not in library:
        return wording.unknown_material(coupon.material, library.near(coupon.material))
    material = library.get(coupon.material)
    threshold = threshold_ev(material, mill.gas)
    if coupon.energy_ev <= threshold:
        return wording.too_slow(f"{coupon.energy_ev:g} eV", mill.gas, material.name, f"{threshold:.3g} eV")
    return None
