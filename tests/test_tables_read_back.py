"""What a design writes is read again as the same layout of the same value, for the briefs of all three users."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from layout.brief.objects import SitesBrief
from layout.brief.parse import load_brief
from layout.design import build_problem, design, lay_out_study
from layout.design.given_layouts import given_layout
from layout.engine.information import information
from layout.outputs.bids.channels import housed_of
from layout.outputs.bids.electrodes import electrodes_tsv
from layout.outputs.bids.magnetometers_table import magnetometers_tsv
from layout.outputs.tables import sensors_csv

pytestmark = pytest.mark.slow
CONFIGS = Path(__file__).parents[1] / "configs"


@pytest.mark.parametrize("name", ["cap", "helmet", "budget"])
def test_read_back(name, tmp_path):
    brief = load_brief(CONFIGS / f"{name}.toml")
    brief = replace(
        brief,  # a quick model and hardly a search: here only the tables are on trial
        head=replace(brief.head, model="spheres", source_mesh="coarse"),
        search=replace(brief.search, starts=1, ranked=1, proof_parts=0),
    )
    result = design(brief)
    layout = result.layouts[0]
    table = magnetometers_tsv(result, layout) if housed_of(layout) else electrodes_tsv(layout)
    listed, csv = tmp_path / "listed.tsv", tmp_path / "sensors.csv"
    listed.write_text(table, encoding="utf-8")
    csv.write_text(sensors_csv(layout, result.unit), encoding="utf-8")

    study = lay_out_study(brief)
    problem = build_problem(study)
    for path in (listed, csv):
        given = given_layout(study, str(path))
        assert sorted(given.chosen) == sorted(layout.chosen)
        assert given.notes == ()
        assert information(problem.model, given.chosen) == pytest.approx(layout.value, rel=1e-9)

    sites = tuple(replace(entry, sites=SitesBrief(electrodes_tsv=listed), keep_out=()) for entry in brief.stock)
    again = lay_out_study(replace(brief, stock=sites, places=replace(brief.places, keep=(), forbid=())))
    used = again.candidates.sites
    assert used.names == tuple(row.site for row in layout.sensors)
    places = np.array([row.scalp_position for row in layout.sensors])
    np.testing.assert_allclose(used.positions, places, atol=2e-5)  # tables are rounded to 0.01 mm, then projected
