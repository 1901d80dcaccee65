"""``POST /v1/bands``: the band on an axis."""

from __future__ import annotations

from ladderband.formats.bands import band_plot, bands_csv, bands_npy
from ladderband.formats.jcamp import bands_jcamp
from ladderband.formats.look import png, svg
from ladderband.schemas.bands import BandsRequest, BandsResponse, bands_members
from ladderband.usecases.bands import bands, estimate_seconds
from ladderband.usecases.bands_question import BandsAnswer, BandsQuestion
from ladderband.web.resource import Resource

DYE = {
    "process": "absorption",
    "origin_cm1": 18900.0,
    "temperature_k": 298.15,
    "modes": [
        {
            "label": "skeletal bend",
            "wavenumber_initial_cm1": 242.0,
            "wavenumber_final_cm1": 236.0,
            "huang_rhys": 0.35,
        },
        {
            "label": "ring breathing",
            "wavenumber_initial_cm1": 611.0,
            "wavenumber_final_cm1": 598.0,
            "huang_rhys": 0.22,
        },
        {
            "label": "ring stretch",
            "wavenumber_initial_cm1": 1365.0,
            "wavenumber_final_cm1": 1342.0,
            "huang_rhys": 0.48,
        },
    ],
    "moment": {"constant_debye": [7.9, 0.0, 0.0]},
    "axis": {"unit": "nm", "start": 400.0, "stop": 600.0, "points": 401},
    "line_shape": {"fwhm_cm1": 120.0, "bath": {"reorganisation_cm1": 260.0}},
    "scale": "molar_absorption_coefficient",
}
COLD = {
    "process": "emission",
    "origin_cm1": 24810.0,
    "temperature_k": 4.2,
    "modes": [
        {
            "label": "C-C stretch",
            "wavenumber_initial_cm1": 1395.0,
            "wavenumber_final_cm1": 1408.0,
            "huang_rhys": 1.1,
        },
        {
            "label": "in-plane bend",
            "wavenumber_initial_cm1": 389.0,
            "wavenumber_final_cm1": 395.0,
            "huang_rhys": 0.42,
        },
    ],
    "moment": {"constant_debye": [0.0, 3.2, 0.0]},
    "axis": {"unit": "cm-1", "start": 18600.0, "stop": 25400.0, "step": 4.0},
    "line_shape": {"kind": "voigt", "fwhm_cm1": 18.0, "fwhm_lorentzian_cm1": 6.0},
    "scale": "photon_rate",
    "label_lines": 12,
}
PHOTOELECTRON = {
    "process": "photoelectron",
    "origin_cm1": 82130.0,
    "temperature_k": 298.15,
    "modes": [
        {
            "label": "symmetric stretch",
            "wavenumber_initial_cm1": 2480.0,
            "wavenumber_final_cm1": 2210.0,
            "displacement": 0.62,
        },
        {
            "label": "bend",
            "wavenumber_initial_cm1": 1130.0,
            "wavenumber_final_cm1": 1015.0,
            "displacement": -2.1,
        },
    ],
    "mixing": [[0.9921976, 0.1246747], [-0.1246747, 0.9921976]],
    "mixing_repair": "nearest-orthogonal",
    "axis": {"unit": "eV", "start": 9.9, "stop": 12.0, "points": 421},
    "line_shape": {
        "fwhm_cm1": 160.0,
        "instrument": {"offset_cm1": [-120.0, 0.0, 120.0], "weight": [0.0, 1.0, 0.0]},
    },
}
ALLOWED_BY_VIBRATION = {
    "process": "absorption",
    "origin_cm1": 36540.0,
    "temperatures_k": [77.0, 298.15],
    "modes": [
        {
            "label": "promoting bend",
            "wavenumber_initial_cm1": 571.0,
            "wavenumber_final_cm1": 498.0,
            "huang_rhys": 0.0,
        },
        {
            "label": "breathing",
            "wavenumber_initial_cm1": 1018.0,
            "wavenumber_final_cm1": 951.0,
            "huang_rhys": 1.3,
        },
    ],
    "moment": {
        "constant_debye": [0.0, 0.0, 0.0],
        "slopes_debye": [[0.21, 0.0, 0.0], [0.0, 0.0, 0.0]],
    },
    "axis": {"unit": "cm-1", "start": 35500.0, "stop": 42500.0, "step": 5.0},
    "line_shape": {"kind": "lorentzian", "fwhm_cm1": 30.0},
    "scale": "molar_absorption_coefficient",
}

BANDS: Resource[BandsQuestion, BandsAnswer] = Resource(
    path="/v1/bands",
    operation_id="computeBands",
    summary="The band of a transition on an axis",
    description="All lines of a polyatomic transition at once, however many there are, broadened "
    "and on a scale: mixing of the modes, temperature, a transition moment that depends on the "
    "coordinates, baths, mixtures of species. Computed in the time domain with a proven bound. "
    "npy: array (points, 1 + bands) of axis and intensities. Worked requests: /docs/bands.",
    request=BandsRequest(),
    response=BandsResponse,
    use_case=bands,
    estimate=estimate_seconds,
    members=bands_members,
    formats={
        "csv": bands_csv,
        "npy": bands_npy,
        "jcamp": bands_jcamp,
        "svg": svg(band_plot),
        "png": png(band_plot),
    },
    examples={
        "dye-at-room-temperature": DYE,
        "cold-emission": COLD,
        "photoelectron": PHOTOELECTRON,
        "vibronically-allowed": ALLOWED_BY_VIBRATION,
    },
)
