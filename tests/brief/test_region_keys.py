"""[[regions]]: the ways to say which cortex is meant."""

import pytest
from good_brief import GOOD_BRIEF

from layout.brief.objects import RegionBrief
from layout.errors import BriefError

BALL = 'centre_mm = [-38, -24, 56]\nframe = "head"\nradius_mm = 12\n'


@pytest.fixture
def load_region(load_text, tmp_path):
    """A function that loads the good brief with the first region's place said otherwise."""

    def load(keys):
        for name in ("labels.gii", "mask.nii", "list.txt"):
            (tmp_path / name).write_text("x")
        assert GOOD_BRIEF.count(BALL) == 1
        return load_text(GOOD_BRIEF.replace(BALL, f"{keys}\n")).regions[0]

    return load


def region(**said):
    place = {"centre": None, "frame": "head", "radius": None} | said
    return RegionBrief(name="left hand area", side="left", moment=10e-9, **place)


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        (BALL + "along_cortex = true", {"centre": (-0.038, -0.024, 0.056), "radius": 0.012, "along_cortex": True}),
        ('label_file = "labels.gii"\nlabel = "hand"', {"label_file": "labels.gii", "label": "hand"}),
        ('label_file = "labels.gii"\nlabel = 7', {"label_file": "labels.gii", "label": 7}),
        ('mask_nifti = "mask.nii"\nframe = "mni152"', {"mask_nifti": "mask.nii", "frame": "mni152"}),
        (
            'mask_nifti = "mask.nii"\nframe = "files"\nlabel = 3',
            {"mask_nifti": "mask.nii", "frame": "files", "label": 3},
        ),
        ('vertices_file = "list.txt"', {"vertices_file": "list.txt"}),
        ("vertices = [1, 5, 9]", {"vertices": (1, 5, 9)}),
        ('parcel = "precentral"', {"parcel": "precentral"}),
    ],
)
def test_places(load_region, tmp_path, keys, said):
    folder = tmp_path.resolve()
    files = {key: folder / said[key] for key in ("label_file", "mask_nifti", "vertices_file") if key in said}
    assert load_region(keys) == region(**(said | files))


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ("", "regions[0].centre_mm must be given (or one of label_file, mask_nifti"),
        (
            'parcel = "a"\nvertices = [1]',
            "regions[0].parcel must be left out where vertices says which cortex is meant",
        ),
        (BALL + 'parcel = "a"', "regions[0].parcel must be left out where centre_mm"),
        ('label_file = "labels.gii"', "regions[0].label must be given with label_file"),
        (
            'label_file = "labels.gii"\nlabel = 1.5',
            "regions[0].label must be a label's name in quotes or its whole number",
        ),
        ('label_file = "labels.gii"\nlabel = true', "regions[0].label must be a label's name"),
        ('label_file = "labels.gii"\nlabel = 1\nframe = "head"', "regions[0].frame must be left out with label_file"),
        ('mask_nifti = "mask.nii"', "regions[0].frame must be given with mask_nifti"),
        (
            'mask_nifti = "mask.nii"\nframe = "mni152"\nradius_mm = 3',
            "regions[0].radius_mm must be left out with mask_nifti",
        ),
        (
            'mask_nifti = "gone.nii"\nframe = "mni152"',
            "regions[0].mask_nifti must be a file that exists",
        ),
        ("vertices = []", "regions[0].vertices"),
        ("vertices = [-1]", "must be at least 0"),
        ("vertices = [1.5]", "must be a whole number"),
        ('centre_mm = [-38, -24, 56]\nframe = "head"', "regions[0].radius_mm must be given with centre_mm"),
        ('centre_mm = [-38, -24, 56]\nframe = "talairach"\nradius_mm = 3', '"mni152", "head" or "files"'),
        ('parcel = "a"\nalong_cortex = true', "regions[0].along_cortex must be left out with parcel"),
    ],
)
def test_what_does_not_go_together(load_region, keys, words):
    with pytest.raises(BriefError) as refusal:
        load_region(keys)
    said = str(refusal.value)
    assert said.endswith(".")
    assert "\n" not in said
    assert words in said.replace(" (entry 1 of [[regions]])", "")
