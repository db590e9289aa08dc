"""A brief that runs in seconds: both kinds of sensors on a sphere head."""

SMALL_BRIEF = """\
schema = 1
title = "Two small regions on a sphere"
[head]
kind = "sphere"
source_mesh = "coarse"
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
name = "gel cup"
count = 4
sites = { family = "10-20" }
contact_noise_uv = 1.0
[[stock]]
kind = "magnetometer"
name = "sensor head"
count = 2
sites = { family = "10-20" }
noise_ft_per_rthz = 15
axes = "two_axis"
[noise]
band_hz = [1, 40]
[search]
starts = 3
ranked = 2
"""
# The entry of the magnetometers, to leave out where electrodes are to be alone.
MAGNETOMETERS = SMALL_BRIEF[SMALL_BRIEF.rindex("[[stock]]") : SMALL_BRIEF.index("[noise]")]
