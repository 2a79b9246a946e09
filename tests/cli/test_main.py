"""The frame around the commands: help without imports, exit codes, nobody's traceback."""

import os
import signal
import subprocess
import sys
import time

import click
import pytest

import simimg_cli.main
from simimg import __version__
from simimg.errors import InputError, RunError
from simimg_cli.main import COMMANDS, Commands, simimg

COMMAND = [sys.executable, "-m", "simimg_cli"]


def process(*arguments, **options):
    return subprocess.run(
        [*COMMAND, *arguments], capture_output=True, text=True, check=False, timeout=120, **options
    )


class TestHelp:
    def test_lists_every_command(self, run):
        result = run("--help")
        assert result.code == 0
        for name, what in COMMANDS.items():
            assert name in result.out
            assert what in result.out

    def test_without_arguments_shows_the_help(self, run):
        result = run()
        assert result.code == 2
        assert "Commands:" in result.out + result.err

    @pytest.mark.parametrize("name", COMMANDS)
    def test_of_each_command(self, run, name):
        result = run(name, "--help")
        assert result.code == 0
        assert f"simimg {name}" in result.out

    def test_imports_nothing_slow(self):
        code = (
            "import sys, simimg_cli.main as m\n"
            "try: m.simimg(['--help'])\n"
            "except SystemExit: pass\n"
            "print(sorted(sys.modules), file=sys.stderr)"
        )
        done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
        assert "Commands:" in done.stdout
        for module in ("numpy", "astropy", "pydantic", "rich", "simimg.scene", "simimg_cli.check"):
            assert f"'{module}'" not in done.stderr

    def test_version(self, run):
        assert run("--version").out == f"simimg {__version__}\n"


class TestProcess:
    def test_as_a_module(self):
        done = process("--version")
        assert done.returncode == 0
        assert done.stdout == f"simimg {__version__}\n"

    def test_the_installed_command(self):
        path = os.path.join(os.path.dirname(sys.executable), "simimg")
        if not os.path.exists(path):
            pytest.skip("the command is not installed beside this interpreter")
        done = subprocess.run([path, "--version"], capture_output=True, text=True, check=True)
        assert done.stdout == f"simimg {__version__}\n"

    def test_full_standard_output(self, scene):
        with open("/dev/full", "w") as full:
            done = subprocess.run(
                [*COMMAND, "check", scene], stdout=full, stderr=subprocess.PIPE, text=True
            )
        assert done.returncode == 1
        assert "No space left" in done.stderr
        assert "Traceback" not in done.stderr
        assert "Exception ignored" not in done.stderr

    def test_a_reader_that_leaves(self, scene):
        with subprocess.Popen(
            [*COMMAND, "check", scene], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        ) as child:
            child.stdout.close()
            said = child.stderr.read()
        assert child.returncode in (0, 1)
        assert "Traceback" not in said
        assert "Broken pipe" not in said

    @pytest.mark.parametrize(
        ("sign", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)], ids=["INT", "TERM"]
    )
    def test_interrupted_in_the_middle_of_writing(self, folder, scene, sign, code):
        # The write hangs where the system flushes the file, until the signal comes.
        wrapper = (
            "import os, sys, time\n"
            "def hang(_):\n"
            "    print('writing', flush=True)\n"
            "    time.sleep(60)\n"
            "os.fsync = hang\n"
            "from simimg_cli.main import main\n"
            "main()\n"
        )
        arguments = ["expose", scene, "-o", "frame.fits", "--quiet"]
        with subprocess.Popen(
            [sys.executable, "-c", wrapper, *arguments],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        ) as child:
            assert child.stdout.readline() == "writing\n"
            assert any(entry.name.endswith(".part") for entry in folder.iterdir())
            child.send_signal(sign)
            _, said = child.communicate(timeout=60)
        assert child.returncode == code
        assert "Traceback" not in said
        assert [entry.name for entry in folder.iterdir()] == [scene]

    def test_interrupted_at_once(self, scene):
        with subprocess.Popen(
            [*COMMAND, "check", scene], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        ) as child:
            time.sleep(0.3)
            child.send_signal(signal.SIGINT)
            child.communicate(timeout=60)
        # It may have been done already.
        assert child.returncode in (0, 130, -signal.SIGINT)


