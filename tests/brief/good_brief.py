"""A good brief that uses every table, for the tests to spoil."""

GOOD_BRIEF = """\
schema = 1
title = "Both kinds of sensors"
[head]
kind = "sphere"
layers = 3
conductivities_s_per_m = [0.33, 0.0165, 0.33]
source_mesh = "coarse"
radii_mm = [80, 85, 92]
cortex_depth_mm = 12
[[regions]]
name = "left hand area"
centre_mm = [-38, -24, 56]
frame = "head"
radius_mm = 12
side = "left"
moment_nam = 10
coherent = false
orientation = "normal"
[[regions]]
name = "right hand area"
centre_mm = [38, -24, 56]
frame = "head"
radius_mm = 12
side = "right"
moment_nam = 10
[[stock]]
kind = "electrode"
name = "gel cup"
count = 5
sites = { family = "10-10" }
contact_noise_uv = 1.0
contact_noise_in_uv = { forehead = 0.7 }
reference = "any"
keep_out = ["eyes", "ears", "neck"]
only_in = ["band"]
[[stock]]
kind = "magnetometer"
name = "sensor head"
count = 3
sites = { grid_mm = 15 }
noise_ft_per_rthz = 15
axes = "normal"
standoff_mm = 6.5
hair_mm = 0
housing_mm = [12.4, 16.6, 24.4]
spacing_mm = 20
price = 2.5
[places]
keep = ["Cz"]
forbid = ["T7"]
eye_radius_mm = 35
ear_radius_mm = 25
[[places.zones]]
name = "band"
around = ["Fpz", "AF7", "AF8"]
radius_mm = 18
[noise]
band_hz = [1, 40]
averages = 1
[noise.background]
eeg_uv_rms = 15
patch_cm2 = 4
include_regions = false
[noise.eyes]
uv_rms = 20
[noise.surroundings]
field_ft_rms = 0
gradient_ft_per_cm_rms = 0
[goal]
kind = "information"
[search]
seed = 1
starts = 8
ranked = 3
differ_by = 0
time_allowance_s = 60
"""
