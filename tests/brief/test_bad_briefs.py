"""Every kind of bad brief is refused with one sentence that names the key, the rule and the value."""

import os
import re

import pytest
from good_brief import GOOD_BRIEF

from layout.brief.parse import LARGEST_FILE, load_brief
from layout.errors import BriefError

ZONE = '[[places.zones]]\nname = "band"'
ELECTRODES = 'name = "gel cup"\ncount = 5'
MAGNETOMETERS = 'name = "sensor head"\ncount = 3'
FIRST_REGION_END = 'coherent = false\norientation = "normal"\n'

# what is wrong: (part of the good brief, what stands there instead, words of the sentence, the value last)
BAD = {
    "schema of another version": ("schema = 1", "schema = 2", ["schema", "must be 1", "2 was given"]),
    "schema missing": ("schema = 1\n", "", ["schema", "must be 1", "missing"]),
    "schema true": ("schema = 1", "schema = true", ["schema", "must be 1", "true"]),
    "title missing": ('title = "Both kinds of sensors"', "", ["title", "must be given", "missing"]),
    "title empty": ('"Both kinds of sensors"', '""', ["title", "1 to 200 characters", '""']),
    "title unprintable": ('"Both kinds of sensors"', r'"a\nb"', ["title", "printable", r'"a\nb"']),
    "unknown table": (
        "[goal]",
        "[goals]",
        ["goals", "not a known key", "did you mean goal)", '{kind = "information"}'],
    ),
    "unknown key with a near one": (
        "spacing_mm = 20",
        "spacing_cm = 2",
        ["stock[1].spacing_cm", "spacing_mm", "2"],
    ),
    "unknown key with no near one": (
        "seed = 1",
        "luck = 7",
        ["search.luck", "not a known key", "known here: seed, starts", "7"],
    ),
    "unknown key in a nested table": (
        "patch_cm2",
        "patch_mm2",
        ["noise.background.patch_mm2", "patch_cm2", "4"],
    ),
    "key of another kind of sensor": (
        "reference =",
        "noise_ft_per_rthz =",
        ["stock[0].noise_ft_per_rthz", "not a known", '"any"'],
    ),
    "key missing": (
        "noise_ft_per_rthz = 15\n",
        "",
        ["stock[1].noise_ft_per_rthz", "must be given", "missing"],
    ),
    "table missing": (
        "[head]",
        "[search.head]",
        ["search.head", "not a known key", "known here", "(and 1 more)"],
    ),
    "head of unknown kind": (
        'kind = "sphere"',
        'kind = "cube"',
        ["head.kind", '"template", "sphere" or "surfaces"', '"cube"'],
    ),
    "sphere keys on the template": ('"sphere"', '"template"', ["head.radii_mm", '"sphere"', "[80, 85, 92]"]),
    "five layers": ("layers = 3", "layers = 5", ["head.layers", "at most 4", "5"]),
    "two layers": ("layers = 3", "layers = 2", ["head.layers", "at least 3", "2"]),
    "layers against conductivities": (
        "layers = 3",
        "layers = 4",
        ["head.conductivities_s_per_m", "4 layers", "0.0165"],
    ),
    "layers against radii": (
        "[80, 85, 92]",
        "[80, 82, 85, 92]",
        ["head.radii_mm", "3 layers", "[80, 82, 85, 92]"],
    ),
    "radii not increasing": ("[80, 85, 92]", "[80, 92, 85]", ["head.radii_mm", "increasing", "[80, 92, 85]"]),
    "cortex deeper than the head": (
        "depth_mm = 12",
        "depth_mm = 80",
        ["head.cortex_depth_mm", "less than", "80"],
    ),
    "conductivity zero": (
        "[0.33, 0.0165",
        "[0.33, 0",
        ["head.conductivities_s_per_m[1]", "at least 1e-05", "0 was"],
    ),
    "conductivity too large": ("[0.33, 0.0165", "[101, 0.0165", ["s_per_m[0]", "at most 100", "101"]),
    "no such source mesh": (
        '"coarse"',
        '"corase"',
        ["head.source_mesh", '"coarse", "standard" or "fine"', '"corase"'],
    ),
    "no regions": (
        re.compile(r"\[\[regions\]\].*?(?=\[\[stock)", re.DOTALL),
        "",
        ["regions", "must be given", "missing"],
    ),
    "region name twice": (
        '"right hand area"',
        '"left hand area"',
        ["regions[1].name", "differ", '"left hand area"'],
    ),
    "region name empty": ('"left hand area"', '""', ["regions[0].name", "1 to 60", '""']),
    "region name with spaces around": (
        '"left hand area"',
        '" left"',
        ["regions[0].name", "spaces", '" left"'],
    ),
    "centre of two numbers": (
        "[-38, -24, 56]",
        "[-38, -24]",
        ["regions[0].centre_mm", "at least 3", "[-38, -24]"],
    ),
    "centre of four numbers": (
        "[-38, -24, 56]",
        "[-38, -24, 56, 1]",
        ["regions[0].centre_mm", "at most 3", "56, 1]"],
    ),
    "centre far outside": (
        "[-38, -24, 56]",
        "[-38, -24, 560]",
        ["regions[0].centre_mm[2]", "at most 200", "560"],
    ),
    "centre not a number": ("[-38, -24, 56]", "[-38, nan, 56]", ["regions[0].centre_mm[1]", "finite", "nan"]),
    "radius infinite": (
        'radius_mm = 12\nside = "left',
        'radius_mm = inf\nside = "left',
        ["radius_mm", "finite", "inf"],
    ),
    "radius a text": ("radius_mm = 12", 'radius_mm = "12"', ["regions[0].radius_mm", "number", '"12"']),
    "radius true": ("radius_mm = 12", "radius_mm = true", ["regions[0].radius_mm", "number", "true"]),
    "radius of a whole head": (
        "radius_mm = 12",
        "radius_mm = 151",
        ["regions[0].radius_mm", "at most 150", "151"],
    ),
    "no such frame": ('frame = "head"', 'frame = "mri"', ["regions[0].frame", '"mni152", "head"', '"mri"']),
    "no such side": (
        'side = "left"',
        'side = "up"',
        ["regions[0].side", '"left", "right" or "both"', '"up"'],
    ),
    "side the ball does not reach": (
        'side = "left"',
        'side = "right"',
        ["regions[0].side", "reaches", '"right"'],
    ),
    "moment negative": (
        "moment_nam = 10",
        "moment_nam = -3",
        ["regions[0].moment_nam", "at least 0.001", "-3"],
    ),
    "coherent a number": ("coherent = false", "coherent = 0", ["regions[0].coherent", "true or false", "0"]),
    "coherent without an orientation": (
        FIRST_REGION_END,
        'coherent = true\norientation = "free"\n',
        ["regions[0].coherent", '"free"', "true was given"],
    ),
    "no stock": (
        re.compile(r"\[\[stock\]\].*?(?=\[places\])", re.DOTALL),
        "",
        ["stock", "must be given", "missing"],
    ),
    "stock a table": (
        re.compile(r"\[\[stock\]\].*?(?=\[places\])", re.DOTALL),
        "[stock]\n",
        ["stock", "list", "{}"],
    ),
    "sensor without a kind": ('kind = "electrode"\n', "", ["stock[0].kind", '"electrode", ', "missing"]),
    "sensor of unknown kind": (
        'kind = "electrode"',
        'kind = "coil"',
        ["stock[0].kind", '"magnetometer"', '"coil"'],
    ),
    "sensor name twice": (
        '"sensor head"',
        '"gel cup"',
        ["stock[1].name (entry 2 of [[stock]])", "differ", '"gel cup"'],
    ),
    "count zero": (MAGNETOMETERS, MAGNETOMETERS.replace("3", "0"), ["stock[1].count", "at least 1", "0"]),
    "count a fraction": (
        ELECTRODES,
        ELECTRODES.replace("5", "5.0"),
        ["stock[0].count", "whole number", "5.0"],
    ),
    "count huge": (ELECTRODES, ELECTRODES.replace("5", "5000"), ["stock[0].count", "at most 1024", "5000"]),
    "one electrode alone": (
        ELECTRODES,
        ELECTRODES.replace("5", "1"),
        ["stock[0].count", "reference", "1 was"],
    ),
    "two sources of sites": (
        "{ grid_mm = 15 }",
        '{ grid_mm = 15, family = "10-5" }',
        ["stock[1].sites", "exactly one", "{grid_mm = 15, family ="],
    ),
    "no source of sites": ("{ grid_mm = 15 }", "{}", ["stock[1].sites", "exactly one", "{}"]),
    "no such family": (
        '"10-10"',
        '"10-15"',
        ["stock[0].sites.family", '"10-20", "10-10" or "10-5"', '"10-15"'],
    ),
    "sites a text": ('{ family = "10-10" }', '"10-10"', ["stock[0].sites", "table", '"10-10"']),
    "pitch of a hair": ("grid_mm = 15", "grid_mm = 0.1", ["stock[1].sites.grid_mm", "at least 2", "0.1"]),
    "slots for electrodes": (
        'family = "10-10"',
        'slots_csv = "slots.csv"',
        ["stock[0].sites.slots_csv", "magnetometers", '"slots.csv"'],
    ),
    "file that is not there": (
        "grid_mm = 15",
        'slots_csv = "no/slots.csv"',
        ["stock[1].sites.slots_csv", "exists", '"no/slots.csv"'],
    ),
    "file name too long": (
        "grid_mm = 15",
        f'slots_csv = "{"a" * 999}"',
        ["stock[1].sites.slots_csv", "exists", "aaa…"],
    ),
    "noise negative": (
        "noise_ft_per_rthz = 15",
        "noise_ft_per_rthz = -3",
        ["stock[1].noise_ft_per_rthz", "least", "-3"],
    ),
    "contact noise zero": (
        "contact_noise_uv = 1.0",
        "contact_noise_uv = 0",
        ["stock[0].contact_noise_uv", "least", "0"],
    ),
    "contact noise in an unknown zone": (
        "{ forehead = 0.7 }",
        "{ forhead = 0.7 }",
        ["stock[0].contact_noise_in_uv", "known zones", "forehead", '"forhead"'],
    ),
    "contact noise in a zone negative": (
        "forehead = 0.7",
        "forehead = -0.7",
        ["stock[0].contact_noise_in_uv.forehead", "at least", "-0.7"],
    ),
    "keep-out of an unknown zone": ('"neck"]', '"nape"]', ["stock[0].keep_out", "known zones", '"nape"']),
    "only in an unknown zone": ('["band"]', '["bands"]', ["stock[0].only_in", "band", '"bands"']),
    "zone kept out and asked for": ('["band"]', '["neck"]', ["stock[0].only_in", "keep_out", '"neck"']),
    "zone named twice": ('"ears", "neck"]', '"ears", "ears"]', ["stock[0].keep_out", "twice", '"ears"']),
    "zones a text": ('["band"]', '"band"', ["stock[0].only_in", "list", '"band"']),
    "reference on a forbidden site": ('"any"', '"T7"', ["stock[0].reference", "places.forbid", '"T7"']),
    "two references": (
        '"any"',
        '"Cz"\n[[stock]]\nkind = "electrode"\nname = "dry"\ncount = 2\nsites = { family = "10-20" }\n'
        'contact_noise_uv = 3\nreference = "Fz"',
        ["stock[1].reference", '"any"', '"Fz"'],
    ),
    "no such axes": ('axes = "normal"', 'axes = "radial"', ["stock[1].axes", '"three_axis"', '"radial"']),
    "standoff negative": (
        "standoff_mm = 6.5",
        "standoff_mm = -1",
        ["stock[1].standoff_mm", "at least 0", "-1"],
    ),
    "standoff too large": (
        "standoff_mm = 6.5",
        "standoff_mm = 75",
        ["stock[1].standoff_mm", "at most 60", "75"],
    ),
    "housing of two lengths": ("16.6, 24.4]", "16.6]", ["stock[1].housing_mm", "at least 3", "[12.4, 16.6]"]),
    "housing of four lengths": (
        "16.6, 24.4]",
        "16.6, 24.4, 9]",
        ["stock[1].housing_mm", "at most 3", "24.4, 9]"],
    ),
    "housing flat": ("[12.4, 16.6,", "[12.4, 0,", ["stock[1].housing_mm[1]", "at least 1", "0"]),
    "price negative": ("price = 2.5", "price = -2.5", ["stock[1].price", "at least 0", "-2.5"]),
    "zone with a built-in name": (
        ZONE,
        ZONE.replace("band", "neck"),
        ["places.zones[0].name", "built-in", '"neck"'],
    ),
    "zone name twice": (
        ZONE,
        ZONE + '\naround = ["Cz"]\nradius_mm = 9\n' + ZONE,
        ["places.zones[1].name", "differ", '"band"'],
    ),
    "zone around nothing": (
        '["Fpz", "AF7", "AF8"]',
        "[]",
        ["places.zones[0].around", "at least 1 entry", "[]"],
    ),
    "site kept and forbidden": ('["T7"]', '["Cz"]', ["places.forbid", "keep", '"Cz"']),
    "more sites kept than sensors": (
        'keep = ["Cz"]',
        'keep = ["a", "b", "c", "d", "e", "f", "g", "h", "i"]',
        ["places.keep", "at most 8", "9"],
    ),
    "band backwards": ("[1, 40]", "[40, 1]", ["noise.band_hz", "increasing", "[40, 1]"]),
    "band from zero": ("[1, 40]", "[0, 40]", ["noise.band_hz[0]", "greater than 0", "0 was"]),
    "band of one edge": ("[1, 40]", "[40]", ["noise.band_hz", "at least 2", "[40]"]),
    "band of three edges": ("[1, 40]", "[1, 8, 40]", ["noise.band_hz", "at most 2", "[1, 8, 40]"]),
    "band without width": ("[1, 40]", "[40, 40]", ["noise.band_hz", "increasing", "[40, 40]"]),
    "averages zero": ("averages = 1", "averages = 0", ["noise.averages", "at least 1", "0"]),
    "averages a fraction": ("averages = 1", "averages = 1.5", ["noise.averages", "whole number", "1.5"]),
    "background zero": (
        "eeg_uv_rms = 15",
        "eeg_uv_rms = 0",
        ["noise.background.eeg_uv_rms", "greater than 0", "0"],
    ),
    "eyes negative": ("\nuv_rms = 20", "\nuv_rms = -20", ["noise.eyes.uv_rms", "at least 0", "-20"]),
    "goal unknown": ('"information"', '"luck"', ["goal.kind", '"information"', '"luck"']),
    "seed negative": ("seed = 1", "seed = -1", ["search.seed", "at least 0", "-1"]),
    "seed a date": ("seed = 1", "seed = 2024-01-01", ["search.seed", "whole number", "2024-01-01"]),
    "too many starts": ("starts = 8", "starts = 1001", ["search.starts", "at most 1000", "1001"]),
    "too many ranks": ("ranked = 3", "ranked = 51", ["search.ranked", "at most 50", "51"]),
    "ranks differ by more than there is": (
        "differ_by = 0",
        "differ_by = 9",
        ["search.differ_by", "at most 8", "9"],
    ),
    "no time": ("allowance_s = 60", "allowance_s = 0", ["search.time_allowance_s", "greater than 0", "0"]),
    "TOML broken": ("seed = 1", "seed = ", ["valid TOML", "line 72"]),
    "TOML key twice": ("seed = 1", "seed = 1\nseed = 2", ["line 73", "valid TOML", "overwrite"]),
    "TOML list not closed": ("time_allowance_s = 60\n", "x = [", ["valid TOML", "end of document"]),
    "TOML nested too deep": ("seed = 1", "seed = " + "[" * 5000, ["nest"]),
    "number of too many digits": ("seed = 1", "seed = 1" + "0" * 5000, ["thousands of digits"]),
    "number beyond all floats": (
        "price = 2.5",
        "price = 1" + "0" * 400,
        ["stock[1].price", "a double can hold", "more than 80"],
    ),
}


