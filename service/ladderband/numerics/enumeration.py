r"""The assigned lines of one block of coupled modes: few amplitudes, and what is missing proven.

Which sets of quanta to take is decided by the exact one-mode marginals: with P_i the distribution of
index i (final quanta from :mod:`marginals`, initial quanta geometric) the cost of n quanta is
c_i(n) = ln max_j P_i(j) / max_{j>=n} P_i(j), and the sets with total cost <= C are enumerated
(:mod:`quanta_lists`). C is first chosen from the convolution of the marginals as if they were
independent, which also predicts the work, and raised until what is missing is proved to be small:

.. math::
   \text{missing} \le 1 - \sum_k |\hat S(k)|^2 + \sum_k (2|\hat S(k)| E(k) + E(k)^2) + \text{rounding}.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certified_generator import ENTRY_ERROR, certified_thermal_generator
from ladderband.numerics.errors import DomainError
from ladderband.numerics.line_list import Quanta
from ladderband.numerics.marginals import gaussian_modes, marginal
from ladderband.numerics.progression import thermal_populations
from ladderband.numerics.quanta_lists import COST_UNIT, QuantaPairs, quanta_pairs
from ladderband.numerics.quanta_table import Ladder, QuantaTable, amplitude_table
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Transition
from ladderband.numerics.units import boltzmann_exponent

Places = NDArray[np.int64]

BINS = 3840
"""Resolution of the predicted cost distribution: 1/64, so that every bin is in ``COST_UNIT``s."""

COST_MAX = 60.0
"""A set e^60 times rarer than the commonest is never taken."""


@dataclass(frozen=True)
class CoupledProblem:
    """One block ready to enumerate. Index i < n is an initial mode, the rest final modes.

    modes (D,): index in 0..2N-1 of each row of ``cost``, sorted by the cost of one quantum;
    cost, weight (D, width): c_i(n) and P_i(n).
    """

    transition: Transition
    modes: NDArray[np.int64]
    cost: Floats
    weight: Floats


@dataclass(frozen=True)
class BlockLines:
    """Lines of one block of N modes: intensity and its proven bound, (L,).

    ``quanta(chosen)`` gives v and n, (len(chosen), N), of chosen lines only. ``sum_bound``: the sum of
    |intensity - true| over all lines is at most this. ``missing_at_most``: proven. ``examined``: how
    many amplitudes were computed.
    """

    intensity: Floats
    bound: Floats
    quanta: Callable[[Places], tuple[Quanta, Quanta]]
    sum_bound: float
    missing_at_most: float
    route: str
    examined: int


@dataclass(frozen=True)
class Prediction:
    """What independent marginals would give for budgets ``budget``: sets and missing intensity."""

    budget: Floats
    nodes: Floats
    missing: Floats

    def budget_for(self, missing: float) -> float:
        """Smallest budget predicted to leave out at most ``missing``; infinity when none does."""
        enough = np.flatnonzero(self.missing <= missing)
        return float(self.budget[enough[0]]) if len(enough) else math.inf

    def budget_within(self, nodes: float) -> float:
        """Largest budget predicted to need at most ``nodes`` sets."""
        few = np.flatnonzero(self.nodes <= nodes)
        return float(self.budget[few[-1]]) if len(few) else 0.0

    def at(self, budget: float) -> tuple[float, float]:
        """(predicted sets, predicted missing) at a budget."""
        place = min(len(self.budget) - 1, int(np.searchsorted(self.budget, budget)))
        return float(self.nodes[place]), float(self.missing[place])


def coupled_problem(transition: Transition, tolerance: float) -> CoupledProblem:
    """Marginals and costs of a block; initial modes populated below 1e-3 tolerance stay cold."""
    distributions, modes = [], []
    count = len(transition.modes)
    for k, mode in enumerate(transition.modes):
        x = boltzmann_exponent(mode.wavenumber_initial_cm1, transition.temperature_k)
        if math.exp(-x) * count > 1e-3 * tolerance:
            length = int(min(2000.0, -math.log(1e-3 * tolerance / count) / x)) + 2
            distributions.append(
                thermal_populations(mode.wavenumber_initial_cm1, transition.temperature_k, length)
            )
            modes.append(k)
    for k, gaussian in enumerate(gaussian_modes(transition)):
        distributions.append(np.maximum(marginal(gaussian).probabilities, 0.0))
        modes.append(count + k)
    return _sorted_problem(transition, np.array(modes), distributions)


def _sorted_problem(
    transition: Transition, modes: NDArray[np.int64], distributions: list[Floats]
) -> CoupledProblem:
    width = max(2, *(len(d) for d in distributions))
    weight = np.zeros((len(modes), width))
    for row, distribution in zip(weight, distributions, strict=True):
        row[: len(distribution)] = distribution
    best_later = np.maximum.accumulate(np.maximum(weight, 1e-300)[:, ::-1], axis=1)[:, ::-1]
    logarithm = np.log(best_later)
    cost = logarithm[:, :1] - logarithm
    cost = np.rint(cost / COST_UNIT) * COST_UNIT
    cost[cost > COST_MAX] = np.inf
    used = int(np.max(np.sum(np.isfinite(cost), axis=1)))
    order = np.argsort(cost[:, 1], kind="stable")
    keep = slice(0, max(2, used))
    return CoupledProblem(
        transition,
        modes[order],
        np.ascontiguousarray(cost[order, keep]),
        np.ascontiguousarray(weight[order, keep]),
    )


def predict(problem: CoupledProblem) -> Prediction:
    """Sets and missing intensity by budget, marginals taken as independent: D convolutions.

    A prediction, not a bound: it chooses the budget and the cost estimate. Costs are rounded to bins.
    """
    bins = np.arange(BINS + 1) * (COST_MAX / BINS)
    nodes, caught = np.zeros(BINS + 1), np.zeros(BINS + 1)
    nodes[0] = caught[0] = 1.0
    for cost, weight in zip(problem.cost, problem.weight, strict=True):
        place = np.rint(np.where(np.isfinite(cost), cost, 2 * COST_MAX) * (BINS / COST_MAX))
        inside = place <= BINS
        nodes = _convolved(nodes, place[inside], np.ones(int(inside.sum())))
        caught = _convolved(caught, place[inside], weight[inside])
    missing = np.maximum(0.0, 1.0 - np.cumsum(caught))
    return Prediction(np.asarray(bins, dtype=np.float64), np.cumsum(nodes), missing)


def _convolved(histogram: Floats, place: Floats, weight: Floats) -> Floats:
    result = np.zeros_like(histogram)
    for shift, factor in zip(place.astype(int), weight, strict=True):
        result[shift:] += factor * histogram[: len(histogram) - shift]
    return np.minimum(result, 1e300)


# --- the lines of a block ---


def enumerate_block(
    transition: Transition, tolerance: float, node_limit: int, deadline: Deadline
) -> BlockLines:
    """Lines of one block until at most ``tolerance`` is missing, or ``node_limit`` sets are used.

    The caller compares ``missing_at_most`` with its tolerance. Cost: some 20 ns a set, and the
    generator in balls.

    Raises
    ------
    DomainError
        The 0-0 overlap is below 1e-260.
    """
    problem = coupled_problem(transition, tolerance)
    prediction = predict(problem)
    ladder = _ladder(problem)
    budget = min(COST_MAX, prediction.budget_for(0.7 * tolerance))
    while True:
        deadline.check()
        pairs = quanta_pairs(problem.cost, budget, node_limit)
        clipped = pairs is None
        if pairs is None:
            pairs = _most_within(problem, prediction, node_limit)
        lines = _lines(problem, amplitude_table(pairs, ladder))
        if lines.missing_at_most <= tolerance or clipped or budget >= COST_MAX:
            return lines
        budget = min(COST_MAX, _raised(prediction, budget, lines.missing_at_most / tolerance))


def _ladder(problem: CoupledProblem) -> Ladder:
    """What the recursion needs, in the order of the problem's indices."""
    generator, moment = certified_thermal_generator(problem.transition)
    if generator.log_c < -600.0:
        raise DomainError(
            "The states are so far apart that the 0-0 overlap is below 1e-260; no list of lines is "
            "practical. POST /v1/bands gives the band.",
            "/modes",
        )
    modes = problem.modes
    linear = np.zeros((0, len(modes))) if moment is None else moment.linear[:, modes]
    return Ladder(
        M=np.ascontiguousarray(generator.W[np.ix_(modes, modes)]),
        w=np.ascontiguousarray(generator.w[modes]),
        start=math.exp(generator.log_c),
        # c: its logarithm, at most 600, was rounded, and exp rounds: 600 u + 4 u, and the entry's own
        start_error=2.0 * ENTRY_ERROR + 604.0 * UNIT_ROUNDOFF,
        constant=np.zeros(3) if moment is None else moment.constant,
        linear=np.ascontiguousarray(linear),
    )


