"""What a good brief becomes: SI values, defaults, digest, files."""

import dataclasses
import math
import subprocess
import sys
from typing import Literal, get_args, get_origin, get_type_hints

import pytest
from good_brief import GOOD_BRIEF

from layout.brief import objects, schema_common, schema_head, schema_regions, schema_stock
from layout.brief.parse import load_brief
from layout.errors import BriefError

SHORTEST_BRIEF = """\
schema = 1
title = "Short"
head = { kind = "template" }
noise = { band_hz = [1, 40] }
[[regions]]
name = "a"
centre_mm = [-38, -24, 56]
frame = "mni152"
radius_mm = 12
side = "left"
moment_nam = 10
[[stock]]
kind = "electrode"
name = "e"
count = 4
sites = { family = "10-10" }
contact_noise_uv = 1
[[stock]]
kind = "magnetometer"
name = "m"
count = 4
sites = { family = "10-10" }
noise_ft_per_rthz = 15
"""


def si(*values):
    return pytest.approx(values if len(values) > 1 else values[0], rel=1e-12)


def test_every_quantity_arrives_in_si(load_text):
    edits = {
        "hair_mm = 0": "hair_mm = 3",
        "field_ft_rms = 0": "field_ft_rms = 250",
        "gradient_ft_per_cm_rms = 0": "gradient_ft_per_cm_rms = 7",
    }
    text = GOOD_BRIEF
    for before, after in edits.items():
        assert before in text
        text = text.replace(before, after)
    brief = load_text(text)
    assert brief.head.conductivities == (0.33, 0.0165, 0.33)
    assert brief.head.radii == si(0.080, 0.085, 0.092)
    assert brief.head.cortex_depth == si(0.012)
    region = brief.regions[0]
    assert region.centre == si(-0.038, -0.024, 0.056)
    assert region.radius == si(0.012)
    assert region.moment == si(1e-8)
    cups, heads = brief.stock
    assert cups.contact_noise == si(1e-6)
    assert cups.contact_noise_in == {"forehead": si(0.7e-6)}
    assert (cups.keep_out, cups.only_in) == (("eyes", "ears", "neck"), ("band",))
    assert heads.sites.grid_pitch == si(0.015)
    assert heads.noise_density == si(15e-15)
    assert (heads.standoff, heads.hair, heads.spacing) == si(0.0065, 0.003, 0.020)
    assert heads.housing == si(0.0124, 0.0166, 0.0244)
    assert heads.price == 2.5
    assert (brief.places.eye_radius, brief.places.ear_radius) == si(0.035, 0.025)
    assert (brief.places.keep, brief.places.forbid) == (("Cz",), ("T7",))
    zone = brief.places.zones[0]
    assert (zone.name, zone.around, zone.radius) == ("band", ("Fpz", "AF7", "AF8"), si(0.018))
    noise = brief.noise
    assert noise.band == (1, 40)
    assert noise.bandwidth == 39
    assert (noise.eeg_rms, noise.eyes_rms) == si(15e-6, 20e-6)
    assert noise.patch_area == si(4e-4)
    assert noise.field_rms == si(250e-15)
    assert noise.gradient_rms == si(7e-13)  # 1 fT/cm = 1e-15 T / 1e-2 m
    assert brief.search.time_allowance == 60


def test_numbers_without_a_point_become_floats(load_text):
    brief = load_text(SHORTEST_BRIEF)
    assert all(isinstance(edge, float) for edge in brief.noise.band)
    assert isinstance(brief.stock[0].contact_noise, float)
    assert isinstance(brief.stock[0].count, int)


def test_keys_left_out_take_the_defaults_of_the_objects(load_text):
    brief = load_text(SHORTEST_BRIEF)
    assert brief.search == objects.SearchBrief()
    assert brief.places == objects.PlacesBrief()
    assert brief.noise == objects.NoiseBrief(band=(1.0, 40.0))
    for part in (brief.head, *brief.regions, *brief.stock):
        for field in dataclasses.fields(part):
            if field.default is not dataclasses.MISSING and field.name != "model":
                assert getattr(part, field.name) == field.default
    assert brief.head.model == ("spheres" if brief.head.kind == "sphere" else "boundary_elements")
    assert brief.goal == objects.GoalBrief()
    assert brief.goal.kind == "information"


