"""Which effective PSF each star and each pair of a scene has: by colour, place and motion.

Stars of one colour in a field without errors of its own share one PSF. Where they do not, a pair's
two stars have a PSF each; what takes one PSF for both (limits, the fit of a frame) has their mean,
weighted by light, each about the centre of its own light. Radians and detector pixels.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import atan2, degrees, hypot, inf

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.correction import ALIKE
from simimg.assembly.motion import drawn_out
from simimg.assembly.objects import Inventory
from simimg.imaging.basis import Transfer
from simimg.imaging.mixture import Part, mixture
from simimg.imaging.profile import centroid
from simimg.optics.motion import arc_count, arc_transfer

_MANY = 32  # objects that each have the PSF of their exact place; more share places
_CELLS = 8  # to the side of the field, for those
_TELLING = 1e-3  # pixels of displacement from which it is said
_SAME = 1e-4  # pixels by which the centres of two PSFs may lie apart and be one


@dataclass(frozen=True, eq=False)
class PairPsf:
    """The PSFs of a pair.

    Attributes
    ----------
    first, second : Transfer
        Of its stars, about their places above the air.
    mean : Transfer
        Both, weighted by light, about the mean centre of their light.
    displacement : (float, float)
        By which the second star's image is moved more than the first's (x, y; rad).
    """

    first: Transfer
    second: Transfer
    mean: Transfer
    displacement: tuple[float, float] = (0.0, 0.0)

    @property
    def alike(self) -> bool:
        """Whether one PSF serves both stars exactly."""
        return self.first is self.second


class StarPsfs:
    """The effective PSFs of a scene's stars.

    Parameters
    ----------
    found : Inventory
        Of the scene.
    """

    def __init__(self, found: Inventory) -> None:
        self.found = found
        still = found.turn == 0.0 and not found.trails.any()
        self.shared = len(found.train.basis.members) == 1 and still
        """Whether all stars and pairs written in the scene have one and the same PSF."""
        self.coarse = found.written > _MANY
        """Whether neighbouring objects share the PSF of one place."""
        self._stars: dict[int, Transfer] = {}
        self._pairs: dict[tuple[int, int], PairPsf] = {}

    def star(self, row: int) -> Transfer:
        """The PSF of one row of the inventory, pixel included."""
        if row not in self._stars:
            self._stars[row] = self._star(row)
        return self._stars[row]

    def pair(self, first: int, second: int) -> PairPsf:
        """The PSFs of the pair in two rows of the inventory."""
        key = first, second
        if key not in self._pairs:
            light = np.maximum(self.found.electrons[[first, second]], 0.0)
            self._pairs[key] = pair_psf(
                self.star(first), self._partner(first, second), light, self.pixel_scale
            )
        return self._pairs[key]

    @property
    def pixel_scale(self) -> float:
        """Side of a pixel (rad)."""
        return self.found.geometry.pixel_scale

    def _partner(self, first: int, second: int) -> Transfer:
        """The second star's PSF: the first's where it is near and of one colour and motion."""
        found = self.found
        alike = found.colour[first] == found.colour[second] and found.turn == 0.0
        if alike and (found.trails[first] == found.trails[second]).all():
            step = hypot(found.x[second] - found.x[first], found.y[second] - found.y[first])
            if step < min(0.01 * min(found.geometry.columns, found.geometry.rows), self._near):
                return self.star(first)
        return self.star(second)

    @property
    def _near(self) -> float:
        """Pixels within which stars behind a correction have one PSF."""
        corrector = self.found.train.corrector
        if corrector is None or not corrector.varies:
            return inf
        return ALIKE * corrector.isoplanatic_angle / self.pixel_scale

    def _star(self, row: int) -> Transfer:
        found, scale = self.found, self.pixel_scale
        place = float(found.x[row]), float(found.y[row])
        x, y = self._rounded(*place) if self.coarse else place
        transfer = found.train.star(int(found.colour[row]), x, y)
        if row < found.written:
            dx, dy = found.trails[row]
            transfer = drawn_out(transfer, (float(dx), float(dy)))
        if found.turn == 0.0:
            return transfer
        centre, turn = found.geometry.centre, found.turn
        at = (x - centre[0]) * scale, (y - centre[1]) * scale

        length = abs(turn) * hypot(*at)
        if length < 1e-3 * scale:
            return transfer
        try:
            arc_count(length, 1.5 * transfer.band_limit)
        except ValueError:
            # A trail of thousands of points: its bend is lost beside its length.
            return drawn_out(transfer, (-turn * at[1], turn * at[0]))

        def arc(u: FloatArray, v: FloatArray) -> AnyArray:
            return arc_transfer(u, v, x=at[0], y=at[1], angle=turn)

        wings = replace(transfer.wings, core=transfer.wings.core + length)
        return replace(transfer, planar=(*transfer.planar, arc), even=False, wings=wings)

    def _rounded(self, x: float, y: float) -> tuple[float, float]:
        geometry = self.found.geometry
        steps = geometry.columns / _CELLS, geometry.rows / _CELLS
        return (
            geometry.centre[0] + steps[0] * round((x - geometry.centre[0]) / steps[0]),
            geometry.centre[1] + steps[1] * round((y - geometry.centre[1]) / steps[1]),
        )


def pair_psf(first: Transfer, second: Transfer, light: FloatArray, pixel_scale: float) -> PairPsf:
    """Put the PSFs of two stars together.

    Parameters
    ----------
    first, second : Transfer
        Of one pixel, or none.
    light : ndarray, shape (2,)
        Electrons of each.
    pixel_scale : float
        Side of a pixel (rad).
    """
    if first is second or not light.min() > 0.0:
        return PairPsf(first, second, first)
    share = light / light.sum()
    centres = np.array([centroid(first), centroid(second)])
    apart = centres[1] - centres[0]
    if hypot(*apart) < _SAME * pixel_scale:
        apart = np.zeros(2)
    middle = share[1] * apart
    parts = [
        Part(replace(one, box=0.0), float(part), *(float(v) for v in shift))
        for one, part, shift in zip((first, second), share, (middle, middle - apart), strict=True)
    ]
    mean = mixture(parts)
    if first.box:
        mean = mean.with_pixel(first.box)
    return PairPsf(first, second, mean, (float(apart[0]), float(apart[1])))


def psf_notes(psfs: StarPsfs, *, catalogue: bool) -> list[str]:
    """What should be known beside the limits of pairs whose PSFs differ.

    Parameters
    ----------
    psfs : StarPsfs
    catalogue : bool
        Whether stars of catalogues are listed.
    """
    if psfs.shared:
        return []
    found = psfs.found
    notes, unlike = [], []
    for row, partner in enumerate(found.partner[: found.written]):
        if partner <= row:
            continue
        psf = psfs.pair(row, int(partner))
        label = str(found.label[row])
        if not psf.alike:
            unlike.append(label)
        if psf.displacement != (0.0, 0.0):
            across, along = (step / psfs.pixel_scale for step in psf.displacement)
            if hypot(across, along) > _TELLING:
                notes.append(displacement_note(label, across, along, found))
    if unlike:
        notes.append(
            f"{', '.join(unlike[:5])}{' and others' if len(unlike) > 5 else ''}: the PSFs of the "
            "two stars differ; the delivered limits are those of their mean, weighted by light, "
            "bounds and signal to noise are each star's own."
        )
    if psfs.coarse and len(found.train.basis.members) > 1:
        notes.append(
            f"Of more than {_MANY} objects those in one sixty-fourth of the field share the PSF of "
            "its middle."
        )
    if catalogue:
        notes.append(
            "The stars of catalogues are listed as seen through the PSF of the scene's first "
            "object in the middle of the field."
        )
    return notes


def displacement_note(label: str, across: float, along: float, found: Inventory) -> str:
    """Tell how far the air moves a pair's second star against its first (pixels along x and y)."""
    geometry = found.geometry
    ends = geometry.to_offsets(
        geometry.centre[0] + np.array([0.0, across]), geometry.centre[1] + np.array([0.0, along])
    )
    east, north = (float(end[1] - end[0]) for end in ends)
    arcsec = degrees(hypot(east, north)) * 3600.0
    return (
        f"{label}: the PSFs of its stars have different centres (by colour in the air's "
        "refraction, or by place in the field), which moves the image of the second by "
        f"{arcsec:.2g} arcsec towards position angle {degrees(atan2(east, north)) % 360.0:.0f} deg "
        "against the first; a fit with one PSF for both finds them so displaced."
    )
