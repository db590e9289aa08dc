"""Bad briefs on the command line: one sentence, exit code 2, nothing left in the current folder."""

import pytest
from click.testing import CliRunner
from small_brief import MAGNETOMETERS, SMALL_BRIEF
from test_bad_briefs import BAD, BAD_FILES, assert_one_sentence, spoilt

from layout.cli import cli

ELECTRODES_ONLY = SMALL_BRIEF.replace(MAGNETOMETERS, "")
MAGNETOMETERS_ONLY = SMALL_BRIEF[: SMALL_BRIEF.index("[[stock]]")] + SMALL_BRIEF[SMALL_BRIEF.rindex("[[stock]]") :]
FAMILY = 'sites = { family = "10-20" }'


@pytest.fixture
def refusal(tmp_path, monkeypatch):
    """A function that gives a bad brief (and files beside it) to the command line and returns what it says."""
    monkeypatch.chdir(tmp_path)

    def run(content, command=("design", "study.toml"), **beside):
        files = {"study.toml": content, **{name.replace("_", "."): text for name, text in beside.items()}}
        for name, text in files.items():
            (tmp_path / name).write_bytes(text if isinstance(text, bytes) else text.encode())
        answer = CliRunner().invoke(cli, command)
        assert answer.exit_code == 2, answer.output
        assert answer.stdout == ""
        assert answer.stderr.count("\n") == 1
        assert {path.name for path in tmp_path.iterdir()} == set(files)
        assert answer.stderr.startswith("Error: ")
        message = answer.stderr.rstrip("\n")
        assert_one_sentence(message)
        return message

    return run


@pytest.mark.parametrize("edit", BAD.values(), ids=BAD)
def test_a_bad_brief_is_refused_on_the_line(refusal, edit):
    said = refusal(spoilt(edit)).split("study.toml: ", 1)[1]
    for words in edit[2]:
        assert words in said


@pytest.mark.parametrize("bad", BAD_FILES.values(), ids=BAD_FILES)
def test_a_bad_file_is_refused_on_the_line(refusal, bad):
    content, expected = bad
    said = refusal(content, command=("check", "study.toml"))
    for words in expected:
        assert words in said


def replaced(text, part, instead):
    assert part in text
    return text.replace(part, instead, 1)


def with_places(lines, text=ELECTRODES_ONLY):
    return replaced(text, "[noise]", f"[places]\n{lines}\n[noise]")


