"""Readers of Gmsh MSH, Exodus II and MED against the sample files, which other programs' writers made.

Expected numbers: ``samples.json`` beside the samples and the Taylor-Green field
stated there. Tolerance 1e-12 where doubles were stored as doubles or with 17
digits: values of order one, sums of a few hundred terms.
"""

from __future__ import annotations

import json
import os
import random
import re
import resource
import signal
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from fvcheck.errors import FvcheckError
from fvcheck.formats import exodus, med, msh, registry

HERE = Path(__file__).parent
SAMPLES = HERE / "samples"
EXPECTED = json.loads((SAMPLES / "samples.json").read_text())["files"]
NAMES = sorted(name for name in EXPECTED if Path(name).suffix in (".msh", ".exo", ".med"))
BAD = sorted(
    name
    for name in json.loads((SAMPLES / "bad" / "bad.json").read_text())
    if Path(name).suffix in (".msh", ".exo", ".med")
)
READERS = {".msh": msh, ".exo": exodus, ".med": med}
LINES = (3, 21)
CORNERS = {5: 3, 22: 3, 9: 4, 23: 4, 28: 4}
MEMORY = 4 << 30


def only_piece(name: str, step: int = 0):
    (piece,) = registry.open_export(SAMPLES / name).load(step)
    return piece


def rings(piece):
    """Corner nodes of each 2D cell."""
    for kind, start, stop in zip(piece.types, piece.offsets, piece.offsets[1:]):
        if kind not in LINES and kind != 1:
            yield piece.nodes[start : start + CORNERS.get(int(kind), stop - start)]


def taylor_green(x, y):
    """u, v, p, T, rho of the samples ("about" in samples.json)."""
    return {
        "u": np.sin(x) * np.cos(y),
        "v": -np.cos(x) * np.sin(y),
        "p": (np.cos(2 * x) + np.cos(2 * y)) / 4,
        "T": 1 + 0.1 * x - 0.2 * y,
        "rho": np.ones_like(x),
    }


def cell_averages(piece):
    """Averages over each 2D cell: 12 x 12 Gauss points on the triangles of a fan, signed."""
    node, weight = np.polynomial.legendre.leggauss(12)
    node, weight = (node + 1) / 2, weight / 2
    s, t = np.meshgrid(node, node, indexing="ij")
    ws = np.outer(weight, weight) * s  # Duffy: (s, s t) covers the triangle
    out = {key: [] for key in ("u", "v", "p", "T", "rho")}
    for ring in rings(piece):
        xy = piece.points[ring, :2].astype(float)
        area, total = 0.0, dict.fromkeys(out, 0.0)
        for b, c in zip(xy[1:-1] - xy[0], xy[2:] - xy[0]):
            twice = b[0] * c[1] - b[1] * c[0]
            x = xy[0, 0] + s * ((1 - t) * b[0] + t * c[0])
            y = xy[0, 1] + s * ((1 - t) * b[1] + t * c[1])
            for key, values in taylor_green(x, y).items():
                total[key] += twice * float((ws * values).sum())
            area += twice / 2
        for key in out:
            out[key].append(total[key] / area)
    return {key: np.array(values) for key, values in out.items()}


def patch_edges(piece):
    """name -> list of (node, node), from patches and from named tags of line cells."""
    out = {}
    for name, patch in piece.patches.items():
        out[name] = [tuple(patch.nodes[a : a + 2]) for a in patch.offsets[:-1]]
    lines = np.isin(piece.types, LINES)
    for array, names in piece.tag_names.items():
        for tag, name in names.items():
            cells = np.flatnonzero(lines & (piece.cell_data[array] == tag))
            out[name] = [tuple(piece.nodes[piece.offsets[c] : piece.offsets[c] + 2]) for c in cells]
    return out


