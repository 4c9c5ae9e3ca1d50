"""The lean decorator gives what dataclasses.dataclass(frozen=True) gives."""

from __future__ import annotations

import copy
import dataclasses
import pickle

import pytest

from stackmill.frozen import frozen


@frozen
class Lean:
    """As Full."""

    a: int
    b: str = "x"
    c: list = dataclasses.field(default_factory=list, compare=False, repr=False)


@dataclasses.dataclass(frozen=True)
class Full:
    """As Lean."""

    a: int
    b: str = "x"
    c: list = dataclasses.field(default_factory=list, compare=False, repr=False)


@pytest.mark.parametrize("make", [lambda k: k(1), lambda k: k(1, "y"), lambda k: k(a=2, c=[3]), lambda k: k(1, b="z")])
def test_the_same_fields_repr_equality_and_hash(make):
    lean, full = make(Lean), make(Full)
    assert dataclasses.asdict(lean) == dataclasses.asdict(full)
    assert repr(lean) == repr(full).replace("Full", "Lean")
    assert hash(lean) == hash(full)
    assert lean == make(Lean)
    assert lean != Lean(99)
    assert lean != full
    assert dataclasses.replace(lean, a=7).a == 7
    assert copy.deepcopy(lean) == lean
    assert pickle.loads(pickle.dumps(lean)) == lean


def test_each_has_a_default_of_its_own():
    assert Lean(1).c is not Lean(1).c


@pytest.mark.parametrize("make", [lambda k: k(), lambda k: k(1, a=1), lambda k: k(1, d=2), lambda k: k(1, "b", [], 4)])
def test_the_same_misuse_is_refused(make):
    for kind in (Lean, Full):
        with pytest.raises(TypeError):
            make(kind)


def test_nothing_can_be_assigned_or_deleted():
    lean = Lean(1)
    with pytest.raises(dataclasses.FrozenInstanceError):
        lean.a = 2
    with pytest.raises(dataclasses.FrozenInstanceError):
        del lean.a
