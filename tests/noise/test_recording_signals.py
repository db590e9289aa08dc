"""Covariances from EDF and BDF files: against numpy, with bad stretches, and whatever the labels look like."""

from pathlib import Path

import numpy as np
import pytest
from recorded import NAMES, covariance_of, white_recording, write_signals

from layout.brief.objects import RecordingBrief
from layout.errors import BriefError, FileError
from layout.noise.electrode_labels import read_label
from layout.noise.recorded_covariance import effective_samples, read_recording
from layout.noise.signal_covariance import in_band, spectral_width
from layout.units import UV

PLACES = {name: np.array([0.01 * i, 0.0, 0.1]) for i, name in enumerate(NAMES)}
BAND = (1.0, 40.0)
RATE = 128
FOUR = ("Fz", "Cz", "Pz", "C3")


def read(path, band=BAND, **keys):
    return read_recording(RecordingBrief(Path(path), **keys), band, PLACES)


def tones(n, seconds, rate=RATE, seed=0):
    """Signals (n, n_samples) [V] of whole periods of tones well inside the band, 20 µV or so."""
    rng = np.random.default_rng(seed)
    time = np.arange(seconds * rate) / rate
    waves = [np.sin(2 * np.pi * f * time + p) for f, p in zip((7, 10, 13, 16, 21), rng.uniform(0, 6, 5), strict=True)]
    return 10e-6 * rng.normal(size=(n, 5)) @ np.stack(waves)


@pytest.mark.parametrize("name", ["rest.edf", "rest.bdf"])
def test_covariance_is_that_of_the_samples(tmp_path, name):
    signals = tones(4, 60)
    found = read(write_signals(tmp_path / name, FOUR, signals, RATE, largest=100.0))
    np.testing.assert_allclose(found.covariance, np.cov(signals, bias=True), rtol=2e-3, atol=1e-3 * (10e-6) ** 2)
    assert (found.names, found.seconds, found.band) == (FOUR, 60, BAND)
    np.testing.assert_array_equal(found.positions, [PLACES[one] for one in FOUR])
    assert found.is_electrode.all()
    assert found.samples < effective_samples(BAND, 60)  # tones are worth less than a flat spectrum


def test_units_of_the_file_are_heeded(tmp_path):
    signals = tones(4, 20)
    small = read(write_signals(tmp_path / "one.edf", FOUR, signals, RATE, "uV", 100.0)).covariance
    large = read(write_signals(tmp_path / "two.edf", FOUR, signals, RATE, "mV", 0.1)).covariance
    np.testing.assert_allclose(large, small, rtol=1e-2)


def test_what_is_outside_the_band_is_left_out(tmp_path):
    """Mains at 50 Hz, a slow drift and an offset of the amplifier, each stronger than the signals."""
    signals = tones(4, 60)
    time = np.arange(signals.shape[1]) / RATE
    spoilt = signals + 100e-6 * np.sin(2 * np.pi * 50 * time) + 3e-6 * time + 200e-6
    found = read(write_signals(tmp_path / "rest.edf", FOUR, spoilt, RATE))
    expected = np.cov(signals, bias=True)
    np.testing.assert_allclose(found.covariance, expected, atol=0.01 * np.diag(expected).max())


def test_band_is_cut_exactly():
    """White noise keeps the share of its power that lies in the band."""
    noise = np.random.default_rng(1).normal(size=(4, 200 * RATE))
    share = in_band(noise, (8.0, 13.0), RATE).var() / noise.var()
    assert share == pytest.approx(5 / 64, rel=0.06)  # three standard errors of 2 x 5 Hz x 200 s x 4 samples
    tone = np.cos(2 * np.pi * 10 * np.arange(20 * RATE) / RATE + 0.3)[None]
    middle = slice(2 * RATE, -2 * RATE)
    np.testing.assert_allclose(in_band(tone, (8.0, 13.0), RATE)[:, middle], tone[:, middle], atol=0.02)


