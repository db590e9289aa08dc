"""The numbers on the placement sheet, read back from the PDF and measured again by an independent library."""

from dataclasses import replace

import numpy as np
import pytest
import trimesh
from flipped_edges import Judge
from made_result import make_result
from sheet_results import COILS, CUPS, sheet_result
from sheet_text import ENDS, printed_steps

from layout.anatomy.head import Landmarks, Surface
from layout.anatomy.positions import standard_positions
from layout.outputs.sheet.distances import MARKS, READING, STRETCH, Tape
from layout.outputs.sheet.pages import placement_sheet_pdf


@pytest.mark.slow
@pytest.mark.parametrize("tables", [CUPS, COILS], ids=["electrodes", "magnetometers"])
def test_every_printed_distance_is_that_of_the_mesh(tables):
    result = sheet_result(14, tables)
    layout, head = result.layouts[0], result.head
    steps = printed_steps(placement_sheet_pdf(result, layout, "a4"))
    assert sorted(step["number"] for step in steps) == [row.number for row in layout.sensors]

    standard = standard_positions(head.scalp, head.landmarks)
    names = sorted({name for step in steps for name in step["offsets"]})
    marks = head.landmarks
    points = [marks.nas, marks.lpa, marks.rpa, marks.inion, standard["Cz"], *(standard[name] for name in names)]
    judge = Judge(head.scalp, np.array([*points, *(row.scalp_position for row in layout.sensors)]))
    first = len(points) - 1  # sensors count from 1
    misses = []
    for step in steps:
        sensor = first + step["number"]
        ways = [(ENDS.index(name), mm) for name, mm in (step["tapes"] | step["check"]).items()]
        ways += [(len(ENDS) + names.index(name), mm) for name, mm in step["offsets"].items()]
        ways += [(first + number, mm) for number, (mm, _) in step["neighbours"].items()]
        assert len(step["tapes"]) == 2
        assert len(step["offsets"]) in (1, 2)
        misses += [mm - 1e3 * judge.distance(end, sensor) for end, mm in ways]
    assert len(misses) >= 6 * len(steps)
    assert np.abs(misses).max() <= 1.0

    for step in steps:  # none runs under the chin or across the neck
        sensor = first + step["number"]
        for end in _ends_of(step, first):
            lower_end = min(judge.height(end), judge.height(sensor), 0.0)
            assert judge.lowest(end, sensor) > lower_end - 20e-3, (step, end)


def _ends_of(step: dict, first: int) -> list[int]:
    return [ENDS.index(name) for name in (*step["tapes"], *step["check"])] + [first + n for n in step["neighbours"]]


@pytest.mark.slow
def test_printed_neighbours_are_the_nearest_and_marked_by_the_order():
    result = sheet_result(14, CUPS)
    sensors = result.layouts[0].sensors
    steps = printed_steps(placement_sheet_pdf(result, result.layouts[0], "letter"))
    step_of = {step["number"]: step["step"] for step in steps}
    judge = Judge(result.head.scalp, np.array([row.scalp_position for row in sensors]))
    for step in steps:
        own = step["number"]
        ways = {row.number: judge.distance(own - 1, row.number - 1) for row in sensors if row.number != own}
        assert set(step["neighbours"]) <= set(sorted(ways, key=ways.get)[:3])
        assert len(step["neighbours"]) >= 2
        assert {number: placed for number, (_, placed) in step["neighbours"].items()} == {
            number: step_of[number] < step["step"] for number in step["neighbours"]
        }


