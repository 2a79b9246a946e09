"""What a verdict means and what would change it, in a sentence or two.

What would resolve a pair (a sharper air, a larger aperture, a smaller pixel) is found by assembling
the scene anew with that one thing changed, vanes left out for speed, and seeking the value at which
Sparrow's limit for the pair's own magnitude difference comes down to its separation less the margin
that certainty asks.
"""

from __future__ import annotations

from collections.abc import Callable
from math import ceil, degrees, isfinite, nan

from scipy.optimize import brentq

from simimg.assembly.train import Train, assemble_train
from simimg.errors import InputError
from simimg.resolving.criteria import sparrow
from simimg.resolving.judging import Judgement
from simimg.resolving.notes import measured_notes
from simimg.resolving.observation import Observation
from simimg.resolving.records import PairMeasurement
from simimg.resolving.resolution import BRIGHTEST_DIFFERENCE, Directions
from simimg.resolving.verdict import SURELY_DOUBLE
from simimg.scene.file import replace
from simimg.scene.model import Scene

_MARGIN = 1.645  # standard errors beyond a limit that make a pair resolved
_NEEDED = 17.0  # fall of the deviance that rules a single star out
_MOST_EXPOSURES = 1000
_ARCSEC = 180.0 / 3.141592653589793 * 3600.0


def advise(observation: Observation, judgement: Judgement, *, brief: bool = False) -> str:
    """Say what the answer means and what would change it.

    Parameters
    ----------
    observation : Observation
    judgement : Judgement
    brief : bool, optional
        Leave out what takes time: which seeing, aperture or pixel would resolve the pair.
    """
    said = _meaning(observation, judgement, brief)
    if judgement.sighting.empty or judgement.geometry is None:
        return said
    fwhm = observation.fwhm * observation.arcsec
    return " ".join([said, *measured_notes(judgement.record, fwhm_arcsec=fwhm)])


def _meaning(observation: Observation, judgement: Judgement, brief: bool) -> str:
    """What the answer means and what would change it."""
    record = judgement.record
    if judgement.sighting.empty:
        return "No star stands out of the noise here."
    if judgement.geometry is None:
        return "One star explains the light; no second one improves the fit."
    if not record.probability_single < SURELY_DOUBLE:
        return _perhaps_single(judgement)
    verdicts = record.rayleigh.verdict, record.sparrow.verdict
    if verdicts == ("resolved", "resolved"):
        return "Two stars, resolved under both criteria."
    if verdicts[1] == "resolved":
        return (
            "Two stars, resolved by Sparrow: a saddle shows between them, though not as deep as "
            "Rayleigh asks."
        )
    opening = (
        "Two stars are certain here, and farther apart than Rayleigh's limit, which is that of an "
        "equal pair; but by Sparrow the fainter does not show as a peak of its own"
        if verdicts[0] == "resolved"
        else "Two stars are certain here but not resolved"
        if verdicts[1] == "unresolved"
        else "Two stars are certain here, and it is open whether they are resolved"
    )
    scene, train = observation.scene, observation.train
    if brief or scene is None or train is None:
        return opening + "."
    opening += ": "
    return opening + _what_would(scene, train, observation.arcsec, record, judgement.geometry.angle)


def _perhaps_single(judgement: Judgement) -> str:
    """A second star that chance may have made."""
    chance, gain = judgement.record.probability_single, judgement.sighting.gain
    said = f"{chance:.2g}" if chance >= 0.001 else f"{chance:.1g}"
    text = f"A single star would look this double with a chance of {said}"
    exposures = ceil(_NEEDED / gain) if gain > 0.0 else _MOST_EXPOSURES
    if chance > 0.3 or exposures < 2:
        return text + "; nothing speaks for a second one."
    return text + f"; if the second is real, about {exposures} such exposures together show it."


def _what_would(
    scene: Scene, train: Train, pixel: float, record: PairMeasurement, angle: float
) -> str:
    """What sets Sparrow's limit for a pair, and what would bring it below the separation."""
    separation, error = record.separation_arcsec, record.separation_error_arcsec
    limit, difference = record.sparrow.limit_arcsec, record.magnitude_difference
    if not (isfinite(limit) and isfinite(error)) or abs(difference) > BRIGHTEST_DIFFERENCE:
        return "the fainter star is lost in the light of the brighter."
    if separation > limit and error > 0.0:
        exposures = ceil((_MARGIN * error / (separation - limit)) ** 2)
        if exposures <= _MOST_EXPOSURES:
            return f"the noise leaves it open. About {max(2, exposures)} such exposures settle it."
    # Half a percent at least, so that what is advised does resolve it.
    wanted = separation - max(_MARGIN * error, 0.005 * separation)
    if wanted <= 0.0:
        return "the separation is too uncertain to say what would resolve them."
    change = _Change(scene, angle, difference, limit)
    if scene.air is not None and train.seeing is not None:
        return _in_air(train, pixel, change, wanted)
    return _above_air(train, pixel, change, wanted, "")


