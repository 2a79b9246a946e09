"""The error budget of an adaptive correction: what each cause leaves, and all of them together.

Variances of the phase over the pupil. Fitting, lag and anisoplanatism keep the piston, as their
published laws do: 0.2313 (d/r0)^(5/3) for a square of control, (t/t0)^(5/3) and
(theta/theta0)^(5/3) (Fried 1982; Roddier 1981). Noise, aliasing and the cone are without it, the
cone also without the tilt that a laser never shows. The remainder of all causes at once, whose
displacements add before they are squared, is without piston: it is what an image suffers from.

Radians squared at one wavelength.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from math import inf, pi, sqrt

import numpy as np

from simimg.air.correction import CorrectedAir
from simimg.air.phasespectrum import SPECTRUM
from simimg.air.residual import (
    Turbulence,
    aliased_spectrum,
    beyond_piston,
    noise_spectrum,
    residual_spectrum,
    tilt_share,
)
from simimg.arrays import FloatArray


@dataclass(frozen=True, kw_only=True)
class ErrorBudget:
    """Phase variances (rad2); see the module for what each is.

    Attributes
    ----------
    fitting, lag, noise, aliasing, anisoplanatism, cone, tilt : float
        Each cause alone.
    remainder : float
        All causes together, without piston.
    """

    fitting: float
    lag: float
    noise: float
    aliasing: float
    anisoplanatism: float
    cone: float
    tilt: float
    remainder: float

    @property
    def total(self) -> float:
        """Sum of the causes, each alone."""
        return float(
            sum(getattr(self, one.name) for one in fields(self) if one.name != "remainder")
        )

    def path_nm(self, wavelength: float) -> dict[str, float]:
        """Root mean square optical paths (nm) of the causes and their sum, by name."""
        scale = wavelength * 1e9 / (2.0 * pi)
        names = [one.name for one in fields(self) if one.name != "remainder"]
        return {name: scale * sqrt(getattr(self, name)) for name in (*names, "total")}


def fitting_variance(turbulence: Turbulence, edge: float) -> float:
    """Variance (rad2) beyond the square of control, 0.2313 (d/r0)^(5/3) without an outer scale.

    Parameters
    ----------
    turbulence : Turbulence
    edge : float
        Half side of the square (cycles/m), 1/(2d).
    """
    knots, weights = np.polynomial.legendre.leggauss(40)
    border = edge / np.cos(0.125 * pi * (knots + 1.0))
    low = 0.0 if turbulence.outer_scale == inf else turbulence.outer_scale**-2
    # The integral of (f2 + low)^(-11/6) f df from the border out, over eight like octants.
    outside = 0.6 * (border**2 + low) ** (-5.0 / 6.0)
    whole = 8.0 * 0.125 * pi * float((weights * outside).sum())
    return float(SPECTRUM * turbulence.r0 ** (-5.0 / 3.0) * whole)


def error_budget(air: CorrectedAir) -> ErrorBudget:
    """Work out the budget of a correction.

    Parameters
    ----------
    air : CorrectedAir
    """
    turbulence, loop = air.turbulence, air.bounded
    fx, fy, weight = air.square.nodes()
    f = np.hypot(fx, fy)
    moving, tilt = beyond_piston(f, loop.diameter), tilt_share(f, loop.diameter)
    ideal = replace(
        loop, lag=0.0, noise=0.0, aliasing=False, offset=(0.0, 0.0), laser_height=inf,
        tilt_offset=None,
    )  # fmt: skip

    def left(kept: FloatArray | float, **causes: object) -> float:
        power = residual_spectrum(fx, fy, turbulence, replace(ideal, **causes))  # type: ignore[arg-type]
        return float((power * kept * weight).sum())

    noise = aliasing = by_star = cone = 0.0
    if loop.noise > 0.0:
        noise = float((noise_spectrum(fx, fy, loop) * moving * weight).sum())
    if loop.aliasing:
        power = aliased_spectrum(fx, fy, turbulence, loop.pitch)
        aliasing = float((power * moving * weight).sum())
    if loop.laser_height < inf:
        cone = left(moving - tilt, laser_height=loop.laser_height)
    if loop.tilt_offset is not None:
        by_star = left(tilt, offset=loop.tilt_offset)
    left_inside = residual_spectrum(fx, fy, turbulence, loop) * moving
    # Beyond the square of control there is no piston to speak of.
    fitting = fitting_variance(turbulence, loop.edge)
    return ErrorBudget(
        fitting=fitting,
        lag=left(1.0, lag=loop.lag) if loop.lag else 0.0,
        noise=noise,
        aliasing=aliasing,
        anisoplanatism=left(1.0, offset=loop.offset) if any(loop.offset) else 0.0,
        cone=cone,
        tilt=by_star,
        remainder=fitting + float((left_inside * weight).sum()),
    )
