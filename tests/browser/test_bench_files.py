"""Files into the bench page and out of it."""

from __future__ import annotations

import csv
import io
import json
import re
from pathlib import Path

import httpx
import numpy as np
import pytest

SAYS = "() => document.querySelector('#states-said').textContent.includes('{}')"
QCSCHEMA = Path(__file__).parents[1] / "reference/data/qcschema"
REFUSED = "status of 422"
MEASURED = "# invented\nwavenumber / cm-1;absorbance\n" + "".join(
    f"{x};{np.exp(-(((x - 22600) / 700) ** 2)):.6f}\n" for x in range(20500, 27000, 50)
)


def documents(*names):
    return {f"{name}.json": (QCSCHEMA / f"{name}.json").read_text() for name in names}


# --- a measured band ---


def test_a_measured_band_is_laid_over_the_computed_one(page, drop):
    assert page.get_attribute("#plot .measured", "d") == ""
    drop(page, "#plot", {"mine.csv": MEASURED})
    page.wait_for_function("() => document.querySelector('#plot .measured').getAttribute('d')")
    assert "mine.csv: 130 points." in page.inner_text("#measured-said")
    assert page.input_value("#measured-unit") == "cm-1"
    assert page.is_visible("#key .key-measured")
    highest = """() => Math.min(...document.querySelector('#plot .measured').getAttribute('d')
        .slice(1).split('L').map((point) => Number(point.split(' ')[1])))"""
    full = page.evaluate(highest)
    curve = highest.replace(".measured", ".curve")
    assert full == pytest.approx(page.evaluate(curve), abs=2)  # scaled to the computed maximum
    page.fill("#measured-scale", "0.5")
    page.wait_for_function(f"full => ({highest})() > full + 50", arg=full)
    page.reload()
    page.wait_for_function("() => document.querySelector('#plot .measured')?.getAttribute('d')")
    assert page.input_value("#measured-scale") == "0.5"
    page.click("#measured summary")
    page.click("#measured-remove")
    page.wait_for_function("() => !document.querySelector('#plot .measured').getAttribute('d')")


def test_the_unit_of_a_measured_band_can_be_set_right(page):
    text = "".join(f"{x} {1 + (x == 450)}\n" for x in range(380, 480, 5))
    page.click("#measured summary")
    file = {"name": "plain.txt", "mimeType": "text/plain", "buffer": text.encode()}
    page.set_input_files("#measured-file", file)
    page.wait_for_function("() => document.querySelector('#plot .measured').getAttribute('d')")
    assert page.input_value("#measured-unit") == "nm"
    assert "guessed" in page.inner_text("#measured-said")
    page.select_option("#measured-unit", "eV")
    # 380 to 475 eV are far outside the plot
    page.wait_for_function("() => !document.querySelector('#plot .measured').getAttribute('d')")


def test_a_file_that_is_no_spectrum_is_told_and_changes_nothing(page, drop):
    drop(page, "#measured-drop", {"letter.txt": "Dear reader,\nno numbers here.\n"})
    page.wait_for_function("() => document.querySelector('#measured-said').textContent")
    assert "letter.txt was not read. No line begins with a number" in page.inner_text(
        "#measured-said"
    )
    assert page.get_attribute("#plot .measured", "d") == ""


# --- two states from quantum chemistry ---


def test_two_results_become_the_transition(page, drop, watched):
    page.select_option("[data-member=process]", "photoelectron")
    page.click("#states summary")
    # dropped in the wrong order: the lower state is the initial one
    drop(page, "#states-drop", documents("water_cation", "water_neutral"))
    page.wait_for_function(SAYS.format("3 modes"))
    assert "Initial state: water_neutral.json" in page.inner_text("#states-names")
    states = {
        name: {"qcschema": json.loads(text)}
        for name, text in documents("water_neutral", "water_cation").items()
    }
    body = {
        "process": "photoelectron",
        "temperature_k": 300.0,
        "initial": states["water_neutral.json"],
        "final": states["water_cation.json"],
    }
    transition = httpx.post(watched.url + "/v1/mode-maps", json=body).json()["transition"]
    page.wait_for_function("() => document.querySelector('.axis-unit').textContent === 'eV'")
    with page.expect_request("**/v1/bands") as sent:
        page.fill("#width", "300")
    asked = sent.value.post_data_json
    for member in ("process", "origin_cm1", "temperature_k", "modes", "mixing"):
        assert asked[member] == transition[member]
    assert page.is_visible("#mixing")
    page.wait_for_function(
        "() => Math.abs(document.querySelector('#range-start').value - 12.3) < 0.4"
    )
    is_band = re.compile("/v1/bands$").search
    with page.expect_request(lambda r: is_band(r.url) and "mixing" not in r.post_data_json):
        page.click("#mixing-drop")
    assert not page.is_visible("#mixing")


def test_removing_a_mode_of_a_mixed_transition_is_repaired_with_a_warning(page, drop):
    page.click("#states summary")
    drop(page, "#states-drop", documents("water_neutral", "water_cation"))
    page.wait_for_selector("#mixing:not([hidden])")
    page.click("tbody[data-mode='0'] .remove")
    page.wait_for_function(
        "() => document.querySelector('#warnings').textContent.includes('nearest orthogonal')"
    )
    assert "2 × 2" in page.inner_text("#mixing")
    assert page.locator(".wrong").count() == 0


