"""Physical constants and unit conversions, in one place.

Inside the core hbar = 1 and energies, angular frequencies and wavenumbers share one unit, cm^-1;
a time then has the unit cm (multiply by ``TIME_FS_CM`` for femtoseconds). Constants are CODATA
2022 (Mohr, Newell, Taylor and Tiesinga, Rev. Mod. Phys. 97, 025002 (2025)); those marked exact are
fixed by the SI of 2019.
"""

from __future__ import annotations

import math
from fractions import Fraction

PLANCK_J_S = Fraction("6.62607015e-34")  # exact
SPEED_OF_LIGHT_M_S = Fraction(299792458)  # exact
BOLTZMANN_J_K = Fraction("1.380649e-23")  # exact
ELEMENTARY_CHARGE_C = Fraction("1.602176634e-19")  # exact
AVOGADRO_PER_MOL = Fraction("6.02214076e23")  # exact
ATOMIC_MASS_KG = Fraction("1.66053906892e-27")  # relative uncertainty 3.1e-10
ELECTRON_MASS_KG = Fraction("9.1093837139e-31")  # relative uncertainty 3.1e-10
BOHR_ANGSTROM = Fraction("0.529177210544")  # relative uncertainty 1.6e-10
HARTREE_J = Fraction("4.3597447222060e-18")  # relative uncertainty 1.1e-12
VACUUM_PERMITTIVITY_F_M = Fraction("8.8541878188e-12")  # relative uncertainty 1.6e-10

BOLTZMANN_CM1_K = float(BOLTZMANN_J_K / (PLANCK_J_S * SPEED_OF_LIGHT_M_S * 100))
"""k/(hc) = 0.695034800... cm^-1 per kelvin."""

EV_CM1 = float(ELEMENTARY_CHARGE_C / (PLANCK_J_S * SPEED_OF_LIGHT_M_S * 100))
"""1 eV = 8065.543937... cm^-1."""

HARTREE_CM1 = float(HARTREE_J / (PLANCK_J_S * SPEED_OF_LIGHT_M_S * 100))
"""1 hartree = 219474.6313... cm^-1."""

THZ_CM1 = float(Fraction(10) ** 12 / (SPEED_OF_LIGHT_M_S * 100))
"""1 THz = 33.35640951... cm^-1."""

NM_CM1 = 1.0e7
"""A vacuum wavelength of x nm has the wavenumber NM_CM1 / x in cm^-1 (exact)."""

TIME_FS_CM = float(Fraction(10) ** 15 / (SPEED_OF_LIGHT_M_S * 100)) / (2 * math.pi)
"""The core's unit of time, 1/(2 pi c 1 cm^-1) = 5308.837... fs."""

DEBYE_C_M = float(Fraction(10) ** -21 / SPEED_OF_LIGHT_M_S)
"""1 debye = 1e-21/c C m = 3.33564...e-30 C m (common practice: 1e-18 statcoulomb cm)."""

SHIFT_DISPLACEMENT2_PER_PI2 = (
    4 * SPEED_OF_LIGHT_M_S * 100 * ATOMIC_MASS_KG * Fraction(10) ** -20 / PLANCK_J_S
)
"""Squared displacement of a shift of 1 angstrom sqrt(u) in a mode of 1 cm^-1, divided by pi^2.

Delta^2 = K^2 omega / hbar with omega = 2 pi c nu and hbar = h / (2 pi), hence
Delta^2 = pi^2 * (4 c u angstrom^2 / h) * nu * K^2. Kept rational so that a route of any precision
can multiply by its own pi^2.
"""


def displacement_from_shift(shift_angstrom_sqrt_u: float, wavenumber_cm1: float) -> float:
    """Return Delta = K sqrt(omega / hbar), dimensionless, with the sign of the shift K.

    The relative error is that of the atomic mass constant (1.6e-10 after the root).
    """
    factor = math.pi**2 * float(SHIFT_DISPLACEMENT2_PER_PI2)
    return shift_angstrom_sqrt_u * math.sqrt(factor * wavenumber_cm1)


def boltzmann_exponent(wavenumber_cm1: float, temperature_k: float) -> float:
    """Return h c nu / (k T), dimensionless; infinity at T = 0 for nu > 0."""
    if temperature_k <= 0.0:
        return math.inf
    return wavenumber_cm1 / (BOLTZMANN_CM1_K * temperature_k)
