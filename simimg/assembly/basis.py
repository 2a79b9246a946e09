"""Which source of a scene has which PSF: by spectrum, by place in the field, by being followed.

The members of the basis are the PSFs of a few spectra at a few places, once as they are and, where
the telescope follows an object, once drawn out with the stars. A source's weights are the product
of its shares in each.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.aperture import Aperture
from simimg.assembly.colours import KELVIN, Palette, colour_keys
from simimg.assembly.correction import Corrector
from simimg.assembly.fieldplaces import field_places, field_unit
from simimg.assembly.motion import drawn_out, followed_trail
from simimg.assembly.places import field_geometry
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.sources import Points
from simimg.light.colours import ColourMembers
from simimg.scene.model import Scene

FOLLOWED = 1_000_000
"""Added to the kind of a source that the telescope follows."""

Delivered = Callable[[FloatArray, tuple[float, float] | None], Transfer]
StarTransfer = Callable[[int, float, float], Transfer]
"""PSF, with the pixel, of a kind of source at a place of the detector (pixels)."""


def scene_basis(
    scene: Scene,
    palette: Palette,
    aperture: Aperture,
    wavelengths: FloatArray,
    delivered: Delivered,
    *,
    corrector: Corrector | None = None,
) -> tuple[PsfBasis, Transfer, StarTransfer]:
    """The basis of a scene, the PSF of its first object in the middle of the field, and any star's.

    Parameters
    ----------
    scene : Scene
    palette : Palette
    aperture : Aperture
    wavelengths : ndarray
        Nodes of the band (m).
    delivered : callable
        PSF of weights of the nodes at a place of the field, without pixel.
    corrector : Corrector, optional
        The corrected air.

    Returns
    -------
    basis : PsfBasis
        With the pixel, where the scene has one.
    focal : Transfer
        Without.
    star : callable
        The PSF of one kind of source at one place, worked out there and not mixed from members.
    """
    first = first_kind(scene, palette)
    own = [palette.weights(spectrum, wavelengths) for spectrum in palette.spectra]
    shared = palette.members(wavelengths) if _catalogue_colours(scene) else None
    weights = [*own, *(shared.weights if shared is not None else ())]
    places, mix_places = field_places(scene, aperture, corrector)
    focal = delivered(own[first], None)
    trail = followed_trail(scene)
    followed = trail != (0.0, 0.0)
    used = _used(scene, palette, shared)
    members: list[Transfer] = []
    for place in places:
        for colour in used:
            if place is None and colour == first:
                one = focal
            else:
                one = delivered(np.asarray(weights[colour]), place)
            members.append(drawn_out(one, trail))
            if followed:
                members.append(one)
    scale = scene.pixel_scale
    if scale is not None:
        members = [member.with_pixel(scale) for member in members]
    star = _star(scene, palette, aperture, wavelengths, delivered)
    focal = drawn_out(focal, trail)
    if len(members) == 1:
        return PsfBasis((members[0],)), focal, one_for_all(members[0])

    def weigh(points: Points) -> FloatArray:
        kind = points.kind % FOLLOWED
        shares = _colour_shares(kind, used, len(own), shared)
        where = mix_places(points)
        together = where[:, :, None] * shares[:, None, :]
        if followed:
            still = (points.kind >= FOLLOWED).astype(np.float64)
            pair = np.stack([1.0 - still, still], axis=1)
            together = together[:, :, :, None] * pair[:, None, None, :]
        return np.asarray(together.reshape(len(points), -1))

    return PsfBasis(tuple(members), weigh), focal, star


def one_for_all(transfer: Transfer) -> StarTransfer:
    """The PSF of every kind at every place, where there is but one."""

    def star(kind: int, x: float, y: float) -> Transfer:  # noqa: ARG001
        return transfer

    return star


def _star(
    scene: Scene,
    palette: Palette,
    aperture: Aperture,
    wavelengths: FloatArray,
    delivered: Delivered,
) -> StarTransfer:
    """The PSF of one kind of source at one place; each is worked out once."""
    trail, scale, geometry = followed_trail(scene), scene.pixel_scale, field_geometry(scene)
    unit = field_unit(scene, aperture)
    kept: dict[tuple[int, tuple[float, float] | None], Transfer] = {}

    def star(kind: int, x: float, y: float) -> Transfer:
        place = None
        if unit is not None:
            place = (x - geometry.centre[0]) / unit, (y - geometry.centre[1]) / unit
        key = kind, place
        if key not in kept:
            weights = palette.weights(palette.spectrum(kind % FOLLOWED), wavelengths)
            made = delivered(weights, place)
            if kind < FOLLOWED:
                made = drawn_out(made, trail)
            kept[key] = made if scale is None else made.with_pixel(scale)
        return kept[key]

    return star


def first_kind(scene: Scene, palette: Palette) -> int:
    """Kind of the first pair's first star, or else of the first object."""
    for one in (*scene.pair, *scene.objects):
        return palette.kinds[colour_keys(one)[0]]
    return 0


def _catalogue_colours(scene: Scene) -> bool:
    """True where a catalogue may bring temperatures, told from its columns or its first bytes."""
    return any(
        "temperature" in one.columns
        or (not one.columns and b"temperature" in scene.inputs[one.file].read()[:65536].lower())
        for one in scene.catalogue
    )


def _used(scene: Scene, palette: Palette, shared: ColourMembers | None) -> list[int]:
    """Members among the colours: the kinds that objects have, then the shared references."""
    kinds = {palette.kinds[key] for one in scene.objects for key in colour_keys(one)}
    if scene.catalogue or not kinds:
        kinds.add(0)
    count = len(palette.spectra)
    references = range(count, count + (len(shared.weights) if shared is not None else 0))
    return [*sorted(kinds), *references]


def _colour_shares(
    kind: AnyArray, used: list[int], count: int, shared: ColourMembers | None
) -> FloatArray:
    shares = np.zeros((kind.size, len(used)))
    for column, colour in enumerate(used):
        if colour < count:
            shares[:, column] = kind == colour
    stars = kind >= KELVIN
    if shared is not None and stars.any():
        first = sum(colour < count for colour in used)
        shares[stars, first:] = shared.mixture(kind[stars].astype(np.float64))
    return shares