def _most_within(problem: CoupledProblem, prediction: Prediction, limit: int) -> QuantaPairs:
    """The sets below the largest budget, to 1/32, that lets in at most ``limit`` of them."""
    budget = prediction.budget_within(limit)
    while (pairs := quanta_pairs(problem.cost, budget, limit)) is None:
        budget -= 1.0 / 32.0
    return pairs


def _raised(prediction: Prediction, budget: float, excess: float) -> float:
    """The budget at which the predicted missing intensity is smaller by the excess found."""
    _, missing = prediction.at(budget)
    return max(budget + 0.5, prediction.budget_for(0.7 * missing / excess))


def _lines(problem: CoupledProblem, table: QuantaTable) -> BlockLines:
    """Intensities and bounds of all sets of the table."""
    if len(table.moment):
        intensity = np.sum(table.moment**2, axis=0)
        error = table.moment_error + 1e-18
        bound = np.sum((2.0 * np.abs(table.moment) + error) * error, axis=0)
    else:
        intensity = table.amplitude**2
        # entries of M known to 1e-25 absolute only, in sums of at most 1e5 terms below 1
        error = table.error + 1e-20
        bound = (2.0 * np.abs(table.amplitude) + error) * error
    bound = 1.001 * bound + 4.0 * UNIT_ROUNDOFF * intensity
    # summing L positive numbers that add up to about 1 in pairs: below (L/128 + 30) u each way
    rounding = (len(intensity) / 64.0 + 60.0) * UNIT_ROUNDOFF
    sum_bound = 1.001 * float(bound.sum()) + rounding
    count = len(problem.transition.modes)

    def quanta(chosen: Places) -> tuple[Quanta, Quanta]:
        rows = np.zeros((len(chosen), 2 * count), dtype=np.int32)
        rows[:, problem.modes] = table.pairs.quanta(chosen)
        return rows[:, :count], rows[:, count:]

    return BlockLines(
        intensity=intensity,
        bound=bound,
        quanta=quanta,
        sum_bound=sum_bound,
        missing_at_most=max(0.0, 1.0 - float(intensity.sum()) + sum_bound),
        route="quanta table",
        examined=len(intensity),
    )
