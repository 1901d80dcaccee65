"""The reverse transition: same pair of states, other direction."""

from __future__ import annotations

import numpy as np
import pytest

from band_oracles import amplitudes, rotation
from ladderband.numerics.errors import DomainError
from ladderband.numerics.reversal import reversed_transition
from ladderband.numerics.transition import Mode, Moment, Transition


def case():
    rng = np.random.default_rng(3)
    return Transition(
        (Mode(900.0, 1100.0, 0.9, "a"), Mode(1500.0, 1300.0, -0.7, "b")),
        origin_cm1=20000.0,
        temperature_k=300.0,
        mixing=rotation(2, rng, 0.4),
        moment=Moment(np.array([0.1, 0.4, -0.6]), rng.normal(size=(2, 3))),
    )


def test_twice_is_the_same():
    one = case()
    two = reversed_transition(reversed_transition(one))
    assert (two.process, two.origin_cm1, two.temperature_k) == ("absorption", 20000.0, 300.0)
    assert two.wavenumbers_initial == pytest.approx(one.wavenumbers_initial)
    assert two.displacements == pytest.approx(one.displacements)
    assert two.mixing == pytest.approx(one.mixing)
    assert two.moment.constant_debye == pytest.approx(one.moment.constant_debye)
    assert two.moment.slopes_debye == pytest.approx(one.moment.slopes_debye)


def test_amplitudes_are_transposed():
    """<v|mu|n> is <n|mu|v>, moment included."""
    up = amplitudes(case(), 4, 4)
    down = amplitudes(reversed_transition(case()), 4, 4)
    assert down == pytest.approx(up.transpose(0, 3, 4, 1, 2), abs=1e-12)


def test_without_mixing_none_is_invented():
    plain = Transition((Mode(900.0, 1100.0, 0.9),), process="emission")
    back = reversed_transition(plain)
    assert back.mixing is None
    assert back.process == "absorption"
    assert back.displacements == pytest.approx([-0.9 * np.sqrt(900.0 / 1100.0)])


def test_photoelectron_band_has_no_reverse():
    with pytest.raises(DomainError, match="no reverse"):
        reversed_transition(Transition((Mode(900.0, 1100.0, 0.9),), process="photoelectron"))
