"""A brief that uses every rule there is beside the plain ones, for the tests to spoil; and two of other goals."""

RICH_BRIEF = """\
schema = 1
title = "All rules at once"
[head]
kind = "sphere"
layers = 3
[[regions]]
name = "left"
centre_mm = [-40, -10, 54]
frame = "head"
radius_mm = 15
side = "left"
moment_nam = 10
orientation = "free"
[[regions]]
name = "right"
centre_mm = [40, -10, 54]
frame = "head"
radius_mm = 15
side = "right"
moment_nam = 10
orientation = "free"
[[stock]]
kind = "electrode"
name = "cup"
count = 8
count_at_least = 4
sites = { family = "10-10" }
contact_noise_uv = 1.0
price = 10
price_per_channel = 40
footprint = { shape = "circle", diameter_mm = 12 }
clearance_mm = 1
[[stock]]
kind = "magnetometer"
name = "sensor head"
count = 4
sites = { grid_mm = 20 }
noise_ft_per_rthz = 15
axes = [[1, 0, 0], [0.7, 0.7, 0], [3, 0, 4], [3, 0, -4]]
footprint = { shape = "rectangle", width_mm = 12, depth_mm = 16, turn_deg = 30 }
[places]
keep = ["Cz"]
left_right_pairs = true
ground = "AFz"
[[places.zones]]
name = "brow"
corners = ["AF7", "AF8", "F8", [-50, 60, 40]]
at_most = 3
kinds = ["cup"]
[[places.zones]]
name = "ears"
positions = ["P7", "P8"]
at_least = 1
[noise]
band_hz = [1, 40]
[goal]
kind = "information"
region_weights = { left = 2.0, "right" = 1 }
position_prior_mm = 25
moment_spread_percent = 50
error_limits_mm = { left = 8 }
[scenarios]
judge = "worst"
conductivities_s_per_m = [[0.33, 0.0042, 0.33], [0.4, 0.02, 0.4]]
noise_factors = [0.5, 2]
sensor_noise_factors = [3]
background_factors = [1.5]
pose_error_mm = 3
pose_error_degrees = 5
pose_draws = 4
any_one_lost = true
[budget]
total = 5000
block_channels = 8
block_price = 250
[existing]
sites = ["Fz", "Oz"]
use = "extend"
[search]
proof_ranks = 2
polish = false
""".replace('name = "ears"', 'name = "behind"')


def without(text: str, *parts: str) -> str:
    """The text with these lines or tables taken out, each of which must be there."""
    for part in parts:
        assert part in text, part
        text = text.replace(part, "", 1)
    return text


def table(name: str, text: str = RICH_BRIEF) -> str:
    """A table of the text, from its header to the next one."""
    start = text.index(f"[{name}]\n")
    end = text.find("\n[", start)
    return text[start:] if end < 0 else text[start : end + 1]


_MAGNETOMETERS = RICH_BRIEF[RICH_BRIEF.index('[[stock]]\nkind = "magnetometer"') : RICH_BRIEF.index("[places]")]

# The fewest electrodes that reach so many bits.
TARGET_BRIEF = without(
    RICH_BRIEF,
    _MAGNETOMETERS,
    table("budget"),
    "position_prior_mm = 25\nmoment_spread_percent = 50\nerror_limits_mm = { left = 8 }\n",
    "pose_error_degrees = 5\n",
).replace("[scenarios]", "reach_bits = 2.5\n[scenarios]")

LOCALISATION_BRIEF = RICH_BRIEF.replace('kind = "information"', 'kind = "localisation"\nerror_over = "worst"').replace(
    "error_limits_mm = { left = 8 }\n", ""
)