@pytest.mark.parametrize("name", NAMES)
def test_each_sample_is_known_by_its_content_and_has_the_stated_cells_points_and_area(name, tmp_path):
    expected = EXPECTED[name]
    other = tmp_path / "renamed.data"
    other.write_bytes((SAMPLES / name).read_bytes())
    export = registry.open_export(other)
    assert export.times == tuple(expected["times"])
    (piece,) = export.load(0)
    cells = list(rings(piece))
    assert len(cells) == expected["cells"]
    assert len(piece.points) == expected["points"]
    area = 0.0
    for ring in cells:
        x, y = piece.points[ring, 0], piece.points[ring, 1]
        area += abs(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y)) / 2
    assert area == pytest.approx(expected["area"], rel=1e-12)
    assert piece.points.dtype == np.float64


@pytest.mark.parametrize("name", NAMES)
def test_each_patch_of_a_sample_has_the_stated_edges_and_length(name):
    piece = only_piece(name)
    found = patch_edges(piece)
    assert sorted(found) == sorted(EXPECTED[name]["patches"])
    for patch, expected in EXPECTED[name]["patches"].items():
        ends = piece.points[np.array(found[patch])]
        length = np.linalg.norm(ends[:, 1] - ends[:, 0], axis=1).sum()
        assert len(ends) == expected["edges"]
        assert length == pytest.approx(expected["length"], rel=1e-12)


@pytest.mark.parametrize("name", NAMES)
def test_the_data_of_each_sample_follow_the_closed_form_at_every_step(name):
    export = registry.open_export(SAMPLES / name)
    for step in range(export.steps):
        (piece,) = export.load(step)
        time = export.times[step] if export.times else 0.0
        if EXPECTED[name]["location"] == "point":
            data = piece.point_data
            exact = taylor_green(piece.points[:, 0], piece.points[:, 1])
        else:
            plane = ~np.isin(piece.types, LINES)
            data = {key: values[plane] for key, values in piece.cell_data.items()}
            exact = cell_averages(piece)
        # Decay of the series: samples.json, nu = 0.05.
        slow, fast = np.exp(-2 * 0.05 * time), np.exp(-4 * 0.05 * time)
        u, v = (data["U"][:, 0], data["U"][:, 1]) if "U" in data else (data["U_x"], data["U_y"])
        np.testing.assert_allclose(u, exact["u"] * slow, atol=1e-12)
        np.testing.assert_allclose(v, exact["v"] * slow, atol=1e-12)
        np.testing.assert_allclose(data["p"], exact["p"] * fast, atol=1e-12)
        np.testing.assert_allclose(data["T"], exact["T"], atol=1e-12)
        np.testing.assert_allclose(data["rho"], exact["rho"], atol=1e-12)


CHILD = """
import resource, sys
resource.setrlimit(resource.RLIMIT_AS, (4 << 30, 4 << 30))
from pathlib import Path
from importlib import import_module
from fvcheck.errors import FvcheckError
from fvcheck.formats import registry
reader = import_module(sys.argv[2])
for open_export in (registry.open_export, reader.open_export):
    try:
        export = open_export(Path(sys.argv[1]))
        for step in range(export.steps):
            export.load(step)
    except FvcheckError as error:
        print(error)
    else:
        sys.exit(9)
"""


@pytest.mark.parametrize("name", BAD)
def test_each_damaged_sample_ends_in_one_line_and_nothing_worse(name):
    command = [sys.executable, "-c", CHILD, str(SAMPLES / "bad" / name), READERS[Path(name).suffix].__name__]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, cwd=HERE.parent)
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    lines = done.stdout.splitlines()
    assert len(lines) == 2 and all(len(line) > 20 for line in lines)


