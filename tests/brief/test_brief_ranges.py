"""The range of every number in a brief: its ends are taken, what lies just outside is refused."""

import re

import pytest
from good_brief import GOOD_BRIEF
from rich_brief import RICH_BRIEF

from layout.errors import BriefError

# key: (line of the good brief, the line with the number left open, allowed, refused); limits are our choice
RANGES = {
    "head.conductivities_s_per_m[0]": ("[0.33, 0.0165", "[{}, 0.0165", (1e-5, 100), (0.99e-5, 100.1)),
    "head.radii_mm[0]": ("[80, 85, 92]", "[{}, 85, 92]", (13, 84), (0.9, 150.1)),
    "head.radii_mm[2]": ("[80, 85, 92]", "[80, 85, {}]", (86, 150), (0.9, 150.1)),
    "head.cortex_depth_mm": ("cortex_depth_mm = 12", "cortex_depth_mm = {}", (0.1, 79), (0, -1, 100.1)),
    "regions[0].centre_mm[1]": ("[-38, -24, 56]", "[-38, {}, 56]", (-200, 200), (-200.1, 200.1)),
    "regions[0].radius_mm": ("radius_mm = 12", "radius_mm = {}", (1, 150), (0.9, 150.1)),
    "regions[0].moment_nam": ("moment_nam = 10", "moment_nam = {}", (0.001, 10_000), (0.0009, 10_001)),
    "stock[0].count": ("count = 5", "count = {}", (2, 1024), (0, 1025)),
    "stock[0].contact_noise_uv": ("noise_uv = 1.0", "noise_uv = {}", (0.001, 1000), (0.0009, 1000.1)),
    "stock[1].sites.grid_mm": ("grid_mm = 15", "grid_mm = {}", (2, 100), (1.9, 100.1)),
    "stock[1].noise_ft_per_rthz": ("rthz = 15", "rthz = {}", (0.01, 1_000_000), (0.009, 1_000_001)),
    "stock[1].standoff_mm": ("standoff_mm = 6.5", "standoff_mm = {}", (0, 60), (-0.1, 60.1)),
    "stock[1].hair_mm": ("hair_mm = 0", "hair_mm = {}", (0, 60), (-0.1, 60.1)),
    "stock[1].housing_mm[2]": ("24.4]", "{}]", (1, 150), (0.9, 150.1)),
    "stock[1].spacing_mm": ("spacing_mm = 20", "spacing_mm = {}", (0, 200), (-0.1, 200.1)),
    "stock[1].price": ("price = 2.5", "price = {}", (0, 1e9), (-0.1, 1.1e9)),
    "places.eye_radius_mm": ("eye_radius_mm = 35", "eye_radius_mm = {}", (1, 150), (0.9, 150.1)),
    "places.ear_radius_mm": ("ear_radius_mm = 25", "ear_radius_mm = {}", (1, 150), (0.9, 150.1)),
    "places.zones[0].radius_mm": ("radius_mm = 18", "radius_mm = {}", (1, 150), (0.9, 150.1)),
    "noise.band_hz[1]": ("[1, 40]", "[1, {}]", (1.1, 10_000), (0, 10_001)),
    "noise.averages": ("averages = 1", "averages = {}", (1, 1_000_000), (0, 1_000_001)),
    "noise.background.eeg_uv_rms": ("eeg_uv_rms = 15", "eeg_uv_rms = {}", (0.1, 1000), (0, 1001)),
    "noise.background.patch_cm2": ("patch_cm2 = 4", "patch_cm2 = {}", (0.01, 200), (0.009, 200.1)),
    "noise.eyes.uv_rms": ("\nuv_rms = 20", "\nuv_rms = {}", (0, 10_000), (-0.1, 10_001)),
    "noise.surroundings.field_ft_rms": ("field_ft_rms = 0", "field_ft_rms = {}", (0, 1e9), (-1, 1.1e9)),
    "noise.surroundings.gradient_ft_per_cm_rms": ("cm_rms = 0", "cm_rms = {}", (0, 1e9), (-1, 1.1e9)),
    "search.seed": ("seed = 1", "seed = {}", (0, 2**32 - 1), (-1, 2**32)),
    "search.starts": ("starts = 8", "starts = {}", (1, 1000), (0, 1001)),
    "search.ranked": ("ranked = 3", "ranked = {}", (1, 50), (0, 51)),
    "search.differ_by": ("differ_by = 0", "differ_by = {}", (0, 8), (-1, 9)),
    "search.time_allowance_s": ("allowance_s = 60", "allowance_s = {}", (0.1, 604_800), (0, 604_801)),
}

