"""A film told in terms of others: `0.8 x SiO2 ± 30 %`, and mixtures by volume."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Annotated, Any

from pydantic import PlainValidator, WithJsonSchema

from stackmill.documents.wording import refuse
from stackmill.frozen import frozen
from stackmill.units import plain, quoted, read_number

_NUMBER = r"(?:[0-9]+\.?[0-9]*|\.[0-9]+)"
_RELATIVE = re.compile(
    rf"(?P<factor>{_NUMBER})\s*(?:(?:x|times)\s+|[×*]\s*)(?P<name>[^±]*[^±\s])(?:\s*±\s*(?P<sd>{_NUMBER})\s*%)?"
)
_SPREAD = (0.01, 100.0)
"""A factor beyond these is a slip of the pen: no two solids differ by as much."""
_WHOLE_TOLERANCE = 0.005
_RELATIVE_FORM = "write it like 0.8 x SiO2 ± 30 %"
_MIXTURE_FORM = "write it like {SiN PECVD: 60 %, SiCN: 40 %}"


@frozen
class RelativeRate:
    """A milling rate as a multiple of another material's, at every energy and angle.

    factor: the multiple; material: the other's name; ln_sd: sd of ln(factor).
    """

    factor: float
    material: str
    ln_sd: float

    def __str__(self) -> str:
        return f"{plain(self.factor)} x {self.material} ± {plain(100 * self.ln_sd)} %"


def _relative_rate(value: Any) -> RelativeRate:
    if isinstance(value, RelativeRate):
        return value
    text = " ".join(str(value).replace("+/-", "±").replace("+-", "±").split())
    found = _RELATIVE.fullmatch(text)
    if found is None:
        raise refuse(
            f"{quoted(text)} is no rate relative to another material",
            f"{_RELATIVE_FORM}; a rate in nm/min goes under measured_rate",
        )
    if found["sd"] is None:
        raise refuse(f"{quoted(text)} does not say how well it is known", f"write {text} ± 30 %")
    factor, sd = float(found["factor"]), float(found["sd"]) / 100.0
    if not _SPREAD[0] <= factor <= _SPREAD[1]:
        raise refuse(f"{plain(factor)} times another material's rate is no likely rate", "check the factor")
    if not 0.0 < sd <= 1.0:
        raise refuse(f"± {found['sd']} % of a rate cannot be used", "give a ± above 0 and up to 100 %")
    return RelativeRate(factor, found["name"], sd)


def _mixture(value: Any) -> dict[str, float]:
    if not isinstance(value, Mapping):
        raise refuse("a mixture names its materials and their shares of the volume", _MIXTURE_FORM)
    if len(value) < 2:
        raise refuse("a mixture is made of two materials or more", f"{_MIXTURE_FORM}, or use like")
    shares = {" ".join(str(name).split()): _volume_share(name, share) for name, share in value.items()}
    total = sum(shares.values())
    if abs(total - 1.0) > _WHOLE_TOLERANCE:
        raise refuse(f"the shares of this mixture add up to {plain(round(100 * total, 6))} %", "make them 100 %")
    return {name: share / total for name, share in shares.items()}


def _volume_share(name: Any, value: Any) -> float:
    share = float(value) if isinstance(value, int | float) else read_number(str(value), "fraction")
    if not 0.0 < share < 1.0:
        raise refuse(
            f"{plain(100 * share)} % of {quoted(str(name))} is no share of a mixture", "write between 0 and 100 %"
        )
    return share


RelativeRateText = Annotated[
    RelativeRate | None,
    PlainValidator(lambda value: None if value is None else _relative_rate(value)),
    WithJsonSchema({"type": "string", "description": "written as 0.8 x SiO2 ± 30 %"}),
]
Mixture = Annotated[
    dict[str, float] | None,
    PlainValidator(lambda value: None if value is None else _mixture(value)),
    WithJsonSchema({"type": "object", "additionalProperties": {"type": "string", "description": "written as 60 %"}}),
]
