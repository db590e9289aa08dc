"""Keys of extended sensors, gradiometers and the errors of their channels: read, converted, refused."""

import pytest
from references import gradiometers as ref

from layout.errors import BriefError

HEAD = """\
schema = 1
title = "Sensors"
[head]
kind = "sphere"
[[regions]]
name = "hand"
centre_mm = [-38, -24, 56]
frame = "head"
radius_mm = 12
side = "left"
moment_nam = 10
[noise]
band_hz = [1, 40]
[[stock]]
name = "one"
count = 4
sites = { family = "10-20" }
"""
CUP = 'kind = "electrode"\ncontact_noise_uv = 1\n'
COIL = 'kind = "magnetometer"\nnoise_ft_per_rthz = 10\n'
PLANAR = 'kind = "gradiometer"\nform = "planar"\nbaseline_mm = 16.8\nhousing_mm = [28, 28, 30]\n'
AXIAL = 'kind = "gradiometer"\nform = "axial"\nbaseline_mm = 50\nhousing_mm = [20, 20, 60]\n'
NOISE = "noise_ft_per_rthz = 5\n"


@pytest.fixture
def entry_of(load_text):
    """A function from the keys of one stock entry to the entry."""
    return lambda keys: load_text(HEAD + keys).stock[0]


def test_plain_sensors_stay_points_without_errors(entry_of):
    for keys in (CUP, COIL):
        entry = entry_of(keys)
        assert (entry.gain_error, entry.crosstalk) == (0, 0)
    assert entry.cell is None
    assert entry.coil_diameter == 0
    assert entry_of(CUP).disc_diameter == 0


def test_extents_and_errors_in_si(entry_of):
    cup = entry_of(CUP + f"disc_mm = 10\ngain_error_percent = {ref.CALIBRATION_GAIN_PERCENT}\n")
    assert cup.disc_diameter == pytest.approx(0.01, abs=0)
    assert cup.gain_error == pytest.approx(0.013, abs=0)
    coil = entry_of(COIL + "cell_mm = [3, 3, 3]\ncrosstalk_percent = 5\n")
    assert coil.cell == pytest.approx((3e-3,) * 3, abs=0)
    assert coil.crosstalk == pytest.approx(0.05, abs=0)
    assert entry_of(COIL + "coil_mm = 12\n").coil_diameter == pytest.approx(0.012, abs=0)
    assert entry_of(COIL + "cell_mm = [12, 12, 0]\n").cell[2] == 0


def test_gradiometer(entry_of):
    planar = entry_of(PLANAR + NOISE + 'gradients = "both_tangents"\ncell_mm = [3, 3, 3]\nprice = 7\n')
    assert (planar.kind, planar.shape, planar.gradients) == ("gradiometer", "planar", "both_tangents")
    assert planar.baseline == pytest.approx(0.0168, abs=0)
    assert planar.noise_density == pytest.approx(5e-15, abs=0)
    assert planar.housing == pytest.approx((0.028, 0.028, 0.03), abs=0)
    assert entry_of(PLANAR + NOISE).gradients == "one_tangent"
    assert entry_of(AXIAL + NOISE).shape == "axial"


def test_noise_may_be_stated_in_three_ways(entry_of):
    """Two coils of 10 fT/sqrt(Hz) that are noisy apart: sqrt(2) times as much in their difference."""
    pair = entry_of(PLANAR + f"coil_noise_ft_per_rthz = {ref.COIL_FT_PER_RTHZ}\n")
    assert pair.noise_density / 1e-15 == pytest.approx(ref.PAIR_FT_PER_RTHZ, rel=1e-12, abs=0)
    # 3 fT/cm over a baseline of 1.68 cm
    assert entry_of(PLANAR + "noise_ft_per_cm_per_rthz = 3\n").noise_density == pytest.approx(
        5.04e-15, rel=1e-12, abs=0
    )


