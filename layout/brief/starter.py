"""Commented starter briefs: each is valid as it stands and explains every key it uses."""

from __future__ import annotations

from layout.errors import BriefError

STARTER_KINDS = ("cap", "helmet", "budget")


def starter_brief(kind: str) -> str:
    """The text of a starter brief for "cap", "helmet" or "budget"; BriefError for any other kind.

    A key that is commented out shows its default: taking the # away changes nothing.
    """
    if kind not in STARTER_KINDS:
        known = '", "'.join(STARTER_KINDS)
        raise BriefError(f'The kind of starter brief must be one of "{known}", but "{kind}" was given.')
    parts = {"cap": _CAP, "helmet": _HELMET, "budget": _BUDGET}[kind]
    return "\n".join((_OPENING, *parts, _SEARCH))


_OPENING = """\
# A brief: what is wanted of a sensor layout. Units stand in the names of the keys.
# Text behind a # is a comment. A key that is commented out shows its default: taking the # away changes
# nothing.
# Lists of tables are counted from 0 in messages: stock[0] is the first [[stock]].

schema = 1   # version of this form of brief\
"""

_HEAD = """\
[head]
kind = "template"   # "template": an average adult head; "sphere": nested spheres, for quick studies
# layers = 3   # 3: brain, skull, scalp; 4: brain, fluid, skull, scalp
# conductivities_s_per_m = [0.33, 0.0165, 0.33]   # one per layer, from the brain outwards
# source_mesh = "standard"   # how finely the cortex is cut: "coarse", "standard" or "fine"
# With kind = "sphere" there are also radii_mm (80, 85, 92 if left out; from the brain outwards) and
# cortex_depth_mm (12 if left out), the depth of the sources under the innermost radius.
"""

_REGION_KEYS = """\
# Regions of interest, one [[regions]] for each: the cortex inside a ball.
#   name        your own words, different for each region
#   centre_mm   x (right), y (front), z (up) of the ball's centre
#   frame       "mni152": template coordinates; "head": from the midpoint between the ears' fiducial points
#   radius_mm   radius of the ball, 1 to 150
#   side        which hemisphere's cortex counts: "left", "right" or "both"
#   moment_nam  net dipole moment expected of the whole region, rms, in nA m; 10 is a usual evoked response
#   coherent    false: its places vary independently; true: they act as one patch
#   orientation "normal": along the cortex normal; "free": any direction
"""

_CAP_REGIONS = (
    _REGION_KEYS
    + """\
[[regions]]
name = "left inferior frontal"
centre_mm = [-50, 18, 16]
frame = "mni152"
radius_mm = 14
side = "left"
moment_nam = 10
# coherent = false
# orientation = "normal"

[[regions]]
name = "left superior temporal"
centre_mm = [-58, -24, 8]
frame = "mni152"
radius_mm = 15
side = "left"
moment_nam = 10
# coherent = false
# orientation = "normal"
"""
)

_HELMET_REGIONS = (
    _REGION_KEYS
    + """\
[[regions]]
name = "left hand area"
centre_mm = [-38, -24, 56]
frame = "mni152"
radius_mm = 12
side = "left"
moment_nam = 10
# coherent = false
# orientation = "normal"

[[regions]]
name = "right hand area"
centre_mm = [38, -24, 56]
frame = "mni152"
radius_mm = 12
side = "right"
moment_nam = 10
# coherent = false
# orientation = "normal"
"""
)

_BUDGET_REGIONS = (
    _REGION_KEYS
    + """\
[[regions]]
name = "left prefrontal"
centre_mm = [-36, 44, 24]
frame = "mni152"
radius_mm = 18
side = "left"
moment_nam = 15
# coherent = false
# orientation = "normal"

[[regions]]
name = "right prefrontal"
centre_mm = [36, 44, 24]
frame = "mni152"
radius_mm = 18
side = "right"
moment_nam = 15
# coherent = false
# orientation = "normal"
"""
)

_ELECTRODE_KEYS = """\
# What there is to place, one [[stock]] for each kind of sensor. Electrodes:
#   name             your own words
#   count            contacts on the head, the reference contact included; the ground is not counted
#   sites            where they may sit, exactly one of these:
#                    { family = "10-10" }              named positions: "10-20", "10-10" or "10-5"
#                    { grid_mm = 15 }                  an even grid over the scalp with this pitch
#                    { electrodes_tsv = "holes.tsv" }  a BIDS electrodes table beside this brief
#   contact_noise_uv noise of one contact in the band below, rms, on scalp with hair
#   contact_noise_in_uv  other values in some zones, such as bare skin
#   reference        "any": the reference may be any chosen contact (which one changes no result);
#                    or the name of a site that must be in the layout
#   spacing_mm       least distance between two sensors of this kind
#   price            of one sensor, in any currency
#   keep_out         zones where this kind must not sit; built in: eyes, ears, neck, face, forehead
#   only_in          zones outside which this kind must not sit; an empty list allows the whole scalp
"""

_CAP_STOCK = (
    _ELECTRODE_KEYS
    + """\
[[stock]]
kind = "electrode"
name = "gel cup"
count = 24
sites = { family = "10-10" }
contact_noise_uv = 1.0
contact_noise_in_uv = { forehead = 0.7 }   # left out: the same everywhere
# reference = "any"
# spacing_mm = 0
# price = 1.0
# keep_out = ["eyes", "ears", "neck"]
# only_in = []
# A second [[stock]] with kind = "magnetometer" may follow; the "helmet" starter explains its keys.
"""
)

