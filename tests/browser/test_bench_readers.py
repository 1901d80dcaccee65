"""The readers of measured bands and of tables of modes, run in the browser they are made for.

Encodings of ordinates after the published JCAMP-DX 4.24 rules: SQZ @ABC (0 to 9), DIF %JKL, DUP STU.
"""

from __future__ import annotations

import json

import httpx
import pytest

BAND = {
    "origin_cm1": 20000.0,
    "modes": [{"wavenumber_initial_cm1": 1000, "wavenumber_final_cm1": 900, "huang_rhys": 0.8}],
    "line_shape": {"fwhm_cm1": 200.0},
}
EVEN = {"unit": "cm-1", "start": 19000.0, "stop": 25000.0, "points": 121}
UNEVEN = {"unit": "nm", "values": [400.0, 410.0, 425.5, 450.25, 500.0]}


@pytest.fixture(scope="module")
def reader(browser, live_server):
    """Calls a function of one of the page's modules."""
    context = browser.new_context()
    page = context.new_page()
    page.goto(live_server.url + "/")

    def call(module, name, *arguments):
        return page.evaluate(
            """async ([module, name, given]) => {
                const main = document.querySelector('script[type=module]').src;
                const found = await import(new URL(`${module}.js`, main));
                try { return { value: found[name](...given) }; }
                catch (error) { return { error: error.message }; }
            }""",
            [module, name, list(arguments)],
        )

    yield call
    context.close()


@pytest.fixture(scope="module")
def measured(reader):
    return lambda text: reader("measured_reader", "readMeasured", text, "file")["value"]


@pytest.fixture(scope="module")
def refusal(reader):
    return lambda text: reader("measured_reader", "readMeasured", text, "file")["error"]


@pytest.mark.parametrize("axis", [EVEN, UNEVEN], ids=["even", "uneven"])
@pytest.mark.parametrize("kind", ["jcamp", "csv"])
def test_files_of_the_service_itself_are_read_to_the_last_digit(live_server, measured, axis, kind):
    address = live_server.url + "/v1/bands"
    body = {**BAND, "axis": axis}
    answer = httpx.post(address, json=body).json()
    text = httpx.post(address, params={"format": kind}, json=body).text
    found = measured(text)
    assert found["unit"] == axis["unit"]
    assert not found["guessed"]
    assert found["x"] == pytest.approx(answer["axis"]["values"], rel=1e-12)
    assert found["y"] == answer["intensity"]


def jcamp(rows, points, first=1000.0, last=None, **labels):
    last = first + points - 1 if last is None else last
    head = {
        "TITLE": "hand made",
        "JCAMP-DX": "4.24",
        "DATA TYPE": "UV/VIS SPECTRUM",
        "XUNITS": "1/CM",
        "YUNITS": "ABSORBANCE",
        "FIRSTX": first,
        "LASTX": last,
        "NPOINTS": points,
        "XFACTOR": 1,
        "YFACTOR": 1,
        **labels,
    }
    text = "".join(f"##{name}={value}\r\n" for name, value in head.items())
    return text + "##XYDATA=(X++(Y..Y))\r\n" + "\r\n".join(rows) + "\r\n##END=\r\n"


WANTED = [0, 1, 2, 3, 3, 2, 1, 0, -1, -2, -3]


@pytest.mark.parametrize(
    "rows",
    [
        ["1000 0 1 2 3 3 2", "1006 1 0 -1 -2 -3"],
        ["1000, 0, 1, 2, 3, 3, 2", "1006 1, 0, -1, -2, -3 $$ a comment"],
        ["1000+0+1+2+3+3+2", "1006+1+0-1-2-3"],
        ["1000@ABCCB", "1006A@abc"],
        ["1000@ABCTB", "1006A@abc"],
        ["1000@JJJ%jjjjjj"],
        ["1000@JUS%jX"],
        ["1000@JJJ%j", "1005Bjjjjj"],
    ],
    ids=["affn", "affn with commas", "pac", "sqz", "sqz dup", "dif", "dif dup", "dif with check"],
)
def test_every_form_of_ordinates_is_the_same_spectrum(measured, rows):
    found = measured(jcamp(rows, len(WANTED)))
    assert found["y"] == WANTED
    assert found["x"] == [1000.0 + k for k in range(len(WANTED))]


def test_several_digits_factors_and_a_falling_axis(measured):
    text = jcamp(["500A23J5k1", "497A17"], 3, first=500, last=496, YFACTOR=0.01)
    found = measured(text)
    assert found["x"] == [496.0, 498.0, 500.0]
    assert found["y"] == pytest.approx([1.17, 1.38, 1.23])


def test_an_ordinate_that_looks_like_an_exponent_is_an_ordinate(measured):
    assert measured(jcamp(["100E23F1"], 2, first=100))["y"] == [523, 61]
    assert measured(jcamp(["100 1.5E-3 2e+1"], 2, first=100))["y"] == [0.0015, 20]


@pytest.mark.parametrize("label", ["XYPOINTS", "XYDATA"])
def test_pairs_are_read_under_either_label(measured, label):
    text = jcamp([], 2, YFACTOR=0.5).partition("##XYDATA")[0]
    found = measured(text + f"##{label}=(XY..XY)\n500.5, 1; 400, 3\n##END=\n")
    assert found["x"] == [400, 500.5]
    assert found["y"] == [1.5, 0.5]


