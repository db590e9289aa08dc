"""The whole job on the template, and on the template written to files and read back: the same design."""

import json

import pytest
from built_heads import template
from exported_head import write_head

from layout.anatomy import cache
from layout.brief.parse import load_brief
from layout.design import design

BRIEF = """\
schema = 1
title = "one head twice"
[head]
{head}
[[regions]]
name = "hand"
centre_mm = [-38, -24, 56]
frame = "mni152"
radius_mm = 12
side = "left"
moment_nam = 10
[[stock]]
kind = "electrode"
name = "cup"
count = 6
sites = {{ family = "10-20" }}
contact_noise_uv = 0.5
[noise]
band_hz = [1, 40]
[search]
ranked = 1
starts = 3
"""
OWN = """\
kind = "surfaces"
scalp = "scalp.gii"
outer_skull = "outer_skull.gii"
inner_skull = "inner_skull.gii"
cortex_left = "cortex_left.gii"
cortex_right = "cortex_right.gii"
cortex_mask_left = "mask_left.label.gii"
cortex_mask_right = "mask_right.label.gii"
landmarks = "landmarks.json"
units = "m"
mni152_file = "mni.json"
cortex_sources = 30000
"""


@pytest.mark.slow
def test_a_design_on_the_template_read_back_from_files_is_the_same(tmp_path, monkeypatch):
    monkeypatch.setenv(cache.FOLDER_VARIABLE, str(tmp_path / "kept"))
    brief = write_head(template("standard"), tmp_path)
    (tmp_path / "mni.json").write_text(json.dumps(brief.mni_to_files))
    found = []
    for name, head in (("template", 'kind = "template"'), ("own", OWN)):
        path = tmp_path / f"{name}.toml"
        path.write_text(BRIEF.format(head=head))
        found.append(design(load_brief(path)))
    first, second = (one.layouts[0] for one in found)
    assert [row.site for row in first.sensors] == [row.site for row in second.sensors]
    assert second.value == pytest.approx(first.value, rel=1e-9)
    assert found[1].head.name == "surfaces"
    # A second time the head comes from the cache.
    assert len(list((tmp_path / "kept").glob("surfaces-*.npz"))) == 1
    again = design(load_brief(tmp_path / "own.toml")).layouts[0]
    assert again.value == second.value
