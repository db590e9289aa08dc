"""What a starter brief says about every table and key; what its user answers stands as $count and the like."""

OPENING = """\
# A brief: what is wanted of a sensor layout. Units stand in the names of the keys.
# Text behind a # is a comment. A key that is commented out shows its default: taking the # away changes
# nothing.
# Lists of tables are counted from 0 in messages: stock[0] is the first [[stock]].

schema = 1   # version of this form of brief
"""
HEAD = """\
[head]
kind = "template"   # "template": an average adult head; "sphere": nested spheres, for quick studies
"""
HEAD_KEYS = """\
# layers = 3   # 3: brain, skull, scalp; 4: brain, fluid, skull, scalp
# model = "boundary_elements"   # what computes lead fields; "spheres" is quicker, coarser, and for 4 layers
# nodes = 1000   # of each surface of the boundary elements; more are slower and more exact
# conductivities_s_per_m = [0.33, 0.0165, 0.33]   # one per layer, from the brain outwards
# source_mesh = "standard"   # how finely the cortex is cut: "coarse", "standard" or "fine"
# With kind = "sphere" there are also radii_mm (80, 85, 92 if left out; from the brain outwards) and
# cortex_depth_mm (12 if left out), the depth of the sources under the innermost radius.
# The template can be given a head's size: length_mm, breadth_mm, circumference_mm (any of them), or a size of
# the published survey, such as size = "female 5th percentile" (1st, 5th, 50th, 95th, 99th; female, male).
# With kind = "surfaces" the head is a person's own, from files (GIFTI, PLY, STL, OFF, OBJ) in one frame:
#   scalp, outer_skull, inner_skull   files of the layers; those left out are made, and the report says how
#   cortex                            the file of both sides, or cortex_left and cortex_right
#   cortex_mask                       GIFTI values, not zero where there is cortex; with two files
#                                     cortex_mask_left and cortex_mask_right
#   landmarks                         JSON {"NAS": [x, y, z], "LPA": ..., "RPA": ...} and "inion"; or BIDS
#   units                             "mm" or "m": of the files
#   mni152_to_files                   rows of the transform from MNI152 mm to the files; or mni152_file, JSON
#   surface_vertices, cortex_sources  2562 and 10000 if left out: finer surfaces are thinned to so many
#   least_gap_mm                      2 if left out: between the layers; smaller gaps are mended
# lead_field_file is the file of a lead field for these very sites and sensors, instead of computing it.
"""
REGION_KEYS = """\
# Regions of interest, one [[regions]] for each: the cortex inside a ball, or said as below.
#   name        your own words, different for each region
#   centre_mm   x (right), y (front), z (up) of the ball's centre
#   frame       "mni152": template coordinates; "head": from the midpoint between the ears' fiducial points
#   radius_mm   radius of the ball, 1 to 150
#   along_cortex  true: the radius runs along the cortex, from the source nearest to the centre
#   side        which hemisphere's cortex counts: "left", "right" or "both"
#   moment_nam  net dipole moment expected of the whole region, rms, in nA m; 10 is a usual evoked response
#   coherent    false: its places vary independently; true: they act as one patch
#   orientation "normal": along the cortex normal; "free": any direction
# Instead of centre_mm, frame and radius_mm one of these may say which cortex is meant:
#   label_file     GIFTI labels on the cortex's own vertices, with label, a name in quotes or a number
#   mask_nifti     a NIfTI mask, with frame; with label only the voxels of that value
#   vertices       numbers of vertices of the cortex's file, from 0; or vertices_file, a text of them
#   parcel         name of a gyrus, on the template (needs the extra "parcels")
# frame may also be "files": that of a person's own surfaces.
"""
REGION = """\
[[regions]]
name = $name
centre_mm = $centre
frame = "mni152"
radius_mm = $radius
side = "$side"
moment_nam = $moment
# coherent = false
# orientation = "normal"
"""
ELECTRODE_KEYS = """\
# What there is to place, one [[stock]] for each kind of sensor. Electrodes:
#   name             your own words
#   count            contacts on the head, the reference contact included; the ground is not counted
#   count_at_least   under a [budget], or with a goal to reach: the fewest; count is then the most
#   sites            where they may sit, exactly one of these:
#                    { family = "10-10" }              named positions: "10-20", "10-10" or "10-5"
#                    { grid_mm = 15 }                  an even grid over the scalp with this pitch
#                    { electrodes_tsv = "holes.tsv" }  a BIDS electrodes table beside this brief
#   contact_noise_uv noise of one contact in the band below, rms, on scalp with hair
#   contact_noise_in_uv  other values in some zones, such as bare skin
#   reference        "any": the reference may be any chosen contact (which one changes no result);
#                    or the name of a site that must be in the layout
#   spacing_mm       least distance between two sensors of this kind
#   footprint        room that a holder takes: { shape = "circle", diameter_mm = 12 } or
#                    { shape = "rectangle", width_mm = 12, depth_mm = 16, turn_deg = 0 }; left out, none
#   clearance_mm     least gap between this footprint and any other
#   disc_mm          diameter of the contact, over which the potential is averaged
#   gain_error_percent, crosstalk_percent   errors of the channels themselves
#   price            of one sensor, in any currency; price_per_channel comes on top for each channel
#   keep_out         zones where this kind must not sit; built in: eyes, ears, neck, face, forehead
#   only_in          zones outside which this kind must not sit; an empty list allows the whole scalp
"""
CAP_STOCK = """\
[[stock]]
kind = "electrode"
name = "gel cup"
count = $count
sites = { family = "$family" }
contact_noise_uv = 1.0
contact_noise_in_uv = { forehead = 0.7 }   # left out: the same everywhere
# reference = "any"
# spacing_mm = 0
$price
# keep_out = ["eyes", "ears", "neck"]
$only_in
# A second [[stock]] with kind = "magnetometer" may follow; the "helmet" starter explains its keys.
"""
MAGNETOMETER_KEYS = """\
# What there is to place, one [[stock]] for each kind of sensor. Magnetometers:
#   name             your own words
#   count            sensors to place
#   count_at_least   under a [budget], or with a goal to reach: the fewest; count is then the most
#   sites            where they may sit, exactly one of these:
#                    { grid_mm = 15 }                  an even grid over the scalp with this pitch
#                    { slots_csv = "slots.csv" }       the slots of a helmet: a table beside this brief
#                                                      with name, position, axis and insertion travel of each
#                    { family = "10-10" }              named positions: "10-20", "10-10" or "10-5"
#                    { electrodes_tsv = "holes.tsv" }  a BIDS electrodes table beside this brief
#   noise_ft_per_rthz  noise density of one axis, in fT per square root of Hz, one-sided
#   axes             "normal": the sensitive axis points away from the scalp; "tangents": one of the two
#                    directions along the scalp is chosen; "any_of_three": the normal or one of them;
#                    "two_axis": the normal and one of these, two channels; "three_axis": all, three channels;
#                    "free": any direction, within tilt_limit_deg of the normal if given; "free_two": any two
#                    at right angles; or a list such as [[1, 0, 0], [0.7, 0.7, 0]], of which one is chosen,
#                    each by its components along the normal, to the front and to the left
#   standoff_mm      scalp to the centre of the sensitive volume when the housing touches the scalp
#   hair_mm          extra gap between scalp and housing
#   housing_mm       width and depth of the face towards the scalp, and length
#   spacing_mm       least distance between two sensors of this kind, so that housings do not collide
#   footprint        room on the scalp: "housing" (its face), { shape = "circle", diameter_mm = 12 } or
#                    { shape = "rectangle", width_mm = 12, depth_mm = 16, turn_deg = 0 }; left out, none
#   clearance_mm     least gap between this footprint and any other
#   cell_mm, coil_mm edges of the volume, or diameter of the coil, over which the field is averaged
#   gain_error_percent, crosstalk_percent   errors of the channels themselves
#   price            of one sensor, in any currency; price_per_channel comes on top for each channel
#   keep_out         zones where this kind must not sit; built in: eyes, ears, neck, face, forehead
#   only_in          zones outside which this kind must not sit; an empty list allows the whole scalp
"""
HELMET_STOCK = """\
[[stock]]
kind = "magnetometer"
name = "single-axis magnetometer"
count = $count
sites = { grid_mm = 15 }
noise_ft_per_rthz = 15
# axes = "normal"
# standoff_mm = 6.5
hair_mm = 2   # 0 if left out
# housing_mm = [12.4, 16.6, 24.4]
spacing_mm = 20   # 0 if left out: one sensor per site is then the only rule
$price
# keep_out = ["eyes", "ears", "neck"]
$only_in
# A second [[stock]] with kind = "electrode" may follow; the "cap" starter explains its keys.
# With kind = "gradiometer" there are form ("axial" or "planar"), baseline_mm, gradients (planar:
# "one_tangent" or "both_tangents") and, instead of noise_ft_per_rthz, noise_ft_per_cm_per_rthz or
# coil_noise_ft_per_rthz; there are no axes.
"""
BUDGET_STOCK = """\
[[stock]]
kind = "electrode"
name = "dry contact"
count = $count
sites = { family = "10-5" }
contact_noise_uv = 4.0
contact_noise_in_uv = { forehead = 2.0 }   # left out: the same everywhere
# reference = "any"
spacing_mm = 15   # 0 if left out
$price
# keep_out = ["eyes", "ears", "neck"]
$only_in
"""
PLACES = """\
# Places on the scalp.
#   keep, forbid   names of sites that must be used, or must not
#   left_right_pairs   true: a site is used exactly if its mirror image is
#   ground         a site that the ground takes; it is not measured and not counted
#   eye_radius_mm, ear_radius_mm   size of the built-in zones round each eye and each ear
#   [[places.zones]]  a zone of your own, for keep_out, only_in and contact_noise_in_uv of [[stock]]:
#      name, and one of: around (standard positions) with radius_mm (straight distance from any of them);
#      corners, a polygon: ["AF7", "AF8", "F8", [-50, 60, 40]] (positions, or points in mm in the head frame);
#      positions, the names of its sites. at_least and at_most say how many sensors it may hold, of the kinds
#      (names of [[stock]]) or of all
[places]
# keep = []
# forbid = []
# left_right_pairs = false
# eye_radius_mm = 25
# ear_radius_mm = 25
"""
ZONE = """
[[places.zones]]
name = "$name"
around = [$around]
radius_mm = $radius
"""
NOISE = """\
# One band for everything: contact noise, background and magnetometer densities are stated for it.
[noise]
band_hz = [1, 40]
# averages = 1   # trials averaged: every noise power is divided by this number

[noise.background]   # brain activity that is not of interest, all over the cortex
# eeg_uv_rms = 7.5   # what it gives on the scalp, rms over standard positions
# patch_cm2 = 20   # area of cortex that is active together
# include_regions = false   # true: the regions' own cortex belongs to the background as well

[noise.eyes]
# uv_rms = 20   # what eye activity gives at Fp1 and Fp2; 0 switches it off

# A table [noise.recording] takes the strengths from a recording instead, as far as it tells them:
#   file             "rest.edf" (EDF or BDF), or a covariance: "noise.npz" with the arrays covariance, names,
#                    unit, seconds, or "noise.npy" with channels, unit and seconds given here
#   bad              ["T7"]: channels to leave out; largest_uv, 250: leaves out seconds with more in the band
#   band_hz          if wider than that of the noise; electrodes_tsv for electrodes not at standard places
#   reference        "FCz": the electrode that was the reference, if it is to count as one; may be left out
#   sensors          entries of the stock like the recorded sensors; left out: the first of each kind
"""
QUIET = """
[noise.surroundings]   # interference that reaches magnetometers; electrodes do not see it
# field_ft_rms = 0   # the same all over the head
# gradient_ft_per_cm_rms = 0   # changing evenly across the head
"""
SHIELDED_ROOM = """
[noise.surroundings]   # interference that reaches magnetometers; electrodes do not see it
field_ft_rms = 200   # the same all over the head; 0 if left out
gradient_ft_per_cm_rms = 5   # changing evenly across the head; 0 if left out
"""
GOAL = """\
# What a layout is judged by.
#   kind             "information": bits per sample about the regions; "localisation": how far off a source
#                    would be placed, in mm (a linearised error)
#   region_weights   { "a region" = 2.0, "another" = 1.0 }: a weighted sum over the regions, for all of them
#   error_over       localisation: "rms" or "worst" over the sources
#   error_limits_mm  information: { "a region" = 8 }, errors that must not be passed
#   position_prior_mm, moment_spread_percent   what is known before measuring, for such errors: 30 mm in each
#                    direction and 100 % of the moment if left out
#   reach_bits, reach_mm   a target: the fewest sensors that reach it are looked for, up to count
[goal]
# kind = "information"

# More cases under which a layout is judged beside the brief's own; each entry of a list is one.
#   judge            "mean" or "worst" over all cases
#   conductivities_s_per_m   [[0.33, 0.0042, 0.33], [0.33, 0.03, 0.33]]: one value for each layer of the head
#   heads            ["female 5th percentile", "male 95th percentile"]: sizes of a survey for the template
#   noise_factors, sensor_noise_factors, background_factors   [0.5, 2]: all noise, that of the sensors alone,
#                    that of the background alone, times this
#   pose_error_mm, pose_error_degrees   sensors placed and turned wrongly by chance, pose_draws times (8 if
#                    left out)
#   any_one_lost     true: judged by what is left when the sensor that matters most fails
[scenarios]
# judge = "mean"
# any_one_lost = false

"""
BUDGET_KEYS = """\
# With a [budget] the counts of [[stock]] are the most: as many are bought as it pays for. Its keys:
#   total            what the layout may cost, in the currency of price
#   block_channels, block_price   amplifiers come in blocks of so many channels at this price each; the
#                    reference contact is one of the channels
"""
EXISTING_KEYS = """\
# With [existing] a layout that is there already counts:
#   use              "extend": all of it is kept and the rest is added; "trim": only its sensors are chosen
#   sites            its sites, such as ["Fz", "Cz"], or layout_tsv, a table of electrodes or the sensors.csv
#                    of an earlier result, beside this brief

"""
SEARCH = """\
[search]
# seed = 1   # the same seed gives the same layouts
# starts = 20   # the search starts from this many different layouts, 1 to 1000
# ranked = 3   # layouts to hand back, 1 to 50
# differ_by = 0   # sensors in which they must differ at least; 0: chosen from the number of sensors
# proof_parts is how far branch and bound may go to narrow the gap, 0 for not at all; if left out, 1000 parts
# of the tree, or 20 for goals that take long.
# proof_ranks = 1   # how many of the ranked layouts it works on
# polish = false   # true: after the search, slide the sensors along the scalp
# With time_allowance_s (seconds) the search stops by the clock; left out, it stops when its work is done.
"""
