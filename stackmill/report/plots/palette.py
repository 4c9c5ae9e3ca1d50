"""One palette for materials, the same in every picture: told apart in grey and by colour-blind eyes.

A family (metals, barriers, oxides ...) has its hatch and its hue, a material its lightness. Numbers only: nothing
here draws, so that a printed sheet can use it too. A lab's own name is styled by the material it resembles, by its
kind or by its words, always alike.
"""

from __future__ import annotations

import zlib
from collections.abc import Iterable, Mapping
from types import MappingProxyType

from stackmill.frozen import frozen
from stackmill.report.plots.colours import EYES, from_lch, lightness

APART = 8.0
"""Lightness (L*) by which two materials of one hatch differ in a picture, for every kind of eye."""

_INK_DARKER = 22.0
_DARK = 45.0  # L* under which ink is lighter than its ground
_SHIFTS = (0.0, -9.0, 9.0, -18.0, 18.0, -27.0, 27.0, -36.0, 36.0)
_LIGHTEST, _DARKEST = 96.0, 12.0
_SPARE_HATCHES = ("..", "||", "--", "++", "xx", "oo", "////", "\\\\\\\\")


@frozen
class Style:
    r"""How a material looks: face and ink (of hatch and outline) as `#rrggbb`; hatch: '' for plain, else a pattern of
    the signs / \ | - + x o O . (more of one sign: denser); family: what it belongs to.
    """

    face: str
    ink: str
    hatch: str
    family: str

    @property
    def on_it(self) -> str:
        """The colour to write in on the face: black or white."""
        return "#000000" if lightness(self.face) > 55.0 else "#ffffff"


@frozen
class _Family:
    """hatch; hue (deg) and chroma; lightness from and to, for members not listed."""

    hatch: str
    hue: float
    chroma: float
    light: tuple[float, float]


_FAMILIES: Mapping[str, _Family] = MappingProxyType(
    {
        "metal": _Family("", 255.0, 12.0, (46.0, 78.0)),
        "barrier": _Family("", 60.0, 26.0, (16.0, 36.0)),
        "silicide": _Family("||", 330.0, 22.0, (40.0, 66.0)),
        "oxide": _Family("", 235.0, 9.0, (86.0, 95.0)),
        "doped glass": _Family("..", 235.0, 12.0, (80.0, 92.0)),
        "nitride": _Family("//", 150.0, 28.0, (62.0, 88.0)),
        "low-k": _Family("oo", 85.0, 18.0, (84.0, 94.0)),
        "metal oxide": _Family("xx", 110.0, 22.0, (60.0, 86.0)),
        "semiconductor": _Family("\\\\", 330.0, 16.0, (52.0, 78.0)),
        "organic": _Family("--", 70.0, 34.0, (66.0, 88.0)),
        "carbon": _Family("++", 280.0, 4.0, (24.0, 50.0)),
        "composite": _Family("O.", 40.0, 12.0, (44.0, 76.0)),
        "unknown": _Family("+", 310.0, 20.0, (60.0, 84.0)),
    }
)

