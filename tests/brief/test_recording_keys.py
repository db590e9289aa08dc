"""Keys of [noise.recording]: read, converted, refused."""

import pytest

from layout.errors import BriefError

BRIEF = """\
schema = 1
title = "Noise from a recording"
[head]
kind = "sphere"
[[regions]]
name = "hand"
centre_mm = [-38, -24, 56]
frame = "head"
radius_mm = 12
side = "left"
moment_nam = 10
[[stock]]
kind = "electrode"
name = "cup"
count = 4
sites = { family = "10-20" }
contact_noise_uv = 1
[noise]
band_hz = [1, 40]
"""
RECORDING = '[noise.recording]\nfile = "rest.edf"\n'


@pytest.fixture
def recording_of(load_text, tmp_path):
    """A function from the keys of [noise.recording] to the RecordingBrief; the files they may name exist."""
    for name in ("rest.edf", "rest.BDF", "noise.npz", "noise.npy", "caps.tsv"):
        (tmp_path / name).write_bytes(b"")
    return lambda keys: load_text(BRIEF + keys).noise.recording


def test_no_recording_unless_named(recording_of):
    assert recording_of("") is None


def test_defaults(recording_of, tmp_path):
    one = recording_of(RECORDING)
    assert one.file == tmp_path / "rest.edf"
    assert (one.bad, one.band, one.reference, one.electrodes_tsv, one.sensors) == ((), None, None, None, None)
    assert one.largest == 250e-6


def test_all_keys_of_signals(recording_of, tmp_path):
    one = recording_of(
        RECORDING + 'bad = ["Fp1", "EEG T3-REF"]\nband_hz = [0.5, 45]\nreference = "FCz"\nelectrodes_tsv = "caps.tsv"\n'
        'largest_uv = 150\nsensors = ["cup"]\n'
    )
    assert (one.bad, one.band, one.reference) == (("Fp1", "EEG T3-REF"), (0.5, 45), "FCz")
    assert (one.electrodes_tsv, one.largest, one.sensors) == (tmp_path / "caps.tsv", 150e-6, ("cup",))


@pytest.mark.parametrize("name", ["rest.BDF", "noise.npz"])
def test_other_files(recording_of, tmp_path, name):
    assert recording_of(RECORDING.replace("rest.edf", name)).file == tmp_path / name


def test_covariance_alone(recording_of):
    one = recording_of(
        '[noise.recording]\nfile = "noise.npy"\nchannels = ["Fz", "Cz", "Pz"]\nunit = "uV"\nseconds = 120\n'
    )
    assert (one.channels, one.unit, one.seconds) == (("Fz", "Cz", "Pz"), "uV", 120)


BAD = {
    "no file": ("[noise.recording]\n", r"noise\.recording\.file must be given"),
    "missing file": (
        RECORDING.replace("rest", "gone"),
        r"noise\.recording\.file must be a file that exists \(seen from the brief\), but \"gone\.edf\" was given",
    ),
    "missing table": (
        RECORDING + 'electrodes_tsv = "gone.tsv"\n',
        r"noise\.recording\.electrodes_tsv must be a file that exists .*, but \"gone\.tsv\" was given",
    ),
    "type of file": (
        RECORDING.replace("rest.edf", "rest.vhdr"),
        r"noise\.recording\.file must end in \.edf, \.bdf, \.npz, \.npy, but \"rest\.vhdr\" was given",
    ),
    "band too narrow": (
        RECORDING + "band_hz = [2, 40]\n",
        r"noise\.recording\.band_hz must contain noise\.band_hz \(1 to 40 Hz\), but \[2.*, 40.*\] was given",
    ),
    "band backwards": (RECORDING + "band_hz = [50, 0.5]\n", r"noise\.recording\.band_hz must contain"),
    "one edge": (RECORDING + "band_hz = [1]\n", r"noise\.recording\.band_hz must"),
    "bad twice": (RECORDING + 'bad = ["Fz", "Fz"]\n', r"noise\.recording\.bad must not name the same thing twice"),
    "limit": (RECORDING + "largest_uv = 0\n", r"noise\.recording\.largest_uv must be at least 1, but 0 was given"),
    "limit of a covariance": (
        RECORDING.replace(".edf", ".npz").replace("rest", "noise") + "largest_uv = 100\n",
        r"noise\.recording\.largest_uv must be left out where the file holds a covariance",
    ),
    "seconds of signals": (
        RECORDING + "seconds = 100\n",
        r"noise\.recording\.seconds must be left out where the file holds signals",
    ),
    "no sensors": (RECORDING + "sensors = []\n", r"noise\.recording\.sensors must"),
    "unknown key": (RECORDING + "fs = 100\n", r"noise\.recording\.fs"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_keys(recording_of, case):
    keys, sentence = BAD[case]
    with pytest.raises(BriefError, match=sentence) as refusal:
        recording_of(keys)
    assert "\n" not in str(refusal.value)
