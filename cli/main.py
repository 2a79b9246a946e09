"""The command `simimg`: its list of commands, and the one place where failures become exit codes.

A command's module is imported when the command is called; until then the table below speaks for it.
"""

from __future__ import annotations

import os
import signal
import sys
import traceback
import warnings
from collections.abc import Sequence
from difflib import get_close_matches
from importlib import import_module
from typing import Any, NoReturn

import click

from simimg.errors import SimimgError
from simimg.version import __version__
from simimg_cli.output import printable

COMMANDS = {
    "begin": "Write a commented starter scene.",
    "check": "Say what a scene means, and find every mistake in it.",
    "expose": "Make the frame that a scene's set-up would record.",
    "limits": "What can be resolved: diffraction, air, pixel, each object.",
    "measure": "Measure pairs in frames: resolved or not, and how sure.",
    "batch": "Many frames with drawn values, resumable, for a pipeline.",
    "study": "Trade studies: limits, bounds and trials as a key varies.",
    "solve": "The value of a key at which a target is just reached.",
    "calibrate": "Make bias, dark and flat frames of a scene's camera.",
    "inject": "Put a scene's objects into a frame that exists.",
    "figure": "Draw a frame and a pair's profile for a proposal.",
    "report": "One page: frame, limits, how sure a split is, and why.",
}

INTERRUPTED = 130
TERMINATED = 143


class Commands(click.Group):
    """A group that imports a command only when it is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = import_module(f"simimg_cli.{cmd_name}").command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args and args[0] not in COMMANDS and not args[0].startswith("-"):
            near = get_close_matches(args[0], COMMANDS, n=1)
            hint = f"did you mean {near[0]!r}?" if near else "simimg --help lists them"
            ctx.fail(f"no such command {args[0]!r}; {hint}")
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))

    def main(self, args: Sequence[str] | None = None, *others: Any, **extra: Any) -> Any:
        """Run, and turn whatever goes wrong into lines on standard error and an exit code."""
        if not extra.pop("standalone_mode", True):
            return super().main(args, *others, standalone_mode=False, **extra)
        with warnings.catch_warnings():
            warnings.showwarning = _show_warning
            try:
                code = super().main(args, *others, standalone_mode=False, **extra)
                sys.stdout.flush()
            except SimimgError as error:
                _leave(error.exit_code, *error.lines)
            except click.Abort:
                _leave(INTERRUPTED, "interrupted")
            except click.ClickException as error:
                error.show()
                sys.exit(error.exit_code)
            except BrokenPipeError:
                _hush()
                sys.exit(1)
            except MemoryError:
                _leave(
                    1, "simimg: not enough memory; allow less with --memory, or use fewer pixels"
                )
            except OSError as error:
                _leave(1, f"simimg: {error.filename or 'output'}: {error.strerror or error}")
            except Exception as error:
                if os.environ.get("SIMIMG_TRACEBACK"):
                    traceback.print_exc()
                what = " ".join(f"{type(error).__name__}: {error}".split())
                _leave(1, f"simimg: internal error: {what} (SIMIMG_TRACEBACK=1 shows where)")
            sys.exit(code if isinstance(code, int) else 0)


def _leave(code: int, *lines: str) -> NoReturn:
    for line in lines:
        click.echo(printable(line), err=True)
    sys.exit(code)


def _hush() -> None:
    """Let the interpreter close a standard output that nobody reads."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _show_warning(message: Warning | str, *_: Any, **__: Any) -> None:
    first = str(message).strip().split("\n")[0]
    click.echo(printable(f"simimg: warning: {first}"), err=True)


@click.group(
    cls=Commands, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 120}
)
@click.version_option(__version__, prog_name="simimg", message="%(prog)s %(version)s")
def simimg() -> None:
    """What a telescope's detector will record, and whether two stars will come apart.

    Begin with:  simimg begin scene.toml,  then  simimg expose scene.toml -o frame.fits  and  simimg
    measure frame.fits.  Every frame is a simulation, for planning.
    """


def main() -> None:
    """Entry point of the installed command."""
    # A batch system ends a job so: leave by the same doors as an error, which tidy up.
    signal.signal(signal.SIGTERM, lambda *_: sys.exit(TERMINATED))
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="backslashreplace")
    simimg(prog_name="simimg")
