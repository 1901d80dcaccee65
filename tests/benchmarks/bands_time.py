"""Time of the band's parts against LAPACK and the FFT in the same run; memory of 300 modes.

Run: python tests/benchmarks/bands_time.py
Every figure that matters is a ratio of two times of this run, both on one thread. The correlation
function is timed with its proven bounds, as the service evaluates it.
"""

from __future__ import annotations

import os

os.environ["OMP_NUM_THREADS"] = "1"
os.environ["OPENBLAS_NUM_THREADS"] = "1"

import resource
import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from scipy.linalg import lapack

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.axis import Axis
from ladderband.numerics.correlation import correlation_function, coupled_modes, exact_step
from ladderband.numerics.transition import Mode, Transition
from ladderband.numerics.warm import warm
from ladderband.usecases import bands as module
from ladderband.usecases.bands import bands
from ladderband.usecases.bands_question import BandsQuestion, LineShape, Species
from ladderband.usecases.kept_transitions import KeptTransitions
from ladderband.usecases.limits import Limits

NEVER = Deadline.none()
STEP = exact_step(2.3e-4)


def best(work: Callable[[], object], repeats: int) -> float:
    """Least processor time of several runs, seconds: other programs disturb it less."""
    times = []
    for _ in range(repeats):
        start = time.process_time()
        work()
        times.append(time.process_time() - start)
    return min(times)


def invented(n: int, temperature: float, *, mixed: bool) -> Transition:
    """An invented molecule: n modes, wavenumbers changed by up to 12 %, total S of about 4."""
    rng = np.random.default_rng(7)
    g = rng.uniform(80.0, 1650.0, n)
    f = g * rng.uniform(0.88, 1.12, n)
    shifts = rng.normal(size=n) * np.sqrt(8.0 / n)
    mixing = np.linalg.qr(np.eye(n) + 0.02 * rng.normal(size=(n, n)))[0] if mixed else None
    modes = tuple(Mode(float(a), float(b), float(c)) for a, b, c in zip(g, f, shifts, strict=True))
    return Transition(modes, origin_cm1=20000.0, temperature_k=temperature, mixing=mixing)


def factorisation_seconds(n: int, repeats: int) -> float:
    rng = np.random.default_rng(1)
    matrix = np.asfortranarray(rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n)))

    def work() -> None:
        for _ in range(50):
            lapack.zgetrf(matrix)

    return best(work, repeats) / 50


def mixed_modes(n: int, points: int, temperature: float) -> None:
    modes = coupled_modes(invented(n, temperature, mixed=True))
    before = factorisation_seconds(n, 5)
    seconds = best(lambda: correlation_function(modes, STEP, 0, points, NEVER), 3)
    after = factorisation_seconds(n, 5)
    bare = min(before, after) * points
    bound = float(correlation_function(modes, STEP, 0, 64, NEVER).bound.max())
    print(
        f"{n} modes, full mixing, {temperature:g} K, {points} times: {seconds:.2f} s = "
        f"{seconds / bare:.2f} x as many zgetrf ({1e3 * bare / points:.3f} ms each); "
        f"bound of chi {bound:.1e}"
    )


def uncoupled_modes(n: int, points: int, temperature: float) -> None:
    modes = coupled_modes(invented(n, temperature, mixed=False))
    signal = np.random.default_rng(1).normal(size=points) + 0j
    fft = best(lambda: [np.fft.fft(signal) for _ in range(50)], 9) / 50
    seconds = (
        best(lambda: [correlation_function(modes, STEP, 0, points, NEVER) for _ in range(5)], 9) / 5
    )
    print(
        f"{n} modes, uncoupled, {temperature:g} K, {points} times: {1e3 * seconds:.2f} ms = "
        f"{seconds / fft / (points / 1000):.1f} x one FFT of that length a thousand points "
        f"({1e3 * fft:.3f} ms)"
    )


def reuse(n: int, *, mixed: bool) -> None:
    """A fitting loop: widths go up and down around the first; then other temperatures."""
    transition = invented(n, 300.0, mixed=mixed)
    axis = Axis("cm-1", np.linspace(17000.0, 32000.0, 1501))
    limits = Limits(work_s=1e3)

    def ask(width: float, temperature: float = 300.0) -> float:
        species = Species(replace(transition, temperature_k=temperature))
        question = BandsQuestion((species,), axis, LineShape("gaussian", width))
        start = time.process_time()
        bands(question, limits, NEVER)
        return time.process_time() - start

    module._KEPT = KeptTransitions()
    first = ask(200.0)
    wider = np.median([ask(200.0 + 2.0 * k) for k in range(1, 8)])
    down = [ask(200.0 - 2.0 * k) for k in range(1, 8)]
    again = np.median([ask(200.0 + 3.0 * k) for k in range(-4, 5)])
    other = ask(200.0, 310.0)
    print(
        f"{n} modes, {'mixed' if mixed else 'uncoupled'}: first {1e3 * first:.1f} ms; other width "
        f"{first / wider:.0f} x faster (narrower than ever before: {first / np.median(down):.0f} x, "
        f"then {first / again:.0f} x); another temperature {first / other:.2f} x"
    )


def memory(n: int, points: int) -> None:
    modes = coupled_modes(invented(n, 300.0, mixed=True))
    start = time.process_time()
    correlation_function(modes, STEP, 0, points, NEVER)
    seconds = time.process_time() - start
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20
    print(
        f"{n} modes, full mixing: {1e3 * seconds / points:.1f} ms a time point, peak memory of "
        f"this process {peak:.2f} GiB"
    )


def main() -> None:
    warm()
    uncoupled_modes(100, 4096, 300.0)
    uncoupled_modes(100, 4096, 0.0)
    mixed_modes(100, 4096, 300.0)
    mixed_modes(100, 1024, 0.0)
    mixed_modes(30, 4096, 300.0)
    for n, is_mixed in ((12, False), (12, True), (30, True), (100, False), (100, True)):
        reuse(n, mixed=is_mixed)
    memory(300, 128)


if __name__ == "__main__":
    main()