# name: family, L*, and chroma and hue where they are not the family's
_LISTED: Mapping[str, tuple[str, float] | tuple[str, float, float, float]] = MappingProxyType(
    {
        "AlCu": ("metal", 71.0),
        "Al": ("metal", 76.0),
        "Cu": ("metal", 58.0, 48.0, 55.0),
        "Au": ("metal", 79.0, 55.0, 85.0),
        "Ag": ("metal", 82.0, 4.0, 255.0),
        "W": ("metal", 44.0, 26.0, 275.0),
        "Pt": ("metal", 66.0, 10.0, 180.0),
        "Ni": ("metal", 60.0, 12.0, 130.0),
        "Co": ("metal", 52.0, 30.0, 290.0),
        "Ru": ("metal", 50.0, 18.0, 20.0),
        "Mo": ("metal", 54.0, 18.0, 230.0),
        "Cr": ("metal", 48.0, 14.0, 200.0),
        "Sn": ("metal", 74.0, 8.0, 310.0),
        "Be": ("metal", 78.0, 10.0, 130.0),
        "Fe": ("metal", 57.0, 8.0, 300.0),
        "Hf": ("metal", 63.0, 14.0, 320.0),
        "Ir": ("metal", 68.0, 14.0, 90.0),
        "Nb": ("metal", 56.0, 20.0, 190.0),
        "Os": ("metal", 47.0, 16.0, 240.0),
        "Pb": ("metal", 45.0, 6.0, 280.0),
        "Pd": ("metal", 65.0, 10.0, 30.0),
        "Re": ("metal", 51.0, 10.0, 110.0),
        "Rh": ("metal", 72.0, 16.0, 350.0),
        "V": ("metal", 53.0, 22.0, 150.0),
        "Zn": ("metal", 70.0, 12.0, 220.0),
        "Zr": ("metal", 61.0, 10.0, 60.0),
        "SnAg": ("metal", 77.0, 6.0, 180.0),
        "SnPb": ("metal", 62.0, 6.0, 310.0),
        "TiN": ("barrier", 27.0),
        "TaN": ("barrier", 30.0, 26.0, 20.0),
        "Ta": ("barrier", 17.0, 20.0, 300.0),
        "Ti": ("barrier", 36.0, 22.0, 300.0),
        "TiW": ("barrier", 23.0, 22.0, 330.0),
        "NiV": ("barrier", 33.0, 18.0, 130.0),
        "CoSi2": ("silicide", 44.0),
        "NiSi": ("silicide", 54.0),
        "TiSi2": ("silicide", 64.0),
        "WSi2": ("silicide", 34.0),
        "SiO2": ("oxide", 85.0, 16.0, 235.0),
        "SiO2 HDP": ("oxide", 90.0),
        "SiO2 PECVD": ("oxide", 94.0),
        "SiO2 TEOS": ("oxide", 92.0),
        "BPSG": ("doped glass", 84.0),
        "PSG": ("doped glass", 92.0),
        "spin-on glass": ("doped glass", 74.0),
        "SiN PECVD": ("nitride", 82.0),
        "Si3N4 LPCVD": ("nitride", 68.0),
        "SiON": ("nitride", 91.0),
        "SiCN": ("nitride", 56.0, 30.0, 170.0),
        "SiCOH": ("low-k", 90.0),
        "porous SiCOH": ("low-k", 80.0),
        "Al2O3": ("metal oxide", 84.0),
        "HfO2": ("metal oxide", 66.0),
        "Ta2O5": ("metal oxide", 57.0),
        "TiO2": ("metal oxide", 75.0),
        "Cr2O3": ("metal oxide", 48.0),
        "Fe2O3": ("metal oxide", 40.0, 34.0, 40.0),
        "CeO2": ("metal oxide", 92.0),
        "ITO": ("metal oxide", 88.0, 12.0, 190.0),
        "ZnO": ("metal oxide", 80.0, 12.0, 190.0),
        "Si": ("semiconductor", 68.0),
        "poly-Si": ("semiconductor", 57.0, 24.0, 345.0),
        "Ge": ("semiconductor", 48.0),
        "GaAs": ("semiconductor", 62.0, 18.0, 300.0),
        "GaN": ("semiconductor", 80.0, 12.0, 300.0),
        "InP": ("semiconductor", 52.0, 18.0, 300.0),
        "SiC": ("semiconductor", 74.0, 8.0, 200.0),
        "polyimide": ("organic", 74.0),
        "PMMA": ("organic", 88.0),
        "novolac resist": ("organic", 64.0, 40.0, 45.0),
        "C": ("carbon", 28.0),
        "diamond": ("carbon", 88.0),
        "epoxy mould compound": ("composite", 40.0),
        "silver paint": ("composite", 72.0),
    }
)

_OF_KIND: Mapping[str, str] = MappingProxyType(
    {
        "metal": "metal",
        "dielectric": "oxide",
        "semiconductor": "semiconductor",
        "organic": "organic",
        "carbon": "carbon",
        "composite": "composite",
    }
)

