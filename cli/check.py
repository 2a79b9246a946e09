"""simimg check: what a scene means, and every mistake in it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import click

from simimg.errors import InputError
from simimg_cli import options
from simimg_cli.output import document, say, table, warn

if TYPE_CHECKING:
    from simimg.assembly.report import Description
    from simimg.scene.model import Scene


@click.command("check")
@click.argument("scene", type=click.Path(), required=False)
@options.changes
@click.option(
    "--schema",
    is_flag=True,
    help="Print the JSON schema of a scene file, for editors, in place of checking one.",
)
@options.as_json
@options.quiet
def command(
    scene: str | None,
    overrides: Sequence[str],
    without: Sequence[str],
    schema: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Say what SCENE means, list the defaults it uses, and find every mistake in it.

    SCENE may be a frame of simimg, which carries its scene. With --quiet nothing is printed of a
    scene without mistakes.
    """
    if schema:
        if scene is not None or overrides or without:
            raise click.UsageError("--schema is that of every scene; leave out SCENE and changes")
        _print_schema()
        return
    if scene is None:
        raise click.UsageError("Missing argument 'SCENE'.")
    from simimg.scene.file import requirements_to_expose, scene_id
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    opened = open_scene(scene, overrides=overrides, without=without).scene
    missing = requirements_to_expose(opened)
    meaning = _understood(opened, objects=not missing)
    if as_json:
        payload = {**meaning.to_dict(), "to_expose": missing}
        say(document(payload, scene_id=scene_id(opened), warnings=meaning.warnings))
        return
    if quiet:
        print_cautions(opened, quiet=True)
        return
    say(f"{scene}: {opened.title or 'without a title'}")
    say()
    table(("", "", ""), meaning.lines)
    if meaning.defaults:
        say()
        say("Defaults used:")
        table(("key", "value", "meaning"), [tuple(map(str, row)) for row in meaning.defaults])
    if missing:
        say()
        say("No mistake; but to expose it, it also needs:")
        for line in missing:
            say(f"  {line}")
    else:
        say()
        say("No mistake: ready to expose.")
    warn(meaning.warnings)
    print_cautions(opened)


def _print_schema() -> None:
    import json

    from simimg.scene.schema import scene_schema

    say(json.dumps(scene_schema(), indent=1, ensure_ascii=True))


def _understood(scene: Scene, *, objects: bool) -> Description:
    """What a scene means; its maps, pictures and catalogues are looked into as well."""
    from simimg.assembly.objects import inventory
    from simimg.assembly.report import describe

    mistakes: list[str] = []
    meaning = None
    try:
        meaning = describe(scene)
    except InputError as error:
        mistakes += error.lines
    if objects:
        try:
            inventory(scene)
        except InputError as error:
            mistakes += [line for line in error.lines if line not in mistakes]
    if meaning is None or mistakes:
        raise InputError(*mistakes)
    return meaning