def spoilt(edit):
    """The good brief with one part replaced; the part must be there."""
    part, instead, _ = edit
    if isinstance(part, re.Pattern):
        text, n = part.subn(lambda _: instead, GOOD_BRIEF)
    else:
        text, n = GOOD_BRIEF.replace(part, instead, 1), GOOD_BRIEF.count(part)
    assert n, f"the good brief does not hold {part!r}"
    return text


def assert_one_sentence(message):
    assert message.isprintable()
    assert message.endswith(".")
    assert ". " not in message
    assert not message.endswith("..")


def test_the_good_brief_is_good(load_text):
    assert load_text(GOOD_BRIEF).title == "Both kinds of sensors"


@pytest.mark.parametrize("edit", BAD.values(), ids=BAD)
def test_bad_brief_is_refused_in_one_sentence(load_text, edit):
    with pytest.raises(BriefError) as refusal:
        load_text(spoilt(edit))
    message = str(refusal.value)
    assert_one_sentence(message)
    assert "study.toml: " in message
    said = message.split("study.toml: ", 1)[1]
    for words in edit[2]:
        assert words in said
    assert edit[2][-1] in said.split(", but ")[-1]


def test_errors_are_reported_in_the_order_of_the_file(load_text):
    text = GOOD_BRIEF.replace("seed = 1", "seed = -1").replace("radius_mm = 18", "radius_mm = 0")
    text = text.replace("moment_nam = 10\n[[stock]]", "[[stock]]")
    with pytest.raises(BriefError, match=r"regions\[1\]\.moment_nam .* missing \(and 2 more\)\.$"):
        load_text(text)
    before = text.replace("[head]", "[noise]\nband_hz = [1, 0]\n[head]", 1).replace(
        "[noise]\nband_hz = [1, 40]\naverages = 1\n", ""
    )
    with pytest.raises(BriefError, match=r"noise\.band_hz\[1\] .* \(and 3 more\)\.$"):
        load_text(before)


