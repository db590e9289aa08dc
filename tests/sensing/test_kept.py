"""Kept sites and the named reference become candidates, under present and old names."""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import SitesBrief
from layout.errors import BriefError
from layout.sensing.kept import kept_candidates, named_reference
from layout.sensing.lay_out import lay_candidates


def names_kept(head, standard, one):
    laid = lay_candidates(head, one, standard)
    return [laid.names[number] for number in kept_candidates(one, laid)], laid


def test_nothing_is_kept_unless_said(head, standard):
    one = brief(electrodes())
    assert names_kept(head, standard, one)[0] == []
    assert named_reference(one, lay_candidates(head, one, standard)) is None


def test_old_names_are_kept_too(head, standard):
    one = brief(electrodes(reference="T4"), keep=("T3", "Cz"))
    kept, laid = names_kept(head, standard, one)
    assert sorted(kept) == ["Cz", "T7", "T8"]
    assert laid.names[named_reference(one, laid)] == "T8"


def test_a_kept_reference_counts_once(head, standard):
    assert names_kept(head, standard, brief(electrodes(count=1, reference="Cz"), keep=("Cz",)))[0] == ["Cz"]


def test_the_reference_is_the_electrode_where_magnetometers_share_the_site(head, standard):
    family = SitesBrief(family="10-20")
    one = brief(magnetometers(sites=family, axes="tangents"), electrodes(reference="Cz"))
    kept, laid = names_kept(head, standard, one)
    assert len(kept) == 1
    assert laid.kind[named_reference(one, laid)] == 1


def test_the_reference_is_found_where_another_entry_took_its_name(head, standard, tmp_path):
    table = tmp_path / "holes.tsv"
    shifted = standard["Cz"] * 1e3 + np.array([0.0, 9.0, 0.0])
    table.write_text("name\tx\ty\tz\nCz\t" + "\t".join(f"{value:.3f}" for value in shifted) + "\n")
    one = brief(magnetometers(count=1, sites=SitesBrief(electrodes_tsv=table)), electrodes(reference="Cz"))
    laid = lay_candidates(head, one, standard)
    assert laid.names[named_reference(one, laid)] == "Cz@cap"


def test_more_kept_than_the_entry_has(head, standard):
    one = brief(electrodes(count=2), magnetometers(), keep=("Cz", "C3", "C4"))
    with pytest.raises(BriefError, match=r"places\.keep: must keep at most 2 sites of stock\[0\].* 3 were given"):
        names_kept(head, standard, one)


def test_kept_sites_that_exclude_each_other(head, standard):
    one = brief(electrodes(spacing=0.06), keep=("Cz", "C3"))
    with pytest.raises(BriefError, match=r"places\.keep 'C3': .* too near to places\.keep 'Cz'"):
        names_kept(head, standard, one)
