import json
import os
import urllib.error
import urllib.request

URL = os.environ.get("LADDERBAND_URL", "http://127.0.0.1:8080")


def ask(path: str, body: object) -> bytes:
    """The bytes of the answer; ends with the reason when the service refuses."""
    headers = {"Content-Type": "application/json", "Prefer": "wait=60"}
    if "LADDERBAND_KEY" in os.environ:
        headers["Authorization"] = "Bearer " + os.environ["LADDERBAND_KEY"]
    request = urllib.request.Request(URL + path, json.dumps(body).encode(), headers)
    try:
        with urllib.request.urlopen(request) as answer:
            return bytes(answer.read())
    except urllib.error.HTTPError as error:
        raise SystemExit(error.read().decode()) from None


transition = {
    "origin_cm1": 26650,
    "modes": [{"wavenumber_initial_cm1": 992, "wavenumber_final_cm1": 923, "huang_rhys": 1.25}],
}
answer = json.loads(ask("/v1/lines", {**transition, "tolerance": 0.01}))
lines = answer["lines"]
columns = lines["position_cm1"], lines["intensity"], lines["assignment"]
for position, intensity, assignment in zip(*columns, strict=True):
    print(f"{position:.1f} {intensity:.6f} {assignment}")
print("missing at most", answer["completeness"]["missing_at_most"])

axis = {"unit": "cm-1", "start": 26000, "stop": 31500, "points": 551}
band = {**transition, "axis": axis, "line_shape": {"fwhm_cm1": 200}}
with open("band.svg", "wb") as file:
    file.write(ask("/v1/bands?format=svg&title=Band", band))
