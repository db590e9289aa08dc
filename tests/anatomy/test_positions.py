"""The 10-20 family: counts, names, the ideal sphere, re-measured arcs on an ellipsoid, cortex under the
template's sites.
"""

import numpy as np
import pytest
from ellipsoids import ellipse_fraction, ellipsoid, equator_landmarks
from references import ten_twenty
from scipy.spatial.transform import Rotation

from layout.anatomy.contours import three_point_contour
from layout.anatomy.head import Landmarks
from layout.anatomy.positions import (
    canonical_name,
    earlobes,
    family_names,
    find_cz,
    mirrored_name,
    standard_positions,
)
from layout.anatomy.scalp_points import project
from layout.errors import LayoutError

HEAD_AXES = (0.078, 0.098, 0.09)  # m


@pytest.fixture(scope="module")
def on_sphere():
    return standard_positions(ellipsoid(subdivisions=6), equator_landmarks())


@pytest.fixture(scope="module")
def on_ellipsoid():
    return standard_positions(ellipsoid(HEAD_AXES, 5), equator_landmarks(HEAD_AXES))


@pytest.mark.parametrize(("family", "count"), ten_twenty.COUNTS.items())
def test_published_counts(family, count):
    names = family_names(family)
    assert len(names) == len(set(names)) == count
    found = standard_positions(ellipsoid(HEAD_AXES), equator_landmarks(HEAD_AXES), family)
    assert tuple(found) == names


def test_families_are_nested():
    fine = {*family_names("10-5"), "A1", "A2"}
    assert set(family_names("10-20")) < set(family_names("10-10")) < fine


def test_published_names():
    names = family_names("10-5")
    assert set(ten_twenty.NAMES_10_5) <= set(names)
    assert not set(ten_twenty.ABSENT_10_5) & set(names)


def test_unknown_family_is_refused():
    with pytest.raises(LayoutError, match=r"10-20, 10-10, 10-5.*'10-7'"):
        family_names("10-7")


def test_old_names():
    assert [canonical_name(name) for name in ("T3", "T4", "T5", "T6", "Cz")] == ["T7", "T8", "P7", "P8", "Cz"]


@pytest.mark.parametrize(("name", "angles"), ten_twenty.SPHERE.items())
def test_ideal_sphere(on_sphere, name, angles):
    x, y, z = on_sphere[name] / np.linalg.norm(on_sphere[name])
    polar, azimuth = angles
    assert np.arctan2(np.hypot(x, y), z) == pytest.approx(np.radians(polar), abs=1e-3)
    if azimuth is not None:
        away = (np.degrees(np.arctan2(-x, y)) - azimuth + 180) % 360 - 180
        assert np.radians(away) == pytest.approx(0, abs=1e-3)


@pytest.mark.parametrize(("name", "xyz"), ten_twenty.SPHERE_XYZ.items())
def test_ideal_sphere_coordinates(on_sphere, name, xyz):
    assert np.allclose(on_sphere[name], xyz, atol=1e-3)


def test_f3_is_the_plane_arc_not_the_great_circle_midpoint(on_sphere):
    cosine = on_sphere["F3"] @ np.array(ten_twenty.F3_GREAT_CIRCLE) / np.linalg.norm(on_sphere["F3"])
    assert np.degrees(np.arccos(cosine)) == pytest.approx(ten_twenty.F3_DIFFERENCE_DEGREES, abs=0.05)


def test_fp1_to_fp2(on_sphere):
    a, b = (on_sphere[name] / np.linalg.norm(on_sphere[name]) for name in ("Fp1", "Fp2"))
    assert np.degrees(np.arccos(a @ b)) == pytest.approx(ten_twenty.FP1_FP2_DEGREES, abs=0.01)


def test_left_and_right_mirror_each_other(on_ellipsoid):
    names = list(on_ellipsoid)
    assert sum(mirrored_name(name) == name for name in names) == 21
    for name in names:
        mirrored = on_ellipsoid[mirrored_name(name)] * [-1, 1, 1]
        assert np.linalg.norm(on_ellipsoid[name] - mirrored) < 1e-5


def test_all_positions_lie_on_the_mesh_and_apart(on_ellipsoid):
    points = np.array(list(on_ellipsoid.values()))
    surface = ellipsoid(HEAD_AXES, 5)
    assert np.linalg.norm(project(surface, points).positions - points, axis=1).max() < 3e-6  # the projection's own
    apart = np.linalg.norm(points[:, None] - points[None], axis=2) + np.eye(len(points))
    assert apart.min() > 3e-3


MIDLINE = """
Nz NFpz Fpz AFpz AFz AFFz Fz FFCz FCz FCCz Cz CCPz CPz CPPz Pz PPOz POz POOz Oz OIz Iz
""".split()  # noqa: SIM905
CORONAL = """
T9 T9h T7 T7h C5 C5h C3 C3h C1 C1h Cz C2h C2 C4h C4 C6h C6 T8h T8 T10h T10
""".split()  # noqa: SIM905


