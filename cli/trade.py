"""simimg study --pixel-advice and --separation-map: two trade studies with an answer in words."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from simimg_cli.output import document, paragraph, say, table
from simimg_cli.progress import progress_bar
from simimg_cli.words import figures

if TYPE_CHECKING:
    from simimg.fits.hdus import Column
    from simimg.scene.model import Scene


def run_pixel_advice(
    path: str,
    scene: Scene,
    *,
    trials: int | None,
    pair: str | None,
    output: str | None,
    workers: int,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Say which pixel scales suit a scene's pair."""
    from simimg.study.pixels import pixel_advice

    with progress_bar("pixel scales", quiet=quiet) as progress:
        found = pixel_advice(
            scene,
            count=400 if trials is None else trials,
            pair=pair,
            workers=workers,
            progress=progress,
        )
    columns = found.columns()
    _write(columns, output, scene, overwrite=overwrite)
    if as_json:
        own = {
            "scene": path,
            "finest_arcsec": found.finest,
            "coarsest_arcsec": found.coarsest,
            "best_arcsec": found.best,
            "own_arcsec": found.own,
            "confirmed": [dict(one.__dict__, holds=one.holds) for one in found.confirmed],
            "reasons": list(found.reasons),
            "points": rows_of(columns),
        }
        say(document(own, scene_id=_id(scene)))
        return
    _print(columns)
    say()
    say(
        f'Pixels from {figures(found.finest, 3)}" to {figures(found.coarsest, 3)}": there the '
        "separation's bound is within a tenth of its best."
    )
    for reason in found.reasons:
        say(paragraph(f"- {reason}", under="  "))


def run_separation_map(
    path: str,
    scene: Scene,
    *,
    pair: str | None,
    output: str | None,
    plot: str | None,
    width: float | None,
    workers: int,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Say which separations a scene's set-up resolves, against the magnitude difference."""
    from simimg.study.separations import SHOWS, separation_map

    with progress_bar("differences", quiet=quiet) as progress:
        found = separation_map(scene, pair=pair, workers=workers, progress=progress)
    columns = found.columns()
    _write(columns, output, scene, overwrite=overwrite)
    caption = ""
    if plot is not None:
        from simimg.show.canvas import COLUMN
        from simimg.show.separationplot import write_separation_plot

        caption = write_separation_plot(
            found, scene, plot, overwrite=overwrite, width=COLUMN if width is None else width
        )
    contrast = [
        {"separation": separation, "magnitude_difference": difference}
        for separation, difference in zip(
            found.separation.tolist(), found.contrast.tolist(), strict=True
        )
    ]
    if as_json:
        own = {
            "scene": path,
            "share": found.share,
            "significance": SHOWS,
            "points": rows_of(columns),
            "contrast": contrast,
        }
        if caption:
            own["caption"] = caption
        say(document(own, scene_id=_id(scene)))
        return
    say(f"Smallest separations ({found.share:.0%} of frames resolved), arcsec")
    _print(columns)
    say()
    largest = float(found.magnitude_difference[-1])
    say(f"Faintest second star that shows ({SHOWS:g} standard deviations)")
    table(
        ("separation", "dm"),
        [
            (
                f'{figures(one["separation"], 3)}"',
                ("> " if one["magnitude_difference"] >= largest else "")
                + figures(one["magnitude_difference"], 3),
            )
            for one in contrast
        ],
        right=(0, 1),
    )
    if caption and not quiet:
        say()
        say(paragraph(caption))


def rows_of(columns: Sequence[Column]) -> list[dict[str, Any]]:
    """The rows of a table, each by the names of its columns."""
    held = [column.values.tolist() for column in columns]  # type: ignore[union-attr]
    names = [column.name for column in columns]
    return [dict(zip(names, row, strict=True)) for row in zip(*held, strict=True)]


def _write(columns: Sequence[Column], output: str | None, scene: Scene, *, overwrite: bool) -> None:
    if output is None:
        return
    from simimg.fits.ecsv import ecsv_text
    from simimg.newfile import new_file

    text = ecsv_text(columns, meta={"SCENEID": _id(scene)})
    with new_file(output, overwrite=overwrite) as handle:
        handle.write(text.encode("utf-8"))


def _id(scene: Scene) -> str:
    from simimg.scene.file import scene_id

    return scene_id(scene)


def _print(columns: Sequence[Column]) -> None:
    names = [column.name.replace("_", " ") for column in columns]
    rows = [[figures(value, 3) for value in row.values()] for row in rows_of(columns)]
    table(names, rows, right=range(len(names)))