def _in_air(train: Train, pixel: float, change: _Change, wanted: float) -> str:
    """The air's share, or what remains without it."""
    seeing = degrees(train.seeing or nan) * 3600.0

    def with_seeing(value: float) -> dict[str, str | None]:
        return {"air.image_quality": None, "air.seeing": f"{value:.6g} arcsec"}

    best = change.solve(with_seeing, seeing, 0.03 * seeing, wanted)
    if best is not None:
        return f'the air sets the limit. Resolved by Sparrow in {_two_digits(best)}" seeing.'
    without = change.under({"air": None})
    if without <= wanted:
        return "the air sets the limit. Resolved by Sparrow above the atmosphere."
    opening = f'even without air the limit would be {without:.2g}"; '
    return _above_air(train, pixel, change, wanted, opening)


def _above_air(train: Train, pixel: float, change: _Change, wanted: float, opening: str) -> str:
    """The aperture's or the pixel's share, without air."""
    change = change.without_air()
    diameter = train.pupil.diameter
    if change.under({"camera.pixel_size": None, "camera.pixel_scale": '0.0001 "'}) <= wanted:

        def with_pixel(value: float) -> dict[str, str | None]:
            return {"camera.pixel_size": None, "camera.pixel_scale": f"{value:.6g} arcsec"}

        best = change.solve(with_pixel, pixel, 0.05 * pixel, wanted)
        if best is not None:
            return (
                f"{opening}the pixel sets the limit. Resolved by Sparrow with pixels of "
                f'{_two_digits(best)}".'
            )

    def with_aperture(value: float) -> dict[str, str | None]:
        return {"telescope.aperture": f"{value:.6g} m"}

    best = change.solve(with_aperture, diameter, 30.0 * diameter, wanted)
    if best is None:
        return f"{opening}no change of aperture or air alone resolves them."
    where = " above the air" if opening else ""
    return (
        f"{opening}the aperture sets the limit. Resolved by Sparrow with one of "
        f"{_two_digits(best, up=True)} m{where}."
    )


class _Change:
    """Sparrow's limit of a pair under changes of its scene."""

    def __init__(self, scene: Scene, angle: float, difference: float, limit: float) -> None:
        self._angle, self._difference = angle, difference
        self._bare = _without_objects(scene)
        self._scale = 1.0
        here = self.under({})
        # What the vanes do to the limit stays as it is.
        self._scale = limit / here if here > 0.0 else 1.0

    def under(self, changes: dict[str, str | None]) -> float:
        """The limit, arcseconds, with some keys changed; infinite where the scene cannot be."""
        try:
            train = assemble_train(replace(self._bare, changes))
            profile = Directions(train.effective).profile(self._angle, self._difference)
        except (InputError, ValueError):
            return float("inf")
        return self._scale * float(sparrow(profile, self._difference)) * _ARCSEC

    def without_air(self) -> _Change:
        """The same above the air."""
        if self._bare.air is None:
            return self
        other = object.__new__(_Change)
        other._angle, other._difference = self._angle, self._difference
        other._bare, other._scale = replace(self._bare, {"air": None}), self._scale
        return other

    def solve(
        self,
        change: Callable[[float], dict[str, str | None]],
        now: float,
        best: float,
        wanted: float,
    ) -> float | None:
        """The value between ``now`` and ``best`` that brings the limit down to what is wanted."""

        def excess(value: float) -> float:
            return self.under(change(value)) - wanted

        if not excess(best) <= 0.0:
            return None
        if not excess(now) > 0.0:
            return now
        return float(brentq(excess, best, now, rtol=2e-3, xtol=1e-9 * abs(now)))


def _without_objects(scene: Scene) -> Scene:
    """The scene's set-up alone, vanes left out where the pupil is no map."""
    document = scene.document
    kinds = ("star", "pair", "galaxy", "disc", "ring", "picture", "catalogue", "header", "exposure")
    changes: dict[str, str | None] = {kind: None for kind in kinds if kind in document}
    if "vanes" in document.get("telescope", {}):
        changes["telescope.vanes"] = None
    return replace(scene, changes)


def _two_digits(value: float, *, up: bool = False) -> str:
    """Two significant digits, rounded to the safe side."""
    from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal

    number = Decimal(repr(value))
    step = Decimal(1).scaleb(number.adjusted() - 1)
    rounding = ROUND_CEILING if up else ROUND_FLOOR
    return format((number / step).to_integral_value(rounding) * step, "f")
