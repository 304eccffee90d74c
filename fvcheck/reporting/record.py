"""What a report keeps for the record: versions, files with their digests, the date."""

from __future__ import annotations

import hashlib
import platform
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

from fvcheck.version import __version__

_LIBRARIES = ("numpy", "scipy", "numba", "h5py", "shapely", "matplotlib", "vtk", "jinja2", "pydantic")

# Read so much of a file at a time.
_BLOCK = 1 << 22


@dataclass(frozen=True)
class FileFacts:
    """One file: its name as given, its size in bytes, its SHA-256; None where it cannot be read."""

    name: str
    size: int | None
    sha256: str | None


@dataclass(frozen=True)
class Record:
    """When, with what and from what a report was made; versions are (name, version)."""

    date: str
    versions: tuple[tuple[str, str], ...]
    files: tuple[FileFacts, ...]


def record_of(files: Iterable[str | Path], date: datetime | None = None) -> Record:
    """The record of these files, now or at ``date``."""
    when = (date or datetime.now().astimezone()).isoformat(sep=" ", timespec="seconds")
    versions = [("fvcheck", __version__), ("Python", platform.python_version())]
    for name in _LIBRARIES:
        try:
            versions.append((name, version(name)))
        except PackageNotFoundError:
            continue
    return Record(when, tuple(versions), tuple(_facts(Path(name)) for name in dict.fromkeys(map(str, files))))


def _facts(path: Path) -> FileFacts:
    try:
        if not path.is_file():
            return FileFacts(str(path), None, None)
        digest, size = hashlib.sha256(), 0
        with path.open("rb") as file:
            while block := file.read(_BLOCK):
                digest.update(block)
                size += len(block)
    except OSError:
        return FileFacts(str(path), None, None)
    return FileFacts(str(path), size, digest.hexdigest())