_HELMET_STOCK = """\
# What there is to place, one [[stock]] for each kind of sensor. Magnetometers:
#   name             your own words
#   count            sensors to place
#   sites            where they may sit, exactly one of these:
#                    { grid_mm = 15 }                  an even grid over the scalp with this pitch
#                    { slots_csv = "slots.csv" }       the slots of a helmet: a table beside this brief
#                                                      with name, position, axis and insertion travel of each
#                    { family = "10-10" }              named positions: "10-20", "10-10" or "10-5"
#                    { electrodes_tsv = "holes.tsv" }  a BIDS electrodes table beside this brief
#   noise_ft_per_rthz  noise density of one axis, in fT per square root of Hz, one-sided
#   axes             "normal": the sensitive axis points away from the scalp; "tangents": one of the two
#                    directions along the scalp is chosen; "any_of_three": the normal or one of them;
#                    "two_axis": the normal and one of these, two channels; "three_axis": all, three channels
#   standoff_mm      scalp to the centre of the sensitive volume when the housing touches the scalp
#   hair_mm          extra gap between scalp and housing
#   housing_mm       width and depth of the face towards the scalp, and length
#   spacing_mm       least distance between two sensors of this kind, so that housings do not collide
#   price            of one sensor, in any currency
#   keep_out         zones where this kind must not sit; built in: eyes, ears, neck, face, forehead
#   only_in          zones outside which this kind must not sit; an empty list allows the whole scalp
[[stock]]
kind = "magnetometer"
name = "single-axis magnetometer"
count = 20
sites = { grid_mm = 15 }
noise_ft_per_rthz = 15
# axes = "normal"
# standoff_mm = 6.5
hair_mm = 2   # 0 if left out
# housing_mm = [12.4, 16.6, 24.4]
spacing_mm = 20   # 0 if left out: one sensor per site is then the only rule
# price = 1.0
# keep_out = ["eyes", "ears", "neck"]
# only_in = []
# A second [[stock]] with kind = "electrode" may follow; the "cap" starter explains its keys.
"""

_BUDGET_STOCK = (
    _ELECTRODE_KEYS
    + """\
[[stock]]
kind = "electrode"
name = "dry contact"
count = 8
sites = { family = "10-5" }
contact_noise_uv = 4.0
contact_noise_in_uv = { forehead = 2.0 }   # left out: the same everywhere
# reference = "any"
spacing_mm = 15   # 0 if left out
# price = 1.0
# keep_out = ["eyes", "ears", "neck"]
only_in = ["band", "behind the ears"]   # left out: the whole scalp
"""
)

_PLACES_KEYS = """\
# Places on the scalp.
#   keep, forbid   names of sites that must be used, or must not
#   eye_radius_mm, ear_radius_mm   size of the built-in zones round each eye and each ear
#   [[places.zones]]  a zone of your own, for keep_out, only_in and contact_noise_in_uv of [[stock]]:
#      name, around (standard positions) and radius_mm (straight distance from any of them)
[places]
# keep = []
# forbid = []
# eye_radius_mm = 25
# ear_radius_mm = 25
"""

_BUDGET_PLACES = (
    _PLACES_KEYS
    + """\

[[places.zones]]
name = "band"
around = ["Fpz", "Fp1", "Fp2", "AF7", "AF8"]
radius_mm = 20

[[places.zones]]
name = "behind the ears"
around = ["TP9", "TP10"]
radius_mm = 20
"""
)

_NOISE = """\
# One band for everything: contact noise, background and magnetometer densities are stated for it.
[noise]
band_hz = [1, 40]
# averages = 1   # trials averaged: every noise power is divided by this number

[noise.background]   # brain activity that is not of interest, all over the cortex
# eeg_uv_rms = 8   # what it gives on the scalp, rms over standard positions
# patch_cm2 = 20   # area of cortex that is active together
# include_regions = false   # true: the regions' own cortex belongs to the background as well

[noise.eyes]
# uv_rms = 20   # what eye activity gives at Fp1 and Fp2; 0 switches it off
"""

_QUIET = """
[noise.surroundings]   # interference that reaches magnetometers; electrodes do not see it
# field_ft_rms = 0   # the same all over the head
# gradient_ft_per_cm_rms = 0   # changing evenly across the head
"""

_SHIELDED_ROOM = """
[noise.surroundings]   # interference that reaches magnetometers; electrodes do not see it
field_ft_rms = 200   # the same all over the head; 0 if left out
gradient_ft_per_cm_rms = 5   # changing evenly across the head; 0 if left out
"""

_SEARCH = """\
[goal]
# kind = "information"   # bits per sample about the regions

[search]
# seed = 1   # the same seed gives the same layouts
# starts = 20   # the search starts from this many different layouts, 1 to 1000
# ranked = 3   # layouts to hand back, 1 to 50
# differ_by = 0   # sensors in which they must differ at least; 0: chosen from the number of sensors
# proof_parts = 100   # how far branch and bound may go to narrow the gap; 0: not at all
# With time_allowance_s (seconds) the search stops by the clock; left out, it stops when its work is done.
"""

_CAP = (
    'title = "Speech study: which 24 holes of the cap"\n',
    _HEAD,
    _CAP_REGIONS,
    _CAP_STOCK,
    _PLACES_KEYS,
    _NOISE + _QUIET,
)
_HELMET = (
    'title = "Both hands: twenty magnetometers on the scalp"\n',
    _HEAD,
    _HELMET_REGIONS,
    _HELMET_STOCK,
    _PLACES_KEYS,
    _NOISE + _SHIELDED_ROOM,
)
_BUDGET = (
    'title = "Prefrontal rhythms with an eight-contact headband"\n',
    _HEAD,
    _BUDGET_REGIONS,
    _BUDGET_STOCK,
    _BUDGET_PLACES,
    _NOISE + _QUIET,
)
