"""Ways to iterate x = A·x + u until every column is within a tolerance, in NumPy and SciPy in one thread.

Every way reports a proven bound in scaled units: no host's column is further from the exact value than the
bound times the host's PageRank.  Let M be the part of A that reads values already renewed in the same sweep
(none in a plain step).  A sweep from x to y leaves the residual A·y + u - y = (A - M)(y - x), so its error is
(I - A)^-1 (A - M)(y - x), at most max|y - x| times (I - A)^-1 A·1 = p - 1.  The change of a sweep is such a
bound from any start, and no way needs a multiplication more to know when to stop.
"""

import itertools
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import partial

import numpy as np
from numpy.typing import NDArray
from trial_graphs import DAMPING, System

from sparkrank.kernels.extrapolate import combine, extrapolation_weights, residual_products
from sparkrank.propagate.mixing import cycle_start, is_mixed_after

Floats = NDArray[np.float64]
Sweep = Callable[[System, Floats], Floats]
Mixer = Callable[[int, Floats, Floats], Floats]
"""Takes a step's number, what it started from and what it made; returns what the next one starts from."""

_MAX_STEPS = 1000


@dataclass(frozen=True, kw_only=True)
class Outcome:
    """Values (n, k), steps, multiplications by all edges, the proven bound (above the tolerance: gave up)."""

    values: Floats
    steps: int
    edge_passes: float
    bound: float
    skipped: list[float] = field(default_factory=list)
    """Share of the edges that each step left out, where a way leaves any out."""


Way = Callable[[System, float], Outcome]


def iterate(sweep: Sweep, mixer: Callable[[System], Mixer], system: System, tolerance: float) -> Outcome:
    """Sweeps from the teleport; mixtures between them."""
    mix = mixer(system)
    before = system.teleport
    for step in range(1, _MAX_STEPS + 1):
        after = sweep(system, before)
        change = float(np.abs(after - before).max())
        if change <= tolerance:
            break
        before = mix(step, before, after)
    return Outcome(values=after, steps=step, edge_passes=float(step), bound=change)


def plain(system: System, before: Floats) -> Floats:
    """y = A·x + u."""
    after: Floats = system.matrix @ before + system.constant
    return after


def stripes_in_turn(n_stripes: int, system: System, before: Floats) -> Floats:
    """Block Gauss-Seidel: a stripe reads those before it as this sweep left them; no two run at once."""
    now = before.copy()
    for rows in _ranges(system.n_hosts, n_stripes):
        now[rows] = system.matrix[rows] @ now + system.constant[rows]
    return now


def blocks_in_turn(n_stripes: int, n_blocks: int, system: System, before: Floats) -> Floats:
    """Gauss-Seidel within each stripe, over blocks of its hosts; other stripes are read as they were."""
    after = np.empty_like(before)
    for stripe in _ranges(system.n_hosts, n_stripes):
        now = before.copy()
        for block in _ranges(stripe.stop - stripe.start, n_blocks):
            rows = slice(stripe.start + block.start, stripe.start + block.stop)
            now[rows] = system.matrix[rows] @ now + system.constant[rows]
        after[stripe] = now[stripe]
    return after


def _ranges(n: int, parts: int) -> list[slice]:
    bounds = np.linspace(0, n, parts + 1).astype(int).tolist()
    return [slice(low, high) for low, high in itertools.pairwise(bounds)]


def from_zero(system: System, tolerance: float) -> Outcome:
    """Plain steps from zero."""
    empty = System(**{**vars(system), "teleport": np.zeros_like(system.teleport)})
    return iterate(plain, unmixed, empty, tolerance)


def unmixed(system: System) -> Mixer:
    """Each step starts from the last."""
    return lambda step, before, after: after


def power_extrapolation(distance: int, system: System) -> Mixer:
    """Once, after d + 2 steps: (x_k - c^d x_{k-d}) / (1 - c^d) takes out c times the d-th roots of 1.

    Haveliwala, Kamvar, Klein, Manning & Golub, "Computing PageRank using Power Extrapolation", 2003 (from
    memory).
    """
    states: list[Floats] = []
    decay = DAMPING**distance

    def mix(step: int, before: Floats, after: Floats) -> Floats:
        states.append(after)
        if step != distance + 2:
            return after
        mixed: Floats = (after - decay * states[-1 - distance]) / (1 - decay)
        states.clear()
        return mixed

    return mix


