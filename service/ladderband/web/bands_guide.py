"""``/docs/bands``: four worked requests, each shown with the plot this service draws for it.

Requests and plots are those of :data:`ladderband.web.bands.BANDS`, so the page cannot go stale.
"""

from __future__ import annotations

import base64
import html
import json
from functools import cache

from flask import Blueprint, Response

from ladderband.formats.bands import band_plot
from ladderband.formats.look import png
from ladderband.formats.sheet import Sheet
from ladderband.numerics.accuracy import Deadline
from ladderband.usecases.bands import bands
from ladderband.usecases.bands_question import BandsAnswer
from ladderband.usecases.limits import Limits
from ladderband.web.bands import BANDS
from ladderband.web.pages import guarded

blueprint = Blueprint("bands_guide", __name__)

TEXTS = {
    "dye-at-room-temperature": (
        "Room-temperature absorption of a dye",
        "The solvent moves with the electron: a bath of 260 cm<sup>-1</sup> makes most of the width "
        "and shifts the maximum; the shoulder is the ring stretch. With the moment in debye the "
        "scale is absolute. The axis is in nm; the molar absorption coefficient is not a density, "
        "so no Jacobian enters. Change <code>temperature_k</code> and both the thermal lines and "
        "the bath's width follow.",
    ),
    "cold-emission": (
        "Cold emission with resolved progressions",
        "At 4.2 K only the vibrationless level of the upper state is populated: <code>initial</code> "
        "is the upper state, and the lines run down from the origin. A Voigt profile joins the "
        "instrument's Gaussian with the lifetime's Lorentzian. <code>photon_rate</code> carries the "
        "third power of the wavenumber; its area is the Einstein A coefficient in "
        "<code>strength</code>, whose inverse is the radiative lifetime.",
    ),
    "photoelectron": (
        "A photoelectron band",
        "The axis is the ionisation energy in eV, the origin the adiabatic one. The two modes mix; "
        "the matrix is given with seven decimals and repaired to the nearest orthogonal one. The "
        "triangular slit of the analyser is a table. <code>positions</code> has the vertical "
        "energy beside the adiabatic one.",
    ),
    "vibronically-allowed": (
        "A vibronically allowed band",
        "The moment is zero at the initial minimum and grows along the promoting mode "
        "(Herzberg-Teller): no 0-0 line, the band starts one quantum of that mode higher, and a hot "
        "line one quantum below grows with temperature. Two temperatures in one request make two "
        "bands.",
    ),
}
NOTES = (
    "Molecules and numbers on this page are invented.",
    "<code>accuracy.bound</code> holds for every intensity of the answer, in its unit; it is proven. "
    "Ask for less or more with <code>tolerance</code>.",
    "<code>relative</code> and <code>unit_area</code> carry no factor of the wavenumber; the absolute "
    "scales do (absorption one, photon rate three, radiated power four).",
    "A second request with other widths, axis, origin or scale reuses the work of the first.",
    "An absolute scale says what the model gives, not what a sample stands. Choosing a laser power "
    "or a light dose needs the usual caution: check the computed coefficient against a measured one "
    "first, and obey the laser safety rules of your laboratory.",
)
STYLE = (
    "body{font:16px/1.5 system-ui,sans-serif;max-width:46rem;margin:2rem auto;padding:0 1rem;"
    "color:#1d232b;background:#fff}h1{font-size:1.6rem}h2{font-size:1.2rem;margin-top:2.5rem}"
    "img{width:100%;height:auto}pre{background:#f4f6f8;padding:.8rem;overflow:auto;font-size:.8rem;"
    "max-height:22rem}code{font-size:.92em}"
)


@blueprint.get("/docs/bands")
def bands_guide() -> Response:
    """The guide page; computed once a process."""
    return guarded(Response(_page(), content_type="text/html; charset=utf-8"))


@cache
def _page() -> str:
    sections = "".join(_section(name, title, text) for name, (title, text) in TEXTS.items())
    notes = "".join(f"<li>{note}</li>" for note in NOTES)
    return (
        '<!doctype html><html lang="en"><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        f"<title>Ladderband: bands</title><style>{STYLE}</style>"
        "<h1>Bands: four worked requests</h1><p>Each block below is a complete body for "
        '<code>POST /v1/bands</code>; the members are described in <a href="./">the interface</a>. '
        "Save one as <code>band.json</code> and send it:</p><pre>curl -H 'Content-Type: "
        "application/json' -d @band.json http://127.0.0.1:8080/v1/bands?format=svg</pre>"
        "<p><code>format</code> is one of json, csv, npy, jcamp, svg, png.</p>"
        f"{sections}<h2>Good to know</h2><ul>{notes}</ul></html>"
    )


def _section(name: str, title: str, text: str) -> str:
    body = BANDS.examples[name]
    question = BANDS.request.read(dict(body)).question
    answer = bands(question, Limits(), Deadline.none())
    picture = png(band_plot)(Sheet("guide", ""), question, answer)
    source = "data:image/png;base64," + base64.b64encode(picture).decode()
    shown = html.escape(json.dumps(body, indent=2))
    return (
        f'<h2 id="{name}">{title}</h2><p>{text}</p><img src="{source}" alt="{title}">'
        f"<p>{_figures(answer)}</p><pre>{shown}</pre>"
    )


def _figures(answer: BandsAnswer) -> str:
    """One line of the answer's own numbers."""
    band = answer.bands[0]
    parts = [
        f"mean {band.moments.mean_cm1:.1f} cm<sup>-1</sup>",
        f"standard deviation {band.moments.standard_deviation_cm1:.1f} cm<sup>-1</sup>",
        f"largest intensity {float(band.intensity.max()):.4g} (bound "
        f"{float(band.accuracy.bound):.1g})",
    ]
    if band.strength.oscillator_strength is not None:
        parts.append(f"oscillator strength {band.strength.oscillator_strength:.3g}")
    if band.strength.radiative_lifetime_s is not None:
        parts.append(f"radiative lifetime {1e9 * band.strength.radiative_lifetime_s:.3g} ns")
    return "The answer: " + ", ".join(parts) + "."
