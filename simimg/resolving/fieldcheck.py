"""What was found with the PSF of a neighbourhood, looked at again with that of its own place.

Where the PSF changes over the field, a search takes one PSF for each cell of a coarse grid. What
that PSF leaves in a bright star can pass for a second one; a pair is kept only where the PSF of the
very place needs it, too, and is a single star otherwise. Electrons and detector pixels.
"""

from __future__ import annotations

from simimg.resolving.fieldsingles import SingleStar, single_at
from simimg.resolving.finding import FieldSearch
from simimg.resolving.neighbours import PlacedStar
from simimg.resolving.ownpsfs import OwnPsfs
from simimg.resolving.sighting import Sighting, look
from simimg.resolving.suspect import is_certain


def confirmed(own: OwnPsfs, field: FieldSearch) -> FieldSearch:
    """Keep the pairs that the PSF of their own place confirms; the others are single.

    Parameters
    ----------
    own : OwnPsfs
    field : FieldSearch
        Found with ``own.psf_at``; comes back as it is where there is one PSF for all.
    """
    if own.psf_at is None:
        return field
    pairs: list[Sighting] = []
    singles: list[SingleStar] = list(field.singles)
    stars = len(field.pairs) + len(field.singles)
    for sighting in field.pairs:
        brighter = max(sighting.stars, key=lambda star: star.electrons)
        observation = own.place(brighter[:2], exact=True)
        again = look(observation, brighter[:2], known=sighting.neighbours)
        if is_certain(again, count=stars, fwhm=observation.fwhm):
            pairs.append(again)
            continue
        star = PlacedStar(*brighter[:2], sum(one.electrons for one in sighting.stars))
        single = single_at(observation, star, sighting.neighbours)
        if single is not None:
            singles.append(single)
    singles.sort(key=lambda one: -float(one.point.electrons[0]))
    return FieldSearch(tuple(pairs), tuple(singles))
