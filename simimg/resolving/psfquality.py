"""How well a PSF fits the single stars of its frame, and whether verdicts can rest on it.

Each single star that stands alone is fitted with the PSF; Pearson's chi-square of the pixels within
one and a half FWHM says what is left. What exceeds the pixels' number is the PSF's own misfit. It
grows with the square of a star's signal to noise, so that it can be foretold for a pair of any
brightness. A fall of the deviance by about 17 makes a second star certain (1 % at two FWHM); once
the misfit foretold for a pair passes that, a single star as bright could be called double, and the
verdict is not to be trusted. Deviances have no unit; arcseconds as the name says.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, hypot, isfinite, nan, sqrt
from typing import Any

import numpy as np
from scipy.spatial import cKDTree

from simimg.arrays import FloatArray
from simimg.resolving.isolated import isolated_stars
from simimg.resolving.observation import Observation
from simimg.resolving.psfsource import SourcedPsf, star_field
from simimg.resolving.readout import Readout
from simimg.resolving.sighting import Sighting
from simimg.resolving.starfit import Likelihood, fit_stars

CERTAIN_FALL = 17.0
"""Fall of the deviance from one star to two that makes the second certain."""

_MOST = 20
_WITHIN = 1.5  # FWHM about a star in which its pixels are judged
_CUT = 2.5  # FWHM about a star that are fitted
_FILLED = 0.8  # share of these that must count
_SURE = 3.0  # standard errors by which a misfit must stand out
_OUTLIER = 3.0  # times the median chi-square from which a star is something else
_SIGNAL = 900.0  # square of the signal to noise that a star must have
_COMPANY = 0.01  # electrons of a neighbour within six FWHM, over the star's own


@dataclass(frozen=True, kw_only=True)
class PsfReport:
    """What is said of the PSF of a measurement.

    Attributes
    ----------
    source : str
        "scene", "extension", "file", "stars" or "profile".
    reduced_chi_square : float
        Median over the single stars that were judged; NaN where there was none.
    stars : int
        How many were judged.
    fwhm_arcsec : float
        Of the PSF: geometric mean along rows and columns.
    """

    source: str
    reduced_chi_square: float
    stars: int
    fwhm_arcsec: float

    def to_dict(self) -> dict[str, Any]:
        """For JSON; None for what is not finite."""
        chi = self.reduced_chi_square
        return {
            "source": self.source,
            "reduced_chi_square": chi if isfinite(chi) else None,
            "stars": self.stars,
            "fwhm_arcsec": self.fwhm_arcsec,
        }


@dataclass(frozen=True, eq=False)
class PsfQuality:
    """How well the PSF fits.

    Attributes
    ----------
    report : PsfReport
    misfit, error : float
        Deviance that the PSF leaves in a star over the square of its signal to noise, with its
        standard error; NaN without stars to judge by.
    typical : float
        Square of the signal to noise of the stars that were judged, their median.
    judged : tuple of JudgedStar
        The single stars.
    fwhm : float
        Of the PSF, pixels.
    """

    report: PsfReport
    misfit: float
    error: float
    typical: float
    judged: tuple[JudgedStar, ...] = ()
    fwhm: float = nan

    def floor(self, noise: float) -> float:
        """Deviance over squared signal to noise that the PSF leaves in any star, 0 or more.

        Parameters
        ----------
        noise : float
            The same, that the PSF has from the noise of the stars it was measured from.
        """
        sure = isfinite(self.misfit) and self.misfit > _SURE * self.error
        return max(self.misfit if sure else 0.0, noise)

    def floor_at(self, place: FloatArray, source: SourcedPsf) -> float:
        """The same for an object at a place, from all stars but itself.

        A PSF of the frame's own scene leaves nothing; what alone does not fit is not its fault.
        """
        if source.source == "scene":
            return 0.0
        apart = 0.5 * self.fwhm
        others = [one for one in self.judged if hypot(one.x - place[0], one.y - place[1]) > apart]
        misfit, error = _misfit(others)
        return max(misfit if others and misfit > _SURE * error else 0.0, source.noise)


@dataclass(frozen=True)
class JudgedStar:
    """A single star that the PSF was judged by.

    Attributes
    ----------
    x, y : float
        Pixels.
    chi_square : float
        Pearson's, of the pixels about it.
    freedom : int
        Degrees of freedom.
    power : float
        Square of the signal to noise.
    """

    x: float
    y: float
    chi_square: float
    freedom: int
    power: float


def _misfit(judged: Sequence[JudgedStar]) -> tuple[float, float]:
    """Deviance over squared signal to noise that is left in stars, and its standard error."""
    power = sum(one.power for one in judged)
    if not power > 0.0:
        return nan, nan
    excess = sum(one.chi_square - one.freedom for one in judged)
    return excess / power, sqrt(2.0 * sum(one.freedom for one in judged)) / power


def judge_psf(observation: Observation, *, apart: Sequence[tuple[float, float]] = ()) -> PsfQuality:
    """Judge the PSF of an observation by the single stars of its frame.

    Parameters
    ----------
    observation : Observation
    apart : sequence of (x, y), optional
        Places of what may be no single stars.
    """
    judged = [
        one
        for x, y, width in _single_stars(observation, apart)
        if (one := _judge(observation, x, y, width)) is not None
    ]
    reduced = np.array([one.chi_square / one.freedom for one in judged])
    if len(judged) > 3:
        kept = reduced <= _OUTLIER * np.median(reduced)
        judged = [one for one, good in zip(judged, kept) if good]
        reduced = reduced[kept]
    report = PsfReport(
        source=observation.sourced.source,
        reduced_chi_square=float(np.median(reduced)) if judged else nan,
        stars=len(judged),
        fwhm_arcsec=observation.fwhm * observation.arcsec,
    )
    if not judged:
        return PsfQuality(report, nan, nan, nan)
    typical = float(np.median([one.power for one in judged]))
    return PsfQuality(report, *_misfit(judged), typical, tuple(judged), observation.fwhm)


def psf_warnings(
    observation: Observation, quality: PsfQuality, seen: Sequence[tuple[str, Sighting]]
) -> list[str]:
    """Say where the PSF is not good enough to trust a verdict.

    Parameters
    ----------
    observation : Observation
    quality : PsfQuality
    seen : sequence of (name, Sighting)
        What was measured.
    """
    source, report = observation.sourced, quality.report
    misfit = quality.floor(source.noise)
    if misfit > source.noise:
        cause = (
            f"the PSF leaves a reduced chi-square of {report.reduced_chi_square:.3g} in "
            f"{_count(report.stars, 'single star')} of the frame"
        )
    else:
        cause = f"the PSF rests on {_count(len(source.stars), 'star')} and has their noise"
    powers = [(name, signal_power(observation, one)) for name, one in seen if not one.empty]
    if not powers and isfinite(quality.typical):
        powers = [("a star of the frame", quality.typical)]
    doubtful = [(misfit * power, name) for name, power in powers if misfit * power > CERTAIN_FALL]
    lines = []
    if doubtful:
        names = ", ".join(name for _, name in doubtful[:3])
        more = f" and {len(doubtful) - 3} more" if len(doubtful) > 3 else ""
        lines.append(
            f"{cause}: in {names}{more} that makes a misfit of up to "
            f"{max(doubtful)[0]:.3g}, and {CERTAIN_FALL:g} can pass for a second star; "
            "do not trust the verdict"
        )
    if not isfinite(quality.misfit) and source.source not in ("scene", "extension"):
        lines.append("no single star stands alone in the frame to judge the PSF by")
    return lines


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"


def signal_power(observation: Observation, sighting: Sighting) -> float:
    """Square of the signal to noise of all the light of a sighting, as if it were one star."""
    fit = sighting.double or sighting.single
    return star_power(observation, float(fit.electrons.sum()), float(fit.background.min()))


def star_power(observation: Observation, electrons: float, background: float) -> float:
    """Square of the signal to noise of a star of these electrons on this background a pixel."""
    share = _share(observation)
    noise = electrons * share + max(background, 0.0) + observation.variance
    return float(((electrons * share) ** 2 / noise).sum())


def _share(observation: Observation) -> FloatArray:
    """Share of a star's light on the pixels about it."""
    half = max(2, ceil(_WITHIN * observation.fwhm))
    side = 2 * half + 1
    image = observation.psf.evaluate(half, half, columns=side, rows=side, order=0)[0]
    return np.asarray(np.maximum(image, 0.0))