@pytest.mark.parametrize(
    ("keys", "conductivities", "radii"),
    [
        ("", (0.33, 0.0165, 0.33), (0.080, 0.085, 0.092)),
        ("layers = 3", (0.33, 0.0165, 0.33), (0.080, 0.085, 0.092)),
        ("layers = 4", (0.33, 1.79, 0.0165, 0.33), (0.079, 0.080, 0.085, 0.090)),
        ("conductivities_s_per_m = [1, 2, 3, 4]", (1, 2, 3, 4), (0.079, 0.080, 0.085, 0.090)),
        ("radii_mm = [70, 71, 75, 80]", (0.33, 1.79, 0.0165, 0.33), (0.070, 0.071, 0.075, 0.080)),
    ],
)
def test_layers_and_radii_of_a_sphere(load_text, keys, conductivities, radii):
    text = SHORTEST_BRIEF.replace('head = { kind = "template" }\n', "")
    brief = load_text(f'{text}\n[head]\nkind = "sphere"\n{keys}\n')
    assert brief.head.conductivities == conductivities
    assert brief.head.radii == si(*radii)
    assert brief.head.cortex_depth == si(0.012)


@pytest.mark.parametrize("key", ["conductivities_s_per_m", "radii_mm"])
@pytest.mark.parametrize("values", ["[]", "[10, 20]", "[10, 20, 30, 40, 50]"])
def test_there_is_no_head_of_two_or_five_layers(load_text, key, values):
    text = SHORTEST_BRIEF.replace('head = { kind = "template" }\n', "")
    with pytest.raises(BriefError, match=rf"head\.{key} must have at (least 3|most 4) entries"):
        load_text(f'{text}\n[head]\nkind = "sphere"\n{key} = {values}\n')


@pytest.mark.parametrize(
    ("keys", "innermost", "depth"),
    [
        ("cortex_depth_mm = 90", 80, 90),
        ("layers = 4\ncortex_depth_mm = 79", 79, 79),
        ("radii_mm = [9, 50, 60]", 9, 12),
    ],
)
def test_the_cortex_lies_inside_the_innermost_layer_also_by_default(load_text, keys, innermost, depth):
    text = SHORTEST_BRIEF.replace('head = { kind = "template" }\n', "")
    with pytest.raises(
        BriefError,
        match=rf"head\.cortex_depth_mm .* {innermost} mm \(left out: 12\), but {depth}(\.0)? was given",
    ):
        load_text(f'{text}\n[head]\nkind = "sphere"\n{keys}\n')


def test_default_skull_is_a_twentieth_of_the_brain_and_a_template_has_no_radii(load_text):
    head = load_text(SHORTEST_BRIEF).head
    assert math.isclose(head.conductivities[0] / head.conductivities[1], 20)
    assert (head.radii, head.cortex_depth) == (None, None)


@pytest.mark.parametrize("inner", ["regions = []", "regions = [1]", "regions = [[]]", "regions = {}"])
def test_regions_must_be_tables(load_text, inner):
    start, _, rest = SHORTEST_BRIEF.partition("[[regions]]")
    text = start + inner + "\n[[stock]]" + rest.split("[[stock]]", 1)[1]
    with pytest.raises(BriefError, match=r": regions(\[0\])? must (be a|have at least 1 entry)"):
        load_text(text)


@pytest.mark.parametrize("inner", ["stock = []", "stock = [1]", "stock = [[]]", "stock = [{}]"])
def test_stock_must_be_tables(load_text, inner):
    start, _, rest = SHORTEST_BRIEF.partition("[[regions]]")
    region = rest.split("[[stock]]", 1)[0]
    with pytest.raises(BriefError, match=r": stock(\[0\](\.kind)?)? must (be a|be \"elec|have at least 1 entry)"):
        load_text(f"{start}{inner}\n[[regions]]{region}")


