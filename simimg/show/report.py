"""The report: one page that says what a scene's set-up records, resolves, and how sure that is.

For a committee, an instrument's team, or oneself in a year: the frame, the profile with the
criteria's limits, the probability of a split, the same sky above the air and in it, what limits the
answer, and the scene itself, so that the page can be made again. One HTML file that opens from disk
and needs no network; the same scene gives the same bytes.
"""

from __future__ import annotations

import os
import shlex
from dataclasses import dataclass

from simimg.newfile import new_file
from simimg.scene.file import scene_id
from simimg.scene.model import Scene
from simimg.show.reportagain import again
from simimg.show.reportbudget import largest, noise_shares, width_budget
from simimg.show.reportfacts import Facts, Progress, gather
from simimg.show.reportpage import (
    Files,
    Page,
    Pictures,
    Section,
    Tables,
    Words,
    csv_file,
    file_name,
    items,
    page_html,
    section,
)
from simimg.show.reportpairs import (
    accuracy_table,
    answer,
    measured_table,
    measured_words,
    noise_table,
    trials_table,
    verdict_table,
    width_table,
)
from simimg.show.reportpictures import (
    frame_picture,
    profile_picture,
    profile_table,
    view_pictures,
)
from simimg.show.reportsetup import (
    band_words,
    correction_table,
    defaults_table,
    figures_table,
    limits_table,
    objects_table,
    setup_table,
)
from simimg.show.reporttable import Table, figures
from simimg.show.reportviews import views


@dataclass(frozen=True, eq=False)
class Report:
    """A report that has been made.

    Attributes
    ----------
    facts : Facts
        What it says.
    html : str
        The page.
    """

    facts: Facts
    html: str


def report(
    scene: Scene,
    *,
    trials: int | None = None,
    pair: str | None = None,
    workers: int | None = None,
    progress: Progress | None = None,
) -> Report:
    """Make the report of a scene.

    Parameters
    ----------
    scene : Scene
        With a camera and an exposure.
    trials : int, optional
        Noise draws for the probability of a split, 0 for none; 100 unless given, none of a scene
        without a pair.
    pair : str, optional
        Label of the pair that the pictures show; the first unless given.
    workers : int, optional
        Processes for the trials, of no effect on the result.
    progress : callable, optional
        Called with the trials done and their whole number, now and then.

    Returns
    -------
    Report

    Raises
    ------
    InputError
        The scene lacks what an exposure needs, has no such pair, or cannot be computed.
    RunError
        A process was stopped from outside.
    ValueError
        A number of trials below 0, or of workers below 1.
    """
    if trials is not None and trials < 0:
        raise ValueError(f"trials must be 0 or more, got {trials}")
    facts = gather(scene, count=trials, pair=pair, workers=workers, progress=progress)
    stem = file_name(scene.name).rsplit(".", 1)[0]
    sections = (
        _in_brief(facts),
        _frame(facts, stem),
        _side_by_side(facts),
        _split(facts),
        _limits(facts),
        _budget(facts),
        _setup(facts),
        again(scene, _command(facts, stem, pair)),
    )
    page = Page(
        title=facts.title,
        kind="Report",
        stem=stem,
        cautions=facts.meaning.cautions,
        sections=tuple(one for one in sections if one is not None),
        identity=scene_id(scene),
    )
    return Report(facts, page_html(page))


def write_report(made: Report, path: str | os.PathLike[str], *, overwrite: bool = False) -> None:
    """Write a report: whole, or not at all.

    Parameters
    ----------
    made : Report
    path : path
    overwrite : bool, optional
        Whether a file of that name may be replaced.

    Raises
    ------
    InputError
        The name cannot be used, or the file exists and `overwrite` is false.
    RunError
        The system refused; no part of the file is left behind.
    """
    with new_file(path, overwrite=overwrite) as handle:
        handle.write(made.html.encode("utf-8"))


def _shown(table: Table | None) -> Tables | None:
    return None if table is None else Tables(table)


def _in_brief(facts: Facts) -> Section:
    chosen, found = facts.chosen, facts.limits
    if chosen is None:
        text = (
            f"Stars are {figures(found.delivered.fwhm_arcsec, 3)} arcsec wide (FWHM) as delivered; "
            f"two equal stars come apart from {figures(found.delivered.sparrow_arcsec, 3)} arcsec "
            f"under Sparrow's criterion and {figures(found.delivered.rayleigh_arcsec, 3)} under "
            "Rayleigh's. The scene has no pair in the frame."
        )
        blocks = [Words(text, lead=True)]
    else:
        blocks = [Words(answer(chosen), lead=True)]
        if chosen.measured.advice:
            blocks.append(Words(chosen.measured.advice))
    blocks.append(Words(band_words(facts)))
    return section(
        "in-brief",
        "In brief",
        *blocks,
        items([f"Warning: {text}." for text in facts.meaning.warnings]),
        _shown(verdict_table(facts)),
    )


