"""Reads files in child processes with bounded memory and time, for the tests with damaged files.

Run as ``python hostile_child.py FILE …``: every file in a fork of its own. One
line of JSON per file: [outcome, text], the outcome being ``ok``, ``error`` (a
`FvcheckError`), ``trace`` (any other exception) or ``killed``.
"""

from __future__ import annotations

import json
import os
import resource
import signal
import sys
from pathlib import Path

MEMORY, SECONDS = 4 << 30, 20


def read(path: Path) -> None:
    from whole import whole

    from fvcheck.formats import cgns, vtkhdf, xdmf

    module = {".cgns": cgns, ".vtkhdf": vtkhdf, ".xdmf": xdmf}[path.suffix]
    with path.open("rb") as stream:
        module.sniff(stream.read(4096), path)
    export = module.open_export(path)
    for step in range(export.steps):
        whole(export.load(step))


def attempt(path: Path) -> list[str]:
    from fvcheck.errors import FvcheckError

    out, into = os.pipe()
    child = os.fork()
    if child == 0:
        os.close(out)
        resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
        signal.alarm(SECONDS)
        try:
            read(path)
            result = ["ok", ""]
        except FvcheckError as error:
            result = ["error", str(error)]
        except BaseException as error:
            result = ["trace", f"{type(error).__name__}: {error}"]
        os.write(into, json.dumps(result).encode())
        os._exit(0)
    os.close(into)
    with os.fdopen(out, "rb") as stream:
        text = stream.read()
    _, status = os.waitpid(child, 0)
    return ["killed", f"signal {os.WTERMSIG(status)}"] if os.WIFSIGNALED(status) else json.loads(text)


if __name__ == "__main__":
    # Loaded once here, not again in every fork.
    import h5py  # noqa: F401

    from fvcheck.formats import cgns, vtkhdf, xdmf  # noqa: F401

    for name in sys.argv[1:]:
        print(json.dumps(attempt(Path(name))), flush=True)
