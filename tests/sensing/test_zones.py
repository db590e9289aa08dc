"""Built-in zones by the positions they must and must not hold; zones of the brief; unknown names."""

import numpy as np
import pytest
from synthetic_head import electrodes

from layout.anatomy.scalp_points import project
from layout.brief.objects import PlacesBrief, ZoneBrief
from layout.errors import BriefError
from layout.sensing.zones import allowed, zone_mask

PLACES = PlacesBrief(eye_radius=25e-3)


def names_in(head, standard, zone, places=PLACES):
    inside = zone_mask(head, places, zone, np.array(list(standard.values())), standard)
    return {name for name, is_in in zip(standard, inside, strict=True) if is_in}


@pytest.mark.parametrize(
    ("zone", "inside", "outside"),
    [
        ("eyes", "AF9 AFp9 N1 N2 AF10", "Fp1 Fpz Fp2 AF7 AF8 F7 F9 F10 T9 Cz Iz"),
        ("ears", "T9 T10 A1 A2 T9h", "T7 T8 F9 P9 FT7 Cz"),
        ("neck", "", "Iz I1 I2 P9 PO9 T9 Nz Cz Oz"),
        ("face", "", "Nz F9 FT9 Fp1 Iz Cz N1"),
        ("forehead", "Fp1 Fpz Fp2 AF7 AF8 NFpz AFp7", "F7 F8 AFpz AFz AF3 Fz T7 Oz Iz FT7 F9 F10 FT9"),
    ],
)
def test_built_in_zones(head, standard, zone, inside, outside):
    found = names_in(head, standard, zone)
    assert set(inside.split()) <= found
    assert not set(outside.split()) & found


@pytest.mark.parametrize(
    ("zone", "point"),
    [
        ("face", (0.0, 0.09, -0.02)),
        ("eyes", (0.0, 0.09, -0.02)),
        ("face", (0.05, 0.03, -0.05)),
        ("neck", (0.0, -0.09, -0.02)),
        ("neck", (0.05, -0.03, -0.04)),
        ("neck", (0.0, 0.02, -0.085)),
    ],
)
def test_low_scalp_is_no_place_for_sensors(head, standard, zone, point):
    on = project(head.scalp, np.array([point])).positions
    assert zone_mask(head, PLACES, zone, on, standard)[0]


def test_radii_are_adjustable(head, standard):
    assert "Fp1" in names_in(head, standard, "eyes", PlacesBrief(eye_radius=40e-3))
    assert "T7" in names_in(head, standard, "ears", PlacesBrief(ear_radius=45e-3))
    assert "T9" not in names_in(head, standard, "ears", PlacesBrief(ear_radius=2e-3))


def test_a_zone_of_the_brief_is_a_union_of_balls(head, standard):
    places = PlacesBrief(zones=(ZoneBrief("motor", ("C3", "C4"), 15e-3), ZoneBrief("old", ("T5",), 1e-3)))
    found = names_in(head, standard, "motor", places)
    expected = {
        name
        for name, point in standard.items()
        if min(np.linalg.norm(point - standard[centre]) for centre in ("C3", "C4")) <= 15e-3
    }
    assert found == expected
    assert {"C3", "C4", "C3h"} <= found
    assert "Cz" not in found
    assert names_in(head, standard, "old", places) == {"P7"}


@pytest.mark.parametrize(
    ("places", "zone", "said"),
    [
        (PLACES, "ear", "zone must be one of eyes.*'ear'.*near names: ears"),
        (PlacesBrief(zones=(ZoneBrief("mine", ("C9",), 0.01),)), "mine", "'mine'.*'C9'.*near names: .*C"),
        (PlacesBrief(zones=(ZoneBrief("eyes", ("Cz",), 0.01),)), "eyes", "built-in zone, but 'eyes'"),
    ],
)
def test_unknown_names(head, standard, places, zone, said):
    with pytest.raises(BriefError, match=said):
        zone_mask(head, places, zone, np.zeros((1, 3)), standard)


def test_keep_out_and_only_in(head, standard):
    points = np.array([standard[name] for name in ("Fp1", "C3", "Cz", "T9")])
    places = PlacesBrief(zones=(ZoneBrief("left", ("C3",), 5e-3), ZoneBrief("top", ("Cz",), 5e-3)))
    fine, lost = allowed(head, places, electrodes(keep_out=("ears", "top")), points, standard)
    assert fine.tolist() == [True, True, False, False]
    assert lost == {"ears": 1, "top": 1}
    fine, lost = allowed(head, places, electrodes(keep_out=(), only_in=("left", "top")), points, standard)
    assert fine.tolist() == [False, True, True, False]
    assert lost == {"outside left and top": 2}
    with pytest.raises(BriefError, match=r"stock\[3\].only_in: zone must be one of .*'lef'.*near names: left"):
        allowed(head, places, electrodes(only_in=("lef",)), points, standard, "stock[3]")
