"""The commands together, and the one place where an error becomes a line of text and an exit status."""

from __future__ import annotations

import os
import re
import sys
import traceback
from collections.abc import Iterator, Sequence
from importlib import import_module
from typing import Annotated, Any

import typer

from fvcheck.errors import FvcheckError, nearest
from fvcheck.version import __version__

UNUSABLE = 2
"""Exit status: the command, the check file or the data cannot be used."""

INTERRUPTED, PIPE_CLOSED = 130, 141
"""Exit statuses of a shell for a program stopped by Ctrl-C, or by a reader that went away."""

# Wherever typer keeps them (its own copy, or the click package).
_UsageError: Any = typer.BadParameter.__mro__[1]
_ClickError: Any = typer.BadParameter.__mro__[2]

app = typer.Typer(
    help="Does this 2D flow field conserve mass, momentum and energy?",
    epilog="Exit status: 0 closed, 1 open, 2 unusable input, 3 undecided or mesh-limited.",
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    context_settings={"help_option_names": ["-h", "--help"]},
)
COMMANDS = (
    "inspect", "balance", "forces", "history", "study", "diagnose", "gate", "report", "demo", "explain",
)  # fmt: skip


def _register(arguments: Sequence[str]) -> None:
    """The command that a line names; all where it names none, and for the completion of the shell."""
    named = arguments[:1] if arguments and arguments[0] in COMMANDS else COMMANDS
    known = {info.name for info in app.registered_commands}
    for name in COMMANDS if "_FVCHECK_COMPLETE" in os.environ else named:
        if name not in known:
            app.command(name)(import_module(f"fvcheck.cli.{name}").command)
    app.registered_commands.sort(key=lambda info: COMMANDS.index(str(info.name)))


def _show_version(wanted: bool) -> None:
    if wanted:
        print(f"fvcheck {__version__}")
        raise typer.Exit


@app.callback()
def _start(
    version: Annotated[
        bool,
        typer.Option("--version", help="Show the version and exit.", callback=_show_version, is_eager=True),
    ] = False,
) -> None:
    pass


def run(arguments: Sequence[str]) -> int:
    """Run one command line; its exit status.

    Whatever goes wrong is told on standard error in one line,
    ``error: WHAT (WHERE). HOW TO MEND IT``, with status 2.
    """
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            # A terminal that lacks a character shows a question mark, not a failure.
            stream.reconfigure(errors="replace")
    if "--version" in arguments and not any(a == "--" for a in arguments):
        arguments = ["--version"]  # everywhere, as the contract has it
    _register(arguments)
    try:
        todo = typer.main.get_command(app).main(
            args=list(arguments) or ["--help"], prog_name="fvcheck", standalone_mode=False
        )
        status = todo() if callable(todo) else 0
        sys.stdout.flush()
        return status
    except FvcheckError as error:
        return _fail(str(error))
    except _UsageError as error:
        return _fail(_usage(error))
    except _ClickError as error:
        return _fail(error.format_message())
    except (KeyboardInterrupt, typer.Abort):
        _fail("stopped from the keyboard.")
        return INTERRUPTED
    except (BrokenPipeError, SystemExit) as leaving:
        if isinstance(leaving, SystemExit) and not isinstance(leaving.__context__, BrokenPipeError):
            return int(leaving.code or 0)  # the shell was told how to complete a line
        # The interpreter flushes once more at its end; nobody is there to read it. From within
        # the help rich tells it by leaving.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return PIPE_CLOSED
    except MemoryError:
        return _fail("the memory does not suffice. Use a larger machine, or a smaller export.")
    except OSError as error:
        place = f" ({error.filename})" if error.filename else ""
        return _fail(f"{error.strerror or error}{place}.")
    except Exception as error:
        if os.environ.get("FVCHECK_TRACEBACK"):
            raise
        return _fail(_fault(error))


def _fail(text: str) -> int:
    # One line, whatever a file's names hold: line ends, or the codes that steer a terminal.
    line = "".join(letter if letter.isprintable() else "?" for letter in " ".join(text.split()))
    print(f"error: {line}", file=sys.stderr)
    return UNUSABLE


def _fault(error: Exception) -> str:
    """A fault of fvcheck itself, with the place in its code."""
    last = traceback.extract_tb(error.__traceback__)[-1]
    place = f"{os.path.basename(last.filename)}, line {last.lineno}"
    return (
        f"fvcheck met a fault of its own: {type(error).__name__}: {error} ({place}). "
        "Please report it with the file; FVCHECK_TRACEBACK=1 shows where it happened."
    )


def _usage(error: Any) -> str:
    """What the parser found wrong, with the nearest known name."""
    message = error.format_message().strip().rstrip(".")
    context = error.ctx
    where = context.command_path if context is not None else "fvcheck"
    mend = f"See {where} --help."
    if (option := getattr(error, "option_name", None)) and type(error).__name__ == "NoSuchOption":
        message = f"there is no option {option!r}"
        mend = f"{nearest(option, _options(context))} {mend}"
    elif found := re.match(r"No such command '(.*?)'", message):
        commands = context.command.list_commands(context)
        message = f"there is no command {found[1]!r}"
        mend = nearest(found[1], commands) or f"Commands: {', '.join(commands)}."
    return f"{message[:1].lower()}{message[1:]} ({where}). {mend}"


def _options(context: Any) -> Iterator[str]:
    if context is not None:
        for parameter in context.command.params:
            yield from (name for name in parameter.opts if name.startswith("-"))
