"""The scalp in gores: nothing is lost or doubled, seams match, holes are where geodesics say."""

import numpy as np
import pytest
import shapely
from cap_cases import cap_pattern, cap_result

from layout.anatomy.build import build_head
from layout.anatomy.geodesics import geodesic_distances
from layout.anatomy.head import Surface
from layout.anatomy.positions import family_names, standard_positions
from layout.anatomy.scalp_points import normals_at, project
from layout.anatomy.star_surface import icosphere
from layout.brief.objects import HeadBrief
from layout.brief.objects_head import HeadSizeBrief
from layout.outputs.cap.gores import COUNTS, SEAM_NAMES, Holes, cut_cap, gore_names
from layout.outputs.cap.holes import _across
from layout.outputs.cap.mesh import boundary_loop, cut, halved
from layout.outputs.cap.rim import CLEAR, find_rim


def _area(surface: Surface) -> float:
    a, b, c = (surface.vertices[surface.faces[:, k]] for k in range(3))
    return float(np.linalg.norm(np.cross(b - a, c - a), axis=1).sum() / 2)


def test_a_cut_parts_a_sphere_into_caps_of_known_area():
    directions, faces = icosphere(4)
    vertices, faces, above = cut(directions, faces, directions[:, 2] - 0.3)
    heights = vertices[faces].mean(axis=1)[:, 2]
    assert (heights[above] > 0.3).all()
    assert (heights[~above] < 0.3).all()
    for side, height in ((above, 0.7), (~above, 1.3)):
        assert _area(Surface(vertices, faces[side])) == pytest.approx(2 * np.pi * height, rel=4e-3)
    rim = vertices[np.unique(faces[above])[np.isin(np.unique(faces[above]), faces[~above])]]
    np.testing.assert_allclose(rim[:, 2], 0.3, rtol=0, atol=1e-9)
    shortest = np.linalg.norm(vertices[faces] - vertices[np.roll(faces, 1, axis=1)], axis=2).min()
    assert shortest > 0.1 * np.linalg.norm(directions[icosphere(4)[1][0, 0]] - directions[icosphere(4)[1][0, 1]])


def test_halving_leaves_the_polyhedron_as_it_is():
    surface = cap_result().head.scalp
    finer = halved(surface, 4e-3)
    assert _area(finer) == pytest.approx(_area(surface), rel=1e-9)
    edges = finer.vertices[finer.faces] - finer.vertices[np.roll(finer.faces, 1, axis=1)]
    assert np.linalg.norm(edges, axis=2).max() <= 4e-3


def test_a_border_must_be_one_loop():
    _, faces = icosphere(1)
    assert len(boundary_loop(faces[1:])) == 3
    with pytest.raises(ValueError, match="one border"):
        boundary_loop(faces)
    apart = next(k for k in range(len(faces)) if not np.isin(faces[k], faces[0]).any())
    with pytest.raises(ValueError, match="one border"):
        boundary_loop(np.delete(faces, [0, apart], axis=0))


def test_gores_are_the_scalp_above_the_rim():
    pattern, head = cap_pattern(), cap_result().head
    rim = find_rim(head.landmarks, np.array([row.scalp_position for row in pattern.rows]), _radii(pattern))
    fine = halved(head.scalp, 1.5e-3)
    inside = fine.faces[rim.above(fine.vertices[fine.faces].mean(axis=1)) > 0]
    whole = sum(float(gore.flat.areas.sum()) for gore in pattern.cap.gores)
    assert whole == pytest.approx(_area(Surface(fine.vertices, inside)), rel=3e-3)
    flat = sum(shapely.Polygon(gore.flat.points[gore.loop]).area for gore in pattern.cap.gores)
    low, high = (f(gore.flat.stretch[:, k] for gore in pattern.cap.gores) for f, k in ((_least, 0), (_most, 1)))
    assert low**2 < flat / whole < high**2
    assert flat == pytest.approx(whole, rel=0.005)
    for gore in pattern.cap.gores:
        assert shapely.Polygon(gore.flat.points[gore.loop]).is_valid


