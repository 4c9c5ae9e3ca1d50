"""When to stop: the chance of every stop time, the window of good ones, and what ends it.

A stop succeeds in a draw from the moment the goal is exposed until it, or something to keep, is lost. Stops are
counted from the start of a leg: from the start of the run, or from the last time the eye stopped a step, for the
stopwatch is started again there and what was uncertain before no longer matters.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from stackmill.ensemble.run import Ensemble, Outcome
from stackmill.frozen import frozen

Array = NDArray[np.float64]

FIRST_LOOK_RISK = 0.05  # the first look comes no later than this chance of loss


@frozen
class ChanceCurve:
    """The chance of a stop against time in one leg: chance[i] holds from time_s[i] until time_s[i + 1].

    time_s (K,): s from the start of the leg, rising; chance (K,): shares 0..1; the last one holds for ever.
    """

    time_s: Array
    chance: Array

    def at(self, time_s: float) -> float:
        """The chance of a stop at a time."""
        k = int(np.searchsorted(self.time_s, time_s, side="right")) - 1
        return float(self.chance[k]) if k >= 0 else 0.0


@frozen
class Window:
    """When to stop. Times are on the clock at best values (s); see `leg` for where the stopwatch starts.

    exposed_s, lost_s: ends of the window at `confidence`, None where there is none (lost_s is None too where
    nothing is ever lost, or the eye ends the leg before). stop_s: the earliest stop with the greatest chance, as
    far as the draws can tell, None without a window; best_stop_s, best_stop_chance: that
    stop in any case, and its chance; chance: of stop_s;
    best_chance: the greatest there is. first_look_s: the last moment at which the chance of loss is under 5 %,
    None where there is none, or it never ends; first_look_leg: the leg it lies in; lost_before: the chance of
    loss by the start of `leg`. exposed_by, lost_by: the columns (region, column) that most often decide, None
    where the goal is never exposed, or nothing ever lost; lost_keep: the number of the keep that is, -1 for the
    goal. left_standing: mean share of the goal's area still covered at best_stop_s. leg: 0 from the start, n
    after the nth step stopped by eye; leg_start_s: the clock at best values when the leg starts; by_eye: the eye
    ends this leg.
    """

    confidence: float
    exposed_s: float | None
    lost_s: float | None
    stop_s: float | None
    best_stop_s: float
    best_stop_chance: float
    chance: float | None
    best_chance: float
    first_look_s: float | None
    first_look_leg: int
    lost_before: float
    exposed_by: tuple[int, int] | None
    lost_by: tuple[int, int] | None
    lost_keep: int
    left_standing: float
    leg: int
    leg_start_s: float
    by_eye: bool


def success_spans(outcome: Outcome, leg: int) -> tuple[Array, Array]:
    """From when and until when a stop succeeds in each draw (D,), in s from the start of a leg.

    A leg that the eye ends holds later stops at its end: a success there lasts for ever. Draws in which no
    stop of this leg succeeds get an empty span (inf, inf).
    """
    start = outcome.leg_start_s[leg]
    last = leg + 1 == len(outcome.leg_start_s)
    length = np.full(start.shape, np.inf) if last else outcome.leg_start_s[leg + 1] - start
    begin = np.maximum(outcome.exposed_s - start, 0.0)
    end = outcome.lost_s - start
    end = np.where(end > length, np.inf, end)
    empty = ~(begin < end) | (begin > length)
    return np.where(empty, np.inf, begin), np.where(empty, np.inf, end)


def chance_curve(begin_s: Array, end_s: Array, weights: Array) -> ChanceCurve:
    """The share of draws, by weight, whose span [begin, end) holds a time. All (D,); exact at every time."""
    times = np.concatenate([begin_s, end_s])
    change = np.concatenate([weights, -weights])
    met = np.isfinite(times)
    if not met.any():
        return ChanceCurve(np.array([-np.inf]), np.array([0.0]))
    times, change = times[met], change[met]
    order = np.argsort(times, kind="stable")
    time_s, running = times[order], np.cumsum(change[order])
    last = np.append(time_s[1:] > time_s[:-1], True)  # of those at the same time
    return ChanceCurve(np.append(-np.inf, time_s[last]), np.append(0.0, np.clip(running[last], 0.0, 1.0)))


def find_window(ensemble: Ensemble, confidence: float) -> Window:
    """The window of a job's goal in its most promising leg."""
    outcome, weights = ensemble.outcome, ensemble.weights
    curves = [chance_curve(*success_spans(outcome, leg), weights) for leg in range(len(outcome.leg_start_s))]
    best = [float(curve.chance.max()) for curve in curves]
    leg = max(range(len(curves)), key=lambda k: (best[k], k if best[k] > 0.0 else -k))
    curve = curves[leg]
    # What the draws themselves cannot tell: one standard error of a chance read off this many of them.
    draws = 1.0 / float(np.sum(weights**2))
    stop = best_stop(curve, np.sqrt(best[leg] * (1.0 - best[leg]) / draws))
    ends = window_ends(curve, stop, confidence, 2.0 * np.sqrt(confidence * (1.0 - confidence) / draws))
    clock = float(ensemble.best_outcome.leg_start_s[leg][0])
    told = stop if ends is None else max(stop, ends[0])
    lost_by, lost_keep = _lost_by(outcome, weights)
    look = _first_look(ensemble)
    return Window(
        confidence=confidence,
        exposed_s=None if ends is None else clock + ends[0],
        lost_s=None if ends is None or ends[1] is None else clock + ends[1],
        stop_s=None if ends is None else clock + told,
        best_stop_s=clock + stop,
        best_stop_chance=curve.at(stop),
        chance=None if ends is None else curve.at(told),
        best_chance=best[leg],
        first_look_s=look[1],
        first_look_leg=look[0],
        lost_before=float(weights[outcome.lost_s <= outcome.leg_start_s[leg]].sum()),
        exposed_by=_exposed_by(outcome, weights),
        lost_by=lost_by,
        lost_keep=lost_keep,
        left_standing=left_standing(outcome, weights, leg, stop),
        leg=leg,
        leg_start_s=clock,
        by_eye=leg + 1 < len(curves),
    )


