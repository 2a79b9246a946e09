"""simimg begin: write a commented starter scene."""

from __future__ import annotations

import click

from simimg_cli import options
from simimg_cli.output import say


@click.command("begin")
@click.argument("file", type=click.Path())
@options.overwrite
@options.quiet
def command(file: str, overwrite: bool, quiet: bool) -> None:
    """Write a commented starter scene to FILE.

    It runs as it is; edit it, and ask simimg check what it means.
    """
    from simimg.newfile import new_file
    from simimg_cli.starter import STARTER

    with new_file(file, overwrite=overwrite) as handle:
        handle.write(STARTER.encode())
    if not quiet:
        say(f"wrote {file}; next: simimg check {file}, simimg expose {file} -o frame.fits")
