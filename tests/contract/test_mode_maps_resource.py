"""``POST /v1/mode-maps`` as a client sees it: ways to say the same, refusals, sending it on."""

from __future__ import annotations

import copy
import json
import re
from dataclasses import replace

import numpy as np
import pytest
from qcelemental.models import v1

from ladderband.numerics.normal_modes import normal_modes
from ladderband.numerics.units import BOHR_ANGSTROM, HARTREE_CM1
from ladderband.schemas.transition import TransitionSchema
from spring_molecules import BENT, DATA, document, spring_hessian

PATH = "/v1/mode-maps"
BOHR = float(BOHR_ANGSTROM)


def asked(client, body):
    answer = client.post(PATH, json=body)
    assert answer.status_code == 200, answer.text
    return answer.json


def as_document(name):
    return {"qcschema": document(name)}


def as_version_2(name):
    """The same document through the standard's own models, in its second version."""
    converted = v1.AtomicResult(**document(name)).convert_v(2)
    return {"qcschema": json.loads(converted.model_dump_json())}


def as_arrays(name, unit="bohr"):
    content = document(name)
    symbols = content["molecule"]["symbols"]
    geometry = np.array(content["molecule"]["geometry"]).reshape(-1, 3)
    size = 3 * len(symbols)
    return {
        "atoms": symbols,
        f"geometry_{unit}": (geometry * (BOHR if unit == "angstrom" else 1.0)).tolist(),
        "hessian_hartree_bohr2": np.array(content["return_result"]).reshape(size, size).tolist(),
        "energy_hartree": content["properties"]["return_energy"],
    }


def as_modes(name, kind="cartesian"):
    """The same state by its printed modes, without a Hessian."""
    state = as_arrays(name, "angstrom")
    hessian = np.array(state.pop("hessian_hartree_bohr2"))
    masses = [{"O": 15.99491461957, "H": 1.00782503223}[s] for s in state["atoms"]]
    molecule = replace(BENT, geometry_angstrom=np.array(state["geometry_angstrom"]),
                       masses_u=np.array(masses))  # fmt: skip
    modes = normal_modes(molecule, hessian)
    vectors = modes.vectors.T / (molecule.root_masses if kind == "cartesian" else 1.0)
    state["normal_modes"] = {
        "wavenumbers_cm1": modes.wavenumbers_cm1.tolist(),
        "vectors": vectors.tolist(),
        "vectors_kind": kind,
    }
    return state


WAYS = {
    "QCSchema 2": as_version_2,
    "arrays, bohr": as_arrays,
    "arrays, angstrom": lambda name: as_arrays(name, "angstrom"),
    "atomic numbers": lambda name: {**as_arrays(name), "atoms": [8, 1, 1]},
    "modes": as_modes,
    "mass-weighted modes": lambda name: as_modes(name, "mass-weighted"),
}


@pytest.mark.parametrize("way", WAYS)
def test_every_way_to_say_two_states_gives_one_transition(client, way):
    names = ("water_neutral", "water_cation")
    plain = asked(client, dict(zip(("initial", "final"), map(as_document, names), strict=True)))
    other = asked(client, dict(zip(("initial", "final"), map(WAYS[way], names), strict=True)))
    for mode, expected in zip(
        other["transition"]["modes"], plain["transition"]["modes"], strict=True
    ):
        assert mode["label"] == expected["label"]
        for member in ("wavenumber_initial_cm1", "wavenumber_final_cm1", "displacement"):
            assert mode[member] == pytest.approx(expected[member], abs=1e-9)
    assert other["transition"]["mixing"] == pytest.approx(
        np.array(plain["transition"]["mixing"]), abs=1e-9
    )
    assert other["energies"] == pytest.approx(plain["energies"])


def test_the_committed_documents_are_valid_qcschema():
    # qcelemental, the standard's own Python models (MolSSI)
    names = sorted(path.stem for path in DATA.glob("*.json"))
    assert len(names) >= 14
    for name in names:
        result = v1.AtomicResult(**document(name))
        assert result.success
        assert result.molecule.geometry.shape == (len(result.molecule.symbols), 3)


def test_the_transition_is_what_a_transition_schema_takes(client):
    answer = asked(client, {"initial": as_document("ammonia_neutral"),
                            "final": as_document("ammonia_cation"), "temperature_k": 300.0})  # fmt: skip
    schema = TransitionSchema()
    notes = []
    transition = schema.transition(schema.load(answer["transition"]), notes)
    assert notes == []  # the mixing needs no repair
    assert transition.temperature_k == 300.0
    assert [mode.displacement for mode in transition.modes] == answer["modes"]["displacement"]