def test_digest_is_of_the_bytes_of_the_file(tmp_path):
    path = tmp_path / "study.toml"
    path.write_text(SHORTEST_BRIEF)
    printed = subprocess.run(["sha256sum", path], capture_output=True, text=True, check=True).stdout
    assert load_brief(path).sha256 == printed.split()[0]


def test_line_ends_and_byte_order_mark_of_other_editors_change_nothing(load_text):
    plain = load_text(SHORTEST_BRIEF)
    for content in (b"\xef\xbb\xbf" + SHORTEST_BRIEF.encode(), SHORTEST_BRIEF.replace("\n", "\r\n").encode()):
        assert dataclasses.replace(load_text(content), sha256=plain.sha256) == plain


def test_files_are_looked_for_beside_the_brief(tmp_path, monkeypatch):
    study = tmp_path / "study"
    study.mkdir()
    (study / "holes.tsv").write_text("name\tx\ty\tz\n")
    (tmp_path / "slots.csv").write_text("name\n")
    text = SHORTEST_BRIEF.replace('family = "10-10"', 'electrodes_tsv = "holes.tsv"', 1)
    text = text.replace('family = "10-10"', 'slots_csv = "../slots.csv"')
    (study / "brief.toml").write_text(text)
    monkeypatch.chdir(tmp_path)
    brief = load_brief("study/brief.toml")
    assert brief.folder == study
    cups, heads = brief.stock
    assert cups.sites.electrodes_tsv == study / "holes.tsv"
    assert heads.sites.slots_csv.is_absolute()
    assert heads.sites.slots_csv.samefile(tmp_path / "slots.csv")
    (study / "holes.tsv").unlink()
    (study / "holes.tsv").mkdir()
    with pytest.raises(BriefError, match=r"stock\[0\]\.sites\.electrodes_tsv"):
        load_brief("study/brief.toml")


def forms():
    def below(form):
        return [form, *(f for sub in form.__subclasses__() for f in below(sub))]

    return below(schema_common.Form)


def test_choices_of_the_file_are_the_choices_of_the_objects():
    """A word the schema takes and the objects do not know (or the other way round) would go unnoticed."""

    def choices(hints):
        return {key: get_args(hint) for key, hint in hints.items() if get_origin(hint) is Literal}

    pairs = [
        (schema_head.HeadForm, objects.HeadBrief),
        (schema_regions.RegionForm, objects.RegionBrief),
        (schema_stock.ElectrodeForm, objects.ElectrodeBrief),
        (schema_stock.MagnetometerForm, objects.MagnetometerBrief),
    ]
    for form, cls in pairs:
        taken = choices(get_type_hints(form))
        assert taken
        assert taken == choices(get_type_hints(cls))


def test_every_form_is_strict_frozen_and_closed():
    assert len(forms()) > 12  # the walk over the classes found them
    for form in forms():
        config = form.model_config
        assert (config["strict"], config["frozen"], config["extra"]) == (True, True, "forbid")


@pytest.mark.parametrize("module", ["layout.brief.parse", "layout.brief.starter"])
def test_import_is_quick_and_light(module):
    """Best of six, in processor time. --help, which has half a second, imports neither; other tests run beside this."""
    code = (
        "import sys, time; t = time.process_time()\n"
        f"import {module}\n"
        "print(time.process_time() - t, {'numpy', 'scipy', 'trimesh', 'nibabel', 'click'} & set(sys.modules))"
    )
    for _ in range(6):
        run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
        seconds, heavy = run.stdout.split(maxsplit=1)
        assert heavy.strip() == "set()"
        if float(seconds) < 0.5:
            return
    pytest.fail(f"importing {module} takes {seconds} s")