def _frame(facts: Facts, stem: str) -> Section:
    pictures = [frame_picture(facts)]
    profile = profile_picture(facts)
    data = None
    if profile is not None:
        pictures.append(profile)
        data = Files((csv_file(stem, profile_table(facts)),))
    chosen = facts.chosen
    return section(
        "frame",
        "The frame" if profile is None else "The frame, and the profile through it",
        Pictures(tuple(pictures)),
        data,
        _shown(measured_table(facts)),
        None if chosen is None else items(measured_words(chosen.measured)),
    )


def _side_by_side(facts: Facts) -> Section | None:
    pictures = view_pictures(facts, views(facts.scene, facts.frame))
    if not pictures:
        return None
    text = (
        "The same piece of sky on one stretch, in electrons: what is as bright in one picture as "
        "in another has the same shade."
    )
    return section("side-by-side", "Side by side", Words(text), Pictures(pictures))


def _split(facts: Facts) -> Section | None:
    if not facts.pairs:
        return None
    seed = 0 if facts.scene.exposure is None else facts.scene.exposure.seed
    if facts.trials:
        text = (
            f"{facts.trials} exposures of this scene were drawn (numbers 0 to {facts.trials - 1} "
            f"of seed {seed}; the first is the frame shown here), and each was measured as a frame "
            "would be. A trial counts as resolved where its verdict is: the separation lies beyond "
            "the delivered limit with a probability above 0.95, and a single star is ruled out. "
            "Photons, sky, dark signal and the detector's noise are drawn anew; telescope and air "
            "stay as they are."
        )
        count = 1 if facts.scene.exposure is None else facts.scene.exposure.count
        if count > 1:
            text += f" As many sets of {count} exposures each were fitted together."
    else:
        text = (
            "No trials were made. How often an exposure splits the pair is not known from one "
            "frame; ask for trials to learn it."
        )
    return section(
        "split",
        "How sure is the split",
        Words(text),
        _shown(trials_table(facts)),
        _shown(accuracy_table(facts)),
    )


def _limits(facts: Facts) -> Section:
    return section(
        "limits",
        "What can be resolved",
        _shown(limits_table(facts)),
        _shown(figures_table(facts)),
        _shown(correction_table(facts)),
        items(facts.limits.notes),
    )


def _budget(facts: Facts) -> Section:
    own = [one for one in facts.limits.objects if one.kind == "pair"]
    chosen = facts.chosen
    place = None
    if chosen is not None and chosen.limits is not None:
        place = own.index(chosen.limits)
    rows = width_budget(facts.scene, facts.limits, place)
    most = largest(rows)
    text = (
        "No single part widens the images by more than 2 %: they are about as sharp as the pupil."
    )
    if facts.scene.psf is not None:
        text = "The PSF is one that was measured: what widens it cannot be told apart."
    if most is not None:
        text = (
            f"Of all parts the {most.part} widens the images most: without that the delivered FWHM "
            f"would be {figures(most.fwhm_arcsec, 3)} arcsec instead of "
            f"{figures(rows[0].fwhm_arcsec, 3)}."
        )
    if chosen is not None:
        text += (
            " The bounds are the errors that no unbiased measurement of one exposure can stay "
            "below (Cramér and Rao)."
        )
    noise = noise_shares(facts.scene, facts.setup.train, facts.limits.objects)
    return section(
        "budget",
        "What limits the answer",
        Words(text),
        _shown(width_table(rows, None if place is None else "pair")),
        _shown(objects_table(facts)),
        _shown(noise_table(noise)),
    )


def _setup(facts: Facts) -> Section:
    return section(
        "set-up",
        "The set-up",
        _shown(setup_table(facts)),
        _shown(defaults_table(facts)),
    )


def _command(facts: Facts, stem: str, pair: str | None) -> str:
    """The command that makes the page, for the scene as the page holds it."""
    words = ["simimg", "report", file_name(facts.scene.name), "-o", f"{stem}.html"]
    if facts.pairs:
        words += ["--trials", str(facts.trials)]
    if pair is not None:
        words += ["--pair", pair]
    return shlex.join(words)