def _single_stars(
    observation: Observation, apart: Sequence[tuple[float, float]]
) -> list[tuple[float, float, float]]:
    """Places and widths of stars that stand alone."""
    source, fwhm = observation.sourced, observation.fwhm
    if source.source == "profile":
        return [(x, y, fwhm) for x, y in source.stars[:_MOST]]
    of_truth = _of_truth(observation)
    if of_truth is not None:
        return of_truth
    readout = Readout(
        gain=observation.gain,
        bias=observation.bias,
        saturation=observation.saturation,
        variance=observation.variance,
        barred=observation.barred,
        backdrop=observation.backdrop,
    )
    _, field = star_field(observation.frame, readout)
    found = isolated_stars(field, apart=[*apart, *source.stars], most=_MOST)
    return [(float(one.x), float(one.y), max(one.width, fwhm)) for one in found]


def _of_truth(observation: Observation) -> list[tuple[float, float, float]] | None:
    """The stars that TRUTH says stand alone; None where there is no TRUTH."""
    table: Any = observation.frame.truth
    if table is None or not {"kind", "x", "y", "inside", "electrons"} <= set(table.colnames):
        return None
    x, y, electrons = (np.asarray(table[name], dtype=float) for name in ("x", "y", "electrons"))
    known = np.isfinite(x) & np.isfinite(y) & np.isfinite(electrons)
    star = known & (np.asarray(table["kind"]).astype(str) == "star")
    star &= np.asarray(table["inside"], dtype=bool)
    rows = np.flatnonzero(star)
    rows = rows[np.argsort(-electrons[rows], kind="stable")][: 20 * _MOST]
    if not rows.size:
        return []
    fwhm = observation.fwhm
    # A PSF must not be judged by the stars that it was measured from.
    own = np.zeros(rows.size, dtype=bool)
    for place in observation.sourced.stars:
        own |= np.hypot(x[rows] - place[0], y[rows] - place[1]) < fwhm
    rows = rows[~own]
    others = np.flatnonzero(known)
    tree = cKDTree(np.column_stack([x[others], y[others]]))
    found: list[tuple[float, float, float]] = []
    for row in rows:
        around = others[tree.query_ball_point((x[row], y[row]), 6.0 * fwhm)]
        around = around[around != row]
        if (electrons[around] > _COMPANY * electrons[row]).any():
            continue
        found.append((float(x[row]), float(y[row]), fwhm))
        if len(found) == _MOST:
            break
    return found


