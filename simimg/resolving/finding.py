"""Pairs found in a frame that nobody pointed out.

Of the stars that are found, those that show a second star within two delivered FWHM, so good that
no single star of the whole frame is likely to look that double, are pairs; stars in company are
fitted together; what point sources do not explain, a galaxy say, is left out.

Electrons and detector pixels.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from math import hypot
from typing import Any, cast

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from simimg.resolving.crew import crew_map
from simimg.resolving.crowd import REACH, look_among
from simimg.resolving.fieldsingles import SingleStar, single_at, without_fragments
from simimg.resolving.neighbours import CLEAR, PlacedStar
from simimg.resolving.observation import Observation
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.sighting import Sighting
from simimg.resolving.starlist import LIGHT, find_stars
from simimg.resolving.suspect import pair_at

_BATCH = 40  # groups that a process takes at a time
_COMPANY = 7  # neighbours fitted with a star


@dataclass(frozen=True, eq=False)
class FieldSearch:
    """What was found in a frame.

    Attributes
    ----------
    pairs : tuple of Sighting
        By decreasing brightness of their first star.
    singles : tuple of SingleStar
        All other stars, by decreasing brightness.
    """

    pairs: tuple[Sighting, ...]
    singles: tuple[SingleStar, ...]


def find_pairs(
    observation: Observation, *, besides: Sequence[tuple[float, float]] = ()
) -> list[Sighting]:
    """Find the pairs of a frame.

    Parameters
    ----------
    observation : Observation
    besides : sequence of (x, y), optional
        Places already measured, left out.

    Returns
    -------
    list of Sighting
        By decreasing brightness of their first star.
    """
    return list(search_field(observation, besides=besides, singles=False).pairs)


def search_field(
    observation: Observation,
    *,
    besides: Sequence[tuple[float, float]] = (),
    singles: bool = True,
    workers: int = 1,
    psf_at: Callable[[tuple[float, float]], PsfModel] | None = None,
) -> FieldSearch:
    """Find the pairs of a frame, and fit what is single.

    Parameters
    ----------
    observation : Observation
    besides : sequence of (x, y), optional
        Places already measured, left out.
    singles : bool, optional
        Whether single stars are fitted, too.
    workers : int, optional
        Processes at most; the result does not depend on it.
    psf_at : callable, optional
        The PSF at a place, where that of the observation does not hold everywhere.
    """
    stars = find_stars(observation, workers=workers)
    if not stars:
        return FieldSearch((), ())
    fwhm, count = observation.fwhm, len(stars)
    tree = cKDTree(np.array([star[:2] for star in stars]))
    taken = [
        bool(besides) and min(hypot(s.x - x, s.y - y) for x, y in besides) < CLEAR * fwhm
        for s in stars
    ]
    groups = _groups(tree, CLEAR * fwhm, count)
    tasks = []
    for group in groups:
        around = sorted(
            {j for i in group for j in tree.query_ball_point(stars[i][:2], (LIGHT + 4.0) * fwhm)}
        )
        own = [around.index(i) for i in group]
        psf = None if psf_at is None else psf_at(stars[group[0]][:2])
        tasks.append(
            _Group([stars[i] for i in around], own, [taken[i] for i in group], count, singles, psf)
        )
    size = max(1, min(_BATCH, len(tasks) // 8))
    batches = [tasks[i : i + size] for i in range(0, len(tasks), size)]
    pairs: list[tuple[int, Sighting]] = []
    alone: list[tuple[int, SingleStar]] = []
    answers = crew_map(_search_groups, observation, batches, workers=workers, stars=count)
    found = (one for answer in answers for one in answer)
    for group, task, (seen, single) in zip(groups, tasks, found):
        psf = task.psf or observation.psf
        pairs += [(group[i], _psf_of(sighting, psf)) for i, sighting in seen]
        alone += [(group[i], star) for i, star in single]
    return FieldSearch(
        tuple(sighting for _, sighting in sorted(pairs, key=lambda one: one[0])),
        tuple(without_fragments([star for _, star in sorted(alone, key=lambda one: one[0])], fwhm)),
    )


def _groups(tree: Any, reach: float, count: int) -> list[list[int]]:
    """Stars linked by distances within reach, each group in order, by their first."""
    links = tree.query_pairs(reach, output_type="ndarray")
    ones = np.ones(len(links))
    matrix = coo_matrix((ones, (links[:, 0], links[:, 1])), shape=(count, count))
    _, names = connected_components(matrix, directed=False)
    groups: dict[int, list[int]] = {}
    for index, name in enumerate(names):
        groups.setdefault(int(name), []).append(index)
    return list(groups.values())


@dataclass(frozen=True, eq=False)
class _Group:
    """Stars close together, with all whose light reaches them."""

    stars: list[PlacedStar]
    own: list[int]
    taken: list[bool]
    count: int
    singles: bool
    psf: PsfModel | None


_Found = tuple[list[tuple[int, Sighting]], list[tuple[int, SingleStar]]]


def _search_groups(observation: Observation, groups: Sequence[_Group]) -> list[_Found]:
    return [_Search(observation, group).found() for group in groups]


class _Search:
    """A group as it becomes known: its stars, those hidden at first, and the pairs they make."""

    def __init__(self, observation: Observation, group: _Group) -> None:
        self.observation = observation
        if group.psf is not None:
            self.observation = replace(observation, psf=group.psf)
        self.group = group
        self.stars = list(group.stars)
        self.own = list(group.own)
        self.given = {i for i, taken in zip(group.own, group.taken) if taken}
        self.paired: set[int] = set()
        self.pairs: list[tuple[int, Sighting]] = []

    def found(self) -> _Found:
        """Pairs and singles, by the number of their first star in the group."""
        for number, index in enumerate(self.group.own):
            if index not in self.given:
                self._look(number, index)
        alone = []
        for number, index in enumerate(self.group.own if self.group.singles else []):
            if index in self.given or index in self.paired:
                continue
            others = [star for i, star in enumerate(self.stars) if i != index]
            single = single_at(self.observation, self.stars[index], others)
            if single is not None:
                alone.append((number, single))
        return self.pairs, alone

    def _look(self, number: int, index: int) -> None:
        """The pairs in which a star is the brighter."""
        close = self._near(index, CLEAR)
        fainter = [i for i in close if i not in self.paired and self._leader(i) == index]
        if index in self.paired and not fainter:
            return
        if not close or (len(fainter) == 1 and len(self._near(index, REACH)) == 1):
            sighting = self._alone(index, close)
            if sighting is not None and self._settle(index, close, sighting):
                self.pairs.append((number, _psf_of(sighting, None)))
                return
        if close:
            self._among(number, index, fainter)

    def _near(self, index: int, reach: float) -> list[int]:
        """Stars within some FWHM of one, the nearest first."""
        away = {i: self._apart(i, index) for i in self.own if i != index}
        most = reach * self.observation.fwhm
        near = [i for i, far in away.items() if far <= most and i not in self.given]
        return sorted(near, key=lambda i: (away[i], i))[:_COMPANY]

    def _apart(self, one: int, other: int) -> float:
        a, b = self.stars[one], self.stars[other]
        return hypot(a.x - b.x, a.y - b.y)

    def _leader(self, index: int) -> int | None:
        """The nearest brighter star within two FWHM, with which a star makes a pair."""
        light = self.stars[index].electrons
        brighter = [i for i in self._near(index, CLEAR) if self.stars[i].electrons >= light]
        return brighter[0] if brighter else None

    def _alone(self, index: int, close: Sequence[int]) -> Sighting | None:
        """A pair of this star and at most one that was seen beside it."""
        known = [star for i, star in enumerate(self.stars) if i != index and i not in close]
        return pair_at(
            self.observation,
            self.stars[index],
            close=len(close),
            known=known,
            count=self.group.count,
        )

    def _settle(self, index: int, close: Sequence[int], sighting: Sighting) -> bool:
        """Put a pair's stars in place of what was seen, unless it leaves out the one beside it."""
        assert sighting.double is not None
        first, second = sighting.stars
        if close:
            seen = self.stars[close[0]]
            if hypot(second.x - seen.x, second.y - seen.y) > hypot(
                first.x - seen.x, first.y - seen.y
            ):
                first, second = second, first
            if hypot(second.x - seen.x, second.y - seen.y) > 0.5 * self.observation.fwhm:
                return False
            self.stars[close[0]] = second
            self.paired.add(close[0])
        else:
            self._add(second)
        self.stars[index] = first
        self.paired.add(index)
        return True

    def _add(self, star: PlacedStar) -> int:
        """A star that was hidden: known from now on, and part of a pair."""
        self.stars.append(star)
        self.own.append(len(self.stars) - 1)
        self.paired.add(len(self.stars) - 1)
        return len(self.stars) - 1

    def _among(self, number: int, index: int, fainter: Sequence[int]) -> None:
        """The pairs of a star in company, all fitted together."""
        near = self._near(index, REACH)
        inside = {index, *near}
        crowd = look_among(
            self.observation,
            self.stars[index],
            [self.stars[i] for i in near],
            wanted=[near.index(i) for i in fainter],
            known=[star for i, star in enumerate(self.stars) if i not in inside],
            count=self.group.count,
        )
        if crowd is None or not crowd.pairs:
            return
        for place, star in zip((index, *near), crowd.stars):
            self.stars[place] = star
        for member, sighting in crowd.pairs:
            if member > len(near):
                self._add(crowd.stars[member])
            else:
                self.paired.add(near[member - 1])
            self.pairs.append((number, _psf_of(sighting, None)))
        self.paired.add(index)


def _psf_of(sighting: Sighting, psf: PsfModel | None) -> Sighting:
    """The sighting with another PSF in its cutouts: none on its way between processes."""
    cutouts = tuple(replace(one, psf=cast(PsfModel, psf)) for one in sighting.cutouts)
    return replace(sighting, cutouts=cutouts)
