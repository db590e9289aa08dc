"""[head]: a person's own surfaces and a head's size."""

import pytest
from good_brief import GOOD_BRIEF

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.objects import HeadSizeBrief, SurfacesBrief
from layout.errors import BriefError

OLD_HEAD = GOOD_BRIEF[GOOD_BRIEF.index("[head]") : GOOD_BRIEF.index("[[regions]]")]
OWN = """\
[head]
kind = "surfaces"
scalp = "scalp.gii"
cortex_left = "left.gii"
cortex_right = "right.gii"
landmarks = "marks.json"
units = "mm"
"""
FILES = ("scalp.gii", "left.gii", "right.gii", "marks.json", "both.ply", "mask.gii", "mni.json")


@pytest.fixture
def load_head(load_text, tmp_path):
    """A function that loads the good brief with another [head]; the files it names exist beside it."""

    def load(head):
        for name in FILES:
            (tmp_path / name).write_text("x")
        return load_text(GOOD_BRIEF.replace(OLD_HEAD, head)).head

    return load


def refused(load_head, head):
    with pytest.raises(BriefError) as refusal:
        load_head(head)
    said = str(refusal.value)
    assert said.endswith(".")
    assert "\n" not in said
    return said


def test_own_surfaces(load_head, tmp_path):
    folder = tmp_path.resolve()
    head = load_head(OWN)
    assert head.kind == "surfaces"
    assert head.source_mesh == "standard"
    assert head.surfaces == SurfacesBrief(
        cortex={"left": folder / "left.gii", "right": folder / "right.gii"},
        landmarks=folder / "marks.json",
        scalp=folder / "scalp.gii",
        unit=1e-3,
    )


def test_every_key_of_own_surfaces(load_head, tmp_path):
    folder = tmp_path.resolve()
    head = load_head("""\
[head]
kind = "surfaces"
cortex = "both.ply"
cortex_mask = "mask.gii"
landmarks = "marks.json"
units = "m"
mni152_to_files = [[1.0, 0.0, 0.0, 2.5], [0.0, 1.0, 0.0, 0.0], [0.0, 0.0, 1.0, 0.0]]
surface_vertices = 1000
cortex_sources = 4000
least_gap_mm = 1.5
conductivities_s_per_m = [0.33, 0.01, 0.33]
""")
    assert head.surfaces == SurfacesBrief(
        cortex={"both": folder / "both.ply"},
        cortex_masks={"both": folder / "mask.gii"},
        landmarks=folder / "marks.json",
        unit=1.0,
        mni_to_files=((1, 0, 0, 2.5), (0, 1, 0, 0), (0, 0, 1, 0)),
        vertices=1000,
        cortex_sources=4000,
        gap=1.5e-3,
    )
    assert head.conductivities == (0.33, 0.01, 0.33)


def test_units_may_be_left_to_be_asked_for(load_head):
    assert load_head(OWN.replace('units = "mm"\n', "")).surfaces.unit is None


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (('units = "mm"', 'units = "cm"'), 'head.units must be "mm" or "m", but "cm" was given'),
        (('cortex_left = "left.gii"\n', ""), "must name the cortex by"),
        (('cortex_left = "left.gii"', 'cortex = "both.ply"'), "must name the cortex by"),
        (('landmarks = "marks.json"\n', ""), "head.landmarks must name a file with the landmarks"),
        (('"scalp.gii"', '"gone.gii"'), 'head.scalp must be a file that exists (seen from the brief), but "gone.gii"'),
        (
            ('units = "mm"', 'units = "mm"\ncortex_mask = "mask.gii"'),
            "head.cortex_mask must be left out without head.cortex",
        ),
        (('units = "mm"', 'units = "mm"\nsource_mesh = "fine"'), "head.source_mesh must be left out for own surfaces"),
        (
            ('units = "mm"', 'units = "mm"\nlength_mm = 190'),
            'head.length_mm must be left out unless head.kind is "template"',
        ),
        (('units = "mm"', 'units = "mm"\nsurface_vertices = 10'), "head.surface_vertices must be at least 500"),
        (
            (
                'units = "mm"',
                'units = "mm"\nmni152_file = "mni.json"\n' + f"mni152_to_files = {[[1.0, 0.0, 0.0, 0.0]] * 3}",
            ),
            "head.mni152_file must be left out",
        ),
        (('units = "mm"', 'units = "mm"\nmni152_to_files = [[1.0, 0.0], [0.0, 1.0]]'), "head.mni152_to_files"),
        (('units = "mm"', 'units = "mm"\nradii_mm = [80, 85, 92]'), "head.radii_mm must be left out"),
        (('"surfaces"', '"template"'), 'must be left out unless head.kind is "surfaces"'),
    ],
)
def test_what_does_not_go_together(load_head, change, words):
    assert OWN.count(change[0]) == 1
    assert words in refused(load_head, OWN.replace(*change))


@pytest.mark.parametrize("name", NAMED_SIZES)
def test_named_sizes(load_head, name):
    head = load_head(f'[head]\nkind = "template"\nsize = "{name}"\n')
    assert head.size == HeadSizeBrief(*NAMED_SIZES[name], name=name)


def test_sizes_in_millimetres(load_head):
    assert load_head('[head]\nkind = "template"\n').size is None
    head = load_head('[head]\nkind = "template"\nlength_mm = 188.5\ncircumference_mm = 561\n')
    assert head.size == HeadSizeBrief(length=0.1885, circumference=0.561)


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ('size = "male giant"', "head.size must be one of the survey's sizes (male 1st percentile"),
        (
            'size = "male 5th percentile"\nlength_mm = 190',
            "head.length_mm must be left out where head.size names a size",
        ),
        ("length_mm = 19", "head.length_mm must be at least 150"),
        ("breadth_mm = 250", "head.breadth_mm must be at most 190"),
    ],
)
def test_bad_sizes(load_head, keys, words):
    assert words in refused(load_head, f'[head]\nkind = "template"\n{keys}\n')
