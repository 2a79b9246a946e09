"""What a report says, worked out once: the frame, its measurement, limits, and trials.

A report is of one exposure, the scene's first, and of many noise draws of the same scene; the first
of these draws is that exposure.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import pi, radians

from simimg.assembly.report import Description, describe
from simimg.assembly.train import assemble_train
from simimg.errors import InputError, mistake
from simimg.exposure import expose
from simimg.frame import Frame
from simimg.resolving.judging import NamedPair
from simimg.resolving.limits import Limits, limits
from simimg.resolving.listing import ObjectLimits
from simimg.resolving.measure import measure, named_pairs
from simimg.resolving.records import PairMeasurement
from simimg.scene.file import requirements_to_expose
from simimg.scene.model import Scene
from simimg.show.profile import Profile, subject_profile
from simimg.show.setup import Setup
from simimg.show.signal import Light, frame_light
from simimg.show.subject import Subject, brightest_subject, pair_subject
from simimg.study.point import question
from simimg.study.trials import PairTrials, trials

TRIALS = 100
"""Noise draws of a scene with a pair, unless another number is asked for."""

UNTITLED = "A scene without a title"

Progress = Callable[[int, int], None]


@dataclass(frozen=True, eq=False)
class Told:
    """What is known of one pair of the frame.

    Attributes
    ----------
    name : str
        Its label, or its number.
    measured : PairMeasurement
        In the frame.
    limits : ObjectLimits or None
        Its own limits and bounds.
    trials : PairTrials or None
        None where none were made.
    """

    name: str
    measured: PairMeasurement
    limits: ObjectLimits | None
    trials: PairTrials | None


@dataclass(frozen=True, eq=False)
class Facts:
    """Everything that a report is made of.

    Attributes
    ----------
    scene : Scene
    meaning : Description
    limits : Limits
    setup : Setup
    frame : Frame
        The first exposure.
    light : Light
        Of the frame.
    subject : Subject
        What its pictures show.
    profile : Profile
        Through the subject.
    pairs : tuple of Told
        The scene's pairs that lie in the frame, in its order.
    chosen : Told or None
        The one that the pictures show.
    trials : int
        Noise draws that were made; 0 for none.
    """

    scene: Scene
    meaning: Description
    limits: Limits
    setup: Setup
    frame: Frame
    light: Light
    subject: Subject
    profile: Profile
    pairs: tuple[Told, ...]
    chosen: Told | None
    trials: int

    @property
    def title(self) -> str:
        """The scene's title."""
        return self.scene.title or UNTITLED


def gather(
    scene: Scene,
    *,
    count: int | None = None,
    pair: str | None = None,
    workers: int | None = None,
    progress: Progress | None = None,
) -> Facts:
    """Expose, measure and try a scene.

    Parameters
    ----------
    scene : Scene
    count : int, optional
        Noise draws, 0 for none; `TRIALS` unless given, none of a scene without a pair.
    pair : str, optional
        Label of the pair that the pictures show; the first unless given.
    workers : int, optional
        Processes for the trials, of no effect on the result.
    progress : callable, optional
        Called with the trials done and their whole number, now and then.

    Raises
    ------
    InputError
        The scene lacks what an exposure needs, has no such pair, or cannot be computed.
    RunError
        A process was stopped from outside.
    """
    missing = requirements_to_expose(scene)
    if scene.detector:
        what = "a report is of one detector, and this scene is of a mosaic"
        missing.append(mistake(scene.where, "detector", what, "take the [[detector]] tables away"))
    if scene.exposure is not None and scene.exposure.frame_time is not None:
        what = "makes a cube, and a report is of single frames"
        missing.append(mistake(scene.where, "exposure.frame_time", what, "write time in its place"))
    if missing:
        raise InputError(*missing)
    asked = question(scene, trials=count or 0, label=pair).pair
    frame = expose(scene, keep=("expected",))
    named = named_pairs(frame)
    places = _places(frame, named)
    wanted = places.index(asked) if asked in places else None
    if wanted is None and pair is not None:
        what = f"the pair labelled {pair!r} does not lie in the frame"
        raise InputError(mistake(scene.where, "pair", what, "place both its stars inside"))
    if wanted is None and named:
        wanted = 0
    count = (TRIALS if count is None else count) if named else 0
    measured = measure(frame) if named else []
    tried = trials(scene, count=count, workers=workers, progress=progress) if count else []
    angle = 0.5 * pi if wanted is None else radians(named[wanted].truth.position_angle_deg)
    found = limits(scene, position_angle=angle)
    own = [one for one in found.objects if one.kind == "pair"]
    pairs = tuple(
        Told(
            name=one.label or f"pair {place + 1}",
            measured=record,
            limits=own[place] if place < len(own) else None,
            trials=tried[number] if len(tried) == len(named) else None,
        )
        for number, (one, place, record) in enumerate(zip(named, places, measured, strict=True))
    )
    setup = Setup(scene, assemble_train(scene))
    light, fwhm = frame_light(frame), setup.psf_fwhm(0.0)
    if wanted is None:
        subject = brightest_subject(frame, light, fwhm=fwhm)
    else:
        subject = pair_subject(frame, pairs[wanted].measured, fwhm=fwhm)
    return Facts(
        scene=scene,
        meaning=describe(scene),
        limits=found,
        setup=setup,
        frame=frame,
        light=light,
        subject=subject,
        profile=subject_profile(frame, light, subject, setup),
        pairs=pairs,
        chosen=None if wanted is None else pairs[wanted],
        trials=count,
    )


def _places(frame: Frame, named: Sequence[NamedPair]) -> list[int]:
    """Which of the scene's pairs, from 0, those named by the frame are: they keep its order."""
    truth = frame.truth
    assert truth is not None
    firsts = [
        (float(truth["x"][row]), float(truth["y"][row]))
        for row, partner in enumerate(truth["partner"])
        if str(truth["kind"][row]) == "pair" and partner > row
    ]
    places: list[int] = []
    for one in named:
        places.append(firsts.index(one.first, places[-1] + 1 if places else 0))
    return places
