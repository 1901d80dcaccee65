"""A client made from the published document by openapi-python-client, used against the service."""

from __future__ import annotations

import importlib
import subprocess
import sys

import pytest

from ladderband.web.guide.source import SNIPPETS

PACKAGE = "ladderband_generated_client"


@pytest.fixture(scope="module")
def generated(tmp_path_factory, live_server):
    """The generated package, importable for the tests of this module; made as the guide says."""
    folder = tmp_path_factory.mktemp("client")
    config = folder / "config.yaml"
    names = f"package_name_override: {PACKAGE}\nproject_name_override: {PACKAGE}\npost_hooks: []\n"
    config.write_text(names + (SNIPPETS / "overrides.yaml").read_text())
    command = [sys.executable, "-m", "openapi_python_client", "generate"]
    command += ["--url", f"{live_server.url}/openapi.json", "--config", str(config)]
    command += ["--output-path", str(folder / "out"), "--meta", "none"]
    done = subprocess.run(command, capture_output=True, text=True, cwd=folder, timeout=120)
    assert done.returncode == 0, done.stdout + done.stderr
    (folder / "out").rename(folder / PACKAGE)
    sys.path.insert(0, str(folder))
    yield done.stdout + done.stderr
    sys.path.remove(str(folder))


@pytest.fixture
def client(generated, live_server):
    with importlib.import_module(PACKAGE).Client(base_url=live_server.url) as client:
        yield client


def call(name):
    """The generated module of one operation."""
    return importlib.import_module(f"{PACKAGE}.api.default.{name}")


def model(name):
    return getattr(importlib.import_module(f"{PACKAGE}.models"), name)


def test_no_operation_was_left_out(generated):
    assert "WARNING" not in generated.upper()
    for name in ("compute_overlaps", "compute_progressions", "compute_progressions_by_query"):
        call(name)


def test_overlaps(client):
    request = model("OverlapsRequest")(
        wavenumber_initial_cm1=1000.0,
        wavenumber_final_cm1="900.0",
        displacement=1.5,
        v_initial_max=2,
        v_final_max=5,
    )
    answer = call("compute_overlaps").sync(client=client, body=request)
    assert type(answer) is model("OverlapsResponse")
    assert len(answer.overlap_integrals) == 3
    assert answer.accuracy.evidence == "proven"
    assert answer.accuracy.bound <= 1e-10


def test_progression_of_two_modes(client):
    mode = model("Mode")
    request = model("ProgressionsRequest")(
        modes=[
            mode(wavenumber_initial_cm1=992.0, wavenumber_final_cm1=923.0, huang_rhys=1.25),
            mode(wavenumber_initial_cm1=608.0, wavenumber_final_cm1=522.0, displacement=-0.4),
        ]
    )
    answer = call("compute_progressions").sync(client=client, body=request)
    assert answer.lines.position_cm1[0] == 0.0
    assert answer.completeness.missing_at_most < 1e-4


def test_progression_by_query(client):
    answer = call("compute_progressions_by_query").sync(
        client=client, wavenumber_final_cm1="923", huang_rhys="1.25"
    )
    assert answer.lines.assignment[0] == "0^0_0"


def test_problem_is_typed(client):
    request = model("OverlapsRequest")(
        wavenumber_initial_cm1=1000.0, wavenumber_final_cm1=-1.0, v_initial_max=2, v_final_max=5
    )
    answer = call("compute_overlaps").sync(client=client, body=request)
    assert type(answer) is model("Problem")
    assert answer.errors[0].pointer == "#/wavenumber_final_cm1"
