"""A small ellipsoid head and briefs for the tests of this folder."""

from pathlib import Path

import numpy as np
import trimesh

from layout.anatomy.head import Head, Landmarks, Sources, Surface
from layout.brief.objects import (
    Brief,
    ElectrodeBrief,
    GoalBrief,
    HeadBrief,
    MagnetometerBrief,
    NoiseBrief,
    PlacesBrief,
    SearchBrief,
    SitesBrief,
)

SEMI_AXES = (0.078, 0.098, 0.09)  # m


def ellipsoid_head(semi_axes=SEMI_AXES, subdivisions=4) -> Head:
    mesh = trimesh.creation.icosphere(subdivisions=subdivisions)
    unit, faces = np.asarray(mesh.vertices), np.asarray(mesh.faces)
    a, b, _ = semi_axes
    layers = [Surface(unit * np.array(semi_axes) * share, faces) for share in (1.0, 0.92, 0.86)]
    marks = [np.array(p) for p in ([0.0, b, 0.0], [-a, 0.0, 0.0], [a, 0.0, 0.0], [0.0, -b, 0.0])]
    one = Sources(np.zeros((1, 3)), np.eye(3)[:1], np.ones(1), np.ones(1, np.int8), np.zeros((0, 3), int))
    eyes = np.array([[-0.031, 0.072, -0.005], [0.031, 0.072, -0.005]])
    return Head("ellipsoid", *layers, Landmarks(*marks), one, eyes)


def electrodes(name="cap", count=4, **changes) -> ElectrodeBrief:
    settings = {"sites": SitesBrief(family="10-20"), "contact_noise": 1e-6, **changes}
    return ElectrodeBrief(name=name, count=count, **settings)


def magnetometers(name="array", count=4, **changes) -> MagnetometerBrief:
    settings = {"sites": SitesBrief(grid_pitch=0.025), "noise_density": 1e-14, **changes}
    return MagnetometerBrief(name=name, count=count, **settings)


def brief(*stock, **places) -> Brief:
    return Brief(
        title="test",
        head=HeadBrief("sphere", (0.33, 0.0165, 0.33)),
        regions=(),
        stock=stock,
        places=PlacesBrief(**{"eye_radius": 25e-3, **places}),
        noise=NoiseBrief((1.0, 40.0)),
        goal=GoalBrief(),
        search=SearchBrief(),
        sha256="",
        folder=Path("."),
    )