BAD = {
    "cell and coil": (COIL + "cell_mm = [3, 3, 3]\ncoil_mm = 3\n", ["coil_mm", "left out where cell_mm", "3"]),
    "cell without width": (COIL + "cell_mm = [0, 3, 3]\n", ["cell_mm", "width and a depth", "[0, 3, 3]"]),
    "flat cell along a tangent": (
        COIL + 'axes = "tangents"\ncell_mm = [3, 3, 0]\n',
        ["cell_mm", 'unless axes is "normal"', "[3, 3, 0]"],
    ),
    "cell of two edges": (COIL + "cell_mm = [3, 3]\n", ["cell_mm", "3", "[3, 3]"]),
    "cell under the face": (COIL + "cell_mm = [3, 3, 14]\n", ["cell_mm", "12.4 x 16.6 x 24.4", "[3, 3, 14]"]),
    "coil wider than its housing": (COIL + "coil_mm = 13\n", ["coil_mm", "housing_mm of 12.4", "13"]),
    "upright coil under the face": (
        COIL + 'housing_mm = [20, 20, 20]\naxes = "tangents"\ncoil_mm = 14\n',
        ["coil_mm", "6.5 mm above", "14"],
    ),
    "coil of a free axis": (COIL + 'axes = "free"\ncoil_mm = 10\n', ["coil_mm", "where axes are free", "10"]),
    "disc of a magnetometer": (COIL + "disc_mm = 3\n", ["disc_mm"]),
    "cell of an electrode": (CUP + "cell_mm = [3, 3, 3]\n", ["cell_mm"]),
    "wide disc": (CUP + "disc_mm = 41\n", ["disc_mm", "at most 40", "41"]),
    "negative gain error": (CUP + "gain_error_percent = -1\n", ["gain_error_percent", "at least 0", "-1"]),
    "large crosstalk": (CUP + "crosstalk_percent = 51\n", ["crosstalk_percent", "at most 50", "51"]),
    "no noise": (PLANAR, ["noise_ft_per_rthz", "coil_noise_ft_per_rthz"]),
    "noise twice": (
        PLANAR + NOISE + "coil_noise_ft_per_rthz = 5\n",
        ["coil_noise_ft_per_rthz", "left out where noise_ft_per_rthz", "5"],
    ),
    "no baseline": (PLANAR.replace("baseline_mm = 16.8\n", "") + NOISE, ["baseline_mm"]),
    "no form": (PLANAR.replace('form = "planar"\n', "") + NOISE, ["form"]),
    "unknown form": (PLANAR.replace('"planar"', '"cubic"') + NOISE, ["form", '"axial" or "planar"', '"cubic"']),
    "gradients of an axial one": (
        AXIAL + NOISE + 'gradients = "one_tangent"\n',
        ["gradients", 'unless form is "planar"', '"one_tangent"'],
    ),
    "axes of a gradiometer": (PLANAR + NOISE + 'axes = "normal"\n', ["axes"]),
    "planar baseline beyond the housing": (
        PLANAR.replace("[28, 28, 30]", "[28, 16, 30]") + NOISE,
        ["baseline_mm", "28 x 16 x 30", "16.8"],
    ),
    "coils beyond the housing": (PLANAR + NOISE + "coil_mm = 12\n", ["baseline_mm", "28 x 28 x 30", "16.8"]),
    "axial baseline beyond the housing": (AXIAL.replace("50", "54") + NOISE, ["baseline_mm", "20 x 20 x 60", "54"]),
    "unknown kind": (COIL.replace('"magnetometer"', '"squid"'), ["kind", '"gradiometer"', '"squid"']),
}


@pytest.mark.parametrize("case", BAD)
def test_refused_in_one_sentence(entry_of, case):
    keys, words = BAD[case]
    with pytest.raises(BriefError) as refusal:
        entry_of(keys)
    said = str(refusal.value).split("study.toml: ", 1)[1]
    assert said.startswith("stock[0]")
    assert "\n" not in said
    for word in words:
        assert word in said
