"""Helmet slot tables: read, refused, and what is left of the gap on a sphere, where everything has a closed
form.
"""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, ellipsoid_head, magnetometers

from layout.brief.objects import SitesBrief
from layout.errors import FileError
from layout.sensing.housing import face_radius
from layout.sensing.lay_out import lay_candidates
from layout.sensing.slots import read_slots

HEADER = "name,x_mm,y_mm,z_mm,axis_x,axis_y,axis_z,travel_mm\n"
RADIUS = 0.09  # m


def write(folder, *rows, header=HEADER):
    path = folder / "slots.csv"
    path.write_text(header + "".join(f"{row}\n" for row in rows))
    return path


def test_reading(tmp_path):
    slots = read_slots(write(tmp_path, "H1,0,0,120,0,0,1,15", "", " H2 ,-100,0,50,-0.8,0,0.6,0"))
    assert slots.names == ("H1", "H2")
    assert np.allclose(slots.faces, [[0, 0, 0.12], [-0.1, 0, 0.05]])
    assert np.allclose(slots.axes, [[0, 0, 1], [-0.8, 0, 0.6]])
    assert np.allclose(slots.travel, [0.015, 0])


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        ([], "at least one slot"),
        (["H1,0,0,120,0,0,1"], "must have 8 fields"),
        (["H1,0,0,120,0,0,1,5", "H1,0,0,121,0,0,1,5"], "unique, got 'H1'"),
        ([",0,0,120,0,0,1,5"], "name must not be empty"),
        (["H1,0,zero,120,0,0,1,5"], "y_mm must be a finite number, got 'zero'"),
        (["H1,0,0,120,0,0,nan,5"], "axis_z must be a finite number"),
        (["H1,0,0,120,0,0,2,5"], "unit vector .* length 2"),
        (["H1,0,0,120,0,0,0,5"], "unit vector"),
        (["H1,0,0,120,0,0,1,-5"], "travel_mm must not be negative, got -5"),
    ],
)
def test_bad_rows(tmp_path, rows, said):
    with pytest.raises(FileError, match=said):
        read_slots(write(tmp_path, *rows))


def test_missing_columns_and_files(tmp_path):
    with pytest.raises(FileError, match="lacks axis_z, travel_mm"):
        read_slots(write(tmp_path, header="name,x_mm,y_mm,z_mm,axis_x,axis_y\n"))
    with pytest.raises(FileError, match="no such file"):
        read_slots(tmp_path / "none.csv")


@pytest.fixture(scope="module")
def sphere():
    return ellipsoid_head((RADIUS,) * 3, 4)


def lay(head, path, **changes):
    settings = {"count": 1, "sites": SitesBrief(slots_csv=path), "hair": 2e-3, "keep_out": (), **changes}
    return lay_candidates(head, brief(magnetometers(**settings)))


def test_gap_left_by_the_travel_on_a_sphere(tmp_path, sphere):
    """Straight slots: the face starts 30 mm above the scalp; 40 mm of travel reach the hair, 20 mm leave 8
    mm.
    """
    path = write(tmp_path, "A,0,0,120,0,0,1,40", "B,0,-120,0,0,-1,0,20", "C,120,0,0,1,0,0,0")
    laid = lay(sphere, path)
    assert laid.sites.travel_gap == pytest.approx([0, 8e-3, 28e-3], abs=1e-4)
    assert np.allclose(laid.sites.slot_axes, [[0, 0, 1], [0, -1, 0], [1, 0, 0]])
    assert np.linalg.norm(laid.positions, axis=1) == pytest.approx(
        RADIUS + 6.5e-3 + 2e-3 + np.array([0, 8e-3, 28e-3]), abs=1e-4
    )
    assert np.allclose(laid.axes, laid.sites.slot_axes)
    assert np.allclose(laid.housing_pose[:, :3, 2], laid.sites.slot_axes)


def test_a_tilted_slot_touches_with_its_rim(tmp_path, sphere):
    """Axis 30° off the normal: the rim of a face of radius r meets a sphere of radius R first; in the plane
    of the tilt the face must stand h off its site with R cos(30°) + h = R where the sphere's highest point
    lies under the face, else (R cos + h)² + (R sin - r)² = R² at the rim.
    """
    tilt = np.radians(30)
    axis = np.array([np.sin(tilt), 0, np.cos(tilt)])
    face = np.array([0, 0, RADIUS]) + 0.03 * axis
    row = ",".join(f"{v:.9f}" for v in [*face * 1e3, *axis])
    laid = lay(sphere, write(tmp_path, f"T,{row},100"), hair=0.0)
    radius = face_radius((12.4e-3, 16.6e-3, 24.4e-3))
    lateral = RADIUS * np.sin(tilt)  # of the site from the sphere's highest point along the axis
    clearance = np.sqrt(RADIUS**2 - (lateral - radius) ** 2) - RADIUS * np.cos(tilt)
    assert lateral > radius
    found = (laid.housing_pose[0, :3, 3] - laid.sites.positions[0]) @ axis
    assert found == pytest.approx(clearance, abs=0.1e-3)
    assert np.linalg.norm(laid.positions[0] - laid.housing_pose[0, :3, 3]) == pytest.approx(6.5e-3)
    assert laid.sites.normals[0] @ axis == pytest.approx(np.cos(tilt), abs=1e-3)


@pytest.mark.parametrize(
    ("row", "said"),
    [
        ("M,0,200,120,0,0,1,10", "'M' misses it"),
        ("M,0,0,120,0,0,-1,10", "'M' misses it"),
        ("M,0,0,90.5,0,0,1,10", "'M' starts inside"),
        ("M,0,0,40,0,0,1,10", "'M' starts inside"),
    ],
)
def test_slots_that_cannot_be(tmp_path, sphere, row, said):
    with pytest.raises(FileError, match=said):
        lay(sphere, write(tmp_path, row))


def test_electrodes_in_slots_must_reach_the_scalp(tmp_path, sphere):
    path = write(tmp_path, "A,0,0,120,0,0,1,40", "B,0,-120,0,0,-1,0,20")
    laid = lay_candidates(sphere, brief(electrodes(count=1, sites=SitesBrief(slots_csv=path), keep_out=())))
    assert laid.names == ("A",)
    assert "slot does not reach the scalp 1" in " ".join(laid.notes)
