"""A head stretched along its own axes to a stated size."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.anatomy.frame import apply
from layout.anatomy.head import Head, Landmarks, Sources, Surface
from layout.anatomy.head_size import head_size
from layout.brief.objects import HeadSizeBrief
from layout.errors import BriefError
from layout.units import MM

CLOSE = 0.05 * MM  # sizes are met this well
ROUNDS = 20
STRETCH = (0.75, 1.3)  # of any axis: beyond, it is no longer this head
TAPE_APART = 0.06  # share by which a tape may differ from what length and breadth give; over hair it is some 5 %


def scale_to(head: Head, size: HeadSizeBrief) -> Head:
    """The head stretched to a length, breadth and circumference [m], as `head_size` measures them, to 0.05 mm.

    One size alone stretches all axes alike. Two set x (breadth) and y (length; a circumference with one of them sets
    the other), and z follows by the geometric mean of x and y. Of three, length and breadth rule: no stretch along axes
    meets a tape besides them, so the tape is compared and the difference noted. Surfaces, cortex, landmarks, eyes and
    the MNI152 transform go along; normals and areas of sources change as those of area elements.

    Raises BriefError where an axis would be stretched beyond STRETCH, or a tape contradicts length and breadth by more
    than TAPE_APART.
    """
    wanted = {name: getattr(size, name) for name in ("length", "breadth", "circumference")}
    given = [name for name, value in wanted.items() if value is not None]
    rules = given[:2]  # length and breadth before circumference
    stretch = np.ones(3)
    for _ in range(ROUNDS):
        found = head_size(replace(head, scalp=Surface(head.scalp.vertices * stretch, head.scalp.faces)))
        ratio = {name: wanted[name] / getattr(found, name) for name in rules}
        if max(abs(wanted[name] - getattr(found, name)) for name in rules) < CLOSE:
            break
        stretch = stretch * _step(ratio)
        if not (STRETCH[0] <= stretch.min() and stretch.max() <= STRETCH[1]):
            raise BriefError(
                f"head: {_said(wanted, given)} must be those of a head like the template, whose axes may be stretched "
                f"by {STRETCH[0]:g} to {STRETCH[1]:g}, but they ask for {stretch[0]:.2f}, {stretch[1]:.2f} and "
                f"{stretch[2]:.2f}."
            )
    else:
        raise BriefError(f"head: {_said(wanted, given)} must be met by stretching the template, but are not.")
    if len(given) == 3 and abs(wanted["circumference"] / found.circumference - 1) > TAPE_APART:
        raise BriefError(
            f"head.circumference_mm must be near the {found.circumference / MM:.0f} mm that length_mm and breadth_mm "
            f"give (a tape over hair reads more), but {wanted['circumference'] / MM:g} was given."
        )
    return replace(stretched(head, stretch), notes=(*head.notes, _note(size, given, found, stretch)))


def stretched(head: Head, stretch: np.ndarray) -> Head:
    """The head with its axes multiplied by stretch (3,), everything in it alike."""
    matrix = np.diag([*stretch, 1.0])
    vertices = head.cortex_vertices
    if vertices is not None:
        areas = vertices.areas * _area_factor(_vertex_normals(head), stretch)
        vertices = replace(vertices, positions=vertices.positions * stretch, areas=areas)
    return replace(
        head,
        **{name: _surface(getattr(head, name), stretch) for name in ("scalp", "outer_skull", "inner_skull")},
        landmarks=Landmarks(**{name: point * stretch for name, point in vars(head.landmarks).items()}),
        cortex=_sources(head.cortex, stretch),
        eyes=apply(matrix, head.eyes),
        mni_to_head=None if head.mni_to_head is None else matrix @ head.mni_to_head,
        cortex_surface=None if head.cortex_surface is None else _surface(head.cortex_surface, stretch),
        cortex_vertices=vertices,
        files_to_head=None if head.files_to_head is None else matrix @ head.files_to_head,
    )


def _step(ratio: dict[str, float]) -> np.ndarray:
    if len(ratio) == 1:
        return np.full(3, next(iter(ratio.values())))
    if "circumference" in ratio:
        known = "length" if "length" in ratio else "breadth"
        # A tape is nearly as long as an ellipse, whose two axes count alike: what one does not give the other must.
        other = ratio["circumference"] ** 2 / ratio[known]
        x, y = (other, ratio["length"]) if known == "length" else (ratio["breadth"], other)
    else:
        x, y = ratio["breadth"], ratio["length"]
    return np.array([x, y, np.sqrt(x * y)])


def _surface(surface: Surface, stretch: np.ndarray) -> Surface:
    return Surface(surface.vertices * stretch, surface.faces)


def _sources(cortex: Sources, stretch: np.ndarray) -> Sources:
    normals = cortex.normals / stretch
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    return replace(
        cortex,
        positions=cortex.positions * stretch,
        normals=normals,
        areas=cortex.areas * _area_factor(cortex.normals, stretch),
    )


def _area_factor(normals: np.ndarray, stretch: np.ndarray) -> np.ndarray:
    """Nanson's formula: an area element with unit normal n grows by det(S) |S^-T n|."""
    return np.prod(stretch) * np.linalg.norm(normals / stretch, axis=1)


def _vertex_normals(head: Head) -> np.ndarray:
    """Of the cortex's file vertices: those of the sources that stand for them; any normal where there is none."""
    return head.cortex.normals[np.maximum(head.cortex_vertices.source, 0)]


def _said(wanted: dict[str, float | None], given: list[str]) -> str:
    return " and ".join(f"a {name} of {wanted[name] / MM:g} mm" for name in given)


def _note(size: HeadSizeBrief, given: list[str], found: tuple[float, float, float], stretch: np.ndarray) -> str:
    length, breadth, tape = (value / MM for value in found)
    who = f"{size.name} (length and breadth of the survey NATICK/TR-15/007)" if size.name else "its stated size"
    note = (
        f"The template was stretched by {stretch[0]:.3f}, {stretch[1]:.3f} and {stretch[2]:.3f} (right, front, up) to "
        f"{who}: length {length:.0f}, breadth {breadth:.0f}, circumference {tape:.0f} mm."
    )
    if len(given) == 3:
        note += f" The stated circumference of {size.circumference / MM:g} mm was only compared."
    return note
