"""A band equals its complete line list, line by line broadened, to the sum of both bounds.

The lines come from the ladder recursion over all quanta (tests/band_oracles.py), amplitudes with a
linear moment included; the profile of each from scipy.special.voigt_profile. Wavenumbers are whole
numbers, so that the lines of twelve modes are an exact convolution over integer energies.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import voigt_profile

from band_oracles import broadened, histogram, joined, rotation
from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.axis import Axis
from ladderband.numerics.correlation import coupled_modes
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.usecases.bands import bands
from ladderband.usecases.bands_question import BandsQuestion, LineShape, Species
from ladderband.usecases.limits import Limits

TEMPERATURES = [0.0, 77.0, 300.0, 600.0]
SHAPES = {
    "gaussian": LineShape("gaussian", 60.0),
    "lorentzian": LineShape("lorentzian", 25.0),
    "voigt": LineShape("voigt", 40.0, 15.0),
}


def block(seed: int, n: int, temperature: float, *, mixed: bool, slopes: bool) -> Transition:
    rng = np.random.default_rng(seed)
    g = rng.integers(900, 1700, n).astype(float)
    f = np.round(g * rng.uniform(0.88, 1.12, n))
    shifts = rng.uniform(-0.9, 0.9, n)
    moment = None
    if slopes:
        moment = Moment(np.array([0.1, -0.4, 0.8]), 0.3 * rng.normal(size=(n, 3)))
    return Transition(
        tuple(Mode(float(a), float(b), float(c)) for a, b, c in zip(g, f, shifts, strict=True)),
        temperature_k=temperature,
        mixing=rotation(n, rng, 0.25) if mixed else None,
        moment=moment,
    )


def together(blocks: list[Transition]) -> Transition:
    """One transition of independent blocks; the moment, if any, is that of the first."""
    modes = tuple(mode for part in blocks for mode in part.modes)
    n = len(modes)
    mixing, start = np.zeros((n, n)), 0
    for part in blocks:
        stop = start + len(part.modes)
        mixing[start:stop, start:stop] = part.mixing_matrix
        start = stop
    moment = blocks[0].moment
    if moment is not None:
        slopes = np.zeros((n, 3))
        slopes[: len(blocks[0].modes)] = moment.slopes_debye
        moment = Moment(moment.constant_debye, slopes)
    has_mixing = any(part.mixing is not None for part in blocks)
    return replace(blocks[0], modes=modes, mixing=mixing if has_mixing else None, moment=moment)


def density(transition: Transition, energies, shape: LineShape):
    question = BandsQuestion(
        (Species(transition),), Axis("cm-1", energies), shape, "unit_area", tolerance=1e-9
    )
    answer = bands(question, Limits(work_s=60.0), Deadline.none())
    return answer.bands[0]


def compare(transition, lines, missing, shape_name):
    shape = SHAPES[shape_name]
    energies = np.linspace(-4000.0, 12000.0, 641)
    band = density(transition, energies, shape)
    broadening = shape.at(transition.temperature_k, 1.0)
    expected = broadened(lines, energies, broadening.sigma, broadening.gamma)
    expected = expected / coupled_modes(transition).total
    error = float(np.abs(band.intensity - expected).max())
    # what the list misses, at most at the peak of one line, and scipy's profile (1e-13 relative)
    allowed = band.accuracy.bound + missing * broadening.peak + 1e-12 * expected.max()
    assert band.accuracy.evidence == "proven"
    assert error <= allowed, (error, band.accuracy.bound, missing)
    assert band.accuracy.bound < 1e-7 * expected.max()
    assert missing < 1e-5


@pytest.mark.parametrize("temperature", TEMPERATURES)
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
@pytest.mark.parametrize("mixed", [False, True], ids=["uncoupled", "mixed"])
@pytest.mark.parametrize("shape", SHAPES)
def test_two_modes(temperature, slopes, mixed, shape):
    transition = block(21, 2, temperature, mixed=mixed, slopes=slopes)
    v_max = 0 if temperature == 0.0 else 9
    lines = histogram(transition, v_max, 22)
    total = coupled_modes(transition).total
    compare(transition, lines, abs(1.0 - lines[0].sum() / total), shape)


@pytest.mark.parametrize("temperature", TEMPERATURES)
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
@pytest.mark.parametrize("mixed", [False, True], ids=["uncoupled", "mixed"])
def test_three_modes(temperature, slopes, mixed):
    transition = block(33, 3, temperature, mixed=mixed, slopes=slopes)
    v_max, n_max = {0.0: (0, 16), 77.0: (2, 14), 300.0: (3, 13), 600.0: (5, 12)}[temperature]
    lines = histogram(transition, v_max, n_max)
    total = coupled_modes(transition).total
    compare(transition, lines, abs(1.0 - lines[0].sum() / total), "gaussian")


@pytest.mark.parametrize("temperature", TEMPERATURES)
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
@pytest.mark.parametrize("mixed", [False, True], ids=["uncoupled", "mixed"])
def test_twelve_modes(temperature, slopes, mixed):
    blocks = [
        block(40 + k, 2, temperature, mixed=mixed, slopes=slopes and k == 0) for k in range(6)
    ]
    for part in blocks[1:]:
        assert part.moment is None
    v_max = 0 if temperature == 0.0 else 8
    lines = joined([histogram(part, v_max, 16) for part in blocks])
    transition = together(blocks)
    total = coupled_modes(transition).total
    compare(transition, lines, abs(1.0 - lines[0].sum() / total), "gaussian")


def test_list_itself_is_sound():
    """Sum rule and mean of the enumerated lines, so that an error there cannot hide."""
    transition = block(21, 2, 300.0, mixed=True, slopes=True)
    weights, zero = histogram(transition, 9, 22)
    total = coupled_modes(transition).total
    assert weights.sum() == pytest.approx(total, rel=1e-8)
    from ladderband.numerics.moments import line_moments

    mean = float(weights @ (np.arange(len(weights)) - zero)) / total
    assert mean == pytest.approx(line_moments(transition).mean, rel=1e-6)


@pytest.mark.parametrize("temperature", TEMPERATURES)
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
@pytest.mark.parametrize("n", [2, 3, 4])
def test_band_equals_the_services_own_line_list(n, temperature, slopes):
    """The other route of the service, with its own proven completeness and bound."""
    from ladderband.usecases.lines import LinesQuestion, lines

    transition = block(60 + n, n, temperature, mixed=True, slopes=slopes)
    question = LinesQuestion(transition, tolerance=1e-3, max_lines=1_000_000)
    found = lines(question, Limits(work_s=2.0), Deadline.none()).lines
    shape = SHAPES["gaussian"]
    energies = np.linspace(-4000.0, 12000.0, 641)
    band = density(transition, energies, shape)
    broadening = shape.at(temperature, 1.0)
    profile = voigt_profile(energies[:, None] - found.position_cm1, broadening.sigma, 0.0)
    expected = profile @ found.intensity
    missing = found.completeness.missing_at_most * broadening.peak
    wrong = np.max(found.accuracy.bound) * profile.sum(axis=1).max()
    error = np.abs(band.intensity - expected).max()
    assert error <= band.accuracy.bound + missing + wrong + 1e-12 * expected.max()