def test_a_transition_without_mixing_is_answered_by_progressions(client):
    answer = asked(client, {"process": "photoelectron", "initial": as_document("water_neutral"),
                            "final": as_document("water_cation_2a1_gradient")})  # fmt: skip
    sent_on = client.post("/v1/progressions", json=answer["transition"])
    assert sent_on.status_code == 200
    lines = sent_on.json["lines"]
    assert lines["position_cm1"][0] == pytest.approx(answer["energies"]["origin_cm1"])


def test_an_isotopologue_needs_only_mass_numbers(client):
    body = {"initial": {**as_document("water_neutral"), "mass_numbers": [0, 2, 2]},
            "final": as_document("water_cation")}  # fmt: skip
    light = asked(client, {**body, "initial": as_document("water_neutral")})
    heavy = asked(client, body)
    ratio = np.divide(
        heavy["all_wavenumbers"]["initial_cm1"], light["all_wavenumbers"]["initial_cm1"]
    )
    assert (ratio > 0.70).all()
    assert (ratio < 0.76).all()


def test_an_imaginary_mode_is_a_problem_that_lists_it_and_a_choice_settles_it(client):
    rng = np.random.default_rng(1)
    modes = normal_modes(BENT, spring_hessian(BENT, rng))
    wavenumbers = modes.wavenumbers_cm1.tolist()
    state = {
        "atoms": ["O", "H", "H"],
        "geometry_angstrom": BENT.geometry_angstrom.tolist(),
        "masses_u": BENT.masses_u.tolist(),
        "normal_modes": {
            "wavenumbers_cm1": wavenumbers,
            "vectors": modes.vectors.T.tolist(),
            "vectors_kind": "mass-weighted",
        },
    }
    odd = copy.deepcopy(state)
    odd["normal_modes"]["wavenumbers_cm1"][0] = -412.0
    body = {"initial": state, "final": odd}
    refused = client.post(PATH, json=body)
    assert refused.status_code == 422
    assert refused.json["type"] == "/problems/modes-need-a-choice"
    assert refused.json["modes"] == [{"state": "final", "mode": 0, "wavenumber_cm1": -412.0}]
    assert refused.json["actions"] == ["freeze", "replace"]
    choice = {"state": "final", "mode": 0}
    frozen = asked(client, {**body, "mode_choices": [{**choice, "action": "freeze"}]})
    assert len(frozen["transition"]["modes"]) == 2
    replaced = {**choice, "action": "replace", "wavenumber_cm1": 150.0}
    kept = asked(client, {**body, "mode_choices": [replaced]})
    assert 150.0 in kept["modes"]["wavenumber_final_cm1"]
    assert kept["difficult_modes"] == refused.json["modes"]


def test_vectors_are_orthonormal_rows_and_come_only_when_asked_for(client):
    body = {"initial": as_document("water_neutral"), "final": as_document("water_cation")}
    assert "vectors" not in asked(client, body)
    vectors = asked(client, {**body, "vectors": True})["vectors"]
    for rows in map(np.array, vectors.values()):
        assert rows.shape == (3, 9)
        assert rows @ rows.T == pytest.approx(np.eye(3), abs=1e-12)


def test_csv_has_one_row_a_mode(client):
    body = {"initial": as_document("water_neutral"), "final": as_document("water_cation")}
    text = client.post(PATH, json=body, query_string={"format": "csv"}).text
    rows = [line for line in text.splitlines() if not line.startswith("#")]
    assert rows[0].startswith("wavenumber_initial_cm1,wavenumber_final_cm1,final_mode")
    assert len(rows) == 4


def changed(state, path, value):
    """A copy of a state with the member at ``path`` replaced, or left out for ``...``."""
    result = copy.deepcopy(state)
    *parents, last = path.split("/")
    inner = result
    for name in parents:
        inner = inner[name]
    if value is ...:
        del inner[last]
    else:
        inner[last] = value
    return result


ARRAYS = as_arrays("water_neutral", "angstrom")
DOCUMENT = as_document("water_neutral")
ROWS = ARRAYS["hessian_hartree_bohr2"]
LOPSIDED = [[*row] for row in ROWS]
LOPSIDED[0][3] += 0.1

