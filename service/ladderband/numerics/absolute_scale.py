r"""From the unit-area density D(nu) to what is measured, on absolute scales.

All for an isotropic sample in vacuum (refractive index 1), mu in debye, nu in cm^-1, D in cm:

.. math::
   \sigma = \frac{2\pi^2}{3\epsilon_0 h c}\,\mu^2 \nu D,\qquad
   \varepsilon = \frac{N_A \sigma}{1000 \ln 10},\qquad
   \frac{dA}{d\nu} = \frac{16\pi^3}{3\epsilon_0 h}\,\mu^2 \nu^3 D,\qquad
   \frac{dP}{d\nu} = h c \nu\,\frac{dA}{d\nu},\qquad
   f = \frac{8\pi^2 m_e c}{3 h e^2}\,\mu^2 \langle\nu\rangle .

The area of D over all lines is 1 and mu^2 = <mu^2>, so that integral of dA is the Einstein A
coefficient, A = a mu^2 <nu^3> (Hilborn, Am. J. Phys. 50, 982 (1982), Table I, for one line).
Relative error of every factor: below 1e-9, from the measured constants.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ladderband.numerics.errors import DomainError
from ladderband.numerics.transition import Floats, Process
from ladderband.numerics.units import (
    AVOGADRO_PER_MOL,
    DEBYE_C_M,
    ELECTRON_MASS_KG,
    ELEMENTARY_CHARGE_C,
    PLANCK_J_S,
    SPEED_OF_LIGHT_M_S,
    VACUUM_PERMITTIVITY_F_M,
)

Scale = Literal[
    "relative",
    "unit_area",
    "molar_absorption_coefficient",
    "cross_section",
    "photon_rate",
    "radiated_power",
]

_H, _C = float(PLANCK_J_S), float(SPEED_OF_LIGHT_M_S)
_PER_H_EPSILON = DEBYE_C_M**2 / (3.0 * float(VACUUM_PERMITTIVITY_F_M) * _H)

CROSS_SECTION_CM2 = 2.0 * math.pi**2 * _PER_H_EPSILON / _C * 1e4
"""sigma / (mu^2 nu D), cm^2 per debye^2: 4.16e-19."""

MOLAR_PER_CM2 = float(AVOGADRO_PER_MOL) / (1000.0 * math.log(10.0))
"""L mol^-1 cm^-1 per cm^2: 2.6155e20."""

EINSTEIN_A_S = 16.0 * math.pi**3 * _PER_H_EPSILON * 1e6
"""A / (mu^2 nu^3), s^-1 per debye^2 cm^-3: 3.137e-7."""

PHOTON_ENERGY_J = _H * _C * 100.0
"""Energy of a photon of 1 cm^-1."""

OSCILLATOR_STRENGTH = (
    8.0
    * math.pi**2
    * float(ELECTRON_MASS_KG)
    * _C
    * 100.0
    * DEBYE_C_M**2
    / (3.0 * _H * float(ELEMENTARY_CHARGE_C) ** 2)
)
"""f / (mu^2 <nu>), per debye^2 cm^-1: 4.702e-7."""


@dataclass(frozen=True, slots=True)
class ScaleRule:
    """One scale: the process it belongs to (None: any), powers of nu, factor, whether a density."""

    process: Process | None
    power: int
    factor: float
    per_axis_unit: bool
    unit: str


SCALES: dict[Scale, ScaleRule] = {
    "relative": ScaleRule(None, 0, 1.0, True, "1 (largest value on the axis)"),
    "unit_area": ScaleRule(None, 0, 1.0, True, "1 per {axis}"),
    "cross_section": ScaleRule("absorption", 1, CROSS_SECTION_CM2, False, "cm^2"),
    "molar_absorption_coefficient": ScaleRule(
        "absorption", 1, CROSS_SECTION_CM2 * MOLAR_PER_CM2, False, "L mol^-1 cm^-1"
    ),
    "photon_rate": ScaleRule("emission", 3, EINSTEIN_A_S, True, "photons s^-1 per {axis}"),
    "radiated_power": ScaleRule(
        "emission", 4, EINSTEIN_A_S * PHOTON_ENERGY_J, True, "W per {axis}"
    ),
}


def scale_factors(
    scale: Scale, process: Process, wavenumbers: Floats, jacobian: Floats, moment2: float
) -> Floats:
    """What the density per cm^-1 is multiplied by at each point (relative: before its maximum).

    Raises
    ------
    DomainError
        The scale does not belong to the process, or needs photons of wavenumber above zero.
    """
    rule = SCALES[scale]
    if rule.process is not None and rule.process != process:
        raise DomainError(
            f'The scale "{scale}" belongs to {rule.process}, the request is about {process}. '
            'Any process can be shown as "relative" or "unit_area".',
            "/scale",
        )
    if rule.power and float(wavenumbers.min()) <= 0.0:
        raise DomainError(
            f'The scale "{scale}" needs an axis of wavenumbers above 0 cm^-1 (photons): give the '
            "transition its origin_cm1 and start the axis above zero.",
            "/axis",
        )
    strength = moment2 if rule.power else 1.0
    factors: Floats = rule.factor * strength * wavenumbers**rule.power
    return factors * jacobian if rule.per_axis_unit else np.asarray(factors)


@dataclass(frozen=True, slots=True)
class Strength:
    """Numbers of the whole transition; None where they do not belong to the process."""

    moment2_debye2: float
    oscillator_strength: float | None = None
    einstein_a_s: float | None = None
    radiative_lifetime_s: float | None = None


def strength(process: Process, moment2: float, mean: float, mean_cube: float) -> Strength:
    """Oscillator strength (absorption) or Einstein A and radiative lifetime (emission).

    ``mean`` and ``mean_cube`` are <nu> and <nu^3> of the line positions.
    """
    if process == "absorption" and mean > 0.0:
        return Strength(moment2, oscillator_strength=OSCILLATOR_STRENGTH * moment2 * mean)
    if process == "emission" and mean_cube > 0.0:
        rate = EINSTEIN_A_S * moment2 * mean_cube
        return Strength(moment2, einstein_a_s=rate, radiative_lifetime_s=1.0 / rate)
    return Strength(moment2)