# The same for the brief with all rules.
RICH_RANGES = {
    "goal.region_weights.left": ("left = 2.0", "left = {}", (0, 1e6), (-0.1, 1.1e6)),
    "goal.position_prior_mm": ("prior_mm = 25", "prior_mm = {}", (0.1, 1000), (0.09, 1001)),
    "goal.moment_spread_percent": ("percent = 50", "percent = {}", (0.1, 10_000), (0.09, 10_001)),
    "goal.error_limits_mm.left": ("left = 8", "left = {}", (0.001, 100), (0, 100.1)),
    "scenarios.noise_factors[1]": ("[0.5, 2]", "[0.5, {}]", (0.001, 1000), (0.0009, 1001)),
    "scenarios.pose_error_mm": ("error_mm = 3", "error_mm = {}", (0.1, 30), (0, 30.1)),
    "scenarios.pose_error_degrees": ("degrees = 5", "degrees = {}", (0.1, 45), (0, 45.1)),
    "scenarios.pose_draws": ("draws = 4", "draws = {}", (1, 100), (0, 101)),
    "budget.total": ("total = 5000", "total = {}", (450, 1e12), (449, 1.1e12)),
    "budget.block_channels": ("block_channels = 8", "block_channels = {}", (1, 4096), (0, 4097)),
    "budget.block_price": ("block_price = 250", "block_price = {}", (0, 4800), (-1, 1.1e9)),
    "stock[0].count_at_least": ("at_least = 4\n", "at_least = {}\n", (0, 2, 8), (-1, 9)),
    "stock[0].price_per_channel": ("per_channel = 40", "per_channel = {}", (0, 1000), (-1, 1.1e9)),
    "stock[0].footprint.diameter_mm": ("diameter_mm = 12", "diameter_mm = {}", (1, 150), (0.9, 150.1)),
    "stock[0].clearance_mm": ("clearance_mm = 1", "clearance_mm = {}", (0, 100), (-0.1, 100.1)),
    "stock[1].footprint.turn_deg": ("turn_deg = 30", "turn_deg = {}", (-180, 180), (-180.1, 180.1)),
    "places.zones[0].at_most": ("at_most = 3", "at_most = {}", (0, 1024), (-1, 1025)),
    "places.zones[1].at_least": ("at_least = 1\n", "at_least = {}\n", (0, 12), (-1, 13)),
    "search.proof_ranks": ("proof_ranks = 2", "proof_ranks = {}", (1, 3), (0, 4)),
}


def assert_range(load_text, text, key, line, opened, allowed, refused):
    assert line in text
    for value in allowed:
        load_text(text.replace(line, opened.format(value), 1))
    for value in refused:
        with pytest.raises(BriefError, match=rf": {re.escape(key)} .*, but {re.escape(str(value))} was given"):
            load_text(text.replace(line, opened.format(value), 1))


@pytest.mark.parametrize(("key", "line", "opened", "allowed", "refused"), [(k, *v) for k, v in RANGES.items()])
def test_range(load_text, key, line, opened, allowed, refused):
    assert_range(load_text, GOOD_BRIEF, key, line, opened, allowed, refused)


@pytest.mark.parametrize(("key", "line", "opened", "allowed", "refused"), [(k, *v) for k, v in RICH_RANGES.items()])
def test_range_in_a_rich_brief(load_text, key, line, opened, allowed, refused):
    assert_range(load_text, RICH_BRIEF, key, line, opened, allowed, refused)
