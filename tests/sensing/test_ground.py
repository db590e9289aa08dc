"""The ground takes its site and what lies within its spacing and footprint, and nothing else."""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import FootprintBrief, SitesBrief
from layout.errors import BriefError, InfeasibleError
from layout.sensing.lay_out import lay_candidates

TEN_TEN = SitesBrief(family="10-10")


def test_the_site_of_the_ground_is_taken(head, standard):
    with_ground = lay_candidates(head, brief(electrodes(sites=TEN_TEN), ground="AFz"), standard)
    without = lay_candidates(head, brief(electrodes(sites=TEN_TEN)), standard)
    assert set(without.names) - set(with_ground.names) == {"AFz"}
    assert with_ground.ground.names == ("AFz",)
    assert np.allclose(with_ground.ground.positions[0], standard["AFz"], rtol=0, atol=1e-5)
    assert with_ground.ground.nearest_name == ("AFz",)
    assert without.ground is None
    assert any("ground at AFz: 1 places" in note for note in with_ground.notes)


@pytest.mark.slow
def test_spacing_and_footprint_hold_for_the_ground(head, standard):
    """The ground is an electrode of the first entry: distances by brute force."""
    stock = (
        electrodes(sites=TEN_TEN, spacing=0.035),
        magnetometers(sites=SitesBrief(grid_pitch=0.02), spacing=0.05, axes="tangents"),
        electrodes(name="spare", sites=SitesBrief(family="10-5"), footprint=FootprintBrief("circle", 0.03, 0.03)),
    )
    left = lay_candidates(head, brief(*stock, ground="FCz"), standard)
    every = lay_candidates(head, brief(*stock), standard)
    sensor = every.positions[np.searchsorted(every.candidate_of_channel, np.arange(len(every)))]
    away = np.linalg.norm(sensor - left.ground.positions[0], axis=1)
    spacing = np.array([0.035, 0.05, 0.035])[every.kind]
    expected = {name for name, fine in zip(every.names, away >= spacing, strict=True) if fine}
    assert set(left.names) == expected
    assert len(expected) < len(every) - 30
    wide = FootprintBrief("circle", 0.04, 0.04)
    cap = (electrodes(sites=TEN_TEN, footprint=wide),)
    names = set(lay_candidates(head, brief(*cap, ground="FCz"), standard).names)
    assert not {"FCz", "FC1", "FC2"} & names
    assert {"FC3", "F4"} <= names


def test_a_ground_between_the_sites(head, standard):
    laid = lay_candidates(head, brief(electrodes(), ground="AFz"), standard)
    assert laid.ground.names == ("AFz",)
    assert len(laid) == 19
    assert any("ground at AFz: 0 places" in note for note in laid.notes)


@pytest.mark.slow
def test_old_names_and_slots_of_the_stock_may_be_the_ground(head, standard):
    assert lay_candidates(head, brief(electrodes(), ground="T3"), standard).ground.names == ("T7",)
    stock = (electrodes(), magnetometers(sites=SitesBrief(grid_pitch=0.03)))
    assert lay_candidates(head, brief(*stock, ground="S002"), standard).ground.names == ("S002",)


@pytest.mark.parametrize(
    ("stock", "places", "error", "said"),
    [
        (
            {},
            {"ground": "AFZ9"},
            BriefError,
            "places.ground: must name a standard position .*'AFZ9' .*near names: .*AF",
        ),
        ({"spacing": 0.08}, {"ground": "FCz", "keep": ("Cz",)}, BriefError, "places.keep: .*ground at FCz, but 'Cz'"),
        ({"reference": "Cz"}, {"ground": "Cz"}, BriefError, r"stock\[0\].reference: .*ground at Cz, but 'Cz'"),
        ({"spacing": 0.3}, {"ground": "Cz"}, InfeasibleError, r"stock\[0\].count: .*ground at Cz leaves free, 0 of 19"),
    ],
)
def test_what_cannot_be(head, standard, stock, places, error, said):
    with pytest.raises(error, match=said) as caught:
        lay_candidates(head, brief(electrodes(**stock), **places), standard)
    assert "\n" not in str(caught.value)
