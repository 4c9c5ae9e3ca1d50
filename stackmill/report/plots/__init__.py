"""Pictures: the stack as it lies, what is left of it through time, and the cell's surface.

The names below are loaded when first used: the palette costs nothing, and only the drawings need matplotlib.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from stackmill.report.plots.canvas import render, save
    from stackmill.report.plots.cell import draw_cell
    from stackmill.report.plots.palette import Style, style, styles
    from stackmill.report.plots.section import draw_section
    from stackmill.report.plots.stack import draw_stack

_HOMES = {
    "Style": "palette",
    "draw_cell": "cell",
    "draw_section": "section",
    "draw_stack": "stack",
    "render": "canvas",
    "save": "canvas",
    "style": "palette",
    "styles": "palette",
}

__all__ = ["Style", "draw_cell", "draw_section", "draw_stack", "render", "save", "style", "styles"]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return sorted(__all__)
