"""A small synthetic result: icosphere head, two-sided cortex, both kinds of sensor, hostile names."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import trimesh

from layout.anatomy.head import Head, Landmarks, Region, Sources, Surface
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
from layout.noise.calibration import Figure
from layout.outputs.result import Baseline, DesignResult, RankedLayout, RegionFigure, SensorRow
from layout.sensing.candidates import Candidates, Sites
from layout.sensing.housing import Rest, poses

HOSTILE_TITLE = '<script>alert("title")</script> & $x_{1}$ [bold]Ω, "quoted"'
HOSTILE_NAME = 'C3,"<img src=x onerror=alert(1)>"\t[red]ñ;\x1b[31m'


def _ellipsoid(subdivisions: int, axes: tuple[float, float, float], centre=(0.0, 0.0, 0.03)) -> Surface:
    ball = trimesh.creation.icosphere(subdivisions=subdivisions)
    return Surface(np.asarray(ball.vertices) * axes + centre, np.asarray(ball.faces))


def _head() -> Head:
    scalp = _ellipsoid(4, (0.078, 0.097, 0.095))
    halves = []
    for side in (-1, 1):
        half = _ellipsoid(4, (0.031, 0.075, 0.055), centre=(side * 0.034, 0.0, 0.045))
        halves.append(half)
    count = len(halves[0].vertices)
    positions = np.vstack([half.vertices for half in halves])
    cortex = Sources(
        positions=positions,
        normals=np.vstack([half.normals for half in halves]),
        areas=np.full(2 * count, 1e-5),
        side=np.repeat(np.array([-1, 1], dtype=np.int8), count),
        faces=np.vstack([halves[0].faces, halves[1].faces + count]),
    )
    marks = Landmarks(
        nas=np.array([0.0, 0.0922, 0.0]),
        lpa=np.array([-0.0741, 0.0, 0.0]),
        rpa=np.array([0.0741, 0.0, 0.0]),
        inion=np.array([0.0, -0.0922, 0.0]),
    )
    eyes = np.array([[-0.03, 0.08, -0.01], [0.03, 0.08, -0.01]])
    inner, outer = _ellipsoid(3, (0.068, 0.087, 0.085)), _ellipsoid(3, (0.072, 0.091, 0.089))
    return Head("synthetic", scalp, outer, inner, marks, cortex, eyes)


def _region(head: Head, name: str, centre: tuple[float, float, float], radius: float) -> Region:
    centre_point = np.array(centre)
    distance = np.linalg.norm(head.cortex.positions - centre_point, axis=1)
    members = np.flatnonzero(distance < radius)
    return Region(name, members, head.cortex.areas[members], 10e-9, False, False, centre_point)


def _sites(head: Head) -> Sites:
    upper = np.flatnonzero(head.scalp.vertices[:, 2] > 0.02)[::8]
    positions, normals = head.scalp.vertices[upper], head.scalp.normals[upper]
    front = np.array([0.0, 1.0, 0.0]) - normals * normals[:, 1:2]
    front[np.linalg.norm(front, axis=1) < 1e-9] = (1.0, 0.0, 0.0)
    front /= np.linalg.norm(front, axis=1, keepdims=True)
    n = len(upper)
    names = [f"s{k:03d}" for k in range(n)]
    names[0] = HOSTILE_NAME
    return Sites(
        names=tuple(names),
        positions=positions,
        normals=normals,
        tangents=np.stack([front, np.cross(normals, front)], axis=1),
        nearest_name=tuple("Cz" for _ in range(n)),
        nearest_offset=np.linspace(0, 9e-3, n),
        landmark_distance=np.linspace(0.05, 0.2, 4 * n).reshape(n, 4),
        arc_fractions=np.linspace(0.1, 0.9, 2 * n).reshape(n, 2),
        travel_gap=np.zeros(n),
        slot_axes=normals,
    )


def _candidates(sites: Sites) -> Candidates:
    """An electrode, a one-axis and a two-axis magnetometer at every site."""
    n = len(sites)
    kind = np.repeat([0, 1, 2], n)
    site = np.tile(np.arange(n), 3)
    first, second = sites.positions, sites.positions + 6.5e-3 * sites.normals
    two = np.repeat(np.arange(n), 2)
    pairs = np.stack([sites.normals, sites.tangents[:, 0]], axis=1).reshape(-1, 3)
    labels = ("electrode", "one-axis", "two-axis")
    standing = poses(Rest(sites.normals, sites.positions))
    return Candidates(
        sites=sites,
        kind=kind,
        site=site,
        axis_name=("",) * n + ("tangent 1",) * n + ("normal + tangent 1",) * n,
        names=tuple(f"{labels[k]} {sites.names[s]}" for k, s in zip(kind, site, strict=True)),
        candidate_of_channel=np.concatenate([np.arange(2 * n), 2 * n + two]),
        positions=np.concatenate([first, second, second[two]]),
        axes=np.concatenate([np.zeros((n, 3)), sites.tangents[:, 0], pairs]),
        is_electrode=np.arange(4 * n) < n,
        housing_pose=np.concatenate([np.tile(np.eye(4), (n, 1, 1)), standing, standing]),
        cliques=(),
    )


def _rows(candidates: Candidates, chosen: tuple[int, ...], stock) -> tuple[SensorRow, ...]:
    rows = []
    for number, index in enumerate(chosen, start=1):
        kind, site = stock[candidates.kind[index]], candidates.site[index]
        channels = np.flatnonzero(candidates.candidate_of_channel == index)
        rows.append(
            SensorRow(
                number=number,
                candidate=int(index),
                name=candidates.names[index],
                kind=kind.name,
                kind_number=int(candidates.kind[index]),
                kind_type=kind.kind,
                site=candidates.sites.names[site],
                position=candidates.positions[channels[0]],
                scalp_position=candidates.sites.positions[site],
                normal=candidates.sites.normals[site],
                axis_name=candidates.axis_name[index],
                axes=candidates.axes[channels],
                nearest_name=candidates.sites.nearest_name[site],
                nearest_offset=float(candidates.sites.nearest_offset[site]),
                landmark_distance=candidates.sites.landmark_distance[site],
                arc_fractions=candidates.sites.arc_fractions[site],
                worth=0.5 / number,
                role="reference" if kind.kind == "electrode" and number == 2 else "",
            )
        )
    return tuple(rows)


def make_result(only: str | None = None) -> DesignResult:
    """`only`: "electrode" or "magnetometer" keeps one type in the layouts."""
    head = _head()
    candidates = _candidates(_sites(head))
    n = len(candidates.sites)
    sites_brief = SitesBrief(grid_pitch=15e-3)
    stock = (
        ElectrodeBrief("wet <b>cup</b>", 8, sites_brief, 1e-6),
        MagnetometerBrief("one-axis head", 8, sites_brief, 10e-15, axes="tangents"),
        MagnetometerBrief("two-axis head", 4, sites_brief, 15e-15, axes="two_axis"),
    )
    brief = Brief(
        title=HOSTILE_TITLE,
        head=HeadBrief("sphere", (0.33, 0.0042, 0.33)),
        regions=(),
        stock=stock,
        places=PlacesBrief(),
        noise=NoiseBrief(band=(1.0, 40.0)),
        goal=GoalBrief(),
        search=SearchBrief(seed=7),
        sha256="ab" * 32,
        folder=Path("."),
    )
    regions = (
        _region(head, "left <motor> hand", (-0.055, -0.005, 0.085), 0.018),
        _region(head, "right parietal", (0.045, -0.045, 0.08), 0.016),
        _region(head, "medial, hidden", (-0.004, 0.02, 0.045), 0.014),
    )
    target = regions[0].centre
    by_distance = np.argsort(np.linalg.norm(candidates.sites.positions - target, axis=1), kind="stable")
    layouts = []
    for rank in (1, 2, 3):
        near = by_distance[rank - 1 : rank + 11]
        far = np.arange(0, n, n // 8)[:8]
        electrodes = tuple(int(s) for s in far if s not in set(near))
        magnetometers = tuple(int(n + s) for s in near[:8]) + tuple(int(2 * n + s) for s in near[8:])
        chosen = {None: electrodes + magnetometers, "electrode": electrodes, "magnetometer": magnetometers}[only]
        value = 10.0 / rank + 1 / 3
        layouts.append(
            RankedLayout(
                rank=rank,
                value=value,
                bound=value * (1.0005 if rank == 1 else 1.02),
                gap_percent=0.05 if rank == 1 else 2.0,
                proven=rank == 1,
                cost=float(len(chosen)),
                sensors=_rows(candidates, chosen, stock),
                moved=None if rank == 1 else 2,
                chosen=chosen,
                per_region={region.name: RegionFigure(value / (2 + k)) for k, region in enumerate(regions)},
                equals_even_spread_of=31 if rank > 1 else None,
                even_spread_limit=64,
                housings_meet=None if only == "electrode" else 3 - rank,
            )
        )
    baselines = (
        Baseline("even spread", 6.2, 60.0, "", layouts[0].chosen),
        Baseline("10-10 subset", 5.9, 57.1, "nearest named positions", layouts[1].chosen),
        Baseline("best single channels", 7.7, 74.5, "", layouts[2].chosen),
        Baseline("random, median of 200", 3.1, 30.0, "seeded", None),
    )
    return DesignResult(
        brief=brief,
        version="0.1.0",
        goal="information",
        unit="bits",
        layouts=tuple(layouts),
        baselines=baselines,
        bound=layouts[0].bound,
        root_bound=11.2,
        weights=np.zeros(3 * n),
        candidates=candidates,
        head=head,
        regions=regions,
        bound_from="branch and bound",
        notes={
            "Head and model": ("Spherical head: only a quick model.",),
            "Strengths and noise": ("Brain noise is assumed, not measured <here>.",),
            "Ranking": (),
        },
        figures_of_noise={
            "background EEG, rms": Figure(14.8, "µV", "10 to 50 µV", 10.0, 50.0, remark="set by the brief"),
            "background field, rms": Figure(1310.0, "fT", "100 to 1000 fT", 100.0, 1000.0),
            "eye dipole, rms": Figure(float("nan"), "nAm"),
            "far field, rms": Figure(2.0, "fT", "5 to 9 fT", 5.0, 9.0, remark="for comparison", judged=False),
        },
        search_effort={
            "starts": 20,
            "swaps": 1,
            "bound rounds": 340,
            "parts examined": 120,
            "parts left open": 7,
            "differ by": 2,
        },
        audit={"target": np.arange(6.0).reshape(3, 2), "conflicts": np.array([[0, 1]])},
    )
