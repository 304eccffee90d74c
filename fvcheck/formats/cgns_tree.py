"""Nodes of a CGNS file in its HDF5 form.

Mapping: "HDF5 Implementation of the CGNS database", https://cgns.github.io. A
node is a group with the attributes ``name``, ``label`` and ``type``; its data are
the dataset `` data``, with the axes in the reverse of their order in the SIDS.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.mesh.piece import Array


@dataclass(frozen=True, eq=False)
class Node:
    """A node: its name, label, HDF5 group, and the place for messages."""

    group: Any
    name: str
    label: str
    where: str

    def children(self, label: str = "") -> Iterator[Node]:
        """The children, or those with a label, in the order of the file."""
        for key in safe.names(self.group, self.where):
            if key.startswith(" "):
                continue
            child = _node(self.group, key, self.where)
            if child is not None and label in ("", child.label):
                yield child

    def child(self, name: str, label: str = "") -> Node | None:
        """The child with this name (and label), or None."""
        found = _node(self.group, name, self.where)
        return found if found is not None and label in ("", found.label) else None

    def first(self, label: str) -> Node | None:
        """The first child with a label, or None."""
        return next(self.children(label), None)

    def dataset(self) -> Any:
        """The dataset with the node's data, or None."""
        data = safe.member(self.group, " data", self.where)
        if data is not None and not safe.is_dataset(data):
            raise FormatError("the data of a node are no dataset", where=self.where, mend=safe.DAMAGED)
        return data

    def shape(self) -> tuple[int, ...]:
        """Shape of the data, the fastest axis last."""
        data = self.dataset()
        if data is None:
            raise FormatError("the node holds no data", where=self.where, mend=safe.DAMAGED)
        return safe.shape(data, self.where)

    def numbers(self) -> Array:
        """The data as an array, the fastest axis last. Raises `FormatError` when there are none."""
        data = self.dataset()
        if data is None:
            raise FormatError("the node holds no data", where=self.where, mend=safe.DAMAGED)
        return safe.read(data, self.where)

    def integers(self, count: int | None = None) -> Array:
        """The data as a flat list of int64, of ``count`` entries if given."""
        values = self.numbers().reshape(-1)
        if values.dtype.kind not in "iu" or (count is not None and len(values) != count):
            raise FormatError(
                f"{'integers' if count is None else f'{count} integers'} are expected here",
                where=self.where,
                mend=safe.DAMAGED,
            )
        return values.astype(np.int64)

    def text(self) -> str:
        """The data as text, without blanks at the ends; empty if there are none."""
        lines = self.lines()
        return lines[0] if len(lines) == 1 else "".join(lines)

    def lines(self) -> list[str]:
        """The data as texts, one for each row of characters."""
        data = self.dataset()
        if data is None:
            return []
        shape = safe.shape(data, self.where)
        if not safe.is_numeric(data, self.where):
            raise FormatError("the text is stored in an unknown way", where=self.where, mend=safe.DAMAGED)
        values = safe.read(data, self.where)
        if values.dtype.itemsize != 1 or values.size > 1 << 24:
            raise FormatError("text is expected here", where=self.where, mend=safe.DAMAGED)
        rows = values.reshape(-1, shape[-1]) if len(shape) > 1 else values.reshape(1, -1)
        return [row.tobytes().split(b"\0")[0].decode("utf-8", "replace").strip() for row in rows]


def _node(group: Any, name: str, where: str) -> Node | None:
    found = safe.member(group, name, where) if "/" not in name else None
    if found is None or not safe.is_group(found):
        return None
    if safe.text_attribute(found, "type", where) == "LK":
        found = _linked(found, f"{where}/{name}")
    label = safe.text_attribute(found, "label", where)
    if not label:
        raise FormatError("the node has no label", where=f"{where}/{name}", mend=safe.DAMAGED)
    return Node(found, name, label, f"{where}/{name}")


def _linked(group: Any, where: str) -> Any:
    """The group a link node points at, in the same file."""
    if safe.member(group, " file", where) is not None:
        raise FormatError(
            "the node is a link into another file", where=where, mend="Export everything into one file."
        )
    target = safe.member(group, " link", where)
    if target is None or not safe.is_group(target):
        raise FormatError("the link leads nowhere", where=where, mend=safe.DAMAGED)
    return target


def root_of(file: Any, where: str) -> Node:
    """The root of an open file."""
    return Node(safe.root(file, where), "", "Root Node of HDF5 File", where)
