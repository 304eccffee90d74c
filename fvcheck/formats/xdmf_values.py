"""The attributes of an XDMF grid: values at nodes and cells, read when they are wanted, or by rows."""

from __future__ import annotations

from collections.abc import Iterator
from math import prod

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.xdmf_items import Items
from fvcheck.formats.xdmf_tree import Element
from fvcheck.mesh.piece import Array
from fvcheck.mesh.stored import stored

_COMPONENTS = {"scalar": (1,), "globalid": (1,), "vector": (3, 2), "tensor": (9, 4), "tensor6": (6, 3)}


def attributes(grid: Element) -> Iterator[tuple[Element, str, str]]:
    """Attributes at nodes and cells, with their names and centres."""
    for attribute in grid.all("Attribute"):
        centre = attribute.get("Center", default="Node").lower()
        if centre in ("node", "cell") and not attribute.get("ItemType"):
            yield attribute, attribute.get("Name") or "unnamed", centre


def values_of(
    attribute: Element, count: int, centre: str, shape: tuple[int, ...] | None, items: Items
) -> Array:
    """The values (count,) or (count, components) of an attribute; of plain ones in HDF5 read when wanted.

    shape : points per axis of a structured grid, None for others
    """
    item = items.only(attribute)[0]
    declared = items.declared(item)
    if declared is None:
        values = items.read(item)
        return values.reshape(_final_shape(attribute, values.shape, count, centre, shape, items))
    found, kind = declared
    final = _final_shape(attribute, found, count, centre, shape, items)

    def read() -> Array:
        with Items(items.path) as again:
            return again.read(item).reshape(final)

    return stored(final, kind, read)


def rows_of(
    attribute: Element,
    count: int,
    centre: str,
    shape: tuple[int, ...] | None,
    items: Items,
    rows: Array | None,
) -> Array:
    """Some rows (k,) of the values, increasing; None for all."""
    if rows is not None and shape is None:
        some = items.read_rows(items.only(attribute)[0], count, rows)
        if some is not None and some[0].size in _COMPONENTS.get(_kind(attribute), (some[0].size,)):
            return some
    values = np.asarray(values_of(attribute, count, centre, shape, items))
    return values if rows is None else values[rows]


def _final_shape(
    attribute: Element,
    found: tuple[int, ...],
    count: int,
    centre: str,
    shape: tuple[int, ...] | None,
    items: Items,
) -> tuple[int, ...]:
    """The shape that values of the shape ``found`` are brought to; FormatError where they do not fit."""
    where = items.where(attribute)
    name, kind = attribute.get("Name"), _kind(attribute)
    size, rest = divmod(prod(found), count)
    if rest or size < 1 or (kind != "matrix" and size not in _COMPONENTS.get(kind, ())):
        raise FormatError(
            f"the attribute '{name}' ({kind[:20]}) has {prod(found)} values for {count} {centre}s",
            where=where,
            mend="The file is damaged or incomplete; export it again.",
        )
    sizes = (count,) if shape is None else shape if centre == "node" else tuple(max(1, n - 1) for n in shape)
    wanted = [n for n in (*sizes, size) if n != 1]
    long = [n for n in found if n != 1]
    if len(long) > 1 and long != wanted and not (size > 1 and long == [prod(sizes), size]):
        raise FormatError(
            f"the attribute '{name}' has the dimensions {found} for {sizes} {centre}s",
            where=where,
        )
    return (count, size) if size > 1 else (count,)


def _kind(attribute: Element) -> str:
    return attribute.get("AttributeType", "Type", default="Scalar").lower()