def test_midline_fractions_remeasured_on_the_exact_ellipse(on_ellipsoid):
    _, b, c = HEAD_AXES
    for step, name in enumerate(MIDLINE):
        _, y, z = on_ellipsoid[name]
        assert ellipse_fraction(b, c, y, z) == pytest.approx(step / 20, abs=5e-4), name


def test_coronal_fractions_remeasured_on_the_exact_ellipse(on_ellipsoid):
    a, _, c = HEAD_AXES
    for step, name in enumerate(CORONAL):
        x, _, z = on_ellipsoid[name]
        assert ellipse_fraction(a, c, -x, z) == pytest.approx(step / 20, abs=5e-4), name


@pytest.mark.parametrize(
    "row",
    [
        "F7 F7h F5 F5h F3 F3h F1 F1h Fz F2h F2 F4h F4 F6h F6 F8h F8",
        "FFT7 FFT7h FFC5 FFC5h FFC3 FFC3h FFC1 FFC1h FFCz FFC2h FFC2 FFC4h FFC4 FFC6h FFC6 FFT8h FFT8",
        "POO7 POO7h POO5 POO5h POO3 POO3h POO1 POO1h POOz POO2h POO2 POO4h POO4 POO6h POO6 POO8h POO8",
    ],
)
def test_rows_lie_evenly_in_one_plane(on_ellipsoid, row):
    """On a symmetric ellipsoid a row's sixteen arcs are equal; measured on another, finer section of the
    surface.
    """
    names = row.split()
    points = np.array([on_ellipsoid[name] for name in names])
    normal = np.cross(points[8] - points[0], points[-1] - points[0])
    normal /= np.linalg.norm(normal)
    assert np.abs((points - points[0]) @ normal).max() < 1e-9
    section = ellipsoid(HEAD_AXES, 6).mesh.section(plane_origin=points[0], plane_normal=normal)
    curve = section.discrete[0]
    lengths = np.concatenate([[0], np.cumsum(np.linalg.norm(np.diff(curve, axis=0), axis=1))])
    at = [lengths[np.argmin(np.linalg.norm(curve - point, axis=1))] for point in points]
    arcs = np.diff(at)
    arcs = np.abs((arcs + lengths[-1] / 2) % lengths[-1] - lengths[-1] / 2)
    assert arcs == pytest.approx(arcs.mean(), abs=2.5e-3)
    assert arcs[:8].sum() == pytest.approx(arcs[8:].sum(), abs=1.5e-3)


def test_ring_quarters_are_even(on_ellipsoid):
    names = ["Fpz", "Fp1h", "Fp1", "AFp7", "AF7", "AFF7", "F7", "FFT7", "FT7", "FTT7", "T7"]
    points = np.array([on_ellipsoid[name] for name in names])
    chords = np.linalg.norm(np.diff(points, axis=0), axis=1)
    assert chords == pytest.approx(chords.mean(), rel=0.02)
    normal = np.cross(points[-1] - points[0], on_ellipsoid["Oz"] - points[0])
    assert np.abs((points - points[0]) @ normal).max() / np.linalg.norm(normal) < 1e-9


def test_cz_is_midway_both_ways_on_an_asymmetric_head():
    scalp = ellipsoid(HEAD_AXES, 5)
    turn = Rotation.from_euler("xyz", [9, 5, 7], degrees=True)
    marks = equator_landmarks(HEAD_AXES)
    tilted = [turn.apply(point) for point in (marks.nas, marks.lpa, marks.rpa, marks.inion)]
    nas, lpa, rpa, inion = project(scalp, np.array(tilted)).positions
    cz = find_cz(scalp, Landmarks(nas, lpa, rpa, inion))
    for start, end in ((nas, inion), (lpa, rpa)):
        curve = three_point_contour(scalp, start, cz, end)
        assert np.linalg.norm(curve.at(0.5) - cz) < 1e-6
    assert abs(cz[0]) > 1e-3  # the symmetric answer would be wrong here


def test_earlobes_are_below_and_behind_the_ears():
    marks = equator_landmarks(HEAD_AXES)
    lobes = earlobes(ellipsoid(HEAD_AXES), marks)
    for name, ear in (("A1", marks.lpa), ("A2", marks.rpa)):
        down_back = (lobes[name] - ear)[1:] * 1e3
        assert down_back == pytest.approx([-12, -10], abs=1.0)


@pytest.mark.slow
def test_cortex_under_the_templates_positions():
    from layout.anatomy.template import build_template

    head = build_template("coarse")
    found = standard_positions(head.scalp, head.landmarks)
    to_mni = np.linalg.inv(head.mni_to_head)
    for name, published in ten_twenty.OKAMOTO.items():
        nearest = np.argmin(np.linalg.norm(head.cortex.positions - found[name], axis=1))
        mni = (to_mni[:3, :3] @ head.cortex.positions[nearest] + to_mni[:3, 3]) * 1e3
        assert np.linalg.norm(mni - published) < ten_twenty.OKAMOTO_BAND_MM, name
