"""What a shell and a terminal see: completion, width, no colour where nobody watches."""

import fcntl
import os
import pty
import re
import shutil
import struct
import subprocess
import sys
import termios

import pytest

from simimg_cli.main import COMMANDS

MODULE = [sys.executable, "-m", "simimg_cli"]
SOURCES = {
    "bash": "complete -o nosort -F _simimg_completion simimg",
    "zsh": "#compdef simimg",
    "fish": "complete --no-files --command simimg",
}


def completed(shell, words, begun, number):
    """What the completion of a shell is told when a word is begun."""
    environment = os.environ | {
        "_SIMIMG_COMPLETE": f"{shell}_complete",
        "COMP_WORDS": words,
        # Fish gives the word itself, the others its number.
        "COMP_CWORD": begun if shell == "fish" else str(number),
    }
    done = subprocess.run(MODULE, env=environment, capture_output=True, text=True, check=False)
    assert done.stderr == ""
    return done.stdout


class TestCompletion:
    @pytest.mark.parametrize("shell", SOURCES)
    def test_the_script_of_a_shell(self, shell):
        environment = os.environ | {"_SIMIMG_COMPLETE": f"{shell}_source"}
        done = subprocess.run(MODULE, env=environment, capture_output=True, text=True, check=False)
        assert SOURCES[shell] in done.stdout
        assert f"_SIMIMG_COMPLETE={shell}_complete" in done.stdout

    @pytest.mark.parametrize("shell", SOURCES)
    def test_commands_options_and_words(self, shell):
        found = completed(shell, "simimg me", "me", 1)
        assert "measure" in found
        assert "expose" not in found
        every = completed(shell, "simimg ", "", 1)
        assert all(name in every for name in COMMANDS)
        assert "--width" in completed(shell, "simimg figure --wi", "--wi", 2)
        panels = completed(shell, "simimg figure a.toml --what pupil,p", "pupil,p", 4)
        assert "pupil,psf" in panels
        assert "pupil,pupil" not in panels
        assert "wavefront" not in panels

    def test_in_a_real_bash(self, tmp_path):
        bash = shutil.which("bash")
        if bash is None:
            pytest.skip("bash is not installed")
        command = tmp_path / "simimg"
        command.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m simimg_cli "$@"\n')
        command.chmod(0o755)
        script = (
            'eval "$(_SIMIMG_COMPLETE=bash_source simimg)"\n'
            "COMP_WORDS=(simimg cal); COMP_CWORD=1\n"
            "_simimg_completion simimg cal simimg\n"
            'echo "${COMPREPLY[@]}"\n'
        )
        path = f"{tmp_path}{os.pathsep}{os.environ['PATH']}"
        done = subprocess.run(
            [bash, "--norc", "-c", script],
            env=os.environ | {"PATH": path},
            capture_output=True,
            text=True,
            check=False,
        )
        assert (done.stdout, done.stderr) == ("calibrate\n", "")


def piped(*arguments, **environment):
    return subprocess.run(
        [*MODULE, *arguments],
        env=os.environ | {"TERM": "xterm-256color"} | environment,
        capture_output=True,
        text=True,
        check=False,
    )


def watched(columns, *arguments):
    """What a command writes to a terminal of a width."""
    ours, theirs = pty.openpty()
    fcntl.ioctl(theirs, termios.TIOCSWINSZ, struct.pack("HHHH", 40, columns, 0, 0))
    plain = {k: v for k, v in os.environ.items() if k not in ("COLUMNS", "LINES", "NO_COLOR")}
    with subprocess.Popen(
        [*MODULE, *arguments],
        stdin=theirs,
        stdout=theirs,
        stderr=theirs,
        env=plain | {"TERM": "xterm-256color"},
    ) as child:
        os.close(theirs)
        parts = []
        try:
            while part := os.read(ours, 65536):
                parts.append(part)
        except OSError:
            pass  # the other end is closed
        os.close(ours)
    assert child.returncode == 0
    text = b"".join(parts).decode()
    return re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", text).replace("\r", "").splitlines()


class TestWidth:
    def test_help_and_paragraphs_keep_to_the_terminal(self):
        narrow, wide = watched(60, "figure", "--help"), watched(110, "figure", "--help")
        assert max(map(len, narrow)) <= 60
        assert 80 < max(map(len, wide)) <= 110

    def test_captions_keep_to_the_terminal(self, folder, scene, run):
        for columns in (60, 100):
            lines = watched(
                columns, "figure", scene, "--what", "pupil", "-o", "f.png", "--overwrite"
            )
            text = [line for line in lines if "simulation:" not in line]
            assert columns - 25 < max(map(len, text)) <= columns
        out = run("figure", scene, "--what", "pupil", "-o", "g.png").out
        assert 60 < max(map(len, out.splitlines())) <= 80
        assert (folder / "g.png").exists()

    def test_piped_help_has_eighty_columns(self):
        done = piped("figure", "--help", COLUMNS="")
        assert 60 < max(map(len, done.stdout.splitlines())) <= 80


class TestPlain:
    @pytest.mark.parametrize(
        "arguments",
        [
            ["--help"],
            ["check", "tiny.toml"],
            ["check", "missing.toml"],
            ["chek"],
            ["expose", "tiny.toml", "-o", "f.fits"],
            ["limits", "tiny.toml"],
        ],
    )
    def test_no_escape_codes_where_nobody_watches(self, scene, arguments):
        assert scene == "tiny.toml"
        done = piped(*arguments)
        said = done.stdout + done.stderr
        assert said.strip()
        assert "\x1b" not in said
        assert "\r" not in said