REFUSALS = {
    "asymmetric Hessian": (
        changed(ARRAYS, "hessian_hartree_bohr2", LOPSIDED), "/hessian_hartree_bohr2", "not symmetric"),
    "Hessian too small": (
        changed(ARRAYS, "hessian_hartree_bohr2", [row[:6] for row in ROWS[:6]]),
        "/hessian_hartree_bohr2", "need 9 x 9"),
    "ragged Hessian": (
        changed(ARRAYS, "hessian_hartree_bohr2", [*ROWS[:8], ROWS[8][:5]]),
        "/hessian_hartree_bohr2/8", "5 numbers"),
    "Hessian in eV/angstrom^2": (
        changed(ARRAYS, "hessian_hartree_bohr2", (97.17 * np.array(ROWS)).tolist()),
        "/hessian_hartree_bohr2", r"hartree/bohr\^2"),
    "collapsed atoms": (
        changed(ARRAYS, "geometry_angstrom", [[0, 0, 0], [0, 0, 0.1], [0, 1, 0]]),
        "/geometry_angstrom", "0.1 angstrom apart"),
    "no such element": (changed(ARRAYS, "atoms", ["O", "H", "Xx"]), "/atoms/2", "not the symbol"),
    "too few rows": (
        changed(ARRAYS, "geometry_angstrom", ARRAYS["geometry_angstrom"][:2]),
        "/geometry_angstrom", "2 rows"),
    "two units": (
        {**ARRAYS, "geometry_bohr": ARRAYS["geometry_angstrom"]}, "/geometry_bohr", "only one"),
    "no geometry": (changed(ARRAYS, "geometry_angstrom", ...), "/geometry_bohr", "required"),
    "no force constants": (
        changed(ARRAYS, "hessian_hartree_bohr2", ...), "/gradient_hartree_bohr", "required"),
    "no such isotope": ({**ARRAYS, "mass_numbers": [16, 1, 5]}, "/mass_numbers", "mass number 5"),
    "masses twice": (
        {**ARRAYS, "mass_numbers": [16, 1, 1], "masses_u": [16, 1, 1]}, "/mass_numbers", "as well"),
    "too few masses": ({**ARRAYS, "masses_u": [16.0, 1.0]}, "/masses_u", "2 entries"),
    "document and arrays": ({**DOCUMENT, "atoms": ["O", "H", "H"]}, "/atoms", "already"),
    "not a document": ({"qcschema": {"schema_name": "mine"}}, "/qcschema/schema_name", "not the name"),
    "failed calculation": (
        changed(DOCUMENT, "qcschema/success", False), "/qcschema/success", "did not succeed"),
    "document without molecule": (
        changed(DOCUMENT, "qcschema/molecule", ...), "/qcschema/molecule", "required"),
    "ghost atoms": (
        changed(DOCUMENT, "qcschema/molecule/real", [True, True, False]),
        "/qcschema/molecule/real", "ghost"),
    "document with text for numbers": (
        changed(DOCUMENT, "qcschema/return_result", "none"),
        "/qcschema/return_result", "not an array"),
    "document of an energy": (
        changed(DOCUMENT, "qcschema/driver", "energy"), "/qcschema/driver", "neither a Hessian"),
    "document with null for a number": (
        changed(DOCUMENT, "qcschema/molecule/geometry", [None] * 9),
        "/qcschema/molecule/geometry", "not an array of numbers"),
    "document with strange specification": (
        changed(changed(DOCUMENT, "qcschema/driver", ...), "qcschema/input_data", 7),
        "/qcschema/driver", "neither a Hessian"),
    "document with nonsense masses": (
        changed(DOCUMENT, "qcschema/molecule/masses", [0, 1, 1]),
        "/qcschema/molecule/masses", "Number 0 is outside"),
    "gradient as initial state": (
        as_document("water_cation_gradient"), "", "initial state needs"),
}  # fmt: skip


@pytest.mark.parametrize("case", REFUSALS)
def test_bad_states_are_refused_at_the_member_that_is_wrong(client, case):
    state, pointer, says = REFUSALS[case]
    answer = client.post(PATH, json={"initial": state, "final": as_document("water_cation")})
    assert answer.status_code == 422, answer.text
    first = answer.json["errors"][0]
    assert first["pointer"] == f"#/initial{pointer}"
    assert answer.json["title"]
    assert re.search(says, first["detail"] + str(first.get("allowed")))


def test_a_replaced_mode_without_a_wavenumber_is_refused(client):
    body = {"initial": DOCUMENT, "final": as_document("water_cation"),
            "mode_choices": [{"state": "final", "mode": 0, "action": "replace"}]}  # fmt: skip
    answer = client.post(PATH, json=body)
    assert answer.json["errors"][0]["pointer"] == "#/mode_choices/0/wavenumber_cm1"