def test_the_first_block_of_a_compound_file_is_read(measured):
    block = jcamp(["1000 1 2 3"], 3)
    text = "##TITLE=all\r\n##DATA TYPE=LINK\r\n##BLOCKS=3\r\n" + block + jcamp(["1000 7 8 9"], 3)
    assert measured(text + "##END=\r\n")["y"] == [1, 2, 3]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (jcamp(["1000 1 2 3"], 5), "announces 5 points and holds 3"),
        (jcamp(["1000@JJ", "1002C1"], 3), "check value"),
        (jcamp(["1000 1 2 !"], 3), "no line of ordinates"),
        (jcamp(["1000S1"], 1), "repetition"),
        ("##TITLE=x\r\n##END=\r\n", "no XYDATA"),
        (jcamp(["1000 1 2"], 2, FIRSTX="none"), "##FIRSTX="),
        ("", "No line begins with a number"),
        ("a;b\nc;d\n", "No line begins with a number"),
        ("1;2\n3;x\n", "does not begin with two numbers"),
        ("1 2\n", "Fewer than two points"),
        ("1 0\n2 0\n3 -1\n", "No ordinate is above zero"),
    ],
)
def test_what_cannot_be_read_is_told_in_a_sentence(refusal, text, words):
    assert words in refusal(text)


@pytest.mark.parametrize(
    ("text", "unit", "guessed"),
    [
        ("wavelength / nm,absorbance\n400,0.1\n410,0.2\n", "nm", False),
        ("# made up\n# x: wavenumber in cm^-1\n20000\t0.1\n20010\t0.2\n", "cm-1", False),
        ("Energy (eV);Signal\r\n2,5;0,1\r\n2,6;0,2\r\n", "eV", False),
        ("20000 0.1\n20010 0.2\n", "cm-1", True),
        ("400.5 0.1\n401.5 0.2\n", "nm", True),
        ("12,61 0,1\n12,62 0,2\n", "eV", True),
        ('"450";"0.1"\n"460";"0.2"\n', "nm", True),
    ],
)
def test_two_columns_in_the_forms_people_have(measured, text, unit, guessed):
    found = measured(text)
    assert (found["unit"], found["guessed"]) == (unit, guessed)
    assert found["y"] == [0.1, 0.2]
    assert found["x"][1] > found["x"][0]


def test_columns_are_put_in_order_and_gaps_left_out(measured):
    found = measured("500,0.3,7\n400,0.1,7\n450,0.2,7\n")
    assert found["x"] == [400, 450, 500]
    assert found["y"] == [0.1, 0.2, 0.3]


def mode(label, initial, final, shift):
    return {"label": label, "initial": initial, "final": final, "shift": shift}


@pytest.mark.parametrize(
    ("text", "modes", "kind"),
    [
        (
            "992\t923\t1.25\n608\t522\t-0.08",
            [("", "992", "923", "1.25"), ("", "608", "522", "-0.08")],
            None,
        ),
        ("ring;992,5;923;1,25\n", [("ring", "992.5", "923", "1.25")], None),
        (
            "label,initial,final,huang_rhys\na,1000,900,0.5\n",
            [("a", "1000", "900", "0.5")],
            "huang_rhys",
        ),
        (
            "# c\nfinal,initial,displacement\n900,1000,0.5\n",
            [("", "1000", "900", "0.5")],
            "displacement",
        ),
        ("500 480 0.1\n", [("", "500", "480", "0.1")], None),
    ],
)
def test_tables_of_modes_in_the_forms_people_have(reader, text, modes, kind):
    found = reader("mode_text", "modeTable", text)["value"]
    assert found["modes"] == [mode(*entry) for entry in modes]
    assert found.get("shift") == kind


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "nothing to read"),
        ("1 2\n", "has 2 columns"),
        ("a,b,c\n1,2,3\n", 'named "initial"'),
        ("label,initial,final,S\n", "no mode below"),
        ("900,800,x\n", "is no number for shift"),
    ],
)
def test_tables_that_are_none_are_refused_in_a_sentence(reader, text, words):
    assert words in reader("mode_text", "modeTable", text)["error"]


def test_the_state_comes_back_from_its_text(reader):
    state = reader("state", "example")["value"]
    state["modes"][0]["label"] = "Δν / 振動"
    state["mixing"] = [[1, 0], [0, 1]]
    text = reader("state", "encode", state)["value"]
    assert set(text) <= set("ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-_")
    assert reader("state", "decode", text)["value"] == state
    assert reader("state", "decode", json.dumps(state))["value"] is None


@pytest.mark.parametrize("bound", [1e-12, 1.01e-9, 9.99e-5, 0.0123, 2.0, 0.0999])
def test_a_bound_is_never_rounded_down(reader, bound):
    shown = reader("text", "bound", bound)["value"]
    raised = dict(zip("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-", strict=True))
    mantissa, _, power = shown.partition("×10")
    value = float(mantissa) * 10.0 ** float("".join(raised[c] for c in power) or 0)
    assert bound * (1 - 1e-12) <= value <= 1.1 * bound
