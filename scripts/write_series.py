"""Series in HDF5, written by the published layouts: VTKHDF (docs.vtk.org) and XDMF (xdmf.org)."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path

import h5py
import numpy as np
from trial_meshes import Cells

Array = np.ndarray
Data = Mapping[str, Array]
_POLYGON = 7


def points_of(cells: Cells) -> Array:
    return np.column_stack([cells.points, np.zeros(len(cells.points))])


def write_vtkhdf(
    path: Path, cells: Cells, times: Sequence[float], load: Callable[[float], Data], kind="PointData", **store
) -> Path:
    """A transient unstructured grid at rest; ``store``: see `_stored`."""
    every = [load(time) for time in times]
    count = len(cells.points) if kind == "PointData" else len(cells.offsets) - 1
    with h5py.File(path, "w") as file:
        root = file.create_group("VTKHDF")
        root.attrs["Version"] = (2, 2)
        root.attrs["Type"] = np.bytes_("UnstructuredGrid")
        root["NumberOfPoints"] = [len(cells.points)]
        root["NumberOfCells"] = [len(cells.offsets) - 1]
        root["NumberOfConnectivityIds"] = [len(cells.nodes)]
        root["Points"] = points_of(cells)
        root["Connectivity"] = cells.nodes
        root["Offsets"] = cells.offsets
        root["Types"] = np.full(len(cells.offsets) - 1, _POLYGON, np.uint8)
        steps = root.create_group("Steps")
        steps.attrs["NSteps"] = len(times)
        steps["Values"] = np.asarray(times, float)
        zero = np.zeros(len(times), np.int64)
        for name in ("PartOffsets", "PointOffsets"):
            steps[name] = zero
        for name in ("CellOffsets", "ConnectivityIdOffsets"):
            steps[name] = zero[:, None]
        steps["NumberOfParts"] = zero + 1
        arrays, offsets = root.create_group(kind), steps.create_group(f"{kind}Offsets")
        for name in every[0]:
            _stored(arrays, name, np.concatenate([data[name] for data in every]), **store)
            offsets[name] = count * np.arange(len(times))
    return path


def write_xdmf(
    path: Path, cells: Cells, times: Sequence[float], load: Callable[[float], Data], kind="PointData", **store
) -> Path:
    """A temporal collection of polygons or triangles whose mesh is written once."""
    sizes = np.diff(cells.offsets)
    three = bool(np.all(sizes == 3))
    if three:  # straight from the list, as 10⁶ cells are written too
        topology = cells.nodes.reshape(-1, 3)
    else:
        parts = [
            np.concatenate([[3, n], cells.nodes[a : a + n]])
            for a, n in zip(cells.offsets[:-1], sizes.tolist())
        ]
        topology = np.concatenate(parts)
    grids = []
    heavy = path.with_suffix(".h5").name
    centre = "Node" if kind == "PointData" else "Cell"
    with h5py.File(path.with_suffix(".h5"), "w") as file:
        file["mesh/points"] = points_of(cells)
        file["mesh/cells"] = topology
        for number, time in enumerate(times):
            attributes = ""
            for name, values in load(time).items():
                place = f"data/{number}/{name}"
                _stored(file, place, values, **store)
                attributes += (
                    f'<Attribute Name="{name}" Center="{centre}" '
                    f'AttributeType="{"Vector" if values.ndim == 2 else "Scalar"}">'
                    + _item(heavy, place, values, "Float")
                    + "</Attribute>"
                )
            geometry = _item(heavy, "mesh/points", points_of(cells), "Float")
            grids.append(
                f'<Grid GridType="Uniform"><Time Value="{time!r}"/>'
                f'<Topology TopologyType="{"Triangle" if three else "Mixed"}" '
                f'NumberOfElements="{len(sizes)}">{_item(heavy, "mesh/cells", topology, "Int")}</Topology>'
                f'<Geometry GeometryType="XYZ">{geometry}</Geometry>'
                f"{attributes}</Grid>"
            )
    path.write_text(
        '<?xml version="1.0"?><Xdmf Version="3.0"><Domain>'
        f'<Grid GridType="Collection" CollectionType="Temporal">{"".join(grids)}</Grid></Domain></Xdmf>'
    )
    return path


def _stored(group: h5py.Group, name: str, values: Array, rows: int | None = None, **store) -> None:
    """A dataset in chunks of so many rows; ``store``: settings of its storage that h5py takes."""
    chunks = store.pop("chunks", None) if rows is None else (min(rows, len(values)), *values.shape[1:])
    group.create_dataset(name, data=values, chunks=chunks, **store)


def _item(heavy: str, place: str, values: Array, kind: str) -> str:
    shape = " ".join(map(str, values.shape))
    return (
        f'<DataItem Format="HDF" NumberType="{kind}" Precision="{values.dtype.itemsize}" '
        f'Dimensions="{shape}">{heavy}:/{place}</DataItem>'
    )
