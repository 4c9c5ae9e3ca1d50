"""Colours by lightness, chroma and hue (CIE L*, C*, h of Lab, D65), and as colour-blind eyes see them.

Lab and the sRGB curve are those of IEC 61966-2-1 and CIE 15, from memory. The matrices are those of Machado, Oliveira
and Fernandes, IEEE Trans. Vis. Comput. Graph. 15 (2009) 1291, severity 1, on linear sRGB; digits checked against public
code that quotes the paper, the paper itself not in sight.
"""

from __future__ import annotations

import math

Triple = tuple[float, float, float]
Matrix = tuple[Triple, Triple, Triple]

_TO_XYZ: Matrix = ((0.4124, 0.3576, 0.1805), (0.2126, 0.7152, 0.0722), (0.0193, 0.1192, 0.9505))
_TO_RGB: Matrix = ((3.2406, -1.5372, -0.4986), (-0.9689, 1.8758, 0.0415), (0.0557, -0.2040, 1.0570))
_WHITE: Triple = (0.9505, 1.0, 1.089)
_KNEE = 6.0 / 29.0

EYES: dict[str, Matrix] = {
    "usual": ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)),
    "protanopia": ((0.152286, 1.052583, -0.204868), (0.114503, 0.786281, 0.099216), (-0.003882, -0.048116, 1.051998)),
    "deuteranopia": ((0.367322, 0.860646, -0.227968), (0.280085, 0.672501, 0.047413), (-0.011820, 0.042940, 0.968881)),
}
"""What each kind of eye makes of linear sRGB."""


def from_lch(lightness: float, chroma: float, hue_deg: float) -> str:
    """`#rrggbb` of a lightness (0..100), chroma and hue; chroma gives way where sRGB has no such colour."""
    for share in (1.0, 0.9, 0.8, 0.7, 0.6, 0.5, 0.4, 0.3, 0.2, 0.1, 0.0):
        rgb = _linear_of_lch(lightness, share * chroma, hue_deg)
        if all(-1e-3 <= one <= 1.001 for one in rgb):
            break
    return "#" + "".join(f"{round(255.0 * _curved(min(max(one, 0.0), 1.0))):02x}" for one in rgb)


def lightness(colour: str, eyes: str = "usual") -> float:
    """CIE L* (0..100) of `#rrggbb` as one of EYES sees it."""
    luminance = _times(_TO_XYZ, seen(colour, eyes))[1]
    return 116.0 * _lab_root(luminance) - 16.0


def seen(colour: str, eyes: str) -> Triple:
    """Linear sRGB (0..1 each) of `#rrggbb` as one of EYES sees it."""
    red, green, blue = (_linear(int(colour[k : k + 2], 16) / 255.0) for k in (1, 3, 5))
    one, two, three = (min(max(part, 0.0), 1.0) for part in _times(EYES[eyes], (red, green, blue)))
    return one, two, three


def _linear_of_lch(lightness_: float, chroma: float, hue_deg: float) -> Triple:
    hue = math.radians(hue_deg)
    fy = (lightness_ + 16.0) / 116.0
    roots = (fy + chroma * math.cos(hue) / 500.0, fy, fy - chroma * math.sin(hue) / 200.0)
    x, y, z = (white * _lab_power(root) for white, root in zip(_WHITE, roots, strict=True))
    return _times(_TO_RGB, (x, y, z))


def _times(matrix: Matrix, vector: Triple) -> Triple:
    x, y, z = (sum(a * b for a, b in zip(row, vector, strict=True)) for row in matrix)
    return x, y, z


def _linear(value: float) -> float:
    return value / 12.92 if value <= 0.04045 else ((value + 0.055) / 1.055) ** 2.4


def _curved(value: float) -> float:
    return 12.92 * value if value <= 0.0031308 else 1.055 * value ** (1.0 / 2.4) - 0.055


def _lab_root(ratio: float) -> float:
    return ratio ** (1.0 / 3.0) if ratio > _KNEE**3 else ratio / (3.0 * _KNEE**2) + 4.0 / 29.0


def _lab_power(root: float) -> float:
    return float(root**3) if root > _KNEE else 3.0 * _KNEE**2 * (root - 4.0 / 29.0)
