"""The script that a user would otherwise write, with VTK."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from benchmarks.cases import CIRCLE, FLUID


def point_sampling(grid: Any) -> Callable[[], object]:
    """Fluxes by VTK's probe along the circle, four points for each cell it meets, trapezoid sums.

    The locator belongs to it: a script has none yet. Mass, momentum, convected heat; no bands.
    """
    import vtk
    from vtk.util.numpy_support import vtk_to_numpy

    x, y, r = CIRCLE
    count = int(4 * 2 * np.pi * r / np.sqrt(1.0 / grid.n_cells))
    angle = 2 * np.pi * np.arange(count + 1) / count
    line = vtk.vtkPoints()
    for a in angle:
        line.InsertNextPoint(x + r * np.cos(a), y + r * np.sin(a), 0.0)
    places = vtk.vtkPolyData()
    places.SetPoints(line)
    normal = np.column_stack([np.cos(angle), np.sin(angle)])

    def run() -> tuple[float, ...]:
        probe = vtk.vtkProbeFilter()
        locator = vtk.vtkStaticCellLocator()
        locator.SetDataSet(grid)
        locator.BuildLocator()
        probe.SetCellLocatorPrototype(locator)  # the name that also older VTK know
        probe.SetInputData(places)
        probe.SetSourceData(grid)
        probe.Update()
        data = probe.GetOutput().GetPointData()
        u, p, t = (vtk_to_numpy(data.GetArray(name)) for name in ("U", "p", "T"))
        through = np.sum(u[:, :2] * normal, axis=1)
        step = 2 * np.pi * r / count
        fluxes = (
            through,
            u[:, 0] * through + p * normal[:, 0],
            u[:, 1] * through + p * normal[:, 1],
            FLUID["specific_heat"] * t * through,
        )
        return tuple(float(np.trapezoid(flux) * step) for flux in fluxes)

    return run


def clip_and_integrate(grid: Any) -> Callable[[], object]:
    """A volume term by VTK: gradients, clip by the circle, integration."""
    import vtk

    def run() -> float:
        gradient = vtk.vtkGradientFilter()
        gradient.SetInputData(grid)
        gradient.SetInputScalars(0, "U")
        sphere = vtk.vtkSphere()
        sphere.SetCenter(CIRCLE[0], CIRCLE[1], 0.0)
        sphere.SetRadius(CIRCLE[2])
        clip = vtk.vtkClipDataSet()
        clip.SetInputConnection(gradient.GetOutputPort())
        clip.SetClipFunction(sphere)
        clip.InsideOutOn()
        total = vtk.vtkIntegrateAttributes()
        total.SetInputConnection(clip.GetOutputPort())
        total.Update()
        return float(total.GetOutput().GetPointData().GetArray("Gradients").GetTuple(0)[0])

    return run


READ = """
import sys
from vtkmodules.vtkIOXML import {0}
for path in sys.argv[1:]:
    reader = {0}()
    reader.SetFileName(path)
    reader.Update()
"""
"""Bare reads, for a process of its own; to be formatted with the reader's name."""