def mutated(data: bytes, rng: random.Random, text: bool) -> bytes:
    """One of the ways in which files get damaged."""
    out = bytearray(data)
    at = rng.randrange(len(out))
    kind = rng.randrange(6)
    if kind == 0:
        del out[at:]
    elif kind == 1:
        del out[at : at + rng.choice((1, 4, 60, 500))]
    elif kind == 2:
        out[at : at + 8] = rng.choice((b"\xff" * 8, b"\0" * 8, b"\x7f" + b"\xff" * 7))
    elif kind == 3:
        for _ in range(3):
            out[rng.randrange(min(len(out), 3000))] = rng.randrange(256)
    elif kind == 4:
        out[at:at] = out[at : at + rng.choice((4, 60))]
    elif text:
        words = list(re.finditer(rb"\S+", bytes(out)))
        word = rng.choice(words[:150] if rng.random() < 0.5 else words)
        odd = (b"4000000000", b"-1", b"0", b"nan", b"1D+5", b"1.5-103", b"9" * 30, b"x", b"1e400", b"")
        out[word.start() : word.end()] = rng.choice(odd)
    else:
        out[at] ^= 1 << rng.randrange(8)
    return bytes(out)


def outcome(path: Path, reader) -> str:
    """What a child process makes of a file: "read", "refused", or what went wrong."""
    read_end, write_end = os.pipe()
    child = os.fork()
    if child == 0:
        resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
        signal.alarm(20)
        try:
            export = reader.open_export(path)
            for step in range(export.steps):
                export.load(step)
            word = "read"
        except FvcheckError as error:
            word = "refused" if "\n" not in str(error) else "several lines"
        except BaseException as error:
            word = repr(error)
        os.write(write_end, word.encode()[:4000])
        os._exit(0)
    os.close(write_end)
    with os.fdopen(read_end, "rb") as stream:
        word = stream.read().decode()
    status = os.waitpid(child, 0)[1]
    return word if status == 0 else f"killed, status {status}"


@pytest.mark.parametrize("name", NAMES)
def test_random_damage_never_crashes_hangs_or_escapes_as_another_error(name, tmp_path):
    path = tmp_path / name
    data = (SAMPLES / name).read_bytes()
    text = path.suffix == ".msh" and "binary" not in name
    reader = READERS[path.suffix]
    only_piece(name)  # modules are loaded before the forks
    seen = []
    for seed in range(40):
        path.write_bytes(mutated(data, random.Random(seed), text))
        seen.append(outcome(path, reader))
    assert set(seen) <= {"read", "refused"}, seen
    # Flipped bits within values cannot be noticed; most other damage must be.
    assert seen.count("refused") >= 15, seen


@pytest.mark.parametrize("name", NAMES)
def test_a_file_cut_short_is_never_read(name, tmp_path):
    path = tmp_path / name
    data = (SAMPLES / name).read_bytes()
    only_piece(name)
    # Not 100 %: the last bytes of a text file are an end mark and a newline.
    for percent in (1, 10, 33, 50, 77, 90, 99):
        path.write_bytes(data[: len(data) * percent // 100])
        assert outcome(path, READERS[path.suffix]) == "refused", percent


@pytest.mark.parametrize(
    ("name", "old", "new"),
    [
        ("tri_point_v22.msh", b"$Nodes\n99\n", b"$Nodes\n4000000000\n"),
        ("tri_point_v22.msh", b"$Elements\n196\n", b"$Elements\n4000000000\n"),
        ("mixed_cell_v22_binary.msh", b"$Nodes\n108\n", b"$Nodes\n4000000000\n"),
        ("mixed_cell_v22_binary.msh", b"$Elements\n171\n", b"$Elements\n4000000000\n"),
        ("mixed_point_v41.msh", b"2 10 0 108\n", b"2 10 0 4000000000\n"),
        ("mixed_point.exo", b"num_nodes\0\0\0\0\0\0\x6c", b"num_nodes\0\0\0\x7f\xff\xff\xff"),
    ],
)
def test_absurd_counts_are_refused_before_memory_is_taken(name, old, new, tmp_path):
    data = (SAMPLES / name).read_bytes()
    assert data.count(old) == 1
    path = tmp_path / name
    path.write_bytes(data.replace(old, new))
    assert outcome(path, READERS[path.suffix]) == "refused"