def test_seams_are_the_same_line_and_nearly_as_long_on_both_papers():
    cap = cap_pattern().cap
    assert [gore.name for gore in cap.gores] == list(gore_names(7)) == ["L3", "L2", "L1", "C", "R1", "R2", "R3"]
    assert [seam.gores for seam in cap.seams] == [(k, k + 1) for k in range(6)]
    for seam in cap.seams:
        one, two = seam.flat_lengths
        assert abs(one - two) < 1e-3
        assert seam.length == pytest.approx((one + two) / 2, rel=0.03)
        line = cap.surface.vertices[seam.path]
        assert seam.length == pytest.approx(np.linalg.norm(np.diff(line, axis=0), axis=1).sum(), rel=1e-12)
        assert line[0, 1] > line[-1, 1]
        assert all(np.isin(seam.path, cap.gores[number].vertices).all() for number in seam.gores)


def test_no_notch_reads_as_an_electrode():
    pattern = cap_pattern()
    labels = {notch.label.upper() for piece in pattern.pieces for notch in piece.notches}
    electrodes = {name.upper() for name in family_names("10-5")} | {"M1", "M2"}
    assert len(labels) > 20
    assert not labels & electrodes
    assert len(set(SEAM_NAMES)) == len(SEAM_NAMES) >= max(COUNTS) - 1
    assert not {f"{name}{k}" for name in SEAM_NAMES for k in range(1, 11)} & electrodes


def test_front_is_up_and_right_is_right_on_every_gore():
    cap = cap_pattern().cap
    for gore in cap.gores:
        solid = cap.surface.vertices[gore.vertices]
        flat = gore.flat.points
        assert np.corrcoef(solid[:, 1], flat[:, 1])[0, 1] > 0.9
    middle = cap.gores[3]
    assert np.corrcoef(cap.surface.vertices[middle.vertices][:, 0], middle.flat.points[:, 0])[0, 1] > 0.9


def test_notches_of_one_label_are_at_the_same_place_of_the_scalp():
    pattern = cap_pattern()
    seen: dict[str, list] = {}
    for piece in pattern.pieces:
        inside = shapely.Polygon(piece.gore.flat.points[piece.gore.loop])
        for notch in piece.notches:
            assert not inside.contains(shapely.Point(notch.place + 1e-3 * notch.outward))
            assert inside.contains(shapely.Point(notch.place - 1e-3 * notch.outward))
            seen.setdefault(notch.label, []).append(_on_scalp(pattern.cap, piece.gore, notch.place))
    assert len(seen) > 20
    for label, places in seen.items():
        assert len(places) == 2, label
        assert np.linalg.norm(places[0] - places[1]) < 1e-4


def test_holes_lie_on_paper_where_they_are_on_the_scalp():
    pattern = cap_pattern()
    own = [(piece.gore, hole) for piece in pattern.pieces for hole in piece.holes if hole.own]
    assert sorted(hole.row.number for _, hole in own) == [row.number for row in pattern.rows]
    for gore, hole in own:
        assert np.linalg.norm(_on_scalp(pattern.cap, gore, hole.centre) - hole.row.scalp_position) < 1e-4


def test_a_hole_on_a_seam_is_whole_again_when_the_gores_are_joined():
    pattern = cap_pattern()
    own = {hole.row.number: (piece, hole) for piece in pattern.pieces for hole in piece.holes if hole.own}
    parts = [(piece, hole) for piece in pattern.pieces for hole in piece.holes if not hole.own]
    assert parts
    seams = pattern.cap.seams
    for piece, part in parts:
        home, whole = own[part.row.number]
        names = {home.gore.name, piece.gore.name}
        seam = next(s for s in seams if {pattern.pieces[k].gore.name for k in s.gores} == names)
        lines = [*whole.lines, *(_across(piece.gore, home.gore, seam.path, _about(part, line)) for line in part.lines)]
        lines = [
            line[1:] if len(line) > 2 and np.allclose(line[0], whole.centre, atol=1e-3) else line for line in lines
        ]
        around = np.vstack(lines) - whole.centre
        np.testing.assert_allclose(np.linalg.norm(around, axis=1), 5e-3, rtol=0, atol=1.5e-4)
        length = sum(np.linalg.norm(np.diff(line, axis=0), axis=1).sum() for line in lines)
        assert length == pytest.approx(2 * np.pi * 5e-3, rel=0.04)


