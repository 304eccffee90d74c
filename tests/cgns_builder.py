"""Writes small CGNS/HDF5 files for the tests, node by node as the published mapping says."""

from __future__ import annotations

import h5py
import numpy as np

KINDS = {"f8": "R8", "f4": "R4", "i4": "I4", "i8": "I8"}


class Builder:
    """A file under construction; `add` puts a node below another and returns it."""

    def __init__(self, path):
        self.file = h5py.File(path, "w", track_order=True)
        self.add(self.file, "CGNSLibraryVersion", "CGNSLibraryVersion_t", np.array([4.2], "f4"))

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.file.close()

    def add(self, parent, name, label, data=None):
        group = parent.create_group(name, track_order=True)
        kind = "MT"
        if isinstance(data, str):
            data, kind = np.frombuffer(data.encode(), "i1"), "C1"
        elif isinstance(data, list) and data and isinstance(data[0], str):
            data = np.array([list(text.ljust(32).encode()) for text in data], "i1")
            kind = "C1"
        elif data is not None:
            data = np.asarray(data)
            data = data.astype("i4") if data.dtype.kind == "i" and data.dtype != "i8" else data
            kind = KINDS[data.dtype.str[1:]]
        for key, value in (("name", name), ("label", label), ("type", kind)):
            group.attrs[key] = np.bytes_(value)
        if data is not None:
            group.create_dataset(" data", data=data)
        return group

    def base(self, cells=2, space=2, name="Base"):
        return self.add(self.file, name, "CGNSBase_t", np.array([cells, space], "i4"))

    def zone(self, base, points, cells, name="Zone", structured=False):
        size = np.array([points, cells, np.zeros_like(points)], "i4").reshape(3, -1)
        zone = self.add(base, name, "Zone_t", size)
        self.add(zone, "ZoneType", "ZoneType_t", "Structured" if structured else "Unstructured")
        return zone

    def coordinates(self, zone, rind=None, name="GridCoordinates", **axes):
        grid = self.add(zone, name, "GridCoordinates_t")
        if rind is not None:
            self.add(grid, "Rind", "Rind_t", np.array(rind, "i4"))
        for axis, values in axes.items():
            self.add(grid, f"Coordinate{axis}", "DataArray_t", np.asarray(values, float))

    def section(self, zone, name, code, first, last, connectivity, offsets=None, parents=None):
        node = self.add(zone, name, "Elements_t", np.array([code, 0], "i4"))
        self.add(node, "ElementRange", "IndexRange_t", np.array([first, last], "i4"))
        self.add(node, "ElementConnectivity", "DataArray_t", np.array(connectivity, "i4"))
        if offsets is not None:
            self.add(node, "ElementStartOffset", "DataArray_t", np.array(offsets, "i4"))
        if parents is not None:
            self.add(node, "ParentElements", "DataArray_t", np.array(parents, "i4"))

    def solution(self, zone, location, name="FlowSolution", rind=None, **arrays):
        node = self.add(zone, name, "FlowSolution_t")
        self.add(node, "GridLocation", "GridLocation_t", location)
        if rind is not None:
            self.add(node, "Rind", "Rind_t", np.array(rind, "i4"))
        for key, values in arrays.items():
            self.add(node, key, "DataArray_t", np.asarray(values))

    def condition(self, zone, name, kind, index, values, location=None, family=None):
        group = zone.get("ZoneBC") or self.add(zone, "ZoneBC", "ZoneBC_t")
        node = self.add(group, name, "BC_t", kind)
        label = "IndexRange_t" if index.endswith("Range") else "IndexArray_t"
        self.add(node, index, label, np.array(values, "i4"))
        if location:
            self.add(node, "GridLocation", "GridLocation_t", location)
        if family:
            self.add(node, "FamilyName", "FamilyName_t", family)
