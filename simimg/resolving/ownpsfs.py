"""A frame as each of its pairs is seen: with the PSF of its own place and of its own two colours.

Only where the PSF comes from the frame's scene and that scene's stars do not all share one. A pair
of the scene has the mean of its stars' PSFs, weighted by light; any other place that of the scene's
first object there, or near there: places are rounded to a sixteenth of the frame. Detector pixels.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from math import hypot

from simimg.assembly.objects import inventory
from simimg.imaging.basis import Transfer
from simimg.resolving.judging import NamedPair
from simimg.resolving.observation import Observation
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.psfsource import transfer_psf
from simimg.resolving.starpsfs import StarPsfs, displacement_note

Place = tuple[float, float]
_CELLS = 16
_SEARCHED = 8  # cells along a side for a search of the whole frame


class OwnPsfs:
    """The observation of a frame, for each of its pairs and places.

    Parameters
    ----------
    observation : Observation
    """

    def __init__(self, observation: Observation) -> None:
        self._base = observation
        self._psfs: StarPsfs | None = None
        self._made: dict[Transfer, Observation] = {}
        scene, train = observation.scene, observation.train
        if scene is None or train is None or observation.sourced.source != "scene":
            return
        psfs = StarPsfs(inventory(scene.model_copy(update={"catalogue": ()}), train=train))
        if not psfs.shared or len(train.basis.members) > 1:
            self._psfs = psfs

    def pair(self, named: NamedPair) -> Observation:
        """As a pair of TRUTH is seen."""
        row = self._row(named)
        if self._psfs is None or row is None:
            return self.place(named.first)
        psf = self._psfs.pair(row, int(self._psfs.found.partner[row]))
        return self._seen(psf.mean, named)

    def place(self, place: Place, *, exact: bool = False, cells: int = _CELLS) -> Observation:
        """As a star at a place is seen.

        Parameters
        ----------
        place : (x, y)
        exact : bool, optional
            Whether the very place counts, not the middle of its cell.
        cells : int, optional
            Along a side of the frame.
        """
        train = self._base.train
        if self._psfs is None or train is None:
            return self._base
        rows, columns = self._base.frame.counts.shape
        x, y = place
        if not exact:
            x, y = (
                0.5 * (size - 1) + size / cells * round((at - 0.5 * (size - 1)) * cells / size)
                for at, size in zip(place, (columns, rows), strict=True)
            )
        return self._seen(train.star(train.first, x, y), None)

    @property
    def psf_at(self) -> Callable[[Place], PsfModel] | None:
        """The PSF of a star near a place, where it is not the same everywhere."""
        if self._psfs is None:
            return None
        return lambda place: self.place(place, cells=_SEARCHED).psf

    def of(self, psf: PsfModel) -> Observation:
        """The observation of which a PSF is."""
        return next((one for one in self._made.values() if one.psf is psf), self._base)

    def notes(self, named: list[NamedPair]) -> tuple[str, ...]:
        """What should be known beside what was measured."""
        if self._psfs is None:
            return ()
        lines, found = [], self._psfs.found
        for one in named:
            row = self._row(one)
            if row is None:
                continue
            psf = self._psfs.pair(row, int(found.partner[row]))
            across, along = (step / self._psfs.pixel_scale for step in psf.displacement)
            if hypot(across, along) > 1e-3:
                lines.append(displacement_note(one.label, across, along, found))
        return tuple(lines)

    def _row(self, named: NamedPair) -> int | None:
        """Row of the inventory in which a pair's first star stands."""
        if self._psfs is None:
            return None
        found = self._psfs.found
        rows = [
            row
            for row, partner in enumerate(found.partner[: found.written])
            if partner > row and str(found.label[row]) == named.label
        ]
        away = [hypot(found.x[r] - named.first[0], found.y[r] - named.first[1]) for r in rows]
        return rows[away.index(min(away))] if rows else None

    def _seen(self, transfer: Transfer, named: NamedPair | None) -> Observation:
        if transfer not in self._made:
            base, apart = self._base, 0.0
            if named is not None:
                step = (b - a for a, b in zip(named.first, named.second, strict=True))
                apart = hypot(*step)
            own = transfer_psf(transfer, base.sky.pixel_scale, apart)
            self._made[transfer] = replace(
                base, psf=own.model, delivered=own.delivered, sourced=own
            )
        return self._made[transfer]
