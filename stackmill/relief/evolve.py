"""A recipe run over a surface: every kind of step, frames at the moments asked for, and what undercuts.

Time steps are as long as news may travel 0.9 of a grid step (0.5 at second order, half of that in a cell).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from stackmill.frozen import frozen
from stackmill.relief.slope_speed import SlopeTable
from stackmill.relief.terrain import Surface, Terrain, etch, passed_above, strip, untouched
from stackmill.relief.undercut import Undercut, Undercutting
from stackmill.relief.watch import Watch
from stackmill.timing.fall import Cover, Lowering, Step, Strip

Array = NDArray[np.float64]
Index = NDArray[np.intp]

_COURANT = {False: 0.9, True: 0.5}
_AT_ONCE = 32  # time steps between looks at what has been reached, what undercuts, and the watch


class Mover(Protocol):
    """reference.mill and kernel.mill."""

    def __call__(
        self,
        terrain: Terrain,
        surface: Surface,
        table: SlopeTable,
        *,
        duration_s: float,
        steps: int,
        counts: bool = ...,
        second_order: bool = ...,
        shadow: bool = ...,
    ) -> None:
        """Mill a surface in place."""


@frozen
class Stage:
    """One step of a recipe as one region meets it: what it is, how long (s), and its table if it is a beam."""

    step: Step
    length_s: float
    table: SlopeTable | None = None


@frozen
class Reaching:
    """The moment to stop at: `share` of the area of the points where `above` (C,) is not negative has come down.

    above: for each column of the terrain the number of segments over the level, -1 where it does not count.
    """

    above: Index
    share: float


@frozen
class Frame:
    """The surface at one moment: time_s on the clock, height_nm and segment (ny, nx)."""

    time_s: float
    height_nm: Array
    segment: Index


@frozen
class Run:
    """What became of a surface.

    frames: at the moments asked for, as far as the run came; passed_s (ny, nx, S): when each segment's floor was
    met, inf where it was not; end_s: the clock at its end; reached_s: when the level asked for was reached, None
    if it was not; undercuts: the deepest for each pair of materials; finished: False after an interrupt;
    time_steps: how many there were.
    """

    terrain: Terrain
    frames: tuple[Frame, ...]
    passed_s: Array
    end_s: float
    reached_s: float | None
    undercuts: tuple[Undercut, ...]
    finished: bool
    time_steps: int


@dataclass
class _Running:
    """A run on its way: its settings and what it has found so far."""

    terrain: Terrain
    move: Mover
    at_s: list[float]
    until: Reaching | None
    second_order: bool
    shadow: bool
    watch: Watch
    end_s: float
    surface: Surface
    frames: list[Frame] = field(default_factory=list)
    reached_s: float | None = None
    undercutting: Undercutting | None = None
    undercuts_until_s: float = np.inf

    def frame(self) -> None:
        s = self.surface
        self.frames.append(Frame(s.clock_s, s.height_nm.copy(), s.segment.copy()))

    def note_reached(self) -> bool:
        """Whether the level asked for has been reached by now."""
        if self.until is None or self.reached_s is not None:
            return False
        moment = reached_s(self.terrain, self.surface.passed_s, self.until)
        if moment <= self.surface.clock_s:
            self.reached_s = moment
            return True
        return False


def evolve(
    terrain: Terrain,
    stages: Sequence[Stage],
    *,
    region: int = 0,
    at_s: Sequence[float] = (),
    until: Reaching | None = None,
    end_s: float | None = None,
    second_order: bool = False,
    shadow: bool = True,
    compiled: bool = True,
    undercuts: bool = True,
    undercuts_until_s: float = np.inf,
    watch: Watch | None = None,
) -> Run:
    """Run stages over a surface, from the region's real top down.

    region: which region this is, for steps that cover regions; at_s: the moments of frames, on the clock; until:
    one more frame when a level is reached; end_s: where to stop in any case, otherwise at the last moment asked
    for; undercuts: whether to watch for walls that undercut, and until when; watch: told now and then how much is
    done. A frame shows the surface after all that takes no beam-on time then.
    """
    moments = sorted({float(t) for t in at_s})
    last = end_s if end_s is not None else (np.inf if until else max(moments, default=np.inf))
    running = _Running(
        terrain,
        mover(section=terrain.is_section, compiled=compiled, watch=watch or Watch()),
        moments,
        until,
        second_order,
        shadow,
        watch or Watch(),
        last,
        untouched(terrain),
        undercutting=Undercutting() if undercuts else None,
        undercuts_until_s=undercuts_until_s,
    )
    finished = True
    try:
        _run(running, stages, region, last)
    except KeyboardInterrupt:
        finished = False
    s = running.surface
    return Run(
        terrain,
        tuple(running.frames),
        s.passed_s,
        s.clock_s,
        running.reached_s,
        running.undercutting.deepest(terrain) if running.undercutting else (),
        finished,
        s.steps,
    )


def mover(*, section: bool, compiled: bool, watch: Watch) -> Mover:
    """The compiled twin, or the readable reference."""
    if compiled:
        from stackmill.relief import kernel

        if not kernel.is_compiled(section=section):
            watch.compiling()
        return kernel.mill
    from stackmill.relief import reference

    return reference.mill


def reached_s(terrain: Terrain, passed_s: Array, level: Reaching) -> float:
    """When the share of the area has come down to a level; inf if it has not."""
    above = level.above[terrain.column]
    times = np.sort(passed_above(passed_s, above)[above >= 0])
    if not times.size:
        return np.inf
    return float(times[int(np.ceil(level.share * times.size * (1.0 - 1e-9))) - 1])


def _run(running: _Running, stages: Sequence[Stage], region: int, last: float) -> None:
    """All stages in turn, until the last moment or the level asked for."""
    covered = False
    s = running.surface
    for stage in stages:
        step = stage.step
        if isinstance(step, Cover):
            covered = step.covered if region in step.regions else covered
        elif isinstance(step, Strip):
            if not covered:
                strip(running.terrain, s, step.materials)
        elif step.counts:
            _frames_up_to(running, s.clock_s, including=False)
            if s.clock_s >= last:
                break
            if _lower_on_the_clock(running, stage, step, covered, last):
                break
        elif not covered:
            etch(running.terrain, s, step.rate_nm_per_s[:, 0], stage.length_s, counts=False)
        if running.note_reached():
            running.frame()
            break
    _frames_up_to(running, s.clock_s, including=True)


def _frames_up_to(running: _Running, clock_s: float, *, including: bool) -> None:
    """Take the frames that are due by a moment; those of the very moment only if nothing more happens in it."""
    while running.at_s and (running.at_s[0] < clock_s or (including and running.at_s[0] <= clock_s)):
        running.at_s.pop(0)
        running.frame()


def _lower_on_the_clock(running: _Running, stage: Stage, step: Lowering, covered: bool, last: float) -> bool:
    """One step that takes beam-on time, cut at the frames asked for. True when the level asked for is reached."""
    s = running.surface
    end = min(s.clock_s + stage.length_s, last)
    if s.clock_s < end:
        _frames_up_to(running, s.clock_s, including=True)
    while s.clock_s < end:
        target = min([end, *(t for t in running.at_s[:1] if t < end)])
        if not np.isfinite(target) and not (s.segment < running.terrain.count[running.terrain.column]).any():
            return False
        if covered:
            s.clock_s = target
        elif stage.table is None:
            etch(running.terrain, s, step.rate_nm_per_s[:, 0], target - s.clock_s, counts=True)
        elif _mill_to(running, stage.table, target):
            return True
        s.clock_s = target if np.isfinite(target) else s.clock_s
        if s.clock_s < end:
            _frames_up_to(running, s.clock_s, including=True)
    return False


def _mill_to(running: _Running, table: SlopeTable, target: float) -> bool:
    """Mill until a moment on the clock, or the level asked for: True then, with its frame taken."""
    s, terrain = running.surface, running.terrain
    longest = time_step_s(terrain, table, second_order=running.second_order)
    while s.clock_s < target:
        left = target - s.clock_s
        steps = int(min(np.ceil(left / longest * (1.0 - 1e-9)), _AT_ONCE)) or 1
        span = left if left <= steps * longest * (1.0 + 1e-9) else steps * longest
        before = s.copy() if running.until else None
        running.move(
            terrain, s, table, duration_s=span, steps=steps,
            second_order=running.second_order, shadow=running.shadow,
        )  # fmt: skip
        if running.undercutting and s.clock_s <= running.undercuts_until_s:
            running.undercutting.look(terrain, s, table, span)
        running.watch.done(min(s.clock_s / running.end_s, 1.0))
        if running.note_reached() and before is not None and running.reached_s is not None:
            _back_to(running, table, before, span / steps)
            return True
        if not (s.segment < terrain.count[terrain.column]).any():
            s.clock_s = target if np.isfinite(target) else s.clock_s
            return False
    return False


def _back_to(running: _Running, table: SlopeTable, before: Surface, step_s: float) -> None:
    """Go back a few time steps, and take the same ones again up to the very moment the level was reached."""
    assert running.reached_s is not None
    span = running.reached_s - before.clock_s
    whole = int(span / step_s * (1.0 - 1e-12))
    for duration, steps in ((whole * step_s, whole), (span - whole * step_s, 1)):
        if duration > 0.0:
            running.move(
                running.terrain, before, table, duration_s=duration, steps=steps,
                second_order=running.second_order, shadow=running.shadow,
            )  # fmt: skip
    before.clock_s = running.reached_s
    running.surface = before
    running.frame()


def time_step_s(terrain: Terrain, table: SlopeTable, *, second_order: bool) -> float:
    """The longest stable time step."""
    lateral = 1 if terrain.is_section else 2
    step = terrain.step_nm[1] if terrain.is_section else min(terrain.step_nm)
    return _COURANT[second_order] * step / (lateral * table.fastest_nm_per_s)
