"""Where results go: JSON to a file or standard output, text to standard output, each whole or not at all."""

from __future__ import annotations

import sys
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from fvcheck.cli.options import Output
from fvcheck.errors import SetupError
from fvcheck.ledger import Result
from fvcheck.verdict import worst


def check_target(output: Output) -> None:
    """SetupError where the JSON cannot be written, before anything is computed."""
    if output.json in (None, "-"):
        return
    path = Path(str(output.json))
    if path.is_dir() or not path.parent.is_dir():
        what = "this is a directory" if path.is_dir() else "there is no directory for the JSON file"
        raise SetupError(what, where=path, mend="Give --json the path of a file.")


def show(output: Output, data: Callable[[], Mapping[str, Any]], text: Callable[[], str]) -> None:
    """Write the JSON that is wanted, then the text unless JSON went to standard output."""
    from fvcheck import jsonout

    # Text first made, then written: nothing appears if either fails.
    shown = "" if output.json == "-" else text()
    if output.json == "-":
        shown = jsonout.dumps(data())
    elif output.json is not None:
        jsonout.write(output.json, data())
    sys.stdout.write(shown)
    sys.stdout.flush()


def history_data(results: Sequence[Result]) -> dict[str, Any]:
    """The result file of several steps: the last one, with all of them under ``history``."""
    data = results[-1].to_dict()
    data["verdict"] = worst(result.verdict for result in results)
    data["history"] = [
        {key: result.case[key] for key in ("file", "step", "time")}
        | {key: result.to_dict()[key] for key in ("verdict", "surfaces")}
        for result in results
    ]
    return data
