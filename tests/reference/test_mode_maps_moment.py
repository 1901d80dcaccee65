"""A transition dipole that vanishes at the geometry: formaldehyde's first excited singlet.

1A2 from 1A1 is forbidden by symmetry in the dipole approximation; the band is there because
motions of b1 and b2 symmetry bring a moment in (common practice; G. Herzberg and E. Teller,
Z. Phys. Chem. B 21, 410 (1933)). Gradient, dipole and derivatives were computed with PySCF
(tests/reference/generate/qcschema_states.py).
"""

from __future__ import annotations

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.units import (
    BOHR_ANGSTROM,
    DEBYE_C_M,
    ELEMENTARY_CHARGE_C,
)
from ladderband.usecases.limits import Limits
from ladderband.usecases.mode_maps import ModeMapsQuestion, MomentInput, mode_maps
from spring_molecules import committed_state, document

BOHR = float(BOHR_ANGSTROM)
ATOMIC_DIPOLE_DEBYE = float(ELEMENTARY_CHARGE_C) * BOHR * 1e-10 / DEBYE_C_M
TOTALLY_SYMMETRIC = (2, 3, 4)  # bend, CO stretch, CH stretch; the others are b1 and b2


@pytest.fixture(scope="module")
def answer():
    extras = document("formaldehyde_excited_gradient")["extras"]
    derivatives = np.array(extras["transition_dipole_derivatives"]).reshape(12, 3)
    moment = MomentInput(
        np.array(extras["transition_dipole"]) * ATOMIC_DIPOLE_DEBYE,
        derivatives * ATOMIC_DIPOLE_DEBYE / BOHR,
    )
    question = ModeMapsQuestion(
        committed_state("formaldehyde_neutral"),
        committed_state("formaldehyde_excited_gradient"),
        moment=moment,
    )
    return mode_maps(question, Limits(), Deadline.none())


def test_the_atomic_unit_is_2_541746_debye():
    assert pytest.approx(2.541746, abs=1e-6) == ATOMIC_DIPOLE_DEBYE  # from memory (CODATA)


def test_the_moment_vanishes_at_the_geometry_and_along_totally_symmetric_modes(answer):
    moment = answer.transition.moment
    assert np.abs(moment.constant_debye).max() < 1e-4
    assert np.abs(moment.slopes_debye[list(TOTALLY_SYMMETRIC)]).max() < 1e-3


def test_the_other_modes_bring_it_in(answer):
    slopes = np.linalg.norm(answer.transition.moment.slopes_debye, axis=1)
    others = [k for k in range(6) if k not in TOTALLY_SYMMETRIC]
    assert slopes[others].max() > 0.05
    assert slopes[others].max() < 1.0  # a weak band: tenths of a debye


def test_each_mode_brings_in_one_component(answer):
    # b1 x A2 = b2 and b2 x A2 = b1: a single Cartesian axis each
    for row in answer.transition.moment.slopes_debye:
        largest = np.abs(row).max()
        assert np.sort(np.abs(row))[1] < 1e-3 + 1e-2 * largest


def test_the_derivatives_cancel_when_the_molecule_is_shifted(answer):
    assert not any("shifted" in warning for warning in answer.warnings)
