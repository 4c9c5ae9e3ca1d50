"""stackmill: when to stop the ion mill.

The public names below are loaded when first used, so that importing stackmill costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from stackmill.errors import InputError, InputErrors, StackmillError, StackmillWarning
    from stackmill.jobs import Job, load_job
    from stackmill.materials.library import Library
    from stackmill.planning.stops import StopTable, stop_table

__version__ = "0.1.0"

_HOMES = {
    "InputError": "errors",
    "InputErrors": "errors",
    "Job": "jobs",
    "Library": "materials.library",
    "StackmillError": "errors",
    "StackmillWarning": "errors",
    "StopTable": "planning.stops",
    "load_job": "jobs",
    "stop_table": "planning.stops",
}

__all__ = [
    "InputError",
    "InputErrors",
    "Job",
    "Library",
    "StackmillError",
    "StackmillWarning",
    "StopTable",
    "__version__",
    "load_job",
    "stop_table",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'stackmill' has no attribute {name!r}")
    return getattr(import_module(f"stackmill.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return sorted(__all__)
