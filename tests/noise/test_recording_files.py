"""Covariances from arrays, and files that are damaged or lie: one sentence each."""

import io
import zipfile
from pathlib import Path

import numpy as np
import pytest
from recorded import write_signals

from layout.brief.objects import RecordingBrief
from layout.errors import FileError, LayoutError
from layout.noise import edf_header, signal_covariance
from layout.noise.recorded_covariance import read_recording

NAMES = ("Fz", "Cz", "Pz", "O1")
PLACES = {name: np.array([0.01 * i, 0.0, 0.1]) for i, name in enumerate((*NAMES, "FCz", "T7"))}
BAND = (1.0, 40.0)
COVARIANCE = np.diag([4.0, 3.0, 2.0, 5.0]) + 1.0
ARRAYS = {"covariance": COVARIANCE, "names": np.array(NAMES), "unit": np.array("uV"), "seconds": np.array(60.0)}


def read(path, band=None, **keys):
    return read_recording(RecordingBrief(Path(path), band=band, **keys), BAND, PLACES)


def save(path, **changed):
    """An .npz of the good arrays with some changed, or left out where None."""
    arrays = {name: value for name, value in (ARRAYS | changed).items() if value is not None}
    np.savez(path, **arrays)
    return path


def test_covariance_of_arrays(tmp_path):
    found = read(save(tmp_path / "noise.npz"))
    np.testing.assert_allclose(found.covariance, 1e-12 * COVARIANCE, rtol=1e-12)
    assert (found.names, found.samples, found.band) == (NAMES, 2 * 39 * 60, BAND)
    np.testing.assert_array_equal(found.offsets, np.ones((4, 1)))


def test_band_of_the_file_counts(tmp_path):
    found = read(save(tmp_path / "noise.npz", band_hz=np.array([0.5, 45.0])))
    assert (found.band, found.samples) == ((0.5, 45.0), 2 * 44.5 * 60)
    with pytest.raises(FileError, match=r"must contain noise\.band_hz \(1-40 Hz\), but it is 2-45 Hz"):
        read(save(tmp_path / "narrow.npz", band_hz=np.array([2.0, 45.0])))


def test_matrix_alone_with_the_rest_from_the_brief(tmp_path):
    path = tmp_path / "noise.npy"
    np.save(path, np.asfortranarray(COVARIANCE))
    found = read(path, channels=NAMES, unit="uV", seconds=60.0)
    np.testing.assert_allclose(found.covariance, 1e-12 * COVARIANCE, rtol=1e-12)
    with pytest.raises(FileError, match=r"holds a covariance alone, so noise\.recording\.channels must be given"):
        read(path, unit="uV", seconds=60.0)


def test_bad_channels_and_reference(tmp_path):
    path = save(tmp_path / "noise.npz", names=np.array(["Fz-FCZ", "Cz-FCZ", "T3-FCZ", "O1-FCZ"]))
    found = read(path, bad=("Cz",), reference="FCz")
    assert found.names == ("Fz", "T7", "O1", "FCz")
    np.testing.assert_allclose(found.covariance[:3, :3], 1e-12 * COVARIANCE[np.ix_([0, 2, 3], [0, 2, 3])], rtol=1e-12)
    assert not found.covariance[3].any()
    np.testing.assert_array_equal(found.offsets, np.ones((4, 1)))
    silent = COVARIANCE.copy()
    silent[1] = silent[:, 1] = 0
    with pytest.raises(FileError, match=r"must not be silent \(.*\), but Cz is"):
        read(save(tmp_path / "silent.npz", covariance=silent))
    assert read(tmp_path / "silent.npz", reference="Cz").names == NAMES


