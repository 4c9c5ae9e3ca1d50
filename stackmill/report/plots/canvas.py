"""The paper that pictures are drawn on: its size in pixels, its letters, and files that repeat byte for byte."""

from __future__ import annotations

import io
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from stackmill.errors import FileAccessError, UsageError
from stackmill.frozen import frozen

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

DPI = 100
WIDTH_PX = 1400
SUFFIXES = (".png", ".svg")

_SETTINGS = {
    "font.family": ["DejaVu Sans"],
    "mathtext.fontset": "dejavusans",
    "svg.hashsalt": "stackmill",
    "svg.fonttype": "path",
    "hatch.linewidth": 0.6,
    "axes.linewidth": 0.8,
    "axes.unicode_minus": False,
    "text.hinting": "none",
}
_TIMES = (1.0, 2.0, 3.0, 4.0, 5.0, 8.0, 10.0, 15.0, 20.0, 30.0, 40.0, 50.0, 80.0, 100.0)


@contextmanager
def look() -> Iterator[None]:
    """The settings of all pictures while one is made; whatever the user has set is back afterwards."""
    import matplotlib
    from matplotlib.style import context

    with matplotlib.rc_context(), context(["default", _SETTINGS]):
        yield


def blank(width_px: float, height_px: float) -> Figure:
    """An empty white picture."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width_px / DPI, height_px / DPI), dpi=DPI, facecolor="white")
    FigureCanvasAgg(figure)
    return figure


def panel(figure: Figure, left: float, top: float, width: float, height: float) -> Axes:
    """Axes at a place (px, from the picture's upper left corner)."""
    across, up = figure.get_size_inches() * DPI
    return figure.add_axes((left / across, 1.0 - (top + height) / up, width / across, height / up))


def write(
    figure: Figure, x: float, y: float, text: str, size: float, *, bold: bool = False, ha: str = "left", **more: Any
) -> None:
    """Text at a place (px, from the picture's upper left corner)."""
    across, up = figure.get_size_inches() * DPI
    weight = "bold" if bold else "normal"
    figure.text(x / across, 1.0 - y / up, text, fontsize=size, fontweight=weight, ha=ha, va="center", **more)


def write_within(
    figure: Figure, x: float, y: float, text: str, size: float, room: float, *, bold: bool = False, **more: Any
) -> None:
    """A line of text that stays within a width (px): smaller where it is long, and cut where it is far too long."""
    wide = text_px(text, size, bold)[0]
    size = max(size * min(1.0, room / wide), min(size, 8.0)) if wide > 0.0 else size
    while len(text) > 4 and text_px(text, size, bold)[0] > room:
        text = text[:-4].rstrip() + "..."
    write(figure, x, y, text, size, bold=bold, **more)


def short(text: str, most: int = 32) -> str:
    """A name as a picture has room for it."""
    return text if len(text) <= most else text[: most - 3].rstrip() + "..."


@cache
def text_px(text: str, size: float, bold: bool = False) -> tuple[float, float]:
    """How wide and high (px) a line of text is; the widest of several lines, all their heights."""
    from matplotlib.backends.backend_agg import RendererAgg
    from matplotlib.font_manager import FontProperties

    renderer: Any = RendererAgg(8, 8, DPI)  # type: ignore[no-untyped-call]  # matplotlib has no types here
    font = FontProperties(family="DejaVu Sans", size=size, weight="bold" if bold else "normal")
    lines = text.split("\n")
    wide = max(renderer.get_text_width_height_descent(line, font, ismath=False)[0] for line in lines)
    return float(wide), len(lines) * size * DPI / 72.0 * 1.25


@frozen
class Scale:
    """px_per_nm along the section; times: what heights are drawn by, 1 where the picture is true to shape."""

    px_per_nm: float
    times: float

    @property
    def up_px_per_nm(self) -> float:
        """Pixels for each nm of height."""
        return self.px_per_nm * self.times

    def in_words(self) -> str:
        """For the picture: how its shape relates to the truth."""
        return "drawn to scale" if self.times == 1.0 else f"heights drawn {self.times:g} x"


def fitted(across_nm: float, up_nm: float, width_px: float, height_px: float, least_px: float) -> Scale:
    """The largest scale that fits a panel, with the least exaggeration that makes it at least so high."""
    best = Scale(1.0, 1.0)
    for times in _TIMES:
        best = Scale(min(width_px / across_nm, height_px / (times * up_nm)), times)
        if best.up_px_per_nm * up_nm >= min(least_px, 0.8 * height_px):
            break
    return best


@frozen
class Unit:
    """A unit of length for both axes: its name and its size in nm."""

    name: str
    nm: float


def unit_for(longest_nm: float) -> Unit:
    """The unit that lengths read best in: um from 1.5 um on, nm below."""
    return Unit("um", 1000.0) if longest_nm >= 1500.0 else Unit("nm", 1.0)


def render(figure: Figure, suffix: str) -> bytes:
    """The picture as a file's bytes, the same every time. suffix: `.png` or `.svg`. Raises UsageError otherwise."""
    kind = suffix.casefold()
    if kind not in SUFFIXES:
        shown = f"a picture called {suffix!r}" if suffix else "a picture without a suffix"
        raise UsageError(f"{shown} cannot be written", cure="end its name in .png or .svg")
    out = io.BytesIO()
    empty = {"Software": None} if kind == ".png" else {"Date": None, "Creator": None}
    with look():
        figure.savefig(out, format=kind[1:], dpi=DPI, metadata=empty, facecolor="white")
    return out.getvalue()


def save(figure: Figure, path: str | Path, write_bytes: Callable[[Path, bytes], object] | None = None) -> bytes:
    """Write the picture, PNG or SVG by the path's suffix, and give its bytes.

    write_bytes: writes the file in its own way (beside and renamed, say). Raises UsageError for another suffix,
    FileAccessError where the file cannot be written.
    """
    target = Path(path)
    content = render(figure, target.suffix)
    if write_bytes is not None:
        write_bytes(target, content)
        return content
    try:
        target.write_bytes(content)
    except OSError as error:
        raise FileAccessError(f"cannot write {target}: {error.strerror}", cure="give another path") from error
    return content
