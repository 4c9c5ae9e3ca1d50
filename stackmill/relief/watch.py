"""Who is told how a long run gets on."""

from __future__ import annotations


class Watch:
    """Told how a run gets on; this one keeps it to itself."""

    def compiling(self) -> None:
        """The kernel is about to be compiled, which takes some seconds, once."""

    def done(self, share: float) -> None:
        """So much (0..1) of the work in hand is done."""