def test_positions_and_magnetometers(tmp_path):
    positions = np.array([[0, 60, 90], [0, 0, 120], [0, -60, 90], [0, 10, 140.0]])
    axes = np.array([[0, 0, 0], [0, 0, 0], [0, 0, 0], [0, 0, 1.0]])
    units = np.array(["uV", "uV", "uV", "fT"])
    names = np.array(["E1", "E2", "E3", "coil"])
    path = save(tmp_path / "both.npz", names=names, unit=units, positions_mm=positions, axes=axes)
    found = read(path)
    np.testing.assert_allclose(found.positions, 1e-3 * positions)
    np.testing.assert_array_equal(found.is_electrode, [True, True, True, False])
    np.testing.assert_array_equal(found.offsets[:, 0], [1, 1, 1, 0])
    assert found.covariance[3, 3] == pytest.approx(6e-30, rel=1e-12, abs=0)
    assert found.covariance[0, 3] == pytest.approx(1e-21, rel=1e-12, abs=0)
    assert read(path, bad=("coil",)).is_electrode.all()
    with pytest.raises(FileError, match=r"axes must be an array \(n, 3\)"):
        read(save(tmp_path / "noaxes.npz", names=names, unit=units, positions_mm=positions))
    with pytest.raises(FileError, match="positions_mm must be an array"):
        read(save(tmp_path / "nowhere.npz", names=names, unit=units, axes=axes))
    with pytest.raises(FileError, match="axes of magnetometers must be of length 1, but one is 2"):
        read(save(tmp_path / "long.npz", names=names, unit=units, positions_mm=positions, axes=2 * axes))


BAD_ARRAYS = {
    "no covariance": ({"covariance": None}, "must hold an array called covariance"),
    "no names": ({"names": None}, "must hold an array called names"),
    "text for numbers": ({"covariance": np.array([["a"]])}, "covariance must be plain numbers"),
    "objects": ({"covariance": np.array([[{}]])}, "covariance must be plain numbers"),
    "shape": ({"covariance": np.ones((3, 4))}, r"covariance must be square .* of shape \(3, 4\)"),
    "not finite": ({"covariance": COVARIANCE * np.nan}, "must be finite"),
    "not symmetric": ({"covariance": COVARIANCE + np.triu(np.ones((4, 4)), 1)}, "must be symmetric"),
    "negative": ({"covariance": COVARIANCE - 4 * np.eye(4)}, "must have no negative eigenvalue"),
    "unit": ({"unit": np.array("volts")}, "unit must be one of V, .*, but 'volts' was given"),
    "units": ({"unit": np.array(["uV", "uV"])}, "unit must be one text or one for each of the 4 names"),
    "seconds": ({"seconds": np.array(-3.0)}, "seconds must be a positive number, but -3"),
    "nan seconds": ({"seconds": np.array(np.nan)}, "seconds must be a positive number, but nan"),
    "band": ({"band_hz": np.array([40.0, 1.0])}, "band_hz must be two increasing frequencies"),
    "too large": ({"covariance": np.zeros((1200, 1200))}, "must be of at most 10 MB, but covariance is of 12 MB"),
    "unknown positions": ({"names": np.array(["a", "b", "c", "d"])}, "at least 3 good electrodes"),
}


@pytest.mark.parametrize("case", BAD_ARRAYS)
def test_bad_arrays(tmp_path, case):
    changed, sentence = BAD_ARRAYS[case]
    with pytest.raises(FileError, match=sentence):
        read(save(tmp_path / "noise.npz", **changed))


def npy_saying(shape):
    """Bytes of an .npy whose header claims a shape and which holds four numbers."""
    file = io.BytesIO()
    np.lib.format.write_array_header_1_0(file, {"descr": "<f8", "fortran_order": False, "shape": shape})
    return file.getvalue() + bytes(32)


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("empty.npz", b""),
        ("text.npz", b"these are no arrays"),
        ("empty.npy", b""),
        ("text.npy", b"these are no arrays"),
        ("lying.npy", npy_saying((100_000, 100_000))),
        ("short.npy", npy_saying((3, 3))),
        ("flat.npy", npy_saying((4,))),
        ("empty.edf", b""),
        ("text.edf", b"0       but then this is no recording\n"),
        ("noise.edf", bytes(range(256)) * 40),
        ("zero.edf", b"0" + b" " * 4000),
        ("noise.bdf", b"\xffBIOSEMI" + bytes(range(256)) * 40),
    ],
)
def test_files_that_are_something_else(tmp_path, name, content):
    path = tmp_path / name
    path.write_bytes(content)
    keys = {"channels": NAMES, "unit": "uV", "seconds": 60.0} if name.endswith("npy") else {}
    with pytest.raises(FileError) as refusal:
        read(path, **keys)
    sentence = str(refusal.value)
    assert sentence.startswith(str(path))
    assert "\n" not in sentence
    assert sentence.isprintable()


