"""Images of one instant: the pupil with the air's phase over it, and the stars seen through it.

The stars are spread once. Each instant then costs one transform of the pupil's wave for every
wavelength (its squared modulus is the PSF), one real transform of the sum, a product and one real
transform back. Wavelengths share one lattice of the pupil and one pitch of the sky: the transform
of a longer wave is longer by as much, and its wavelength is rounded to a whole even length. A PSF
is seen as far out as its transform reaches, where the little light that goes farther folds back.
Angles in radians, lengths in metres, phases in radians; frequencies in cycles per radian.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil

import numpy as np
import scipy.fft

from simimg.arrays import AnyArray, FloatArray
from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.grid import GridPlan, Tile
from simimg.imaging.kernel import kernel_transform
from simimg.imaging.render import fold_spectrum, spread_sources
from simimg.imaging.sources import PlacedShape, Points, Sources

FINEST_SUBDIVISION = 64
# The gridding kernel needs twice the room; the stars' spectrum is made there once and cropped.
_ROOM = 2
_FAINT = 1.0e-6
_CLOSE = 1.15


@dataclass(frozen=True)
class InstantPlan:
    """Grids of the pupil and of the sky for instants.

    Attributes
    ----------
    subdivision : int
        Cells along a pixel's side.
    pitch : float
        Side of a cell (rad): at most half of wavelength over diameter.
    step : float
        Distance of the pupil's samples (m).
    samples : int
        Of the pupil's square, even.
    sides : tuple of int
        Length of the transform of each wavelength.
    wavelengths : tuple of float
        As rounded (m).
    length_x, length_y : int
        Periodic lengths of the image in pixels.
    """

    subdivision: int
    pitch: float
    step: float
    samples: int
    sides: tuple[int, ...]
    wavelengths: tuple[float, ...]
    length_x: int
    length_y: int


def plan_instants(
    sources: Sources,
    *,
    columns: int,
    rows: int,
    pixel_scale: float,
    wavelengths: Sequence[float],
    diameter: float,
    finest: float,
    memory_bytes: int,
) -> InstantPlan:
    """Plan the grids.

    Parameters
    ----------
    sources : Sources
    columns, rows : int
        Size of the image.
    pixel_scale : float
        Side of a pixel (rad).
    wavelengths : sequence of float
        That stand for the band (m).
    diameter : float
        Greatest distance of two open points of the pupil (m).
    finest : float
        Largest distance of the pupil's samples (m) that the phase allows.
    memory_bytes : int
        Most memory that an image may take.

    Raises
    ------
    InputError
        Pixels too coarse for the instants' detail, or more memory than allowed.
    """
    count = ceil(pixel_scale * 2.0 * diameter / min(wavelengths) - 1e-4)
    if count > FINEST_SUBDIVISION:
        raise InputError(
            f"the pixel is {count} times as wide as the finest detail of an instant (lambda/2D), "
            f"and at most {FINEST_SUBDIVISION} times can be computed; use a smaller pixel"
        )
    pitch = pixel_scale / count
    reference = wavelengths[len(wavelengths) // 2]
    side = _fast_even(reference / (finest * pitch))
    whole = columns * count
    if len(wavelengths) == 1 and columns == rows and side < whole <= _CLOSE * side:
        # A transform as long as the image needs no laying out.
        side = whole if _fast_even(whole) == whole else side
    step = reference / (side * pitch)
    sides = tuple(2 * round(one / (2.0 * step * pitch)) for one in wavelengths)
    samples = 2 * ceil(diameter / (2.0 * step) - 1e-9)
    # The outermost two pixels of a halo may fold back: they are folded light themselves.
    half = ceil(max(sides) / (2.0 * count)) - 2
    left, right, bottom, top = _extent(sources, columns, rows, half, pixel_scale)
    smallest = ceil(max(sides) / count)
    length_x = max(columns, columns + half - left, right + half, smallest)
    length_y = max(rows, rows + half - bottom, top + half, smallest)
    length_x, length_y = _fast_even(length_x), _fast_even(length_y)
    need = 40 * length_x * length_y * count**2 * _ROOM**2
    if need > memory_bytes:
        raise InputError(
            f"an instant needs {need} bytes of memory and only {memory_bytes} are allowed; allow "
            "more memory or use fewer pixels"
        )
    return InstantPlan(
        count,
        pitch,
        step,
        samples,
        sides,
        tuple(one * step * pitch for one in sides),
        length_x,
        length_y,
    )


def _fast_even(length: float) -> int:
    return 2 * int(scipy.fft.next_fast_len(ceil(length / 2.0 - 1e-9), real=True))


def _extent(
    sources: Sources, columns: int, rows: int, half: int, pixel_scale: float
) -> tuple[int, int, int, int]:
    """First and last pixel that holds a source whose halo reaches the frame, along x and y."""
    kept = reaching(sources, columns, rows, half)
    x, y = [*kept.points.x], [*kept.points.y]
    x_far, y_far = list(x), list(y)
    for one in kept.shapes:
        radius = one.shape.radius / pixel_scale
        x.append(one.x - radius)
        y.append(one.y - radius)
        x_far.append(one.x + radius)
        y_far.append(one.y + radius)
    if not x:
        return 0, columns, 0, rows
    return int(min(x)), ceil(max(x_far)) + 1, int(min(y)), ceil(max(y_far)) + 1


def reaching(sources: Sources, columns: int, rows: int, half: int) -> Sources:
    """The sources whose halo, so many pixels wide on each side, reaches the frame."""

    def near(x: FloatArray | float, y: FloatArray | float) -> AnyArray:
        across = (np.asarray(x) > -half) & (np.asarray(x) < columns - 1 + half)
        return np.asarray(across & (np.asarray(y) > -half) & (np.asarray(y) < rows - 1 + half))

    points = sources.points
    shapes = tuple(one for one in sources.shapes if near(one.x, one.y))
    return Sources(points.chosen(near(points.x, points.y)), shapes)


class Instants:
    """The stars of a field, to be seen through one wavefront after another.

    Parameters
    ----------
    plan : InstantPlan
    sources : Sources
    columns, rows : int
        Size of the image.
    pupils : sequence of complex ndarray, shape (samples, samples)
        The telescope's own wave at each wavelength of the plan.
    area : float
        Collecting area of the pupil (m2).
    wavelength : float
        At which the air's phase is given (m).
    shares : mapping of int to ndarray
        Share of each wavelength in the light of each kind of source.
    blur : Transfer
        All that is the same at each instant: pixel, spread of charge, tremble within a frame.
    """

    def __init__(
        self,
        plan: InstantPlan,
        sources: Sources,
        *,
        columns: int,
        rows: int,
        pupils: Sequence[AnyArray],
        area: float,
        wavelength: float,
        shares: dict[int, FloatArray],
        blur: Transfer,
    ) -> None:
        self.plan = plan
        self._shape = rows, columns
        self._grid = plan.length_y * plan.subdivision, plan.length_x * plan.subdivision
        self._ratios = [np.float32(wavelength / one) for one in plan.wavelengths]
        # Of unit light in all; what edges throw beyond the transform's reach is lost.
        scale = plan.step / np.sqrt(area)
        self._pupils = [
            (pupil * (scale / side)).astype(np.complex64)
            for pupil, side in zip(pupils, plan.sides, strict=True)
        ]
        kept = reaching(sources, columns, rows, ceil(max(plan.sides) / (2.0 * plan.subdivision)))
        factor = self._static(blur)
        self._shares: list[FloatArray] = []
        self._stars: list[AnyArray] = []
        for share, some in _grouped(kept, shares):
            self._shares.append(share.astype(np.float32))
            stars = self._spectrum(some) * factor
            self._stars.append(stars.astype(np.complex64))

    def _static(self, blur: Transfer) -> AnyArray:
        n_y, n_x = self._grid
        u = np.arange(n_x // 2 + 1) / (n_x * self.plan.pitch)
        v = np.fft.fftfreq(n_y, self.plan.pitch)
        return np.asarray(blur(u[None, :], v[:, None]))

    def _spectrum(self, sources: Sources) -> AnyArray:
        """Transform of the sources on the cells, the kernel divided out."""
        plan = self.plan
        fine = plan.subdivision * _ROOM
        rows, columns = self._shape
        tile = Tile(0, 0, columns, rows, (0, 0, 0, 0), plan.length_x, plan.length_y)
        spread = GridPlan(fine, (tile,), _level(sources), 0, 0)
        one = PsfBasis((Transfer(1.0),))
        scale = plan.pitch * plan.subdivision
        grid = spread_sources(
            tile, spread, one, sources, sources.points, np.ones(len(sources.points)), 0, scale
        )
        n_y, n_x = self._grid
        whole = scipy.fft.rfft2(grid.astype(np.float64))
        k_x, k_y = np.arange(n_x // 2 + 1), np.rint(np.fft.fftfreq(n_y, 1.0 / n_y)).astype(int)
        kept = whole[k_y % (n_y * _ROOM)][:, k_x]
        kept /= kernel_transform(k_x / (n_x * _ROOM))[None, :]
        kept /= kernel_transform(k_y / (n_y * _ROOM))[:, None]
        return np.asarray(kept)

    def psfs(self, phases: Sequence[AnyArray]) -> list[FloatArray]:
        """The PSF of each wavelength, averaged over some instants.

        Parameters
        ----------
        phases : sequence of ndarray, shape (samples, samples)
            Of the air (rad at the wavelength given), one for each instant.

        Returns
        -------
        list of float32 ndarray
            Of the plan's sides, the star at the first cell; of sum 1 less what is lost.
        """
        made: list[FloatArray] = []
        for pupil, ratio, side in zip(self._pupils, self._ratios, self.plan.sides, strict=True):
            total: AnyArray = np.zeros(0)
            for phase in phases:
                turn = np.asarray(phase if ratio == 1.0 else ratio * phase, dtype=np.float32)
                wave = np.zeros((pupil.shape[0], side), dtype=np.complex64)
                part = wave[:, : pupil.shape[1]]
                np.cos(turn, out=part.real)
                np.sin(turn, out=part.imag)
                part *= pupil
                # Rows without a pupil are empty: they need no transform of their own.
                half = scipy.fft.fft(wave, axis=1, overwrite_x=True)
                far = scipy.fft.fft(half, side, axis=0, overwrite_x=True)
                power = np.square(far.real)
                power += np.square(far.imag)
                total = total + power if total.size else power
            if len(phases) > 1:
                total /= np.float32(len(phases))
            made.append(total)
        return made

    def image(self, phases: Sequence[AnyArray]) -> FloatArray:
        """Expected electrons in each pixel, averaged over some instants; ``[y, x]``, float32."""
        psfs = self.psfs(phases)
        total: AnyArray = np.zeros(0)
        for share, stars in zip(self._shares, self._stars, strict=True):
            part = scipy.fft.rfft2(self._laid(psfs, share), overwrite_x=True)
            part *= stars
            total = total + part if total.size else part
        rows, columns = self._shape
        if not total.size:
            return np.zeros(self._shape, dtype=np.float32)
        plan = self.plan
        if plan.subdivision > 1:
            tile = Tile(0, 0, columns, rows, (0, 0, 0, 0), plan.length_x, plan.length_y)
            total = fold_spectrum(total, tile, GridPlan(plan.subdivision, (tile,), 0.0, 0, 0))
        image = scipy.fft.irfft2(total, s=(plan.length_y, plan.length_x), overwrite_x=True)
        return np.asarray(np.maximum(image[:rows, :columns], np.float32(0.0)))

    def _laid(self, psfs: list[FloatArray], share: FloatArray) -> FloatArray:
        """The PSFs of all wavelengths added on the image's cells, each with its share."""
        n_y, n_x = self._grid
        if len(psfs) == 1 and psfs[0].shape == self._grid:
            return psfs[0] if share[0] == 1.0 else np.asarray(psfs[0] * share[0])
        grid = np.zeros(self._grid, dtype=np.float32)
        for psf, part in zip(psfs, share, strict=True):
            half = psf.shape[0] // 2
            for y, from_y in (
                (slice(0, half), slice(0, half)),
                (slice(n_y - half, n_y), slice(half, None)),
            ):
                for x, from_x in (
                    (slice(0, half), slice(0, half)),
                    (slice(n_x - half, n_x), slice(half, None)),
                ):
                    grid[y, x] += part * psf[from_y, from_x]
        return grid


