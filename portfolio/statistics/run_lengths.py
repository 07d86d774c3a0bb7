"""Exact average run lengths of control chart rules, by a Markov chain over what each rule remembers.

How long a chart with known limits runs until its first signal. It explains why signals are shown but do not decide:
the four Western Electric rules together speak once in 92 points of a process that never changed.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike
from scipy.linalg import solve
from scipy.special import ndtr

from portfolio.statistics.charts import Rule
from portfolio.statistics.ragged import Floats, Ints

Memory = tuple[tuple[bool, ...], ...]
"""For each rule and side: which of the last `among` - 1 points lay in its zone, newest first, as far as it matters."""


def average_run_length(rules: Sequence[Rule], shift: ArrayLike = 0.0) -> Floats:
    """Average number of points up to and including the first signal, zero state (no history at the start).

    Parameters
    ----------
    rules : each watched on both sides; any of them ends the run
    shift : distance of the mean from the centre line, in standard errors of the plotted point; any shape S

    Returns
    -------
    (S) float array, points

    Raises
    ------
    ValueError
        If there is no rule, or a rule needs more points than it looks at or has an empty zone.

    Source
    ------
    Champ & Woodall (1987), Technometrics 29:393: the chain of rule histories, run length (I - Q)^-1 1. Their Table 1 is
    checked in tests.
    """
    _check(rules)
    edges = np.array(
        sorted({edge for rule in rules for edge in (rule.low, rule.high, -rule.low, -rule.high)} - {np.inf, -np.inf})
    )
    bounds = np.concatenate(([-np.inf], edges, [np.inf]))
    moves = _moves(rules, bounds)
    states = len(moves)
    state, zone = np.nonzero(moves >= 0)
    offset = np.asarray(shift, dtype=np.float64)
    out = np.empty(offset.size)
    for at, by in enumerate(offset.ravel().tolist()):
        chance = _chances(bounds - by)
        stays = np.zeros((states, states))
        np.add.at(stays, (state, moves[state, zone]), chance[zone])
        out[at] = solve(np.eye(states) - stays, np.ones(states))[0]
    return out.reshape(offset.shape)


def _check(rules: Sequence[Rule]) -> None:
    if not rules:
        raise ValueError("no rule: a chart that never signals has no run length")
    for rule in rules:
        if not (1 <= rule.need <= rule.among and 0 <= rule.low < rule.high):
            raise ValueError(f"{rule}: need 1 <= need <= among and 0 <= low < high")


def _chances(bounds: Floats) -> Floats:
    """Chance of each zone between `bounds` (Z + 1,), (Z,); by the smaller tail, so far zones keep their digits."""
    low, high = bounds[:-1], bounds[1:]
    return np.asarray(np.where(low > 0, ndtr(-low) - ndtr(-high), ndtr(high) - ndtr(low)))


def _moves(rules: Sequence[Rule], bounds: Floats) -> Ints:
    """Next state after a point in each zone, (states, Z); -1 where a rule signals. State 0 is the start."""
    sided = [(rule, side) for rule in rules for side in (1, -1)]
    middle = (np.maximum(bounds[:-1], bounds[1] - 1) + np.minimum(bounds[1:], bounds[-2] + 1)) / 2
    inside = [[bool(rule.low < side * x < rule.high) for rule, side in sided] for x in middle.tolist()]

    start: Memory = tuple((False,) * (rule.among - 1) for rule, _ in sided)
    known = {start: 0}
    waiting = [start]
    rows: list[list[int]] = []
    while len(rows) < len(waiting):
        memory = waiting[len(rows)]
        row = []
        for hits in inside:
            after = [(hit, *past) for hit, past in zip(hits, memory, strict=True)]
            if any(sum(seen) >= rule.need for seen, (rule, _) in zip(after, sided, strict=True)):
                row.append(-1)
                continue
            following = tuple(_kept(seen, rule) for seen, (rule, _) in zip(after, sided, strict=True))
            if following not in known:
                known[following] = len(waiting)
                waiting.append(following)
            row.append(known[following])
        rows.append(row)
    return np.array(rows, dtype=np.int64)


def _kept(seen: tuple[bool, ...], rule: Rule) -> tuple[bool, ...]:
    """What of the last points still matters: a mark is forgotten once no future can complete a pattern with it."""
    kept = []
    marks = 0
    for age, mark in enumerate(seen[: rule.among - 1], start=1):
        marks += mark
        kept.append(mark and marks + rule.among - age >= rule.need)
    return tuple(kept)