def test_the_same_question_has_the_same_digest(client):
    body = {"initial": DOCUMENT, "final": as_document("water_cation")}
    assert asked(client, body)["request_digest"] == asked(client, body)["request_digest"]
    warmer = asked(client, {**body, "temperature_k": 10.0})
    assert warmer["request_digest"] != asked(client, body)["request_digest"]


def band_of(client, transition):
    start = transition["origin_cm1"] - 5000.0
    axis = {"unit": "cm-1", "start": start, "stop": start + 35000.0, "points": 300}
    line_shape = {"kind": "gaussian", "fwhm_cm1": 400.0}
    answer = client.post("/v1/bands", json={**transition, "axis": axis, "line_shape": line_shape})
    assert answer.status_code == 200, answer.text
    return answer.json


@pytest.mark.parametrize("molecule", ["water", "ammonia", "sulfur_dioxide", "phenol"])
def test_the_mean_of_the_displaced_band_is_the_computed_vertical_energy(client, molecule):
    # equal wavenumbers: the mean is the origin plus the reorganisation energy at any temperature
    # (Lax, J. Chem. Phys. 20, 1752 (1952)), here the difference of two PySCF energies
    names = (f"{molecule}_neutral", f"{molecule}_cation_gradient")
    states = dict(zip(("initial", "final"), map(as_document, names), strict=True))
    answer = asked(client, {"process": "photoelectron", "temperature_k": 300.0, **states})
    low, high = (document(name)["properties"]["return_energy"] for name in names)
    mean = band_of(client, answer["transition"])["moments"]["mean_cm1"]
    assert mean == pytest.approx((high - low) * HARTREE_CM1, abs=1e-3)


@pytest.mark.parametrize("molecule", ["water", "ammonia", "sulfur_dioxide"])
def test_the_mean_of_a_mixed_band_is_vertical_plus_what_the_zero_points_change(client, molecule):
    # 1/4 Tr(J^T F^2 J G^-1) + 1/4 sum g - 1/2 sum f over the vertical energy, less the zero points
    # that the 0-0 line holds, with the orthogonal J of the transition
    names = (f"{molecule}_neutral", f"{molecule}_cation")
    states = dict(zip(("initial", "final"), map(as_document, names), strict=True))
    answer = asked(client, {"process": "photoelectron", **states})
    transition, energies = answer["transition"], answer["energies"]
    g, f = (np.array(answer["modes"][f"wavenumber_{s}_cm1"]) for s in ("initial", "final"))
    mixing = np.array(transition["mixing"])
    kinetic = 0.25 * ((mixing**2 * f[:, None] ** 2 / g[None]).sum() - g.sum())
    mean = band_of(client, transition)["moments"]["mean_cm1"]
    assert mean == pytest.approx(energies["vertical_cm1"] + kinetic, abs=1e-3)


def test_a_moment_that_varies_is_taken_by_bands(client):
    states = {"initial": as_document("water_neutral"), "final": as_document("water_cation")}
    slopes = (np.outer(np.arange(9.0), [1.0, 0.0, 0.5]) - [4.0, 0.0, 2.0]).tolist()
    dipole = {"constant_debye": [0.0, 0.0, 0.4], "derivatives_debye_angstrom": slopes}
    answer = asked(client, {**states, "transition_dipole": dipole})
    moment = answer["transition"]["moment"]
    assert np.shape(moment["slopes_debye"]) == (3, 3)
    assert max(band_of(client, answer["transition"])["intensity"]) > 0.0


@pytest.mark.parametrize("molecule", ["water", "ammonia"])
@pytest.mark.parametrize("final", ["cation", "cation_gradient"])
def test_a_transition_is_answered_by_lines_unchanged(client, molecule, final):
    states = {
        "initial": as_document(f"{molecule}_neutral"),
        "final": as_document(f"{molecule}_{final}"),
    }
    answer = asked(client, {"process": "photoelectron", **states})
    body = {**answer["transition"], "tolerance": 0.02, "max_lines": 5000}
    sent_on = client.post("/v1/lines", json=body)
    assert sent_on.status_code == 200, sent_on.text
    assert sent_on.json["completeness"]["missing_at_most"] <= 0.02
    lines, f = sent_on.json["lines"], np.array(answer["modes"]["wavenumber_final_cm1"])
    expected = answer["energies"]["origin_cm1"] + np.array(lines["v_final"]) @ f
    assert lines["position_cm1"] == pytest.approx(expected, abs=1e-6)
    # mean of a complete list = mean of the band; 2 % are missing here, at most 25000 cm^-1 up
    mean = np.average(lines["position_cm1"], weights=lines["intensity"])
    assert mean == pytest.approx(
        band_of(client, answer["transition"])["moments"]["mean_cm1"], abs=500
    )