class TestExitCodes:
    @pytest.fixture
    def fails(self, run, monkeypatch):
        """Run a command that raises what it is told to."""

        def call(error):
            @click.command()
            def command():
                raise error

            monkeypatch.setattr(Commands, "get_command", lambda *_: command)
            return run("check")

        return call

    def test_wrong_input(self, fails):
        result = fails(InputError("a.toml: first", "a.toml: second"))
        assert (result.code, result.out, result.err) == (2, "", "a.toml: first\na.toml: second\n")

    def test_failed_while_running(self, fails):
        result = fails(RunError("frame.fits: could not be written"))
        assert (result.code, result.err) == (1, "frame.fits: could not be written\n")

    def test_interrupt(self, fails):
        result = fails(KeyboardInterrupt())
        assert result.code == 130
        assert result.err.strip() == "interrupted"

    def test_out_of_memory(self, fails):
        result = fails(MemoryError())
        assert result.code == 1
        assert "not enough memory" in result.err

    def test_a_fault_of_the_program(self, fails, monkeypatch):
        monkeypatch.delenv("SIMIMG_TRACEBACK", raising=False)
        result = fails(ZeroDivisionError("two\nlines"))
        assert result.code == 1
        assert result.err.startswith("simimg: internal error: ZeroDivisionError: two lines")
        assert result.err.count("\n") == 1

    def test_a_fault_of_the_program_in_full(self, monkeypatch, folder):  # noqa: ARG002
        from click.testing import CliRunner

        @click.command()
        def command():
            raise ZeroDivisionError

        monkeypatch.setattr(Commands, "get_command", lambda *_: command)
        monkeypatch.setenv("SIMIMG_TRACEBACK", "1")
        result = CliRunner().invoke(simimg, ["check"])
        assert result.exit_code == 1
        assert "Traceback" in result.stderr

    def test_control_characters_stay_out_of_the_terminal(self, fails):
        assert fails(InputError("a\x1b[2Jb")).err == "a\\x1b[2Jb\n"

    def test_a_library_warning_is_one_line(self, run, monkeypatch):
        import warnings

        @click.command()
        def command():
            with warnings.catch_warnings():
                warnings.simplefilter("default")
                warnings.warn("mind\nthe gap", RuntimeWarning, stacklevel=1)

        monkeypatch.setattr(Commands, "get_command", lambda *_: command)
        result = run("check")
        assert (result.code, result.err) == (0, "simimg: warning: mind\n")

    @pytest.mark.parametrize(
        "arguments",
        [
            ["chek"],
            ["--frobnicate"],
            ["check"],
            ["check", "a", "b"],
            ["check", "a", "--what"],
            ["expose", "a"],
            ["expose", "a", "-o", "b", "--with", "truth"],
            ["expose", "a", "-o", "b", "--memory", "2"],
            ["expose", "a", "-o", "b", "--memory", "2 apples"],
            ["expose", "a", "-o", "b", "--memory", "0 GiB"],
            ["expose", "a", "-o", "b", "--threads", "0"],
            ["limits", "a", "--position-angle", "north"],
            ["limits", "a", "--position-angle", "nan"],
            ["measure"],
            ["measure", "a", "--near", "12"],
            ["measure", "a", "--near", "12,inf"],
            ["measure", "a", "--near", "1,2,3"],
        ],
    )
    def test_wrong_options(self, run, files, arguments):
        result = run(*arguments)
        assert result.code == 2
        assert "Error: " in result.err
        assert result.out == ""
        assert files() == []

    def test_a_near_miss_is_hinted_at(self, run):
        assert "did you mean 'check'?" in run("chek").err


def test_the_table_of_commands_is_true():
    context = click.Context(simimg)
    for name in COMMANDS:
        command = simimg.get_command(context, name)
        assert command.name == name
        assert command.help
    assert simimg_cli.main.simimg.get_command(context, "nothing") is None
