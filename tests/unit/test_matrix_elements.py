"""Matrix elements of the coordinate and the derivative."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.hermite import hermite_functions
from ladderband.numerics.matrix_elements import Operator, float_matrix_elements
from ladderband.numerics.oscillators import one_pair

FINAL_OVER_INITIAL = 0.64
DELTA = 0.9


def elements(operator: Operator, v: int, n: int) -> tuple[np.ndarray, float]:
    rows, columns = operator.extra
    pair = one_pair(1.0, FINAL_OVER_INITIAL, DELTA)
    found = certified_tables(pair, v + rows, n + columns, 1e-10, Deadline.none())
    values, bounds = float_matrix_elements(found.tables, found.bounds, operator)
    return values[0], float(bounds[0])


def by_quadrature(operator: Operator, v: int, n: int) -> float:
    """scipy.integrate.quad of phi_v(xi) O phi_n(x), derivatives by DLMF 18.9.25-26 in position space."""
    s = FINAL_OVER_INITIAL**-0.5

    def integrand(x: float) -> float:
        xi = s * (x - DELTA)
        bra = hermite_functions(np.array([xi]), v)[0][v, 0] * np.sqrt(s)
        ket = hermite_functions(np.array([x]), n + 1)[0][:, 0]
        q = x if operator.state == "final" else xi
        if operator.kind == "coordinate_power":
            return float(bra * q**operator.power * ket[n])
        below = np.sqrt(2.0 * n) * ket[n - 1] if n else 0.0
        slope = below - x * ket[n]  # d phi_n / dx
        return float(bra * slope / (1.0 if operator.state == "final" else s))

    return integrate.quad(integrand, -12, 12, epsabs=1e-12, epsrel=1e-12, limit=400)[0]


OPERATORS = [Operator("coordinate_power", p, s) for p in (1, 2, 3, 4) for s in ("initial", "final")]
OPERATORS += [Operator("derivative", 1, s) for s in ("initial", "final")]


@pytest.mark.parametrize("operator", OPERATORS, ids=lambda o: f"{o.kind}-{o.power}-{o.state}")
def test_against_quadrature(operator: Operator) -> None:
    values, bound = elements(operator, 4, 5)
    assert values.shape == (5, 6)
    for v, n in [(0, 0), (0, 3), (2, 1), (4, 5)]:
        assert values[v, n] == pytest.approx(by_quadrature(operator, v, n), abs=1e-9)
    assert bound < 1e-7


def test_the_bound_covers_the_error_of_the_overlaps() -> None:
    """Push every overlap by its whole bound: the elements move by less than theirs."""
    operator = Operator("coordinate_power", 3, "final")
    found = certified_tables(one_pair(1.0, 0.64, 0.9), 6, 9, 1e-10, Deadline.none())
    wide = np.array([1e-6])
    values, bounds = float_matrix_elements(found.tables, wide, operator)
    rng = np.random.default_rng(1)
    for _ in range(20):
        moved = found.tables + 1e-6 * rng.choice([-1.0, 1.0], size=found.tables.shape)
        again, _ = float_matrix_elements(moved, wide, operator)
        assert np.abs(again - values).max() <= bounds[0]
