"""What share of the mill's current density each region gets, by where it lies on the die."""

from __future__ import annotations

from stackmill.documents import wording
from stackmill.documents.marks import KeyPath
from stackmill.documents.mill import Mill
from stackmill.documents.profile import Profile
from stackmill.documents.stack import Region, Stack
from stackmill.documents.wording import Sentence
from stackmill.frozen import frozen
from stackmill.units import quoted


@frozen
class BeamOver:
    """The beam over a die. share: of each region; notes; complaints, with their place in the stack file."""

    share: tuple[float, ...]
    notes: tuple[str, ...] = ()
    complaints: tuple[tuple[Sentence, KeyPath], ...] = ()


def beam_over(stack: Stack, mill: Mill) -> BeamOver:
    """What each region gets of a mill's beam by its profile; those without a place have the stated current."""
    profile = mill.profile
    if profile is None or (profile.map is not None and profile.grid is None):
        return BeamOver((1.0,) * len(stack.regions))
    share: list[float] = []
    complaints: list[tuple[Sentence, KeyPath]] = []
    for k, region in enumerate(stack.regions):
        found = _share(profile, region)
        if found is None or found <= 0.0:
            says = wording.off_the_map(region.name) if found is None else wording.out_of_beam(region.name)
            complaints.append((says, ("regions", k, "at")))
        share.append(found or 0.0)
    placeless = [quoted(region.name) for region in stack.regions if region.at is None]
    notes: tuple[str, ...] = ()
    if placeless:
        names, have = wording.listed(placeless, last="and"), "has" if len(placeless) == 1 else "have"
        notes = (f"the beam changes across the die, and {names} {have} no 'at': the stated current is taken there",)
    return BeamOver(tuple(share), notes, tuple(complaints))


def _share(profile: Profile, region: Region) -> float | None:
    return 1.0 if region.at is None else profile.relative(region.at.x, region.at.y)