def test_a_matrix_with_more_behind_it_is_refused(tmp_path):
    path = tmp_path / "long.npy"
    path.write_bytes(npy_saying((4, 4)) + bytes(128))
    with pytest.raises(FileError, match=r"cannot be read \(it says \(4, 4\) and holds 160 bytes\)"):
        read(path, channels=NAMES, unit="uV", seconds=60.0)


def test_a_cut_archive_is_refused(tmp_path):
    path = save(tmp_path / "noise.npz")
    whole = path.read_bytes()
    for length in range(1, len(whole), 97):
        path.write_bytes(whole[:length])
        with pytest.raises(FileError):
            read(path)


def test_a_member_that_unpacks_to_too_much_is_refused(tmp_path):
    path = tmp_path / "bomb.npz"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("covariance.npy", bytes(50_000_000))
    with pytest.raises(FileError, match="must be of at most 10 MB, but covariance is of 50 MB"):
        read(path)


@pytest.fixture
def good(tmp_path):
    """Bytes of a good EDF file, 4 channels of 20 s at 100 Hz, 1 s a record."""
    signals = 10e-6 * np.random.default_rng(0).normal(size=(4, 2000))
    path = write_signals(tmp_path / "rest.edf", NAMES, signals, 100, largest=100.0)
    assert read(path).seconds == 20
    return path, path.read_bytes()


def changed(content, at, text):
    return content[:at] + text.encode().ljust(8)[:8] + content[at + 8 :]


def test_headers_that_lie(good):
    path, content = good
    records, duration, size = 236, 244, 184
    samples, low, high = (256 + 4 * at for at in (216, 104, 112))
    lies = {
        "more records": (changed(content, records, "9999"), "its header promises .* bytes and there are"),
        "endless": (changed(content, records, "-1"), "must give a number of records of 1 to 1e"),
        "words": (changed(content, records, "many"), "number of records .*, but it says 'many'"),
        "no time": (changed(content, duration, "0"), "must be sampled at most 100000 times a second"),
        "not a number": (changed(content, duration, "nan"), "must give a record duration"),
        "backwards": (changed(content, duration, "-5"), "must give a record duration"),
        "header size": (changed(content, size, "99999"), "must give a header size of 1280 to 1280"),
        "no samples": (changed(content, samples, "0"), "must give a samples per record of 1 to"),
        "many samples": (changed(content, samples, "99999"), "its header promises"),
        "no range": (changed(changed(content, low, "5"), high, "5"), "rest.edf"),
        "infinite range": (changed(content, high, "1e999"), "rest.edf"),
        "large range": (changed(content, high, "1e300"), "samples must be voltages below 10 V"),
        "signals": (content[:252] + b"9999" + content[256:], "must give a number of signals of 1 to 2048"),
        "gaps": (content[:192] + b"EDF+D" + content[197:], "must be continuous"),
        "cut in the header": (content[:700], "it ends within its header"),
        "cut in the data": (content[:-1], "its header promises"),
    }
    for name, (spoilt, sentence) in lies.items():
        path.write_bytes(spoilt)
        with pytest.raises(FileError, match=sentence) as refusal:
            read(path)
        assert "\n" not in str(refusal.value), name


def test_any_byte_of_a_header_may_be_wrong(good):
    """Whatever a single byte says, the answer is a covariance of finite numbers or one sentence."""
    path, content = good
    rng = np.random.default_rng(1)
    refusals = []
    for at in rng.integers(0, 256 * 5, 80):
        path.write_bytes(content[:at] + bytes([rng.integers(0, 256)]) + content[at + 1 :])
        try:
            assert np.isfinite(read(path).covariance).all()
        except LayoutError as refusal:
            refusals.append(str(refusal))
    assert 3 < len(refusals) < 70
    assert not any("\n" in one for one in refusals)


def test_sizes_are_capped(good, monkeypatch):
    path, _ = good
    monkeypatch.setattr(signal_covariance, "MOST_NUMBERS", 7999)
    with pytest.raises(FileError, match=r"electrodes x samples must be at most 7,999 .*, but there are 8,000"):
        read(path)
    monkeypatch.setattr(edf_header, "LARGEST_FILE", 1000)
    with pytest.raises(FileError, match=r"must be at most 0\.001 MB"):
        read(path)
