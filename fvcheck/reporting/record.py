"""What a report keeps for the record: versions, files with their digests, the date."""

from __future__ import annotations

import hashlib
import html
import platform
import re
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

from fvcheck.version import __version__

_LIBRARIES = ("numpy", "scipy", "numba", "h5py", "shapely", "matplotlib", "vtk", "jinja2", "pydantic")

# Files that name others, and how they do.
_LISTS = (".pvd", ".pvtu", ".pvtp", ".pvts", ".pvtr", ".pvti", ".vtm", ".vtmb", ".xdmf", ".xmf")
_NAMED = re.compile(r"""\b(?:file|Source)\s*=\s*["']([^"']+)["']|([^<>\s"':]+\.(?:h5|hdf5|hdf|bin|xmf)):?""")
_LONGEST_LIST, _MOST_NAMED = 20_000_000, 2_000

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
    named = dict.fromkeys(one for name in files for one in (Path(name), *_named_within(Path(name))))
    return Record(when, tuple(versions), tuple(map(_facts, named)))


def _named_within(path: Path, depth: int = 2) -> list[Path]:
    """Files that an XML file of parts or steps names: those that are there, in its own folder or below."""
    if path.suffix.lower() not in _LISTS or not path.is_file() or path.stat().st_size > _LONGEST_LIST:
        return []
    text = path.read_text(encoding="utf-8", errors="replace")
    folder, found = path.parent.resolve(), []
    for spelling in dict.fromkeys(match[1] or match[2] for match in _NAMED.finditer(text)):
        part = path.parent / html.unescape(spelling)
        try:
            known = part.is_file() and folder in part.resolve().parents
        except (OSError, ValueError):
            continue
        if known:
            found += [part, *(_named_within(part, depth - 1) if depth else ())]
    return found[:_MOST_NAMED]


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
