"""Runs of the command line in child processes, forked from one server that has the slow imports behind it."""

import contextlib
import functools
import multiprocessing
import os
import resource
import sys
import tempfile
from dataclasses import dataclass
from pathlib import Path

SECONDS = 20.0
BYTES = 6_000_000_000
"""Address space of a child: far more than any sample needs, far less than a damaged header may ask for."""

_PRELOAD = [
    "fvcheck.cli.app",
    "fvcheck.balancing",
    "fvcheck.inspection",
    "fvcheck.kernels.polygons",
    "fvcheck.text.ledger",
    "fvcheck.text.inspection",
    "h5py",
    "pydantic",
    "shapely",
    "scipy.sparse",
    "vtkmodules.vtkIOXML",
    "vtkmodules.util.numpy_support",
]

_CONTEXT = multiprocessing.get_context("forkserver")
_CONTEXT.set_forkserver_preload(_PRELOAD)


@dataclass(frozen=True)
class Run:
    """status : exit status, None after a time-out."""

    status: int | None
    out: str
    err: str


def fvcheck(
    *arguments: str | Path, cwd: Path | None = None, environment: dict[str, str] | None = None
) -> Run:
    """Run ``fvcheck ARGUMENTS``; a child that takes longer than `SECONDS` is ended."""
    _compile_kernels()
    return _run([str(argument) for argument in arguments], cwd, environment, SECONDS)


@functools.cache
def _compile_kernels() -> None:
    """Fill the cache of compiled kernels, so that no timed child has to: a fresh clone takes a minute."""
    samples = Path(__file__).parent / "samples"
    for name in ("tri_point.vtkhdf", "ext_poly_cell.cgns", "mixed_cell_zones.vtm", "tri6_point.xdmf"):
        warm = _run(["balance", str(samples / name), "--density", "1", "--viscosity", "1"], None, None, 600.0)
        assert warm.status in (0, 1, 3), warm
        assert _run(["inspect", str(samples / name)], None, None, 600.0).status == 0


def _run(arguments: list[str], cwd: Path | None, environment: dict[str, str] | None, seconds: float) -> Run:
    with tempfile.TemporaryDirectory() as folder:
        out, err = Path(folder, "out"), Path(folder, "err")
        child = _CONTEXT.Process(
            target=_child, args=(arguments, out, err, cwd or Path.cwd(), environment or {})
        )
        child.start()
        child.join(seconds)
        status = child.exitcode
        if status is None:
            child.kill()
            child.join()
        texts = [path.read_text(encoding="utf-8") if path.exists() else "" for path in (out, err)]
    return Run(status, *texts)


def _child(arguments: list[str], out: Path, err: Path, cwd: Path, environment: dict[str, str]) -> None:
    for number, path in ((1, out), (2, err)):
        handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC)
        os.dup2(handle, number)
    # The server's own streams may be anything: these are the child's.
    sys.stdout = os.fdopen(1, "w", encoding="utf-8", closefd=False)
    sys.stderr = os.fdopen(2, "w", encoding="utf-8", closefd=False)
    os.chdir(cwd)
    os.environ.update(environment)
    with contextlib.suppress(ValueError):
        resource.setrlimit(resource.RLIMIT_AS, (BYTES, BYTES))
    from fvcheck.cli.app import run

    status = run(arguments)
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(status)