# words in a name that tell its family; the first that is found counts
_TELLING: tuple[tuple[str, tuple[str, ...]], ...] = (
    ("barrier", ("barrier", "liner", "adhesion", "titanium nitride", "tantalum")),
    ("silicide", ("silicide", "salicide")),
    ("low-k", ("low-k", "low k", "ulk", "sicoh")),
    ("nitride", ("nitride", "sin", "si3n4", "sicn")),
    ("doped glass", ("glass", "bpsg", "psg", "bsg")),
    ("oxide", ("oxide", "sio2", "teos", "dielectric")),
    ("organic", ("resist", "polymer", "polyimide", "epoxy", "organic", "bcb")),
    ("semiconductor", ("silicon", "wafer", "substrate", "arsenide", "phosphide", "poly")),
    (
        "metal",
        ("metal", "copper", "aluminium", "aluminum", "gold", "silver", "solder", "tungsten", "alloy", "platinum"),
    ),
    ("carbon", ("carbon", "graphite", "diamond")),
    ("composite", ("paint", "paste", "mould", "mold", "compound")),
)


def style(name: str, *, like: str | None = None, kind: str | None = None) -> Style:
    """How a material looks, the same wherever it is asked.

    like: the library's material it resembles (another lightness of the same family); kind: of the material, as the
    library says it. Both count only for names that the palette does not list, and any name has a style.
    """
    return _made(name, like, kind, 0.0, None)


def styles(
    names: Iterable[str], *, like: Mapping[str, str] | None = None, kind: Mapping[str, str] | None = None
) -> dict[str, Style]:
    """The styles of all materials of one picture, of which no two look the same to any eye.

    Each has its own `style`; where two would be alike, the one that the palette does not list, or lists later, gives
    way by lightness, then by hatch. The order of the names does not matter.
    """
    likes, kinds = like or {}, kind or {}
    place = {one: k for k, one in enumerate(_LISTED)}
    wanted = list(dict.fromkeys(names))
    found: dict[str, Style] = {}
    for name in sorted(wanted, key=lambda one: (place.get(one, len(place)), one)):
        found[name] = _free(name, likes.get(name), kinds.get(name), found.values())
    return {name: found[name] for name in wanted}


def apart(one: Style, other: Style) -> bool:
    """Whether two styles are told apart: by their hatch, or by lightness for every kind of eye."""
    if one.hatch != other.hatch:
        return True
    return all(abs(lightness(one.face, eyes) - lightness(other.face, eyes)) >= APART for eyes in EYES)


def _free(name: str, like: str | None, kind: str | None, taken: Iterable[Style]) -> Style:
    """The first variant of a material's style that is apart from all those taken."""
    others = list(taken)
    for hatch in (None, *_SPARE_HATCHES):
        for shift in _SHIFTS:
            made = _made(name, like, kind, shift, hatch)
            if all(apart(made, other) for other in others):
                return made
    return _made(name, like, kind, 0.0, None)


def _made(name: str, like: str | None, kind: str | None, shift: float, hatch: str | None) -> Style:
    family, light, chroma, hue = _colour(name, like, kind)
    light = min(max(light + shift, _DARKEST), _LIGHTEST)
    ink = light + _INK_DARKER if light < _DARK else light - _INK_DARKER
    return Style(
        face=from_lch(light, chroma, hue),
        ink=from_lch(ink, chroma, hue),
        hatch=_FAMILIES[family].hatch if hatch is None else hatch,
        family=family,
    )


def _colour(name: str, like: str | None, kind: str | None) -> tuple[str, float, float, float]:
    """Family, lightness, chroma and hue."""
    if name in _LISTED:
        family, light, *rest = _LISTED[name]
        own = _FAMILIES[family]
        chroma, hue = rest if rest else (own.chroma, own.hue)
        return family, light, chroma, hue
    family = _family(name, like, kind)
    own, lot = _FAMILIES[family], zlib.crc32(name.encode("utf-8")) % 997 / 996.0
    low, high = own.light
    return family, low + lot * (high - low), own.chroma, (own.hue + 40.0 * (lot - 0.5)) % 360.0


def _family(name: str, like: str | None, kind: str | None) -> str:
    if like is not None and like in _LISTED:
        return _LISTED[like][0]
    if kind == "dielectric" or kind is None or kind not in _OF_KIND:
        words = name.casefold()
        told = next((family for family, signs in _TELLING if any(sign in words for sign in signs)), None)
        if told is not None:
            return told
    return _OF_KIND.get(kind or "", "unknown")
