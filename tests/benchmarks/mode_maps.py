"""Time and memory of a mode map against the number of atoms.

    python tests/benchmarks/mode_maps.py

Prints one row a size: seconds of the use case, the same as a multiple of one dense symmetric
eigenproblem of order 3N measured in the same run, the cost model's estimate, and the process's
peak memory so far.
"""

from __future__ import annotations

import resource
import sys
import time
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from ladderband.numerics.accuracy import Deadline
from ladderband.usecases.limits import Limits
from ladderband.usecases.mode_maps import ModeMapsQuestion, estimate_seconds, mode_maps
from ladderband.usecases.molecular_states import HessianInput, StateInput
from spring_molecules import random_molecule, spring_hessian


def best_of(runs, function):
    """Shortest of several runs, in seconds."""
    times = []
    for _ in range(runs):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return min(times)


def question(n_atoms, apart_angstrom, order):
    rng = np.random.default_rng(n_atoms)
    molecule = random_molecule(rng, n_atoms)
    hessian = spring_hessian(molecule, rng)
    shake = apart_angstrom * rng.normal(size=molecule.geometry_angstrom.shape)
    other = replace(molecule, geometry_angstrom=molecule.geometry_angstrom + shake)
    states = StateInput(molecule, HessianInput(hessian)), StateInput(other, HessianInput(hessian))
    return ModeMapsQuestion(*states, atom_order=order)


def row(n_atoms, apart_angstrom, order):
    asked = question(n_atoms, apart_angstrom, order)
    seconds = best_of(3, lambda: mode_maps(asked, Limits(), Deadline.none()))
    hessian = asked.initial.source.hessian
    eigen = best_of(3, lambda: np.linalg.eigh(hessian))
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(
        f"{n_atoms:5d}  {apart_angstrom:5.2f}  {order:6s}  {seconds:8.4f}  {seconds / eigen:7.1f}  "
        f"{estimate_seconds(asked):8.4f}  {peak:7.0f}"
    )


if __name__ == "__main__":
    print("atoms  apart  order   seconds   / eigh  estimate  peak MB")
    for n_atoms in (3, 13, 30, 60, 100, 130):
        row(n_atoms, 0.02, "check")
    row(100, 0.15, "match")  # far enough apart for the search of another order