BAD_FILES = {
    "not UTF-8": (GOOD_BRIEF.replace("Both", "Bäde").encode("latin-1"), ["UTF-8", "line 2", "0xe4"]),
    "UTF-16": (GOOD_BRIEF.encode("utf-16"), ["UTF-8", "line 1", "0xff"]),
    "empty": (b"", ["must not be empty", "0 bytes"]),
    "blank": (b" \n\n", ["must not be empty", "3 bytes"]),
    "only a comment": (b"# later\n", ["schema", "missing"]),
    "huge": (b"#" * (LARGEST_FILE + 1), ["at most 1000000 bytes"]),
}


@pytest.mark.parametrize("bad", BAD_FILES.values(), ids=BAD_FILES)
def test_bad_file_is_refused_in_one_sentence(load_text, bad):
    content, expected = bad
    with pytest.raises(BriefError) as refusal:
        load_text(content)
    assert_one_sentence(str(refusal.value))
    for words in expected:
        assert words in str(refusal.value)


def test_paths_that_are_no_brief(tmp_path):
    os.mkfifo(tmp_path / "pipe")
    cases = {
        tmp_path / "none.toml": "exists",
        tmp_path: "folder",
        tmp_path / "pipe": "ordinary",
        tmp_path / ("a" * 300): "cannot be read",
        tmp_path / "two\nlines": "exists",
        "nul\0": "none of this name",
    }
    for path, words in cases.items():
        with pytest.raises(BriefError, match=words) as refusal:
            load_brief(path)
        assert_one_sentence(str(refusal.value))


def test_a_file_of_the_largest_size_is_read(load_text):
    filler = b"#" * (LARGEST_FILE - len(GOOD_BRIEF.encode()))
    assert load_text(GOOD_BRIEF.encode() + filler).search.seed == 1
