"""Where the output of every command goes: a closed pipe, a pipe, a terminal, with and without colour."""

from __future__ import annotations

import os
import pty
import re
import sys
from pathlib import Path

import pytest
from forked import _CONTEXT, fvcheck

ROOT = Path(__file__).parent.parent
DEMO, FINE = (str(ROOT / "meshes" / f"demo-{size}.vtu") for size in ("coarse", "fine"))
CHECK = str(ROOT / "meshes" / "demo.toml")
ITERATIONS = [str(ROOT / "meshes" / f"demo-coarse-0{n}.vtu") for n in ("100", "200", "400")]
MASS = ["-c", CHECK, "--law", "mass"]

COMMANDS = {
    "inspect": ["inspect", DEMO],
    "balance": ["balance", DEMO, *MASS],
    "forces": ["forces", DEMO, "-c", CHECK, "--body", "patch-4"],
    "history": ["history", *ITERATIONS, *MASS, "--steady"],
    "study": ["study", DEMO, FINE, *MASS],
    "diagnose": ["diagnose", DEMO, *MASS],
    "gate": ["gate", CHECK, "--workers", "1"],
    "report": ["report", CHECK, "--law", "mass", "-o", os.devnull],
    "explain": ["explain", "bands"],
    "--help": ["--help"],
    "balance --help": ["balance", "--help"],
    "--version": ["--version"],
}
QUIET = [name for name in COMMANDS if "-" not in name and name != "explain"]

CLOSED_PIPE = 141  # 128 + SIGPIPE, as a shell tells it of other programs
COLOUR = re.compile(r"\x1b\[(?:\d+;)*(?:3[0-7]|4[0-7]|9[0-7]|38|48)(?:;\d+)*m")


def _arguments(name: str, folder: Path) -> list[str]:
    return [str(folder / "page.html") if word == os.devnull else word for word in COMMANDS[name]]


def _end(arguments: list[str]) -> None:
    sys.stdout = os.fdopen(1, "w", encoding="utf-8", closefd=False)
    sys.stderr = os.fdopen(2, "w", encoding="utf-8", closefd=False)
    from fvcheck.cli.app import run

    status = run(arguments)
    sys.stderr.flush()
    if status != CLOSED_PIPE:
        sys.stdout.flush()
    os._exit(status)


def _into_a_closed_pipe(arguments: list[str], err: str) -> None:
    reading, writing = os.pipe()
    os.close(reading)
    os.dup2(writing, 1)
    os.dup2(os.open(err, os.O_WRONLY | os.O_CREAT | os.O_TRUNC), 2)
    _end(arguments)


def _on_a_terminal(arguments: list[str], terminal: str, environment: dict[str, str]) -> None:
    handle = os.open(terminal, os.O_RDWR | os.O_NOCTTY)
    os.dup2(handle, 1)
    os.dup2(handle, 2)
    for name in ("NO_COLOR", "FORCE_COLOR"):
        os.environ.pop(name, None)
    os.environ.update({"TERM": "xterm-256color", **environment})
    _end(arguments)


def on_a_terminal(arguments: list[str], **environment: str) -> str:
    """What appears on a terminal, standard output and error together."""
    master, slave = pty.openpty()
    child = _CONTEXT.Process(target=_on_a_terminal, args=(arguments, os.ttyname(slave), environment))
    child.start()
    shown = b""
    os.set_blocking(master, False)
    while child.is_alive() or shown == b"":
        child.join(0.02)
        try:
            while part := os.read(master, 65536):
                shown += part
        except BlockingIOError:
            pass
        if not child.is_alive():
            break
    os.close(slave)
    os.close(master)
    assert child.exitcode in (0, 1, 3), shown
    return shown.decode("utf-8", "replace")


@pytest.mark.parametrize("name", COMMANDS)
def test_a_reader_that_leaves_is_no_fault(name, tmp_path):
    err = tmp_path / "err"
    child = _CONTEXT.Process(target=_into_a_closed_pipe, args=(_arguments(name, tmp_path), str(err)))
    child.start()
    child.join(30)
    assert child.exitcode == CLOSED_PIPE
    assert err.read_text() == ""


@pytest.mark.parametrize("name", COMMANDS)
def test_a_pipe_gets_no_codes_and_no_progress(name, tmp_path):
    shown = fvcheck(*_arguments(name, tmp_path))
    assert shown.status in (0, 1, 3) and shown.out
    assert "\x1b" not in shown.out and "\r" not in shown.out
    assert shown.err == ""


@pytest.mark.parametrize("name", QUIET)
def test_quietly_a_command_tells_its_result_in_a_line_or_two(name, tmp_path):
    quiet = fvcheck(*_arguments(name, tmp_path), "--quiet")
    assert quiet.status in (0, 1, 3) and quiet.err == ""
    assert 1 <= len(quiet.out.splitlines()) <= 2
    assert "hint" not in quiet.out


def test_a_terminal_gets_colour_unless_it_is_switched_off(tmp_path):
    for name in ("balance", "gate", "history"):
        arguments = _arguments(name, tmp_path)
        assert COLOUR.search(on_a_terminal(arguments)), name
        assert not COLOUR.search(on_a_terminal(arguments, NO_COLOR="1")), name


def test_a_terminal_gets_progress_of_long_work_unless_quiet(tmp_path):
    arguments = _arguments("history", tmp_path)
    assert "3/3" in on_a_terminal(arguments)
    assert "3/3" not in on_a_terminal([*arguments, "--quiet"])