def _judge(observation: Observation, x: float, y: float, width: float) -> JudgedStar | None:
    """Fit one star and weigh what is left of it; None where it is faint, full or at the edge."""
    if not observation.holds(x, y):
        return None
    cutout = observation.cutout(x, y, max(_CUT * width, 4.0))
    rows, columns = cutout.electrons.shape
    across = cutout.x0 + np.arange(columns) - x
    along = (cutout.y0 + np.arange(rows) - y)[:, None]
    inside = np.hypot(across, along) <= max(_WITHIN * width, 1.5)
    seen = inside & (cutout.used > 0.0)
    if seen.sum() < max(9.0, _FILLED * inside.sum()):
        return None
    fit = fit_stars([cutout], places=[(x, y)])
    if hypot(*(fit.places[0] - (x, y))) > width:
        return None
    likelihood = Likelihood([cutout], 1)
    vector = fit.own(0)
    model = likelihood.jacobian(vector, 0)[0].reshape(rows, columns)
    variance = np.maximum(np.maximum(model, 0.0) + cutout.variance, 1e-6)
    light = likelihood.star(vector, 0, fit.places[0], order=0)[0] * float(fit.electrons[0])
    power = float((light**2 / variance)[seen].sum())
    if power < _SIGNAL:
        return None
    rest = (cutout.electrons - model) ** 2 / variance
    return JudgedStar(x, y, float(rest[seen].sum()), int(seen.sum()) - 3, power)
