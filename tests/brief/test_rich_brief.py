"""What goals, scenarios, budgets, existing layouts and rules of places become, and their defaults."""

import math

import pytest
from good_brief import GOOD_BRIEF
from rich_brief import LOCALISATION_BRIEF, RICH_BRIEF, TARGET_BRIEF, table, without

from layout.brief import objects


def si(*values):
    return pytest.approx(values if len(values) > 1 else values[0], rel=1e-12, abs=0)


def test_goal(load_text):
    goal = load_text(RICH_BRIEF).goal
    assert goal.kind == "information"
    assert goal.region_weights == {"left": 2.0, "right": 1.0}
    assert goal.position_prior == si(25e-3)
    assert goal.moment_spread == si(0.5)
    assert goal.error_limits == {"left": si(8e-3)}
    assert (goal.reach_bits, goal.reach_error, goal.has_target) == (None, None, False)


def test_localisation_goal(load_text):
    goal = load_text(LOCALISATION_BRIEF).goal
    assert (goal.kind, goal.error_over, goal.error_limits) == ("localisation", "worst", {})
    reach = without(LOCALISATION_BRIEF, table("budget"), table("existing")).replace(
        "[scenarios]", "reach_mm = 7\n[scenarios]"
    )
    reach = reach[: reach.index('[[stock]]\nkind = "magnetometer"')] + reach[reach.index("[places]") :]
    goal = load_text(without(reach, "pose_error_degrees = 5\n")).goal
    assert (goal.reach_error, goal.has_target) == (si(7e-3), True)


def test_the_smallest_count_that_reaches_a_target(load_text):
    brief = load_text(TARGET_BRIEF)
    assert (brief.goal.reach_bits, brief.goal.has_target) == (2.5, True)
    assert brief.least == (4,)
    assert load_text(without(TARGET_BRIEF, "count_at_least = 4\n")).least == (2,)


def test_scenarios(load_text):
    asked = load_text(RICH_BRIEF).scenarios
    assert asked.judge == "worst"
    assert asked.conductivities == ((0.33, 0.0042, 0.33), (0.4, 0.02, 0.4))
    assert asked.noise_factors == (0.5, 2.0)
    assert (asked.sensor_noise_factors, asked.background_factors) == ((3.0,), (1.5,))
    assert asked.pose_error == si(3e-3)
    assert asked.pose_tilt == si(math.radians(5))
    assert (asked.pose_draws, asked.poses, asked.any_one_lost) == (4, 4, True)
    assert objects.ScenariosBrief().poses == 0


def test_budget_and_counts(load_text):
    brief = load_text(RICH_BRIEF)
    assert brief.budget == objects.BudgetBrief(5000.0, 8, 250.0)
    assert [entry.count for entry in brief.stock] == [8, 4]
    assert brief.least == (4, 0)
    assert (brief.stock[0].price, brief.stock[0].price_per_channel) == (10, 40)
    without_blocks = without(RICH_BRIEF, "block_channels = 8\nblock_price = 250\n")
    assert load_text(without_blocks).budget == objects.BudgetBrief(5000.0)
    plain = without(RICH_BRIEF, table("budget"), "count_at_least = 4\n")
    assert load_text(plain).least == (8, 4)


def test_footprints(load_text):
    cup, head = load_text(RICH_BRIEF).stock
    assert cup.footprint == objects.FootprintBrief("circle", 0.012, 0.012)
    assert (cup.clearance, head.clearance) == (si(1e-3), 0.0)
    assert head.footprint == objects.FootprintBrief("rectangle", 0.012, 0.016, si(math.radians(30)))


@pytest.mark.parametrize("word", ['"housing"', '{ shape = "housing" }'])
@pytest.mark.parametrize(("line", "face"), [("", (12.4e-3, 16.6e-3)), ("housing_mm = [20, 10, 30]\n", (20e-3, 10e-3))])
def test_the_face_of_the_housing_as_footprint(load_text, word, line, face):
    rectangle = '{ shape = "rectangle", width_mm = 12, depth_mm = 16, turn_deg = 30 }'
    footprint = load_text(RICH_BRIEF.replace(rectangle, f"{word}\n{line}")).stock[1].footprint
    assert (footprint.shape, footprint.turn) == ("rectangle", 0.0)
    assert (footprint.width, footprint.depth) == si(*face)


def test_axes_of_a_list_have_length_one(load_text):
    head = load_text(RICH_BRIEF).stock[1]
    half = math.sqrt(0.5)
    assert head.axes[0] == (1.0, 0.0, 0.0)
    assert head.axes[1] == si(half, half, 0.0)
    assert head.axes[2:] == (si(0.6, 0, 0.8), si(0.6, 0, -0.8))
    assert head.free_axes == 0


@pytest.mark.parametrize(
    ("axes", "free", "limit"), [("free", 1, "tilt_limit_deg = 40"), ("free_two", 2, ""), ("free", 1, "")]
)
def test_free_axes(load_text, axes, free, limit):
    text = without(GOOD_BRIEF, 'axes = "normal"').replace("standoff_mm", f'axes = "{axes}"\n{limit}\nstandoff_mm')
    entry = load_text(text).stock[1]
    assert (entry.axes, entry.free_axes) == (axes, free)
    assert entry.tilt_limit == (si(math.radians(40)) if limit else None)


def test_places(load_text):
    places = load_text(RICH_BRIEF).places
    assert (places.left_right_pairs, places.ground) == (True, "AFz")
    brow, behind = places.zones
    assert brow == objects.ZoneBrief(
        "brow", corners=("AF7", "AF8", "F8", si(-50e-3, 60e-3, 40e-3)), at_most=3, kinds=("cup",)
    )
    assert behind == objects.ZoneBrief("behind", positions=("P7", "P8"), at_least=1)


def test_existing_layout(load_text, tmp_path):
    assert load_text(RICH_BRIEF).existing == objects.ExistingBrief("extend", ("Fz", "Oz"))
    (tmp_path / "now.tsv").write_text("name\tx\ty\tz\n")
    text = RICH_BRIEF.replace('sites = ["Fz", "Oz"]\nuse = "extend"', 'layout_tsv = "now.tsv"\nuse = "trim"')
    assert load_text(text).existing == objects.ExistingBrief("trim", (), tmp_path / "now.tsv")


def test_search(load_text):
    search = load_text(RICH_BRIEF).search
    assert (search.proof_ranks, search.polish) == (2, False)


def test_a_brief_that_says_nothing_of_all_this(load_text):
    brief = load_text(GOOD_BRIEF)
    assert brief.goal == objects.GoalBrief()
    assert brief.scenarios == objects.ScenariosBrief()
    assert (brief.budget, brief.existing) == (None, None)
    assert brief.least == (5, 3)
    assert (brief.places.left_right_pairs, brief.places.ground) == (False, None)
    assert (brief.search.proof_ranks, brief.search.polish) == (1, False)
    for entry in brief.stock:
        assert (entry.footprint, entry.clearance, entry.price_per_channel, entry.count_at_least) == (
            None,
            0.0,
            0.0,
            None,
        )
