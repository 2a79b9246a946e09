"""Steps down a likelihood by Fisher scoring with Levenberg-Marquardt damping.

The expected information takes the place of the Hessian; every direction is measured in its own
standard error, so that pixels and electrons weigh alike.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simimg.arrays import FloatArray


@dataclass(frozen=True, eq=False)
class Expansion:
    """The likelihood at one set of parameters, to second order.

    Attributes
    ----------
    deviance : float
    slope : ndarray, shape (p,)
        Half the gradient of the deviance.
    information : ndarray, shape (p, p)
        Fisher information (half the expected Hessian of the deviance).
    """

    deviance: float
    slope: FloatArray
    information: FloatArray


def covariance_of(information: FloatArray) -> FloatArray:
    """Invert a Fisher information; infinite variances where it is singular.

    Parameters
    ----------
    information : ndarray, shape (p, p)
    """
    scale = np.sqrt(np.diag(information))
    result = np.full(information.shape, np.inf)
    if not (np.isfinite(scale).all() and (scale > 0).all()):
        return result
    unit = information / np.outer(scale, scale)
    values, vectors = np.linalg.eigh(unit)
    if values[0] < 1e-13 * values[-1]:
        return result
    inverse: FloatArray = (vectors / values) @ vectors.T / np.outer(scale, scale)
    return inverse


def damped_step(expansion: Expansion, damping: float) -> tuple[FloatArray, float]:
    """Return a Levenberg-Marquardt step and the fall of the deviance that it promises."""
    diagonal = np.diag(expansion.information)
    floor = 1e-14 * float(diagonal.max(initial=0.0)) + 1e-300
    scale = 1.0 / np.sqrt(np.maximum(diagonal, floor))
    unit = expansion.information * np.outer(scale, scale)
    unit[np.diag_indices_from(unit)] += damping + 1e-13
    step = -scale * np.linalg.solve(unit, scale * expansion.slope)
    promised = -(2.0 * expansion.slope @ step + step @ expansion.information @ step)
    return step, float(promised)


def next_damping(damping: float, fall: float, promised: float) -> float:
    """Return the damping after a step that lowered the deviance by ``fall``, not ``promised``."""
    if fall < 0.0:
        return max(8.0 * damping, 1e-3)
    if fall > 0.7 * promised:
        return max(damping / 10.0, 1e-9)
    return damping if fall > 0.2 * promised else max(3.0 * damping, 1e-3)
