"""Goals, scenarios, budgets, existing layouts and rules of places that cannot be: one sentence each."""

import pytest
from rich_brief import LOCALISATION_BRIEF, RICH_BRIEF, TARGET_BRIEF, table
from test_bad_briefs import assert_one_sentence

from layout.errors import BriefError

AXES = "[[1, 0, 0], [0.7, 0.7, 0], [3, 0, 4], [3, 0, -4]]"
CIRCLE = '{ shape = "circle", diameter_mm = 12 }'
RECTANGLE = '{ shape = "rectangle", width_mm = 12, depth_mm = 16, turn_deg = 30 }'
WEIGHTS = 'region_weights = { left = 2.0, "right" = 1 }'
CORNERS = '["AF7", "AF8", "F8", [-50, 60, 40]]'
EXISTING = 'sites = ["Fz", "Oz"]'
LIMITS = "error_limits_mm = { left = 8 }\n"

# what is wrong: (brief, part of it, what stands there instead, words of the sentence, the value last)
BAD = {
    "goal of another word": (RICH_BRIEF, '"information"', '"luck"', ["goal.kind", '"localisation"', '"luck"']),
    "weight of an unknown region": (
        RICH_BRIEF,
        WEIGHTS,
        "region_weights = { left = 1, middle = 1 }",
        ["goal.region_weights", "regions of the brief (left, right)", '"middle"'],
    ),
    "a region without weight": (
        RICH_BRIEF,
        WEIGHTS,
        "region_weights = { left = 1 }",
        ["goal.region_weights", 'every region a weight (0 is allowed), also "right"', "{left = 1}"],
    ),
    "weights all zero": (
        RICH_BRIEF,
        WEIGHTS,
        "region_weights = { left = 0, right = 0 }",
        ["goal.region_weights", "at least one weight above 0", "{left = 0, right = 0}"],
    ),
    "weight negative": (RICH_BRIEF, "left = 2.0", "left = -2", ["goal.region_weights.left", "at least 0", "-2"]),
    "weight not finite": (RICH_BRIEF, "left = 2.0", "left = inf", ["goal.region_weights.left", "finite", "inf"]),
    "weights of nobody": (RICH_BRIEF, WEIGHTS, "region_weights = {}", ["goal.region_weights", "at least 1", "{}"]),
    "error limit of an unknown region": (
        RICH_BRIEF,
        LIMITS,
        "error_limits_mm = { lef = 8 }\n",
        ["goal.error_limits_mm", "(left, right)", '"lef"'],
    ),
    "error limit zero": (RICH_BRIEF, "left = 8", "left = 0", ["goal.error_limits_mm.left", "greater than 0", "0 was"]),
    "error limits of localisation": (
        LOCALISATION_BRIEF,
        'error_over = "worst"\n',
        LIMITS,
        ["goal.error_limits_mm", 'unless goal.kind is "information"', "{left = 8}"],
    ),
    "rms or worst of bits": (
        RICH_BRIEF,
        "position_prior_mm = 25",
        'error_over = "rms"',
        ["goal.error_over", 'unless goal.kind is "localisation"', '"rms"'],
    ),
    "rms or worst of another word": (
        LOCALISATION_BRIEF,
        '"worst"\nregion',
        '"mean"\nregion',
        ["goal.error_over", '"rms" or "worst"', '"mean"'],
    ),
    "a prior for nothing": (
        RICH_BRIEF,
        LIMITS,
        "",
        ["goal.position_prior_mm", "error_limits_mm", "25"],
    ),
    "prior zero": (RICH_BRIEF, "prior_mm = 25", "prior_mm = 0", ["goal.position_prior_mm", "at least 0.1", "0 was"]),
    "bits to reach with several entries": (
        RICH_BRIEF,
        f"position_prior_mm = 25\nmoment_spread_percent = 50\n{LIMITS}",
        "reach_bits = 3\n",
        ["goal.reach_bits", "several entries", "3"],
    ),
    "millimetres to reach with bits": (
        TARGET_BRIEF,
        "reach_bits = 2.5",
        "reach_mm = 2.5",
        ["goal.reach_mm", 'unless goal.kind is "localisation"', "2.5"],
    ),
    "bits to reach under a budget": (
        TARGET_BRIEF,
        "[existing]",
        "[budget]\ntotal = 5000\n[existing]",
        ["goal.reach_bits", "where there is a [budget]", "2.5"],
    ),
    "bits to reach under error limits": (
        RICH_BRIEF,
        LIMITS,
        f"{LIMITS}reach_bits = 3\n",
        ["goal.reach_bits", "error_limits_mm", "3"],
    ),
    "bits to reach none": (TARGET_BRIEF, "bits = 2.5", "bits = 0", ["goal.reach_bits", "greater than 0", "0 was"]),
    "least count above the count": (
        RICH_BRIEF,
        "count_at_least = 4",
        "count_at_least = 9",
        ["stock[0].count_at_least", "at most the count of 8", "9"],
    ),
    "least count of one electrode": (
        RICH_BRIEF,
        "count_at_least = 4",
        "count_at_least = 1",
        ["stock[0].count_at_least", "0 or at least 2", "1"],
    ),
    "least count for nothing": (
        RICH_BRIEF,
        table("budget"),
        "",
        ["stock[0].count_at_least", "[budget] or a goal to reach", "4"],
    ),
    "judge of another word": (RICH_BRIEF, 'judge = "worst"', 'judge = "best"', ["scenarios.judge", '"mean"', '"best"']),
    "conductivities of four layers": (
        RICH_BRIEF,
        "[0.4, 0.02, 0.4]",
        "[0.4, 1, 0.02, 0.4]",
        ["scenarios.conductivities_s_per_m[1]", "the head's 3 layers", "[0.4, 1, 0.02, 0.4]"],
    ),
    "conductivities that are the head's own": (
        RICH_BRIEF,
        "[0.4, 0.02, 0.4]",
        "[0.33, 0.0165, 0.33]",
        ["scenarios.conductivities_s_per_m[1]", "head's own", "0.0165"],
    ),
    "conductivities twice": (
        RICH_BRIEF,
        "[0.4, 0.02, 0.4]",
        "[0.33, 0.0042, 0.33]",
        ["scenarios.conductivities_s_per_m[1]", "same scenario twice", "0.0042"],
    ),
    "conductivities not in lists": (
        RICH_BRIEF,
        "[[0.33, 0.0042, 0.33], [0.4, 0.02, 0.4]]",
        "[0.33, 0.0042, 0.33]",
        ["scenarios.conductivities_s_per_m[0]", "list", "0.33"],
    ),
    "conductivity negative": (RICH_BRIEF, "0.0042", "-1", ["conductivities_s_per_m[0][1]", "at least 1e-05", "-1"]),
    "noise factor one": (RICH_BRIEF, "[0.5, 2]", "[0.5, 1]", ["scenarios.noise_factors[1]", "must not be 1", "1 was"]),
    "noise factor twice": (RICH_BRIEF, "[0.5, 2]", "[2, 2.0]", ["scenarios.noise_factors[1]", "twice", "2.0"]),
    "noise factor zero": (RICH_BRIEF, "[0.5, 2]", "[0]", ["scenarios.noise_factors[0]", "at least 0.001", "0 was"]),
    "noise factors none": (RICH_BRIEF, "[0.5, 2]", "[]", ["scenarios.noise_factors", "at least 1 entry", "[]"]),
    "background factor one": (
        RICH_BRIEF,
        "[1.5]",
        "[1.0]",
        ["scenarios.background_factors[0]", "must not be 1", "1.0"],
    ),
    "pose error of a head": (
        RICH_BRIEF,
        "error_mm = 3",
        "error_mm = 31",
        ["scenarios.pose_error_mm", "at most 30", "31"],
    ),
    "pose error backwards": (
        RICH_BRIEF,
        "degrees = 5",
        "degrees = -5",
        ["scenarios.pose_error_degrees", "greater than 0", "-5"],
    ),
    "draws of nothing": (
        TARGET_BRIEF,
        "pose_error_mm = 3\n",
        "",
        ["scenarios.pose_draws", "pose_error_mm or pose_error_degrees", "4"],
    ),
    "tilts of electrodes": (
        TARGET_BRIEF,
        "pose_error_mm = 3\n",
        "pose_error_degrees = 3\n",
        ["scenarios.pose_error_degrees", "no magnetometers", "3"],
    ),
    "one lost of two": (
        TARGET_BRIEF,
        "count = 8\ncount_at_least = 4",
        "count = 2",
        ["scenarios.any_one_lost", "fewer than 3 sensors", "true"],
    ),
    "budget of nothing": (RICH_BRIEF, "total = 5000", "total = 0", ["budget.total", "greater than 0", "0 was"]),
    "budget missing": (RICH_BRIEF, "total = 5000\n", "", ["budget.total", "must be given", "missing"]),
    "budget below the least": (
        RICH_BRIEF,
        "total = 5000",
        "total = 449",
        ["budget.total", "at least 450", "449"],
    ),
    "blocks without a price": (
        RICH_BRIEF,
        "block_price = 250\n",
        "",
        ["budget.block_price", "block_channels", "missing"],
    ),
    "price without blocks": (
        RICH_BRIEF,
        "block_channels = 8\n",
        "",
        ["budget.block_channels", "block_price", "missing"],
    ),
    "blocks of nothing": (RICH_BRIEF, "channels = 8", "channels = 0", ["budget.block_channels", "at least 1", "0 was"]),
    "price per channel negative": (
        RICH_BRIEF,
        "per_channel = 40",
        "per_channel = -1",
        ["stock[0].price_per_channel", "at least 0", "-1"],
    ),
    "footprint of another shape": (
        RICH_BRIEF,
        '"circle"',
        '"disc"',
        ["stock[0].footprint.shape", '"circle"', '"disc"'],
    ),
    "footprint of another word": (RICH_BRIEF, CIRCLE, '"round"', ["stock[0].footprint", '"housing"', '"round"']),
    "footprint a number": (RICH_BRIEF, CIRCLE, "12", ["stock[0].footprint", "table", "12"]),
    "circle without a diameter": (
        RICH_BRIEF,
        CIRCLE,
        '{ shape = "circle" }',
        ["stock[0].footprint.diameter_mm", 'given where shape is "circle"', "missing"],
    ),
    "rectangle with a diameter": (
        RICH_BRIEF,
        "turn_deg = 30",
        "diameter_mm = 30",
        ["stock[1].footprint.diameter_mm", 'left out where shape is "rectangle"', "30"],
    ),
    "circle that is turned": (
        RICH_BRIEF,
        "diameter_mm = 12",
        "diameter_mm = 12, turn_deg = 5",
        ["stock[0].footprint.turn_deg", "left out", "5"],
    ),
    "housing of an electrode": (
        RICH_BRIEF,
        CIRCLE,
        '"housing"',
        ["stock[0].footprint", "no housing", '"housing"'],
    ),
    "footprint too small": (RICH_BRIEF, "diameter_mm = 12", "diameter_mm = 0", ["diameter_mm", "at least 1", "0 was"]),
    "unknown key of a footprint": (
        RICH_BRIEF,
        "diameter_mm = 12",
        "diametre_mm = 12",
        ["stock[0].footprint.diametre_mm", "did you mean diameter_mm", "12"],
    ),
    "clearance of no footprint": (
        RICH_BRIEF,
        f"footprint = {CIRCLE}\n",
        "",
        ["stock[0].clearance_mm", "unless there is a footprint", "1"],
    ),
    "axes an empty list": (RICH_BRIEF, AXES, "[]", ["stock[1].axes", "1 to 24 axes", "[]"]),
    "axes a number": (RICH_BRIEF, AXES, "3", ["stock[1].axes", '"three_axis"', "list of axes", "3"]),
    "axes of numbers": (RICH_BRIEF, AXES, "[1, 0, 0]", ["stock[1].axes[0]", "three finite numbers", "1 was"]),
    "axis of two numbers": (RICH_BRIEF, AXES, "[[1, 0]]", ["stock[1].axes[0]", "three finite numbers", "[1, 0]"]),
    "axis not finite": (RICH_BRIEF, AXES, "[[1, nan, 0]]", ["stock[1].axes[0]", "finite", "[1, nan, 0]"]),
    "axis of truths": (RICH_BRIEF, AXES, "[[true, false, false]]", ["stock[1].axes[0]", "[true, false, false]"]),
    "axis of no length": (RICH_BRIEF, AXES, "[[0, 0, 0]]", ["stock[1].axes[0]", "largest component", "[0, 0, 0]"]),
    "axis beyond all numbers": (RICH_BRIEF, AXES, f"[[1{'0' * 400}, 0, 0]]", ["stock[1].axes[0]", "finite"]),
    "axis twice": (RICH_BRIEF, AXES, "[[1, 0, 0], [-2, 0, 0]]", ["stock[1].axes[1]", "before it", "[-2, 0, 0]"]),
    "axis without its mirror image": (
        RICH_BRIEF,
        AXES,
        "[[1, 0, 0], [3, 0, 4]]",
        ["stock[1].axes[1]", "mirror image", "[3, 0, 4]"],
    ),
    "free axes in pairs": (RICH_BRIEF, AXES, '"free"', ["stock[1].axes", "fixed choice", '"free"']),
    "tilt limit of fixed axes": (
        RICH_BRIEF,
        f"axes = {AXES}",
        "tilt_limit_deg = 30",
        ["stock[1].tilt_limit_deg", 'unless axes is "free"', "30"],
    ),
    "tilt limit zero": (
        RICH_BRIEF,
        f"axes = {AXES}",
        'axes = "free"\ntilt_limit_deg = 0',
        ["stock[1].tilt_limit_deg", "greater than 0", "0 was"],
    ),
    "polygon of two corners": (RICH_BRIEF, CORNERS, '["AF7", "AF8"]', ["places.zones[0].corners", "3 to 100 corners"]),
    "polygon a text": (RICH_BRIEF, CORNERS, '"AF7"', ["places.zones[0].corners", "list", '"AF7"']),
    "corner twice": (RICH_BRIEF, '"F8", [', '"AF7", [', ["places.zones[0].corners[2]", "before it", '"AF7"']),
    "corner of two numbers": (
        RICH_BRIEF,
        "[-50, 60, 40]",
        "[1, 2]",
        ["zones[0].corners[3]", "[x, y, z] in mm", "[1, 2]"],
    ),
    "corner far away": (RICH_BRIEF, "[-50, 60, 40]", "[-50, 600, 4]", ["zones[0].corners[3]", "at most 200 mm", "600"]),
    "corner not a number": (RICH_BRIEF, "[-50, 60, 40]", "[nan, 0, 0]", ["zones[0].corners[3]", "[nan, 0, 0]"]),
    "zone of two ways": (
        RICH_BRIEF,
        "at_least = 1",
        'around = ["Cz"]\nradius_mm = 20',
        ["places.zones[1]", "exactly one of around", "positions"],
    ),
    "zone of no way": (
        RICH_BRIEF,
        'positions = ["P7", "P8"]\n',
        "",
        ["places.zones[1]", "exactly one of around", "{"],
    ),
    "ball without a radius": (
        RICH_BRIEF,
        'positions = ["P7", "P8"]',
        'around = ["P7"]',
        ["places.zones[1].radius_mm", "given where around is", "missing"],
    ),
    "radius of a polygon": (RICH_BRIEF, "at_most = 3", "radius_mm = 3", ["places.zones[0].radius_mm", "unless around"]),
    "least above most": (
        RICH_BRIEF,
        "at_most = 3",
        "at_most = 3\nat_least = 4",
        ["zones[0].at_least", "at_most of 3", "4"],
    ),
    "least above the stock": (
        RICH_BRIEF,
        "at_most = 3",
        "at_least = 9",
        ["places.zones[0].at_least", "at most 8, the number of such sensors", "9"],
    ),
    "kinds of no stock": (RICH_BRIEF, '["cup"]', '["cap"]', ["zones[0].kinds", "(cup, sensor head)", '"cap"']),
    "kinds of no rule": (RICH_BRIEF, "at_most = 3\n", "", ["places.zones[0].kinds", "at_least or at_most", '["cup"]']),
    "pairs a text": (
        RICH_BRIEF,
        "pairs = true",
        'pairs = "yes"',
        ["places.left_right_pairs", "true or false", '"yes"'],
    ),
    "ground that is kept": (RICH_BRIEF, 'ground = "AFz"', 'ground = "Cz"', ["places.ground", "places.keep", '"Cz"']),
    "ground that is forbidden": (
        RICH_BRIEF,
        'keep = ["Cz"]',
        'forbid = ["AFz"]',
        ["places.ground", "places.forbid", '"AFz"'],
    ),
    "ground that is the reference": (
        RICH_BRIEF,
        "price = 10",
        'reference = "AFz"',
        ["stock[0].reference", "places.ground", '"AFz"'],
    ),
    "ground that is there already": (
        RICH_BRIEF,
        EXISTING,
        'sites = ["AFz"]',
        ["existing.sites", "places.ground", '"AFz"'],
    ),
    "existing nowhere": (
        RICH_BRIEF,
        f"{EXISTING}\n",
        "",
        ["existing", "exactly one of sites and layout_tsv", "extend"],
    ),
    "existing for nothing": (RICH_BRIEF, 'use = "extend"\n', "", ["existing.use", "must be given", "missing"]),
    "existing for another use": (
        RICH_BRIEF,
        '"extend"',
        '"replace"',
        ["existing.use", '"extend" or "trim"', '"replace"'],
    ),
    "existing twice the same": (RICH_BRIEF, '["Fz", "Oz"]', '["Fz", "Fz"]', ["existing.sites", "twice", '"Fz"']),
    "more existing than the counts": (
        RICH_BRIEF,
        '["Fz", "Oz"]',
        str([f"E{i}" for i in range(13)]).replace("'", '"'),
        ["existing.sites", "at most 12", "13"],
    ),
    "too few to trim": (
        RICH_BRIEF.replace("left_right_pairs = true\n", ""),
        'use = "extend"',
        'use = "trim"',
        ["existing.sites", "at least 4", "2"],
    ),
    "existing and forbidden": (
        RICH_BRIEF,
        'keep = ["Cz"]',
        'forbid = ["Oz"]',
        ["existing.sites", "places.forbid", '"Oz"'],
    ),
    "existing table that is not there": (
        RICH_BRIEF,
        EXISTING,
        'layout_tsv = "none.tsv"',
        ["existing.layout_tsv", "file that exists", '"none.tsv"'],
    ),
    "more ranks proven than ranked": (
        RICH_BRIEF,
        "proof_ranks = 2",
        "proof_ranks = 4",
        ["search.proof_ranks", "at most 3", "4"],
    ),
    "polish of pairs": (
        RICH_BRIEF,
        "polish = false",
        "polish = true",
        ["search.polish", "left_right_pairs", "true"],
    ),
    "polish of slots": (
        RICH_BRIEF[: RICH_BRIEF.index("[[stock]]")]
        + '[[stock]]\nkind = "magnetometer"\nname = "a"\ncount = 4\nsites = { slots_csv = "s.csv" }\n'
        + "noise_ft_per_rthz = 15\n[noise]\nband_hz = [1, 40]\n[search]\npolish = true\n",
        "polish = true",
        "polish = true",
        ["search.polish", "helmet slots", "true"],
    ),
}


@pytest.mark.parametrize("edit", BAD.values(), ids=BAD)
def test_bad_brief_is_refused_in_one_sentence(load_text, edit):
    text, part, instead, expected = edit
    assert text.count(part) >= 1
    with pytest.raises(BriefError) as caught:
        load_text(text.replace(part, instead, 1))
    said = str(caught.value).split("study.toml: ", 1)[1]
    assert_one_sentence(str(caught.value))
    for words in expected:
        assert words in said, said


@pytest.mark.parametrize("text", [RICH_BRIEF, TARGET_BRIEF, LOCALISATION_BRIEF])
def test_the_briefs_that_are_spoilt_are_good(load_text, text):
    load_text(text)
