"""Solved systems kept on disk: found again, never taken from a damaged file, bounded in size."""

import os

import numpy as np
import pytest
from boundary_spheres import sphere_model

from layout.physics import boundary_cache
from layout.physics.boundary_cache import key, load_or_solve
from layout.physics.boundary_system import SolvedSystem

MODEL = sphere_model(1)
SOLVED = SolvedSystem(np.arange(6.0).reshape(3, 2), np.eye(3), np.array([0, 1, 2], np.int32))


@pytest.fixture
def folder(tmp_path, monkeypatch):
    monkeypatch.setenv("SCALPSITE_CACHE", str(tmp_path / "deep" / "cache"))
    return tmp_path / "deep" / "cache"


def solve_with(calls, conductivities=MODEL.conductivities):
    def solve():
        calls.append(1)
        return SOLVED

    return load_or_solve(MODEL.surfaces, conductivities, solve)


def test_solved_once(folder):
    calls = []
    for _ in range(3):
        found = solve_with(calls)
        for name in SolvedSystem._fields:
            np.testing.assert_array_equal(getattr(found, name), getattr(SOLVED, name))
    assert len(calls) == 1
    assert [path.name for path in folder.iterdir()] == [f"boundary-{key(MODEL.surfaces, MODEL.conductivities)}.npz"]


def test_the_key_follows_the_content():
    other = sphere_model(1)
    assert key(other.surfaces, other.conductivities) == key(MODEL.surfaces, MODEL.conductivities)
    other.surfaces[0].vertices[0, 0] += 1e-12
    assert key(other.surfaces, other.conductivities) != key(MODEL.surfaces, MODEL.conductivities)
    assert key(MODEL.surfaces, (0.33, 0.0043, 0.33)) != key(MODEL.surfaces, MODEL.conductivities)


@pytest.mark.parametrize("damage", ["cut", "changed", "other", "pickled"])
def test_damaged_files_are_solved_anew_and_replaced(folder, damage):
    calls = []
    solve_with(calls)
    (path,) = folder.iterdir()
    content = bytearray(path.read_bytes())
    if damage == "cut":
        path.write_bytes(content[: len(content) // 2])
    elif damage == "changed":
        arrays = dict(np.load(path))
        arrays["factors"][0, 0] += 1
        np.savez(path, **arrays)
    elif damage == "other":
        path.write_bytes(b"not an archive")
    else:
        np.savez(path, potentials=np.array([{}], dtype=object))
    for _ in range(2):
        np.testing.assert_array_equal(solve_with(calls).potentials, SOLVED.potentials)
    assert len(calls) == 2


def test_oldest_files_go_when_the_folder_is_full(folder, monkeypatch):
    calls = []
    for number in range(3):
        solve_with(calls, (0.33, 0.001 * (number + 1), 0.33))
        for path in folder.iterdir():
            os.utime(path, (path.stat().st_mtime - 100,) * 2)
    size = next(folder.iterdir()).stat().st_size
    monkeypatch.setattr(boundary_cache, "LARGEST", 2.5 * size)
    solve_with(calls, (0.33, 0.001, 0.33))  # the oldest is used again
    solve_with(calls, (0.33, 0.009, 0.33))
    names = {path.name for path in folder.iterdir()}
    kept = {f"boundary-{key(MODEL.surfaces, (0.33, skull, 0.33))}.npz" for skull in (0.001, 0.009)}
    assert names == kept
    assert len(calls) == 4


def test_a_folder_that_cannot_be_written_is_no_error(tmp_path, monkeypatch):
    (tmp_path / "file").write_text("")
    monkeypatch.setenv("SCALPSITE_CACHE", str(tmp_path / "file" / "cache"))
    calls = []
    for _ in range(2):
        solve_with(calls)
    assert len(calls) == 2