def best_stop(curve: ChanceCurve, error: float = 0.0) -> float:
    """The earliest time whose chance is the greatest, or within the draws' own error of it.

    What is left can be milled later; what is gone cannot be put back.
    """
    if len(curve.time_s) == 1:
        return 0.0
    return float(curve.time_s[1:][np.argmax(curve.chance[1:] >= curve.chance.max() - error - 1e-12)])


def window_ends(
    curve: ChanceCurve, stop_s: float, confidence: float, error: float = 0.0
) -> tuple[float, float | None] | None:
    """The first and last time around a stop at which the chance is at least the confidence; None if there is none.

    Dips below it that are no deeper than `error`, what the draws cannot tell, do not part a window.
    """
    ends = np.append(curve.time_s[1:], np.inf)
    good = _runs(curve, ends, confidence - 1e-12)
    for start, end in _runs(curve, ends, confidence - error - 1e-12):
        inside = [run for run in good if start <= run[0] and run[1] <= end]
        if start <= stop_s < end and inside:
            first, last = inside[0][0], inside[-1][1]
            return float(first), None if np.isinf(last) else float(last)
    return None


def _runs(curve: ChanceCurve, ends: Array, least: float) -> list[tuple[float, float]]:
    """Unbroken stretches in which the chance is at least `least`."""
    good = np.concatenate([[False], curve.chance >= least, [False]])
    starts = np.flatnonzero(good[1:-1] & ~good[:-2])
    stops = np.flatnonzero(good[1:-1] & ~good[2:])
    return [(float(curve.time_s[a]), float(ends[b])) for a, b in zip(starts, stops, strict=True)]


def left_standing(outcome: Outcome, weights: Array, leg: int, stop_s: float) -> float:
    """The mean share of the goal's area still covered when stopped at stop_s of a leg."""
    start = outcome.leg_start_s[leg]
    stop = start + stop_s
    if leg + 1 < len(outcome.leg_start_s):
        stop = np.minimum(stop, outcome.leg_start_s[leg + 1])
    covered = outcome.upper_area @ (outcome.upper_s > stop * (1.0 + 1e-12)) / outcome.upper_area.sum()
    return float(covered @ weights)


def _first_look(ensemble: Ensemble) -> tuple[int, float | None]:
    """The leg and the last moment (on the clock) at which the chance of loss is under 5 %; None if there is none."""
    outcome, weights = ensemble.outcome, ensemble.weights
    for leg, start in enumerate(outcome.leg_start_s):
        moment = weighted_quantile(outcome.lost_s - start, weights, FIRST_LOOK_RISK)
        last = leg + 1 == len(outcome.leg_start_s)
        in_leg = outcome.lost_s <= (np.inf if last else outcome.leg_start_s[leg + 1])
        if last or weights[in_leg].sum() >= FIRST_LOOK_RISK:
            clock = float(ensemble.best_outcome.leg_start_s[leg][0])
            return leg, clock + moment if np.isfinite(moment) and moment > 0.0 else None
    return 0, None


def weighted_quantile(values: Array, weights: Array, share: float) -> float:
    """The least value (of (D,)) at or under which lies at least this share of the weight."""
    order = np.argsort(values)
    total = np.cumsum(weights[order])
    return float(values[order][np.searchsorted(total, share * total[-1] * (1.0 - 1e-12))])


def _exposed_by(outcome: Outcome, weights: Array) -> tuple[int, int] | None:
    """The wanted column that most often decides when the goal is exposed; None where it never is."""
    met = np.isfinite(outcome.exposed_s)
    if not met.any():
        return None
    deciding = np.argmax(outcome.upper_s[:, met] == outcome.exposed_s[met], axis=0)
    return outcome.wanted[_most(deciding, weights[met])]


def _lost_by(outcome: Outcome, weights: Array) -> tuple[tuple[int, int] | None, int]:
    """The column, and the number of the keep (-1: the goal), by which most often the window ends."""
    lost = np.isfinite(outcome.lost_s)
    if not lost.any():
        return None, -1
    first = outcome.spoilt[_most(outcome.lost_by[lost], weights[lost])]
    return first.place, first.keep


def _most(choices: NDArray[np.intp], weights: Array) -> int:
    return int(np.argmax(np.bincount(choices, weights)))


def quantiles(times: Array, weights: Array, shares: Sequence[float]) -> list[Array]:
    """For rows of draws (..., D): the least time at or under which lies each share of the weight (...)."""
    if (weights == weights[0]).all():
        # Equal draws need no full sort: the k-th of them is the answer.
        ranks = [max(int(np.ceil(share * len(weights) * (1.0 - 1e-12))) - 1, 0) for share in shares]
        parted = np.partition(times, ranks, axis=-1)
        return [parted[..., rank] for rank in ranks]
    order = np.argsort(times, axis=-1)
    total = np.cumsum(weights[order], axis=-1)
    found = []
    for share in shares:
        index = np.argmax(total >= share * (1.0 - 1e-12) * total[..., -1:], axis=-1)
        pick = np.take_along_axis(order, index[..., None], axis=-1)
        found.append(np.take_along_axis(times, pick, axis=-1)[..., 0])
    return found