def quadratic_extrapolation(every: int, system: System) -> Mixer:
    """Three modes at most make up the last four states: their fixed point, a column at a time.

    Kamvar, Haveliwala, Manning & Golub, "Extrapolation methods for accelerating PageRank computations", 2003
    (from memory).  The original scales the mixture to a sum of 1; here its weights are scaled to one, which a
    system with a constant term needs.
    """
    states: list[Floats] = []

    def mix(step: int, before: Floats, after: Floats) -> Floats:
        states[:] = [*(states or [before]), after][-4:]
        if step % every or len(states) < 4:
            return after
        mixed = after.copy()
        for j in range(after.shape[1]):
            first, *others = (state[:, j] for state in states)
            changes = [other - first for other in others]
            left = np.column_stack(changes[:2])
            g1, g2 = np.linalg.lstsq(left, -changes[2], rcond=None)[0]
            weights = np.array([g1 + g2 + 1, g2 + 1, 1.0])
            if np.isfinite(weights).all() and weights.sum() != 0.0:
                weights /= weights.sum()
                mixed[:, j] = sum(w * other for w, other in zip(weights, others, strict=True))
        states.clear()
        return mixed

    return mix


def reduced_rank(system: System) -> Mixer:
    """The product's own cycle and kernel: residuals are those of the flow."""
    pairs: list[tuple[Floats, Floats]] = []

    def mix(step: int, before: Floats, after: Floats) -> Floats:
        pairs[:] = [*pairs, (before, after)][-(step - cycle_start(step)) :]
        return _smallest_residual(system, pairs) if is_mixed_after(step) else after

    return mix


def anderson(depth: int, system: System) -> Mixer:
    """Every step starts from the mixture of the last depth + 1 with the smallest residual.

    Anderson, "Iterative procedures for nonlinear integral equations", 1965 (from memory).
    """
    pairs: list[tuple[Floats, Floats]] = []

    def mix(step: int, before: Floats, after: Floats) -> Floats:
        pairs[:] = [*pairs, (before, after)][-(depth + 1) :]
        return _smallest_residual(system, pairs)

    return mix


def _smallest_residual(system: System, pairs: list[tuple[Floats, Floats]]) -> Floats:
    """The mixture of the states with weights that sum to 1, a column at a time."""
    factor = system.flow_per_score[:, None]
    residuals = [np.ascontiguousarray(((after - before) * factor).T) for before, after in pairs]
    weights = np.array([extrapolation_weights(found.tolist()) for found in residual_products(residuals)]).T
    return np.ascontiguousarray(combine([after.T for _, after in pairs], weights).T)


def differences(n_stripes: int | None, system: System, tolerance: float) -> Outcome:
    """Residuals alone travel, and those of a stripe that are all within the tolerance stay where they are.

    With r = A·x + u - x kept up to date, a step adds the residuals of the unsettled stripes to x and sends
    them along their links; what a settled stripe still receives piles up there, and may unsettle it again.
    At the end no residual is above the tolerance, so neither is the error's share of PageRank.  Without a
    number of stripes every host is one: the least that any cut could leave to multiply.
    """
    stripes = _ranges(system.n_hosts, min(system.n_hosts, n_stripes or system.n_hosts))
    starts = [stripe.start for stripe in stripes]
    sizes = [stripe.stop - stripe.start for stripe in stripes]
    links = np.bincount(system.matrix.indices, minlength=system.n_hosts)
    value = system.teleport.copy()
    residual = plain(system, value) - value
    skipped: list[float] = []
    for _ in range(_MAX_STEPS):
        largest = np.maximum.reduceat(np.abs(residual).max(axis=1), starts)
        if largest.max() <= tolerance:
            break
        moving = np.repeat(largest > tolerance, sizes)
        skipped.append(float(links[~moving].sum() / links.sum()))
        moved = np.where(moving[:, None], residual, 0.0)
        value += moved
        residual += system.matrix @ moved - moved
    bound = float(largest.max())
    # The first residual is a multiplication, too.
    steps = 1 + len(skipped)
    passes = steps - sum(skipped)
    return Outcome(values=value, steps=steps, edge_passes=passes, bound=bound, skipped=skipped)


WAYS: dict[str, Way] = {
    "plain": partial(iterate, plain, unmixed),
    "plain, from zero": from_zero,
    "Gauss-Seidel, 4 stripes in turn": partial(iterate, partial(stripes_in_turn, 4), unmixed),
    "Gauss-Seidel, 16 stripes in turn": partial(iterate, partial(stripes_in_turn, 16), unmixed),
    "Gauss-Seidel, 8 blocks within 4 stripes": partial(iterate, partial(blocks_in_turn, 4, 8), unmixed),
    "power extrapolation, d = 6": partial(iterate, plain, partial(power_extrapolation, 6)),
    "quadratic extrapolation, every 8": partial(iterate, plain, partial(quadratic_extrapolation, 8)),
    "reduced rank extrapolation": partial(iterate, plain, reduced_rank),
    "Anderson, m = 5": partial(iterate, plain, partial(anderson, 5)),
    "reduced rank over 8 blocks within 4 stripes": partial(
        iterate, partial(blocks_in_turn, 4, 8), reduced_rank
    ),
    "differences, 4 stripes": partial(differences, 4),
    "differences, 16 stripes": partial(differences, 16),
    "differences, 256 stripes": partial(differences, 256),
    "differences, single hosts": partial(differences, None),
}
"""The ways by name, plain iteration first."""