def _level(sources: Sources) -> float:
    """Electrons a pixel below which a shape's light is left out."""
    return max(_FAINT * min([one.electrons for one in sources.shapes], default=1.0), 1e-30)


def _grouped(sources: Sources, shares: dict[int, FloatArray]) -> list[tuple[FloatArray, Sources]]:
    """Sources of one kind together, each group with its shares of the wavelengths."""
    groups = []
    for kind, share in shares.items():
        points: Points = sources.points.chosen(sources.points.kind == kind)
        shapes: tuple[PlacedShape, ...] = tuple(s for s in sources.shapes if s.kind == kind)
        if len(points) or shapes:
            groups.append((share, Sources(points, shapes)))
    return groups


def pupil_samples(wave: AnyArray, pitch: float, *, samples: int, step: float) -> AnyArray:
    """A wave on the pupil's lattice as means over the squares of a coarser one.

    Parameters
    ----------
    wave : (n, n) ndarray
        Real or complex.
    pitch : float
        Side of its squares (m).
    samples : int
        Squares of the result along a side.
    step : float
        Their side (m); both lattices have one middle.

    Returns
    -------
    (samples, samples) ndarray
    """
    old = (np.arange(wave.shape[0] + 1) - wave.shape[0] / 2.0) * pitch
    new = (np.arange(samples + 1) - samples / 2.0) * step
    low = np.maximum(new[:-1, None], old[None, :-1])
    high = np.minimum(new[1:, None], old[None, 1:])
    part = np.maximum(high - low, 0.0) / step
    # Sums in a fixed order (no BLAS), so that threads change no bit.
    return np.asarray(np.einsum("ai,bi->ba", part, np.einsum("bj,ji->bi", part, wave)))