def test_bad_seconds_are_left_out(tmp_path):
    """A cable that moves, an electrode that comes off, an amplifier at its end: seconds gone, covariance kept."""
    signals = tones(4, 120)
    expected = np.cov(signals, bias=True)
    spoilt = signals.copy()
    spoilt[1, 20 * RATE + 30 : 21 * RATE - 30] += 2e-3
    spoilt[2, 60 * RATE : 63 * RATE] = 0.0
    spoilt[3, 90 * RATE : 90 * RATE + 40] = 3e-3
    found = read(write_signals(tmp_path / "rest.edf", FOUR, spoilt, RATE))
    np.testing.assert_allclose(found.covariance, expected, atol=0.02 * np.diag(expected).max())
    # 3 s flat, 1 s at the end of the range, 1 s moved and its two neighbours
    assert found.seconds == 120 - 3 - 1 - 3
    (note,) = (note for note in found.notes if "left out: " in note)
    assert note.startswith("of 120 s, 7 left out: 4 flat or out of range, 1 beyond 250 µV")


def test_limit_of_large_samples_is_the_briefs(tmp_path):
    signals = tones(4, 60)
    signals[0, 30 * RATE : 30 * RATE + RATE // 2] += 100e-6
    path = write_signals(tmp_path / "rest.edf", FOUR, signals, RATE)
    assert read(path).seconds == 60
    assert read(path, largest=np.abs(signals[:, : 20 * RATE]).max() + 20 * UV).seconds < 60


def test_bad_channels_by_label_or_position(tmp_path):
    signals = tones(6, 20)
    labels = ("EEG Fp1-REF", "EEG FP2-REF", "EEG T3-REF", "EEG Cz-REF", "EEG O1-REF", "ECG")
    path = write_signals(tmp_path / "rest.edf", labels, signals, RATE)
    everything = read(path)
    assert everything.names == ("Fp1", "Fp2", "T7", "Cz", "O1")
    assert everything.references == ("REF",) * 5
    assert "left out, of no known position or no voltage: ECG" in everything.notes
    assert "old names read: T3 as T7" in everything.notes
    fewer = read(path, bad=("T7", "EEG O1-REF"))
    assert fewer.names == ("Fp1", "Fp2", "Cz")
    np.testing.assert_allclose(fewer.covariance, everything.covariance[np.ix_([0, 1, 3], [0, 1, 3])], rtol=1e-12)
    with pytest.raises(BriefError, match=r"noise\.recording\.bad: must name channels of rest\.edf, but 'O3' was given"):
        read(path, bad=("O3",))


@pytest.mark.parametrize(
    ("label", "expected"),
    [
        ("Fz", ("Fz", "")),
        ("FZ", ("Fz", "")),
        ("EEG Fz", ("Fz", "")),
        ("EEG FP1-REF", ("Fp1", "REF")),
        ("Fp1-A1", ("Fp1", "A1")),
        ("T5 - AVG", ("P7", "AVG")),
        ("t4", ("T8", "")),
        ("Cz..", ("Cz", "")),
        ("EOG", None),
        ("EEG", None),
        ("", None),
        ("Fz9", None),
        ("ECG-Fz", None),
    ],
)
def test_labels(label, expected):
    read_as = read_label(label, {name.lower(): name for name in PLACES})
    assert (None if read_as is None else (read_as.position, read_as.reference)) == expected


def test_one_channel_alone_in_its_reference_is_left_out(tmp_path):
    """A bipolar pair among channels of one reference."""
    labels = ("Fp1-A1", "F3-A1", "C3-A1", "O1-O2")
    found = read(write_signals(tmp_path / "rest.edf", labels, tones(4, 20), RATE))
    assert found.names == ("Fp1", "F3", "C3")
    assert "left out, alone in their reference: O1-O2" in found.notes


def test_the_reference_itself_may_be_in_the_file_or_not(tmp_path):
    """Against Cz: the same covariance whether the file carries Cz as zeros or leaves it out."""
    signals = tones(4, 20)
    against = signals - signals[1]
    whole = write_signals(tmp_path / "whole.edf", FOUR, against, RATE, largest=100.0)
    without = write_signals(tmp_path / "without.edf", [*FOUR[:1], *FOUR[2:]], against[[0, 2, 3]], RATE, largest=100.0)
    one, other = read(whole, reference="Cz"), read(without, reference="cz")
    assert (other.names, one.names) == (("Fz", "Pz", "C3", "Cz"), FOUR)
    order = [other.names.index(name) for name in FOUR]
    np.testing.assert_allclose(other.covariance[np.ix_(order, order)], one.covariance, rtol=1e-9, atol=1e-22)
    assert len(read(without).names) == 3
    with pytest.raises(FileError, match="Cz is flat or out of range in 100 % of them"):
        read(whole)
    with pytest.raises(FileError, match="must be silent against itself, but Fz has"):
        read(without, reference="Fz")
    with pytest.raises(BriefError, match=r"noise\.recording\.reference: must be a known position, but 'ear'"):
        read(without, reference="ear")


def test_a_flat_spectrum_is_worth_twice_the_bandwidth(tmp_path):
    rng = np.random.default_rng(2)
    covariance = covariance_of(contacts=1.0, background=1.0, eyes=0.5)
    path = write_signals(tmp_path / "rest.edf", NAMES, white_recording(covariance, BAND, 120, RATE, rng), RATE)
    found = read(path)
    assert found.samples == pytest.approx(2 * 39 * 120, rel=0.03)
    np.testing.assert_allclose(np.diag(found.covariance), np.diag(covariance), rtol=0.1)
    half = read(path, band=(1.0, 20.0))
    assert half.samples == pytest.approx(2 * 19 * 120, rel=0.03)


def test_spectral_width_tells_how_well_a_variance_is_known():
    """Variance of the mean square of 600 narrow-band signals against 2/N."""
    rng = np.random.default_rng(3)
    rate, seconds, n = 64, 30, 600
    white = in_band(rng.normal(size=(n, seconds * rate)), (2.0, 30.0), rate)
    frequency = np.fft.rfftfreq(white.shape[1], 1 / rate)
    shape = 0.2 + np.exp(-(((frequency - 10) / 2) ** 2) / 2)
    signals = np.fft.irfft(np.fft.rfft(white) * shape, white.shape[1])
    power = (signals**2).mean(axis=1)
    worth = 2 * power.mean() ** 2 / power.var()
    width = spectral_width(signals, np.ones(seconds * rate, dtype=bool), rate)
    assert 2 * width * seconds == pytest.approx(worth, rel=0.2)  # three standard errors of a variance of 600
    assert width < 0.4 * 28


def test_recording_must_have_enough_in_it(tmp_path):
    path = write_signals(tmp_path / "short.edf", FOUR, tones(4, 2), RATE)
    with pytest.raises(FileError, match="must last at least 3 s, but it has 2 whole s"):
        read(path)
    path = write_signals(tmp_path / "loud.edf", FOUR, 50 * tones(4, 20), RATE)
    with pytest.raises(FileError, match=r"at least 25 % of the seconds must be good, but of 20 s, 20 left out"):
        read(path)
    path = write_signals(tmp_path / "narrow.edf", FOUR, tones(4, 20), RATE)
    with pytest.raises(FileError, match="must be worth at least 20 independent samples"):
        read(path, band=(7.0, 7.2))
    with pytest.raises(BriefError, match=r"must end below half the sampling rate of narrow\.edf \(64 Hz\)"):
        read(path, band=(1.0, 64.0))
    with pytest.raises(FileError, match=r"must contain noise\.band_hz \(1-40 Hz\), but it is 5-30 Hz"):
        read_recording(RecordingBrief(path, band=(5.0, 30.0)), BAND, PLACES)


def test_channels_must_be_told_apart_and_sampled_alike(tmp_path):
    path = write_signals(tmp_path / "twice.edf", ("Fz", "Cz", "EEG FZ", "Pz"), tones(4, 20), RATE)
    with pytest.raises(FileError, match=r"must hold each position once .*, but Fz, EEG FZ are all Fz"):
        read(path)
    path = write_signals(tmp_path / "unknown.edf", ("X1", "X2", "Fz", "Cz"), tones(4, 20), RATE)
    with pytest.raises(FileError, match=r"at least 3 good electrodes .*, but there are 2"):
        read(path)
    path = write_signals(tmp_path / "unitless.edf", FOUR, tones(4, 20), RATE, unit="")
    with pytest.raises(FileError, match=r"at least 3 good electrodes .*, but there are 0"):
        read(path)


def test_positions_may_come_from_a_table(tmp_path):
    path = write_signals(tmp_path / "rest.edf", ("E1", "E2", "E3", "Cz"), tones(4, 20), RATE)
    table = tmp_path / "sub-1_electrodes.tsv"
    table.write_text("name\tx\ty\tz\nE1\t10\t20\t90\nE2\t-10\t20\t90\ne3\t0\t40\t80\nCz\t1\t2\t95\n")
    found = read(path, electrodes_tsv=table)
    assert found.names == ("E1", "E2", "e3", "Cz")
    np.testing.assert_allclose(1e3 * found.positions, [[10, 20, 90], [-10, 20, 90], [0, 40, 80], [1, 2, 95]])
