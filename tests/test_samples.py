"""Every sample file gives the mesh that samples.json states (written by other programs than fvcheck)."""

import json
from pathlib import Path

import numpy as np
import pytest
from small_pieces import length

from fvcheck.errors import MeshError
from fvcheck.formats.registry import open_export
from fvcheck.mesh.assemble import assemble

SAMPLES = Path(__file__).parent / "samples"
EXPECTED = json.loads((SAMPLES / "samples.json").read_text())["files"]


@pytest.mark.parametrize("name", sorted(EXPECTED))
@pytest.mark.parametrize("keep_centres", [False, True])
def test_a_sample_gives_the_stated_mesh(name, keep_centres):
    expected = EXPECTED[name]
    pieces = open_export(SAMPLES / name).load(0)
    assembly = assemble(pieces, keep_centres=keep_centres)
    mesh = assembly.mesh
    assert (mesh.n_cells, mesh.n_points, assembly.plane) == (
        expected["cells"],
        expected["points"],
        expected["plane"],
    )
    # float32 coordinates near 2 are off by up to 1.2e-7, along a rim of length 7
    assert mesh.areas.sum() == pytest.approx(expected["area"], abs=1e-6 if "float32" in name else 1e-11)
    for patch, facts in expected["patches"].items():
        ours = patch if patch in mesh.boundary.names else f"patch-{facts['id']}"
        halves = 2 if expected["mesh"].startswith("quadratic") else 1
        assert len(mesh.patch_edges(ours)) == halves * facts["edges"]
        assert length(mesh, ours) == pytest.approx(facts["length"], abs=1e-9)  # coordinates of 11 digits
    if expected["patches"]:
        assert len(mesh.boundary.names) == len(expected["patches"])
    else:
        assert set(mesh.boundary.names) == {"left", "right", "bottom", "top"}


@pytest.mark.parametrize("name", sorted(EXPECTED))
def test_sources_lead_back_to_the_coordinates_of_the_file(name):
    pieces = open_export(SAMPLES / name).load(0)
    assembly = assemble(pieces)
    raw = np.concatenate([np.asarray(p.points, float) for p in pieces])[assembly.point_source]
    back = (raw - assembly.origin) @ assembly.axes[:2].T
    np.testing.assert_array_equal(back, assembly.mesh.points)
    assert len(np.unique(assembly.cell_source)) == assembly.mesh.n_cells


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("vtu_bow_tie.vtu", "crosses or touches itself"),
        ("vtu_two_layers.vtu", "not one cell thick"),
        ("vtu_lines_only.vtu", "only lines"),
    ],
)
def test_a_file_that_holds_no_plane_mesh_is_refused_with_the_reason(name, words):
    pieces = open_export(SAMPLES / "bad" / name).load(0)
    with pytest.raises(MeshError, match=words):
        assemble(pieces)
