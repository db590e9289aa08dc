"""Existing layouts: found by name or position, kept or chosen from, and what is no existing layout."""

import dataclasses

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import ExistingBrief, SitesBrief
from layout.errors import BriefError, FileError, InfeasibleError
from layout.outputs.tables import SENSOR_COLUMNS
from layout.sensing.kept import kept_candidates
from layout.sensing.lay_out import lay_candidates

FAMILY = SitesBrief(family="10-20")
GRID = SitesBrief(grid_pitch=0.03)


def with_existing(one, use, *sites, table=None):
    return dataclasses.replace(one, existing=ExistingBrief(use, sites, table))


def test_extend_keeps_all_of_it(head, standard):
    one = with_existing(brief(electrodes(count=6), keep=("Oz",)), "extend", "Fz", "T3")
    one = dataclasses.replace(one, places=dataclasses.replace(one.places, keep=("Pz",)))
    laid = lay_candidates(head, one, standard)
    assert len(laid) == 19
    assert sorted(laid.names[number] for number in kept_candidates(one, laid)) == ["Fz", "Pz", "T7"]


def test_trim_leaves_nothing_else(head, standard):
    one = with_existing(brief(electrodes(spacing=0.07)), "trim", "Fz", "T3", "Cz", "Pz", "C4")
    laid = lay_candidates(head, one, standard)
    every = lay_candidates(head, brief(electrodes(spacing=0.07)), standard)
    assert laid.names == ("Fz", "T7", "Cz", "C4", "Pz")
    assert kept_candidates(one, laid) == ()
    number = {name: i for i, name in enumerate(laid.names)}
    pairs = {
        frozenset(every.names[c] for c in (a, b)) for clique in every.cliques for a in clique for b in clique if a < b
    }
    left = {
        frozenset(laid.names[c] for c in (a, b)) for clique in laid.cliques for a in clique for b in clique if a < b
    }
    assert left == {pair for pair in pairs if pair <= set(number)}
    assert left


def test_axes_may_be_named_or_left_open(head, standard):
    stock = magnetometers(sites=FAMILY, axes="tangents", count=2)
    laid = lay_candidates(head, with_existing(brief(stock), "trim", "Cz", "C3 tangent2"), standard)
    assert laid.names == ("C3 tangent2", "Cz tangent1", "Cz tangent2")
    assert np.array_equal(laid.candidate_of_channel, [0, 1, 2])
    assert [tuple(clique) for clique in laid.cliques] == [(1, 2)]
    one = with_existing(brief(stock), "extend", "C3 tangent2")
    laid = lay_candidates(head, one, standard)
    assert [laid.names[number] for number in kept_candidates(one, laid)] == ["C3 tangent2"]
    one = with_existing(brief(stock), "extend", "Cz")
    with pytest.raises(BriefError, match=r"existing\.sites 'Cz': must mean a single candidate .*, but 2 are there"):
        kept_candidates(one, lay_candidates(head, one, standard))


def test_the_plain_name_of_a_shared_site_is_its_electrode(head, standard):
    stock = (electrodes(), magnetometers(sites=FAMILY))
    one = brief(*stock, keep=("Cz", "Pz normal"))
    laid = lay_candidates(head, one, standard)
    assert sorted(laid.names[number] for number in kept_candidates(one, laid)) == ["Cz", "Pz normal"]


def test_a_table_of_positions(head, standard, tmp_path):
    """Positions decide, names do not: the nearest site within 5 mm."""
    table = tmp_path / "cap_electrodes.tsv"
    rng = np.random.default_rng(5)
    rows = [("one", "Cz"), ("Cz", "Pz"), ("x", "F7")]
    shifted = [standard[site] * 1e3 + rng.uniform(-2, 2, 3) for _, site in rows]
    lines = ["\t".join([name, *(f"{v:.2f}" for v in p)]) for (name, _), p in zip(rows, shifted, strict=True)]
    table.write_text("name\tx\ty\tz\n" + "\n".join(lines) + "\n")
    one = with_existing(brief(electrodes(count=3)), "trim", table=table)
    assert set(lay_candidates(head, one, standard).names) == {"Cz", "Pz", "F7"}
    stock = (magnetometers(sites=FAMILY), electrodes())
    one = with_existing(brief(*stock), "extend", table=table)
    laid = lay_candidates(head, one, standard)
    assert {laid.names[number] for number in kept_candidates(one, laid)} == {"Cz", "Pz", "F7"}  # the electrodes there