# what is wrong, seen only once the head is there: (brief, words of the sentence)
NEEDS_THE_HEAD = {
    "zone around an unknown position": (
        with_places('[[places.zones]]\nname = "band"\naround = ["Fpx"]\nradius_mm = 20').replace(
            "contact_noise_uv", 'only_in = ["band"]\ncontact_noise_uv'
        ),
        ["places.zones", "'band'", "around", "standard positions", "'Fpx'"],
    ),
    "unknown site kept": (with_places('keep = ["Czz"]'), ["places.keep", "site of the stock", "'Czz'"]),
    "unknown site forbidden": (with_places('forbid = ["Q1"]'), ["places.forbid", "site of the stock", "'Q1'"]),
    "site of another family kept": (with_places('keep = ["AF7"]'), ["places.keep", "'AF7'"]),
    "kept site in a keep-out zone": (with_places('keep = ["A1"]'), ["places.keep", "allow", "'A1'"]),
    "unknown reference": (
        replaced(ELECTRODES_ONLY, "contact_noise_uv", 'reference = "M1"\ncontact_noise_uv'),
        ["stock[0].reference", "'M1'"],
    ),
    "reference in a keep-out zone": (
        replaced(ELECTRODES_ONLY, "contact_noise_uv", 'reference = "A2"\ncontact_noise_uv'),
        ["stock[0].reference", "'A2'"],
    ),
    "region outside the cortex": (
        replaced(ELECTRODES_ONLY, "[-40, -10, 54]", "[-10, 0, 0]"),
        ['regions "left"', "radius_mm", "at least one source", "not within 15 mm"],
    ),
    "template coordinates on a sphere": (
        replaced(ELECTRODES_ONLY, 'frame = "head"', 'frame = "mni152"'),
        ['regions "left"', "frame", '"head"', '"mni152"'],
    ),
    "normals of a sphere": (
        replaced(ELECTRODES_ONLY, 'orientation = "free"', 'orientation = "normal"'),
        ['regions "left"', "orientation", '"free"', '"normal"'],
    ),
    "more sensors than sites": (
        replaced(ELECTRODES_ONLY, "count = 4", "count = 20"),
        ["stock[0].count", "at most", "19 of 21", "lost to ears 2", "20 was given"],
    ),
    "zone with too few sites": (
        replaced(ELECTRODES_ONLY, "contact_noise_uv", 'only_in = ["forehead"]\ncontact_noise_uv'),
        ["stock[0].count", "outside forehead", "4 was given"],
    ),
    "kept site with several candidates": (
        with_places('keep = ["Cz"]', MAGNETOMETERS_ONLY),
        ["places.keep", "single candidate", "'Cz'", "holds 2"],
    ),
    "more sites kept of an entry than its count": (
        with_places(
            'keep = ["Cz", "C3", "C4", "Pz", "Fz"]',
            MAGNETOMETERS.replace(FAMILY, "sites = { grid_mm = 40 }").join(SMALL_BRIEF.split(MAGNETOMETERS)),
        ),
        ["places.keep", "at most 4", "stock[0]", "5 were given"],
    ),
    "two kept sites nearer than the spacing": (
        with_places('keep = ["Cz", "C3"]').replace("contact_noise_uv", "spacing_mm = 60\ncontact_noise_uv"),
        ["places.keep 'C3'", "too near", "places.keep 'Cz'"],
    ),
    "reference too near to a kept site": (
        with_places('keep = ["Cz"]').replace("contact_noise_uv", 'spacing_mm = 60\nreference = "C4"\ncontact_noise_uv'),
        ["stock[0].reference", "too near", "places.keep 'Cz'"],
    ),
    "spacing that leaves no room": (
        replaced(ELECTRODES_ONLY, "contact_noise_uv", "spacing_mm = 170\ncontact_noise_uv"),
        ["stock.count", "room", "spacing_mm (", "counts given: 4"],
    ),
    "zone that cannot hold enough": (
        with_places('[[places.zones]]\nname = "z"\npositions = ["O1", "O2", "A1"]\nat_least = 3'),
        ["places.zones 'z'", "at_least", "sites allowed in the zone, 2", "3 was given"],
    ),
    "zone of an unknown site": (
        with_places('[[places.zones]]\nname = "z"\npositions = ["O1", "Ozz"]\nat_most = 1'),
        ["places.zones 'z'", "positions", "'Ozz'", "near names"],
    ),
    "polygon with crossing edges": (
        with_places('[[places.zones]]\nname = "z"\ncorners = ["F3", "P4", "F4", "P3"]\nat_most = 1'),
        ["places.zones 'z'", "corners", "without crossing edges"],
    ),
    "unknown ground": (with_places('ground = "AFzz"'), ["places.ground", "standard position", "'AFzz'"]),
    "ground beside a kept site": (
        with_places('keep = ["Fz"]\nground = "AFz"').replace("contact_noise_uv", "spacing_mm = 50\ncontact_noise_uv"),
        ["places.keep", "clear of the ground at AFz", "'Fz'"],
    ),
    "unknown site in an existing layout": (
        ELECTRODES_ONLY + '[existing]\nuse = "trim"\nsites = ["Fz", "Cz", "Pz", "C3", "C99"]\n',
        ["existing.sites", "'C99'"],
    ),
    "kept site without a mirror image": (
        with_places('keep = ["C3"]\nforbid = ["C4"]\nleft_right_pairs = true'),
        ["places.keep 'C3'", "mirror image", "left_right_pairs"],
    ),
    "budget below what is kept": (
        with_places('keep = ["C3", "C4", "Cz"]') + "[budget]\ntotal = 2.5\n",
        ["budget.total", "at least 3", "2.5 was given"],
    ),
}