def test_clearance_is_that_on_paper():
    pattern = cap_pattern()
    nearest = np.inf
    for piece in pattern.pieces:
        for hole in piece.holes:
            for line in piece.seams.values():
                if hole.radius is not None:
                    nearest = min(nearest, shapely.LineString(line).distance(shapely.Point(hole.centre)) - 5e-3)
    least = pattern.cap.clearance.min()
    assert nearest == pytest.approx(least, abs=3e-4) if least > 0 else nearest < 2e-3


def test_the_rim_leaves_room_below_every_hole():
    pattern = cap_pattern()
    for piece in pattern.pieces:
        for hole in piece.holes:
            for line in piece.rim:
                if hole.own:
                    way = shapely.LineString(line).distance(shapely.Point(hole.centre))
                    assert way > 5e-3 + 0.7 * CLEAR


@pytest.mark.slow
def test_straight_ways_on_paper_are_geodesics_within_the_stated_strain():
    pattern, head = cap_pattern(), cap_result().head
    checked = 0
    for piece in pattern.pieces:
        area = shapely.Polygon(piece.gore.flat.points[piece.gore.loop])
        low, high = piece.gore.flat.stretch.min(), piece.gore.flat.stretch.max()
        holes = [hole for hole in piece.holes if hole.own]
        places = np.array([hole.row.scalp_position for hole in holes])
        ways = geodesic_distances(head.scalp, places, places) if len(holes) > 1 else None
        for i, one in enumerate(holes):
            for j in range(i):
                straight = shapely.LineString([one.centre, holes[j].centre])
                # Longer ways would be geodesics through the next gore.
                if straight.length < 0.07 and area.contains(straight.buffer(2e-3)):
                    assert low * ways[i, j] - 1e-4 < straight.length < high * ways[i, j] + 1e-4
                    checked += 1
    assert checked > 20


@pytest.mark.slow
@pytest.mark.parametrize(
    "size",
    [HeadSizeBrief(circumference=0.51), None, HeadSizeBrief(length=0.22, breadth=0.173, circumference=0.63)],
    ids=["small", "nominal", "large"],
)
def test_heads_of_all_sizes_are_laid_flat_within_five_per_cent(size):
    head = build_head(HeadBrief("template", (0.33, 0.0042, 0.33), size=size))
    names = "Fp1 Fp2 F7 F3 Fz F4 F8 T7 C3 Cz C4 T8 P7 P3 Pz P4 P8 O1 O2".split()  # noqa: SIM905
    found = standard_positions(head.scalp, head.landmarks, "10-20")
    where = project(head.scalp, np.array([found[name] for name in names]))
    holes = Holes(where.positions, normals_at(head.scalp, where), np.full(len(names), 5e-3))
    cap = cut_cap(head.scalp, head.landmarks, find_rim(head.landmarks, holes.positions, holes.radii).above, holes, 7)
    assert cap.beyond(0.05) < 0.002
    assert max(gore.flat.rms for gore in cap.gores) < 0.017
    assert max(abs(seam.flat_lengths[0] - seam.flat_lengths[1]) for seam in cap.seams) < 1e-3
    assert cap.clearance.min() > 1e-3


def _radii(pattern) -> np.ndarray:
    return np.array([shape.reach for shape in pattern.shapes])


def _least(arrays) -> float:
    return min(float(one.min()) for one in arrays)


def _most(arrays) -> float:
    return max(float(one.max()) for one in arrays)


def _on_scalp(cap, gore, place: np.ndarray) -> np.ndarray:
    """The scalp point (3,) of a place (2,) on a gore's paper, by looking through its triangles."""
    corners = gore.flat.points[gore.faces]
    a, b, c = (corners[:, k] for k in range(3))
    matrix = np.stack([b - a, c - a], axis=2)
    share = np.linalg.solve(matrix, (place - a)[..., None])[..., 0]
    weights = np.column_stack([1 - share.sum(axis=1), share])
    face = int(np.argmax(weights.min(axis=1)))
    return weights[face] @ cap.surface.vertices[gore.vertices[gore.faces[face]]]


def _about(part, line: np.ndarray) -> np.ndarray:
    """The line with its hole's centre before it, so that both gores are joined beside the same place of the seam."""
    return np.vstack([part.centre, line])