def sensors_csv(laid, chosen, stock):
    """As a ranked folder's own table has it: a row for each channel."""
    rows = [",".join(SENSOR_COLUMNS)]
    for number, one in enumerate(chosen, 1):
        position = laid.sites.positions[laid.site[one]] * 1e3
        for channel in range(int((laid.candidate_of_channel == one).sum())):
            row = dict.fromkeys(SENSOR_COLUMNS, "0")
            row |= {"number": str(number), "channel": str(channel + 1), "name": laid.names[one]}
            row |= {"kind": stock[laid.kind[one]].name, "axis": laid.axis_name[one]}
            row |= {f"scalp_{letter}_mm": f"{value:.2f}" for letter, value in zip("xyz", position, strict=True)}
            rows.append(",".join(row.values()))
    return "\n".join(rows) + "\n"


def test_the_table_of_a_ranked_layout(head, standard, tmp_path):
    stock = (electrodes(), magnetometers(sites=GRID, axes="two_axis"))
    laid = lay_candidates(head, brief(*stock), standard)
    rng = np.random.default_rng(2)
    chosen = [*rng.choice(np.flatnonzero(laid.kind == 0), 3, replace=False)]
    sites = rng.choice(np.unique(laid.site[laid.kind == 1]), 3, replace=False)
    chosen += [rng.choice(np.flatnonzero((laid.site == site) & (laid.kind == 1))) for site in sites]
    table = tmp_path / "sensors.csv"
    table.write_text(sensors_csv(laid, chosen, stock))
    one = with_existing(brief(*stock), "extend", table=table)
    assert kept_candidates(one, laid) == tuple(sorted(int(c) for c in chosen))


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("name\tx\ty\tz\na\t0\t0\t90\nb\t45\t0\t75\n", "within 5 mm of a site .*'b' is .* mm off"),
        ("name\tx\ty\tz\na\t0\t0\t90\nb\t1\t1\t90\n", "sites of their own, but .*'a' and .*'b' share one"),
        ("name\tx\ty\na\t0\t0\n", "first columns must be name, x, y, z"),
        ("number,name\n1,a\n", "with the columns number, name, kind, scalp_x_mm"),
        ("", "first columns must be name, x, y, z"),
        (b"number,\xff\n", "readable UTF-8"),
        (b"name\t\xff\n", "readable UTF-8"),
        (
            "number,name,kind,scalp_x_mm,scalp_y_mm,scalp_z_mm,axis\n1,Cz,cap,0,here,90,\n",
            "line 2: scalp_x_mm, scalp_y_mm and scalp_z_mm must be finite",
        ),
        (
            "number,name,kind,scalp_x_mm,scalp_y_mm,scalp_z_mm,axis\n1,Cz,cap,0,nan,90,\n",
            "line 2: scalp_x_mm, scalp_y_mm and scalp_z_mm must be finite",
        ),
        (
            "number,name,kind,scalp_x_mm,scalp_y_mm,scalp_z_mm,axis\n1,Cz,cap,0,0,90\n",
            "with the columns number",
        ),
        (
            "number,name,kind,scalp_x_mm,scalp_y_mm,scalp_z_mm,axis\n1,Cz,helmet,0,0,90,\n",
            "kind and axis that the stock has there, but 'Cz' is not",
        ),
    ],
)
def test_damaged_tables(head, standard, tmp_path, content, said):
    table = tmp_path / "layout.tsv"
    table.write_bytes(content if isinstance(content, bytes) else content.encode())
    one = with_existing(brief(electrodes(count=2)), "trim", table=table)
    with pytest.raises(FileError, match=said) as caught:
        lay_candidates(head, one, standard)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("use", "sites", "error", "said"),
    [
        ("trim", ("Fz", "Qz"), BriefError, r"existing\.sites: must name a site of the stock, but 'Qz'"),
        ("trim", ("Fz", "A1"), BriefError, r"existing\.sites: must name a site that zones and forbid allow, but 'A1'"),
        ("trim", ("Fz", "Cz", "Pz"), InfeasibleError, r"existing: must hold .* stock\[0\] .* 4, but there are 3"),
        ("extend", ("Fz", "Cz", "Pz", "C3", "C4"), BriefError, r"existing: must keep at most 4 .* 5 were given"),
    ],
)
def test_what_is_no_existing_layout(head, standard, use, sites, error, said):
    one = with_existing(brief(electrodes()), use, *sites)
    with pytest.raises(error, match=said) as caught:
        kept_candidates(one, lay_candidates(head, one, standard))
    assert "\n" not in str(caught.value)


def test_an_existing_layout_in_pairs(head, standard):
    one = brief(electrodes(count=4), left_right_pairs=True)
    trimmed = lay_candidates(head, with_existing(one, "trim", "F3", "F4", "C3", "Cz", "Pz"), standard)
    assert set(trimmed.names) == {"F3+F4", "Cz", "Pz"}
    extended = with_existing(one, "extend", "F3", "F4", "C3")
    laid = lay_candidates(head, extended, standard)
    assert {laid.names[number] for number in kept_candidates(extended, laid)} == {"F3+F4", "C3+C4"}