@pytest.mark.parametrize("bad", NEEDS_THE_HEAD.values(), ids=NEEDS_THE_HEAD)
@pytest.mark.parametrize("command", ["design", "check"])
def test_what_only_the_head_can_tell(refusal, command, bad):
    text, expected = bad
    said = refusal(text, command=(command, "study.toml"))
    for words in expected:
        assert words in said


# (table, words of the sentence)
DAMAGED_ELECTRODES = {
    "no table": ("hello\n", ["first columns", "'hello'"]),
    "a coordinate that is none": ("name\tx\ty\tz\nE1\t0\tx\t92\n", ["line 2", "y must be a finite number", "'x'"]),
    "a name twice": ("name\tx\ty\tz\nE1\t0\t0\t92\nE1\t0\t9\t91\n", ["line 3", "unique", "'E1'"]),
    "a short line": ("name\tx\ty\tz\nE1\t0\t0\n", ["line 2", "4 tab-separated fields", "got 3"]),
    "no rows": ("name\tx\ty\tz\n", ["at least one electrode", "none"]),
    "metres for millimetres": ("name\tx\ty\tz\nE1\t0\t0\t0.092\n", ["within 30 mm of the scalp", "'E1'"]),
    "not text": (b"\xff\xfe\x00", ["UTF-8"]),
}
SLOTS = "name,x_mm,y_mm,z_mm,axis_x,axis_y,axis_z,travel_mm\n"
DAMAGED_SLOTS = {
    "a column missing": ("name,x_mm\nA,1\n", ["columns", "lacks y_mm"]),
    "an axis of no length": (SLOTS + "A,0,0,120,0,0,0,30\n", ["line 2", "unit vector", "length 0"]),
    "a travel outwards": (SLOTS + "A,0,0,120,0,0,1,-3\n", ["line 2", "travel_mm", "-3"]),
    "an axis past the head": (SLOTS + "A,0,0,120,1,0,0,30\n", ["axis must meet the scalp", "'A'"]),
    "a slot inside the head": (SLOTS + "A,0,0,50,0,0,1,30\n", ["clear of the scalp", "'A'"]),
}


@pytest.mark.parametrize("bad", DAMAGED_ELECTRODES.values(), ids=DAMAGED_ELECTRODES)
def test_a_damaged_electrodes_table(refusal, bad):
    table, expected = bad
    said = refusal(ELECTRODES_ONLY.replace(FAMILY, 'sites = { electrodes_tsv = "holes.tsv" }'), holes_tsv=table)
    for words in ["holes.tsv", *expected]:
        assert words in said


@pytest.mark.parametrize("bad", DAMAGED_SLOTS.values(), ids=DAMAGED_SLOTS)
def test_a_damaged_slot_table(refusal, bad):
    table, expected = bad
    said = refusal(MAGNETOMETERS_ONLY.replace(FAMILY, 'sites = { slots_csv = "slots.csv" }'), slots_csv=table)
    for words in ["slots.csv", *expected]:
        assert words in said


def test_a_brief_that_is_not_there(refusal):
    assert "none of this name" in refusal(SMALL_BRIEF, command=("design", "other.toml"))


def test_an_output_folder_that_cannot_be(refusal):
    assert "must not be the current folder" in refusal(SMALL_BRIEF, command=("design", "study.toml", "--out", "."))
    assert "is a file" in refusal(SMALL_BRIEF, command=("design", "study.toml", "--out", "study.toml"))


def test_a_picture_of_another_kind(refusal):
    assert "'here.jpg'" in refusal(SMALL_BRIEF, command=("check", "study.toml", "--picture", "here.jpg"))


def test_a_starter_of_no_kind(refusal):
    assert '"cap", "helmet", "budget"' in refusal(SMALL_BRIEF, command=("new", "hat"))


def test_a_starter_over_an_existing_file(refusal, tmp_path):
    assert "'study.toml'" in refusal("mine", command=("new", "cap", "--out", "study.toml"))
    assert (tmp_path / "study.toml").read_text() == "mine"