@pytest.mark.slow
def test_fractions_give_the_place_back_along_plane_cuts():
    """trimesh cuts the scalp; the printed per cents of its sections lead to the sensor within a millimetre or two."""
    result = sheet_result(14, CUPS)
    head, marks = result.head, result.head.landmarks
    cz = standard_positions(head.scalp, marks)["Cz"]
    midline = _section(head.scalp, marks.nas, cz, marks.inion)
    for step in printed_steps(placement_sheet_pdf(result, result.layouts[0], "a4")):
        along, along_mm, across, across_mm, whole_mm = step["fractions"]
        place = result.layouts[0].sensors[step["number"] - 1].scalp_position
        if not 0 < along < 100 or min(np.linalg.norm(place - ear) for ear in (marks.lpa, marks.rpa)) < 0.03:
            continue  # the planes crowd at the ears
        assert along_mm == pytest.approx(1e3 * along / 100 * midline[1], abs=1.0)
        over = _at(midline, along / 100)
        arc = _section(head.scalp, marks.lpa, over, marks.rpa)
        assert whole_mm == pytest.approx(1e3 * arc[1], abs=1.0)
        assert across_mm == pytest.approx(across / 100 * whole_mm, abs=0.8)
        assert np.linalg.norm(_at(arc, across / 100) - place) < 1e-3


def _section(surface, start, over, end):
    """The points of a plane cut from start through over to end, and its length [m]."""
    normal = np.cross(over - start, end - start)
    middle = (start + end) / 2
    up = over - middle
    across = np.cross(normal / np.linalg.norm(normal), up)

    def angle(points):  # from the direction of `over`, about the middle of the two ends
        return np.arctan2((points - middle) @ across, (points - middle) @ up)

    points = trimesh.intersections.mesh_plane(surface.mesh, normal, over).reshape(-1, 3)
    turn = np.sign(angle(end))
    points = points[np.argsort(turn * angle(points))]
    within = (turn * angle(points) > turn * angle(start)) & (turn * angle(points) < turn * angle(end))
    points = np.vstack([start, points[within], end])
    return points, float(np.linalg.norm(np.diff(points, axis=0), axis=1).sum())


def _at(section, share):
    points, length = section
    along = np.append(0.0, np.cumsum(np.linalg.norm(np.diff(points, axis=0), axis=1)))
    return np.array([np.interp(share * length, along, column) for column in points.T])


def test_the_pair_of_landmarks_has_the_least_error_by_finite_differences():
    """On a ball: what errors of two tapes do to their crossing point, from great circles alone."""
    radius, made = 0.09, make_result("electrode")
    mesh = trimesh.creation.icosphere(subdivisions=4, radius=radius)
    front, back = radius * np.array([[0, np.cos(0.2), -np.sin(0.2)], [0, -np.cos(0.2), -np.sin(0.2)]])
    marks = Landmarks(front, np.array([-radius, 0, 0]), np.array([radius, 0, 0]), back)
    head = replace(
        made.head,
        scalp=Surface(np.asarray(mesh.vertices), np.asarray(mesh.faces)),
        landmarks=marks,
        eyes=np.zeros((0, 3)),
    )
    starts = np.stack([marks.nas, marks.lpa, marks.rpa, marks.inion, [0, 0, radius]])

    def ways(place):
        return radius * np.arccos(np.clip(starts @ place / radius / np.linalg.norm(place), -1, 1))

    rng = np.random.default_rng(2)
    normals = rng.normal(size=(12, 3))
    normals[:, 2] = np.abs(normals[:, 2]) + 0.3
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    rows = tuple(
        replace(made.layouts[0].sensors[0], scalp_position=radius * n, normal=n, landmark_distance=ways(radius * n)[:4])
        for n in normals
    )
    for row, fix in zip(rows, Tape(head).fixes(rows), strict=True):
        tangents = np.linalg.svd(row.normal[None])[2][1:]
        slopes = np.array([(ways(row.scalp_position + 1e-6 * t) - ways(row.scalp_position)) / 1e-6 for t in tangents]).T
        errors = READING + STRETCH * ways(row.scalp_position)
        spread = {}
        for a in range(5):
            for b in range(a + 1, 5):
                if abs(np.linalg.det(slopes[[a, b]])) > 1e-3:  # else the two ways run along one line
                    spread[a, b] = np.linalg.norm(np.linalg.inv(slopes[[a, b]]) * errors[[a, b]])
        chosen = spread[tuple(sorted(fix.pair))]
        assert chosen <= 1.02 * min(spread.values()), (MARKS, fix, spread)
        assert fix.check not in fix.pair
