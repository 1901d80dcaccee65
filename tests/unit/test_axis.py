"""Axes: units, Jacobians and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.constants as sc

from ladderband.numerics.axis import Axis, in_unit
from ladderband.numerics.errors import DomainError

EV = sc.e / (sc.h * sc.c * 100.0)  # scipy's CODATA, cm^-1 per eV


@pytest.mark.parametrize(
    ("unit", "values", "wavenumbers"),
    [
        ("cm-1", [1.0, 20000.0], [1.0, 20000.0]),
        ("eV", [1.0, 2.5], [EV, 2.5 * EV]),
        ("nm", [400.0, 500.0], [25000.0, 20000.0]),
        ("THz", [1.0, 600.0], [1e10 / sc.c, 600e10 / sc.c]),
    ],
)
def test_wavenumbers(unit, values, wavenumbers):
    axis = Axis(unit, np.array(values))
    assert axis.wavenumbers == pytest.approx(wavenumbers, rel=1e-14)
    assert in_unit(wavenumbers[1], unit) == pytest.approx(values[1], rel=1e-14)


@pytest.mark.parametrize("unit", ["cm-1", "eV", "nm", "THz"])
def test_jacobian_is_the_derivative(unit):
    values = np.array([350.0, 350.001])
    axis = Axis(unit, values)
    slope = np.abs(np.diff(axis.wavenumbers))[0] / (values[1] - values[0])
    assert axis.jacobian.mean() == pytest.approx(slope, rel=1e-8)


@pytest.mark.parametrize(
    ("unit", "values", "message"),
    [
        ("cm-1", [], "empty"),
        ("cm-1", [2.0, 1.0], "must ascend: point 1 is 1"),
        ("cm-1", [1.0, 2.0, 2.0], "point 2"),
        ("cm-1", [1.0, np.nan], "not finite"),
        ("nm", [-1.0, 1.0], "above 0 nm"),
        ("nm", [0.0, 1.0], "above 0 nm"),
    ],
)
def test_refusals(unit, values, message):
    with pytest.raises(DomainError, match=message):
        Axis(unit, np.array(values))
