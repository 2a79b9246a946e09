"""A piece of a frame as a fit takes it: electrons, pixels that count, noise, PSF.

Electrons and detector pixels; places are counted from 0 at the centre of the frame's first pixel.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.resolving.layout import FIRST, View
from simimg.resolving.psfmodel import PsfModel


@dataclass(frozen=True, eq=False)
class Cutout:
    """A piece of a frame, in electrons, with all that its likelihood needs.

    Attributes
    ----------
    electrons : ndarray, shape (rows, columns)
        Electrons above the bias; 0 where `used` is 0.
    used : ndarray, shape (rows, columns)
        1 for pixels that count, 0 for saturated, bad and missing ones.
    variance : float
        Variance of the Gaussian part: read noise squared and the rounding, electrons squared.
    x0, y0 : float
        Place of the first pixel's centre in the frame.
    psf : PsfModel
        The effective PSF here.
    known : ndarray, shape (rows, columns)
        Expected electrons of whatever is not fitted (other stars); zeros for an isolated object.
    tilted : bool
        Whether the background is a plane; one level otherwise.
    view : View
        How this frame sees the stars; `x0` and `y0` count in its own pixels.
    """

    electrons: FloatArray
    used: FloatArray
    variance: float
    x0: float
    y0: float
    psf: PsfModel
    known: FloatArray
    tilted: bool = False
    view: View = FIRST

    @classmethod
    def of(
        cls,
        electrons: AnyArray,
        *,
        variance: float,
        psf: PsfModel,
        x0: float = 0.0,
        y0: float = 0.0,
        used: AnyArray | None = None,
        known: FloatArray | None = None,
        tilted: bool = False,
        view: View = FIRST,
    ) -> Cutout:
        """Make a cutout; pixels that are not finite are left out.

        Raises
        ------
        ValueError
            When shapes differ or the variance is negative or not finite.
        """
        values = np.array(electrons, dtype=np.float64)
        finite = np.isfinite(values)
        if used is not None:
            finite &= np.asarray(used, dtype=bool)
        values[~finite] = 0.0
        other = np.zeros(values.shape) if known is None else np.asarray(known, dtype=np.float64)
        if values.ndim != 2 or other.shape != values.shape:
            raise ValueError(f"cutout arrays differ in shape: {values.shape}, {other.shape}")
        if not (np.isfinite(variance) and variance >= 0):
            raise ValueError(f"variance must be finite and not negative, got {variance}")
        return cls(
            electrons=frozen(values),
            used=frozen(finite.astype(np.float64)),
            variance=float(variance),
            x0=float(x0),
            y0=float(y0),
            psf=psf,
            known=frozen(other),
            tilted=tilted,
            view=view,
        )

    def with_known(self, known: FloatArray) -> Cutout:
        """The same cutout with other expected electrons of what is not fitted."""
        return replace(self, known=frozen(np.asarray(known, dtype=np.float64)))
