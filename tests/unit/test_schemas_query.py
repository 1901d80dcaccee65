"""Short query forms: text to members of the body, each parameter once."""

from __future__ import annotations

import pytest
from marshmallow import ValidationError

from ladderband.schemas.progressions import ProgressionsQuery, ProgressionsRequest
from ladderband.schemas.query import ViewQuery, number_of

QUERY = ProgressionsQuery()


def body_of(**parameters):
    return QUERY.body(QUERY.read({name: [value] for name, value in parameters.items()}))


def test_columns_become_modes():
    body = body_of(
        wavenumber_final_cm1="923, 522", wavenumber_initial_cm1="992,608", huang_rhys="1,0.3"
    )
    assert body["modes"] == [
        {"wavenumber_final_cm1": 923.0, "wavenumber_initial_cm1": 992.0, "huang_rhys": 1.0},
        {"wavenumber_final_cm1": 522.0, "wavenumber_initial_cm1": 608.0, "huang_rhys": 0.3},
    ]


def test_initial_wavenumbers_default_to_the_final_ones():
    (mode,) = body_of(wavenumber_final_cm1="923", displacement="-1")["modes"]
    assert mode["wavenumber_initial_cm1"] == 923.0


def test_the_short_form_is_the_same_question_as_its_body():
    body = body_of(
        wavenumber_final_cm1="923", huang_rhys="1.25", v_final_max="19", process="emission"
    )
    mode = {"wavenumber_initial_cm1": 923, "wavenumber_final_cm1": 923, "huang_rhys": 1.25}
    written = {"modes": [mode], "v_final_max": 19, "process": "emission"}
    request = ProgressionsRequest()
    assert request.read(body) == request.read(written)


@pytest.mark.parametrize("text", ["1", "-1.5", "+2e3", "1e-300"])
def test_numbers(text):
    assert number_of(text) == float(text)


@pytest.mark.parametrize("text", ["", "nan", "inf", "1e999", "1,2", "0x10", "1_0", "9" * 500, "٣"])
def test_what_is_not_a_number(text):
    assert number_of(text) is None


def test_a_parameter_given_twice_is_refused():
    with pytest.raises(ValidationError):
        QUERY.read({"wavenumber_final_cm1": ["1", "2"]})


def test_view_defaults():
    view = ViewQuery().read({})
    assert (view["width"], view["height"], view["theme"]) == (760.0, 420.0, "light")
    assert "format" not in view