def with_an_imaginary_mode(name):
    """The same document with the curvature along its lowest vibration turned over."""
    document = json.loads((QCSCHEMA / f"{name}.json").read_text())
    masses = {"H": 1.007825, "O": 15.994915}
    root = np.sqrt(np.repeat([masses[s] for s in document["molecule"]["symbols"]], 3))
    hessian = np.reshape(document["return_result"], (len(root), len(root))) / np.outer(root, root)
    values, vectors = np.linalg.eigh(hessian)
    lowest = np.flatnonzero(values > 1e-3 * values[-1])[0]
    hessian -= 2.0 * values[lowest] * np.outer(vectors[:, lowest], vectors[:, lowest])
    document["return_result"] = (hessian * np.outer(root, root)).ravel().tolist()
    return json.dumps(document)


def test_modes_that_need_a_choice_get_one_on_the_page(page, drop, watched):
    watched.expected.append(REFUSED)
    page.click("#states summary")
    files = documents("water_neutral")
    drop(page, "#states-drop", {**files, "saddle.json": with_an_imaginary_mode("water_cation")})
    page.wait_for_selector(".choices")
    assert re.fullmatch(
        r"Mode 1 of the final state, \d+i cm⁻¹", page.inner_text(".choices legend >> nth=0")
    )
    assert page.locator("table.modes tbody").count() == 4  # still the transition before
    page.check(".choices [value=replace]")
    page.fill(".choices .replacement", "900")
    page.click(".choices button")
    page.wait_for_function(SAYS.format("3 modes"))
    assert page.locator(".choices").count() == 0
    wavenumbers = [page.input_value(f"tbody[data-mode='{k}'] [data-cell=final]") for k in range(3)]
    assert 900.0 in [pytest.approx(float(text)) for text in wavenumbers]


def test_wrong_documents_are_told_by_their_file(page, drop, watched):
    watched.expected.append(REFUSED)
    page.click("#states summary")
    failed = json.dumps({"schema_name": "qcschema_output", "success": False})
    for files, words in (
        ({"a.json": "{", "b.json": "{}"}, "a.json is not JSON"),
        ({"a.json": "{}", "b.json": "{}"}, "a.json, schema_name: This is not the name"),
        ({"a.json": failed, "b.json": "{}"}, "did not succeed"),
    ):
        drop(page, "#states-drop", files)
        page.wait_for_function(SAYS.format(words))
    assert page.locator("table.modes tbody").count() == 4


# --- tables of modes ---


def test_a_table_is_pasted_into_the_cells(page):
    page.evaluate(
        "navigator.clipboard.writeText('500,5\\t480\\t0,9\\n300\\t290\\t0.1\\n200\\t190\\t0.2')"
    )
    page.focus("tbody[data-mode='2'] [data-cell=initial]")
    page.keyboard.press("Control+V")
    page.wait_for_function("() => document.querySelectorAll('table.modes tbody').length === 5")
    texts = [page.input_value(f"tbody[data-mode='{k}'] [data-cell=shift]") for k in range(5)]
    assert texts == ["0.65", "0.5", "0.9", "0.1", "0.2"]
    assert page.input_value("tbody[data-mode='2'] [data-cell=initial]") == "500.5"
    assert page.input_value("tbody[data-mode='2'] [data-cell=label]") == "in-plane bend"


def test_a_table_replaces_the_modes(page):
    page.click("#paste summary")
    page.fill("#paste-text", "mode,initial,final,displacement\na,1000,900,-1.5\nb,500,450,0.5\n")
    page.click("#paste-use")
    assert page.locator("table.modes tbody").count() == 2
    assert page.input_value("[data-member=shift]") == "displacement"
    assert page.input_value("tbody[data-mode='0'] [data-cell=shift]") == "-1.5"
    page.fill("#paste-text", "a,b\n")
    page.click("#paste-use")
    assert "columns" in page.inner_text("#paste-said") or "named" in page.inner_text("#paste-said")
    assert page.locator("table.modes tbody").count() == 2


# --- downloads ---


def check_json(data, what):
    answer = json.loads(data)
    assert answer["accuracy"]["evidence"] == "proven"
    assert ("lines" in answer) == (what == "lines")


def check_csv(data, what):
    rows = [row for row in csv.reader(io.StringIO(data.decode())) if not row[0].startswith("#")]
    assert len(rows) > 300
    assert len({len(row) for row in rows}) == 1


def check_ndjson(data, what):
    lines = [json.loads(line) for line in data.splitlines()]
    assert len(lines) > 300


def check_npy(data, what):
    assert np.load(io.BytesIO(data)).shape[1] == 2


def check_jcamp(data, what):
    assert data.startswith(b"##TITLE=")
    assert b"##XYDATA=" in data
    assert data.rstrip().endswith(b"##END=")


def check_svg(data, what):
    assert b"<svg" in data[:500]


def check_png(data, what):
    assert data.startswith(b"\x89PNG")


DOWNLOADS = {
    "bands": ("json", "csv", "npy", "jcamp", "svg", "png"),
    "lines": ("json", "csv", "ndjson", "npy", "svg", "png"),
}


def test_every_format_of_the_service_is_offered(page, watched):
    document = httpx.get(watched.url + "/openapi.json").json()
    for what, formats in DOWNLOADS.items():
        content = document["paths"][f"/v1/{what}"]["post"]["responses"]["200"]["content"]
        assert len(content) == len(formats)
        assert page.locator(f"[data-download^={what}-]").count() == len(formats)


def test_every_download_arrives_and_can_be_read(page):
    for what, formats in DOWNLOADS.items():
        for name in formats:
            with page.expect_download() as coming:
                page.click(f"[data-download={what}-{name}]")
            file = coming.value
            ending = "jdx" if name == "jcamp" else name
            assert file.suggested_filename == f"ladderband-{what}.{ending}"
            globals()[f"check_{name}"](Path(file.path()).read_bytes(), what)
