"""Aberrations that grow away from the field's centre, and the few pupils that stand for them all.

To third order (Born & Wolf, ch. 5) coma grows linearly with the distance from the axis, along the
line to it; field curvature and astigmatism grow with its square. A wavefront over the pupil at the
field place (x, y) is then

    W = on axis + coma (x Z8 + y Z7) + curvature (x^2 + y^2) Z4
        + astigmatism ((x^2 - y^2) Z6 + 2 x y Z5),

with Noll's terms Z. The image at any place is a mixture of images computed at a few nodes of the
field: polynomials through the nodes in each direction. Where the errors take a quarter off the peak
at the field's corner (0.07 wavelengths of coma and 0.05 of curvature), 3 nodes a side are within
0.5 % of the peak and 5 within 0.05 %; at half of that, 3 are within 0.2 %. Field places are in
units of the distance at which the coefficients are given (1 at the corner, say); wavefronts in
metres of path.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray

MOST_NODES = 9
"""Most nodes a side of the field."""


@dataclass(frozen=True)
class FieldAberration:
    """How much of each aberration there is at unit distance from the field's centre.

    Attributes
    ----------
    coma : float
        Root mean square (m), along the line to the centre; positive throws the tail outwards.
    curvature : float
        Root mean square of the defocus (m).
    astigmatism : float
        Root mean square (m), its axis along the line to the centre.
    """

    coma: float = 0.0
    curvature: float = 0.0
    astigmatism: float = 0.0

    def __post_init__(self) -> None:
        for name in ("coma", "curvature", "astigmatism"):
            if not np.isfinite(getattr(self, name)):
                raise ValueError(f"{name} must be finite, got {getattr(self, name)}")

    def terms(self, x: float, y: float) -> dict[int, float]:
        """Noll's index -> root mean square (m) at a place of the field.

        Parameters
        ----------
        x, y : float
            From the field's centre along the detector's +x and +y, in units of the distance at
            which the coefficients hold.
        """
        return {
            4: self.curvature * (x * x + y * y),
            5: self.astigmatism * 2.0 * x * y,
            6: self.astigmatism * (x * x - y * y),
            7: self.coma * y,
            8: self.coma * x,
        }

    def rms(self, x: ArrayLike, y: ArrayLike) -> FloatArray:
        """Root mean square of all together (m) at places of the field."""
        square = np.asarray(x, dtype=np.float64) ** 2 + np.asarray(y, dtype=np.float64) ** 2
        quadratic = self.curvature**2 + self.astigmatism**2
        return np.asarray(np.sqrt(self.coma**2 * square + quadratic * square**2))


@dataclass(frozen=True)
class FieldNodes:
    """A lattice of places in the field whose images are mixed; made by `field_nodes`.

    Attributes
    ----------
    half_x, half_y : float
        Half sides of the field, in its unit.
    count : int
        Nodes a side.
    """

    half_x: float
    half_y: float
    count: int

    @property
    def places(self) -> list[tuple[float, float]]:
        """Every node ``(x, y)``, y the slower."""
        axis = _chebyshev(self.count)
        return [(self.half_x * x, self.half_y * y) for y in axis for x in axis]

    def weights(self, x: ArrayLike, y: ArrayLike) -> FloatArray:
        """Weights of the nodes for places of the field.

        Parameters
        ----------
        x, y : (n,) array_like
            Within the field; places outside are taken to its edge.

        Returns
        -------
        (n, count^2) ndarray of float64
            Possibly negative, rows of sum 1, in the order of `places`.
        """
        axis = _chebyshev(self.count)
        across, along = (
            _polynomials(np.clip(np.asarray(place, dtype=np.float64) / half, -1.0, 1.0), axis)
            for place, half in ((x, self.half_x), (y, self.half_y))
        )
        mixed = along[:, :, np.newaxis] * across[:, np.newaxis, :]
        return np.asarray(mixed.reshape(len(mixed), self.count**2))


def field_nodes(half_x: float, half_y: float, *, count: int = 3) -> FieldNodes:
    """A lattice of places that spans a rectangular field.

    Parameters
    ----------
    half_x, half_y : float
        Half sides of the field from its centre, above 0, in its unit.
    count : int
        Nodes a side, 1 to `MOST_NODES`: the images between follow polynomials of degree
        ``count - 1`` in each direction.

    Raises
    ------
    ValueError
        If a value is out of range.
    """
    for half in (half_x, half_y):
        if not (np.isfinite(half) and half > 0.0):
            raise ValueError(f"half a field's side must be finite and above 0, got {half}")
    if not 1 <= count <= MOST_NODES:
        raise ValueError(f"a field needs 1 to {MOST_NODES} nodes a side, got {count}")
    return FieldNodes(half_x, half_y, count)


def _chebyshev(count: int) -> FloatArray:
    """Chebyshev's points from -1 to 1: the polynomial through them misses least."""
    return np.asarray(-np.cos(np.pi * (np.arange(count) + 0.5) / count))


def _polynomials(place: FloatArray, nodes: FloatArray) -> FloatArray:
    """Values of the polynomials that are 1 at one node and 0 at the others, (n, count)."""
    values = np.ones((place.size, nodes.size))
    for i, node in enumerate(nodes):
        for j, other in enumerate(nodes):
            if i != j:
                values[:, i] *= (place - other) / (node - other)
    return values
