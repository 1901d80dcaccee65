"""The transition object: loading, cross-member rules, and back to JSON."""

from __future__ import annotations

import math

import numpy as np
import orjson
import pytest
from marshmallow import ValidationError

from ladderband.numerics.transition import Transition
from ladderband.numerics.units import displacement_from_shift
from ladderband.schemas.base import complaints
from ladderband.schemas.transition import TransitionSchema, transition_members


class OnlyTransition(TransitionSchema[Transition]):
    """A request that is nothing but a transition."""

    def build(self, data, notes):
        return self.transition(data, notes)


SCHEMA = OnlyTransition()
FIRST = {"wavenumber_initial_cm1": 992.0, "wavenumber_final_cm1": 923.0, "huang_rhys": 1.25}
SECOND = {"wavenumber_initial_cm1": 608.0, "wavenumber_final_cm1": 522.0, "displacement": -0.4}
COS, SIN = math.cos(0.1), math.sin(0.1)
FULL = {
    "process": "emission",
    "origin_cm1": 26650.0,
    "temperature_k": 298.15,
    "modes": [FIRST | {"label": "ring breathing"}, SECOND],
    "mixing": [[COS, SIN], [-SIN, COS]],
    "moment": {"constant_debye": [0, 0, 1.3], "slopes_debye": [[0, 0, 0.1], [0, 0.02, 0]]},
}


def refused(body):
    """Pointers and details of a refusal."""
    with pytest.raises(ValidationError) as caught:
        SCHEMA.read(body)
    return {pointer: complaint.detail for pointer, complaint in complaints(caught.value.messages)}


def test_a_full_transition():
    transition = SCHEMA.read(FULL).question
    assert transition.process == "emission"
    assert transition.direction == -1.0
    assert transition.modes[0].label == "ring breathing"
    assert transition.displacements == pytest.approx([math.sqrt(2.5), -0.4], abs=1e-15)
    assert np.abs(transition.mixing_matrix - FULL["mixing"]).max() < 1e-15
    assert transition.moment.slopes_debye.shape == (2, 3)


def test_defaults():
    transition = SCHEMA.read({"modes": [FIRST]}).question
    assert (transition.process, transition.origin_cm1, transition.temperature_k) == (
        "absorption",
        0,
        0,
    )
    assert transition.mixing is None
    assert transition.moment is None


def test_a_shift_in_mass_weighted_length():
    mode = {k: v for k, v in FIRST.items() if k != "huang_rhys"} | {"shift_angstrom_sqrt_u": -0.12}
    transition = SCHEMA.read({"modes": [mode]}).question
    assert transition.displacements[0] == displacement_from_shift(-0.12, 923.0)


def test_its_own_members_load_as_the_same_transition():
    transition = SCHEMA.read(FULL).question
    text = orjson.dumps(transition_members(transition), option=orjson.OPT_SERIALIZE_NUMPY)
    again = SCHEMA.read(orjson.loads(text)).question
    assert again.modes == transition.modes
    assert (again.process, again.origin_cm1, again.temperature_k) == ("emission", 26650.0, 298.15)
    assert np.abs(again.mixing - transition.mixing).max() < 1e-15  # made orthogonal once more
    assert (again.moment.constant_debye == transition.moment.constant_debye).all()
    assert (again.moment.slopes_debye == transition.moment.slopes_debye).all()


def test_every_wrong_mode_is_named_at_once():
    bad = {k: v for k, v in FIRST.items() if k != "huang_rhys"}
    found = refused({"modes": [bad, FIRST, SECOND | {"wavenumber_final_cm1": 1.0}]})
    assert set(found) == {"/modes/0/huang_rhys", "/modes/2/wavenumber_final_cm1"}


def test_mixing_of_another_size():
    assert "/mixing" in refused({"modes": [FIRST], "mixing": FULL["mixing"]})


def test_moment_of_another_size_and_a_zero_moment():
    slopes = {"constant_debye": [0, 0, 1], "slopes_debye": [[0, 0, 1]]}
    assert "/moment/slopes_debye" in refused({"modes": [FIRST, SECOND], "moment": slopes})
    assert "/moment" in refused({"modes": [FIRST], "moment": {"constant_debye": [0, 0, 0]}})


def test_printed_mixing_is_repaired_without_a_word():
    matrix = np.round(FULL["mixing"], 7).tolist()
    loaded = SCHEMA.read(FULL | {"mixing": matrix})
    repaired = loaded.question.mixing
    assert np.abs(repaired @ repaired.T - np.eye(2)).max() < 1e-15
    assert loaded.warnings == ()


def test_mixing_far_from_orthogonal_is_refused_and_repaired_only_when_asked():
    body = FULL | {"mixing": [[0.99, 0.1], [-0.1, 0.98]]}
    with pytest.raises(ValueError, match="nearest-orthogonal"):
        SCHEMA.read(body)
    loaded = SCHEMA.read(body | {"mixing_repair": "nearest-orthogonal"})
    assert "row" in loaded.warnings[0]
