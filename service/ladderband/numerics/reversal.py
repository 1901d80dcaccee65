"""The same pair of electronic states, seen in the other direction."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ladderband.numerics.errors import DomainError
from ladderband.numerics.transition import Mode, Moment, Transition


def reversed_transition(transition: Transition) -> Transition:
    """Exchange initial and final state: absorption becomes emission and the other way round.

    Q' = J Q + K gives Q = J^T Q' - J^T K, so mode k of the reverse pairs its old final oscillator k
    with its old initial one, J -> J^T and K -> -J^T K. The moment, linear in Q, is written in Q':
    mu(Q) = mu_0 - s^T J^T K + (J s)^T Q'. The 0-0 line stays where it is.

    Raises
    ------
    DomainError
        A photoelectron band has no reverse.
    """
    if transition.process == "photoelectron":
        raise DomainError("A photoelectron band has no reverse process.", "/both_directions")
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    mixing = transition.mixing_matrix
    back = -mixing.T @ (transition.displacements / np.sqrt(f))
    modes = tuple(
        Mode(float(f[k]), float(g[k]), float(back[k] * np.sqrt(g[k])), mode.label)
        for k, mode in enumerate(transition.modes)
    )
    moment = None
    if transition.moment is not None:
        slopes = transition.moment.slopes_debye * np.sqrt(g)[:, None]
        moment = Moment(
            transition.moment.constant_debye + back @ slopes,
            (mixing @ slopes) / np.sqrt(f)[:, None],
        )
    return replace(
        transition,
        modes=modes,
        process="emission" if transition.process == "absorption" else "absorption",
        mixing=None if transition.mixing is None else np.ascontiguousarray(mixing.T),
        moment=moment,
    )
