"""Lead fields in files: exact round trips, and every file from elsewhere refused in one sentence at little cost."""

import contextlib
import io
import pickle
import struct
import tracemalloc
import zipfile
import zlib
from dataclasses import fields, replace
from pathlib import Path

import numpy as np
import pytest
from scipy.io import savemat

from layout.errors import FileError
from layout.physics import array_limits, lead_field_hdf5
from layout.physics.lead_field_files import LeadFieldArrays, read_lead_field, write_lead_field

h5py = pytest.importorskip("h5py")
BIG = 10**9  # numbers that no test machine should be asked for


def unit(rng, n):
    v = rng.normal(size=(n, 3))
    return v / np.linalg.norm(v, axis=1, keepdims=True)


def made(n=4, m=6, free=True, seed=0):
    rng = np.random.default_rng(seed)
    kinds = tuple(("electrode", "magnetometer", "gradiometer")[i % 3] for i in range(n))
    axes = unit(rng, n)
    axes[[kind == "electrode" for kind in kinds]] = 0
    return LeadFieldArrays(
        gain=rng.normal(size=(n, m, 3) if free else (n, m)) * 1e-7,
        channel_names=tuple(f"Ä{i} axis {i * i}" for i in range(n)),
        channel_kinds=kinds,
        channel_positions=rng.normal(size=(n, 3)) * 0.1,
        channel_axes=axes,
        source_positions=rng.normal(size=(m, 3)) * 0.05,
        source_normals=unit(rng, m),
        source_areas=rng.uniform(1e-6, 2e-6, m),
    )


def values(arrays=None, **changes):
    """What a file holds, by name, to spoil."""
    arrays = arrays or made()
    unit_of = {"electrode": "V/(A m)", "magnetometer": "T/(A m)", "gradiometer": "T/(A m)"}
    everything = {"schema": 1, "frame": "head", "position_unit": "m"}
    everything |= {field.name: getattr(arrays, field.name) for field in fields(LeadFieldArrays)}
    everything["channel_units"] = [unit_of[kind] for kind in arrays.channel_kinds]
    everything |= changes
    return {name: np.asarray(value) for name, value in everything.items() if value is not None}


def save(path, **changes):
    """A file of the kind of its ending, written by the library alone."""
    content = values(**changes)
    if path.suffix == ".npz":
        np.savez(path, **content)
    elif path.suffix == ".mat":
        savemat(path, content)
    else:
        with h5py.File(path, "w") as file:
            for name, value in content.items():
                file[name] = value.astype(object) if value.dtype.kind == "U" else value
    return path


def refusal(path):
    """The one sentence, and that it cost next to nothing."""
    tracemalloc.start()
    with pytest.raises(FileError) as caught:
        read_lead_field(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 50 * 2**20
    said = str(caught.value)
    assert "\n" not in said
    assert said.startswith(str(path))
    return said.removeprefix(str(path))


@pytest.mark.parametrize(
    ("ending", "n", "m", "free"),
    [
        *((e, *s) for e in (".npz", ".mat") for s in ((4, 6, True), (1, 1, True), (1, 5, False), (3, 1, False))),
        (".h5", 1, 5, False),
        (".hdf5", 4, 6, True),
    ],
)
def test_round_trip_is_exact(tmp_path, ending, n, m, free):
    path = tmp_path / f"field{ending}"
    arrays = made(n, m, free)
    write_lead_field(path, arrays)
    back = read_lead_field(path)
    for field in fields(LeadFieldArrays):
        before, after = getattr(arrays, field.name), getattr(back, field.name)
        if isinstance(before, tuple):
            assert after == before
        else:
            assert after.dtype == float
            np.testing.assert_array_equal(after, before)
    assert [found.name for found in tmp_path.iterdir()] == [path.name]


@pytest.mark.parametrize("ending", [".npz", ".mat", ".h5"])
def test_files_of_other_programs_are_read(tmp_path, ending):
    """Plain saves of the library: integer and single types, Fortran order, extra arrays."""
    changes = {
        "gain": np.asfortranarray(made().gain.astype(np.float32)),
        "comment": np.arange(3),
        "schema": np.uint8(1),
    }
    back = read_lead_field(save(tmp_path / f"field{ending}", **changes))
    np.testing.assert_array_equal(back.gain, made().gain.astype(np.float32))
    assert back.channel_names == made().channel_names


def test_compressed_files_are_read(tmp_path):
    np.savez_compressed(tmp_path / "a.npz", **values())
    savemat(tmp_path / "b.mat", values(), do_compression=True)
    with h5py.File(tmp_path / "c.h5", "w") as file:
        for name, value in values().items():
            if value.dtype.kind == "U":
                file[name] = np.char.encode(value, "utf-8")  # texts of fixed length
            else:
                zipped = {"compression": "gzip", "shuffle": True} if value.ndim else {}
                file.create_dataset(name, data=value, **zipped)
    for path in sorted(tmp_path.iterdir()):
        back = read_lead_field(path)
        np.testing.assert_array_equal(back.gain, made().gain)
        assert back.channel_names == made().channel_names


WRONG = {
    "schema": ({"schema": 2}, ["schema must be 1", "2"]),
    "frame": ({"frame": "mri"}, ["frame must be 'head'", "'mri'"]),
    "unit of lengths": ({"position_unit": "mm"}, ["position_unit must be 'm'", "'mm'"]),
    "schema as text": ({"schema": "one"}, ["schema must be numbers"]),
    "frame as number": ({"frame": 1}, ["frame must be text"]),
    "no gain": ({"gain": None}, ["array called gain"]),
    "flat gain": ({"gain": np.ones(5)}, ["gain", "5"]),
    "two components": ({"gain": np.ones((4, 6, 2))}, ["gain", "(4, 6, 2)"]),
    "too few channels": ({"gain": np.ones((3, 6, 3))}, ["channel_names", "(3,)", "(4,)"]),
    "too few sources": ({"gain": np.ones((4, 5, 3))}, ["source_positions", "(5, 3)", "(6, 3)"]),
    "turned positions": ({"channel_positions": np.ones((3, 4))}, ["channel_positions", "(4, 3)", "(3, 4)"]),
    "nan": ({"gain": np.full((4, 6, 3), np.nan)}, ["gain must have finite values"]),
    "inf": ({"source_areas": np.full(6, np.inf)}, ["source_areas must have finite values"]),
    "complex gain": ({"gain": np.full((4, 6, 3), 1 + 2j)}, ["gain must be"]),
    "names twice": ({"channel_names": ["a", "b", "a", "c"]}, ["channel_names must all differ", "'a'"]),
    "kind": ({"channel_kinds": ["electrode", "magnetometer", "squid", "electrode"]}, ["channel_kinds", "'squid'"]),
    "unit": ({"channel_units": ["V/(A m)", "fT", "T/(A m)", "V/(A m)"]}, ["channel_units", "'T/(A m)'", "'fT'"]),
    "axes": ({"channel_axes": np.ones((4, 3))}, ["channel_axes", "row 1"]),
    "normals": ({"source_normals": np.ones((6, 3))}, ["source_normals", "1.73205"]),
    "areas": ({"source_areas": np.arange(6) * 1e-6}, ["source_areas must be greater than 0"]),
    "millimetres": ({"source_positions": np.full((6, 3), 50.0)}, ["source_positions must be in metres", "50"]),
}


@pytest.mark.parametrize("ending", [".npz", ".mat", pytest.param(".h5", marks=pytest.mark.slow)])
@pytest.mark.parametrize("case", WRONG)
def test_wrong_content_is_named(tmp_path, ending, case):
    changes, words = WRONG[case]
    said = refusal(save(tmp_path / f"field{ending}", **changes))
    for word in words:
        assert word in said


def test_other_endings_and_missing_files(tmp_path):
    assert "must end in .npz, .mat, .h5, .hdf5, but '.txt'" in refusal(tmp_path / "field.txt")
    with pytest.raises(FileError, match="must end in"):
        write_lead_field(tmp_path / "field.txt", made())
    assert "no such file" in refusal(tmp_path / "field.npz")
    (tmp_path / "folder.npz").mkdir()
    assert "no such file" in refusal(tmp_path / "folder.npz")
    with pytest.raises(FileError, match="must be a place that can be written"):
        write_lead_field(tmp_path / "nowhere" / "field.npz", made())


def test_a_failed_write_leaves_nothing_and_the_old_file_whole(tmp_path):
    path = tmp_path / "field.npz"
    write_lead_field(path, made())
    before = path.read_bytes()
    with pytest.raises(ValueError, match="Object arrays"):
        write_lead_field(path, replace(made(), gain=np.array([{}], dtype=object)))
    assert path.read_bytes() == before
    assert [found.name for found in tmp_path.iterdir()] == [path.name]


@pytest.mark.parametrize(
    ("ending", "share"),
    [(ending, share) for ending in (".npz", ".mat") for share in (0.0, 0.01, 0.3, 0.9, 0.999)] + [(".h5", 0.9)],
)
def test_truncated_files(tmp_path, ending, share):
    whole = tmp_path / f"field{ending}"
    write_lead_field(whole, made(40, 50))
    content = whole.read_bytes()
    cut = tmp_path / f"cut{ending}"
    cut.write_bytes(content[: int(share * len(content))])
    refusal(cut)


@pytest.mark.parametrize("ending", [".npz", ".mat", ".h5"])
def test_one_kind_called_another(tmp_path, ending):
    for other in (".npz", ".mat", ".h5"):
        if other != ending:
            path = tmp_path / f"field{other}"
            path.write_bytes(save(tmp_path / f"right{ending}").read_bytes())
            refusal(path)


@pytest.mark.parametrize("ending", [".npz", ".mat"])
def test_damaged_bytes_never_get_past_one_sentence(tmp_path, ending):
    """Bytes changed at random: the file is read, or refused in one sentence; nothing else ever happens."""
    content = bytearray(save(tmp_path / f"field{ending}").read_bytes())
    rng = np.random.default_rng(5)
    path = tmp_path / f"spoilt{ending}"
    refused = []
    for _ in range(150):
        spoilt = content.copy()
        for place in rng.integers(0, len(spoilt), 4):
            spoilt[place] = rng.integers(0, 256)
        path.write_bytes(spoilt)
        try:
            read_lead_field(path)
        except FileError as said:
            refused.append(str(said))
    assert len(refused) > 50
    assert not any("\n" in said for said in refused)


class Trap:
    """Whoever unpickles this leaves a file behind."""

    def __init__(self, path):
        self.path = str(path)

    def __reduce__(self):
        return (open, (self.path, "w"))


def npz_with(path, name, member: bytes):
    """A good archive but for one member."""
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for other, value in values().items():
            content = io.BytesIO()
            np.save(content, value)
            archive.writestr(f"{other}.npy", member if other == name else content.getvalue())
    return path


def npy(header: str, data: bytes = b"") -> bytes:
    text = header.encode()
    return b"\x93NUMPY\x01\x00" + struct.pack("<H", len(text)) + text + data


def test_pickles_are_never_loaded(tmp_path):
    marker = tmp_path / "executed"
    content = io.BytesIO()
    np.save(content, np.array([Trap(marker)], dtype=object), allow_pickle=True)
    assert pickle.dumps(Trap(marker))[:2] in content.getvalue()
    for name in ("gain", "channel_names", "schema"):
        said = refusal(npz_with(tmp_path / f"{name}.npz", name, content.getvalue()))
        assert f"{name} must be plain numbers" in said
    assert not marker.exists()


@pytest.mark.parametrize(
    "header",
    [
        "{'descr': '<f8', 'fortran_order': False, 'shape': (1000000000, 1000, 3), }\n",  # more than any memory
        "{'descr': '<f8', 'fortran_order': False, 'shape': (4, 60000000), }\n",  # within the limits, but not there
        "{'descr': [('a', '<f8'), ('b', 'O')], 'fortran_order': False, 'shape': (4,), }\n",
        "{'descr': '<U900000000', 'fortran_order': False, 'shape': (4,), }\n",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (-1, 6, 3), }\n",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (" + "1," * 20000 + "), }\n",
        "__import__('os').abort()\n",
    ],
)
def test_lying_array_headers(tmp_path, header):
    refusal(npz_with(tmp_path / "field.npz", "gain", npy(header, b"\0" * 64)))


def test_bytes_behind_an_array_are_not_passed_over(tmp_path):
    content = io.BytesIO()
    np.save(content, made().gain)
    assert "holds 640 bytes" in refusal(npz_with(tmp_path / "field.npz", "gain", content.getvalue() + b"\0" * 64))


def test_zip_bomb(tmp_path, monkeypatch):
    """A member that says and unfolds to a thousand times its size, over the limit by one number."""
    monkeypatch.setattr(array_limits, "LARGEST_FILE", 64 * 2**20)
    header = "{'descr': '<f8', 'fortran_order': False, 'shape': (8388609,), }\n"
    path = npz_with(tmp_path / "field.npz", "gain", npy(header, b"\0" * (8 * 8388609)))
    assert path.stat().st_size < 2**18
    assert "at most 64 MiB, but gain says (8388609,)" in refusal(path)


def test_a_zip_that_says_less_than_it_holds(tmp_path):
    content = npz_with(tmp_path / "a.npz", "comment", b"").read_bytes()
    sizes = struct.pack("<I", len(npy("x")))
    with zipfile.ZipFile(tmp_path / "a.npz") as archive:
        info = archive.getinfo("gain.npy")
    old = struct.pack("<II", info.compress_size, info.file_size)
    assert content.count(old) == 2
    (tmp_path / "b.npz").write_bytes(content.replace(old, struct.pack("<I", info.compress_size) + sizes))
    refusal(tmp_path / "b.npz")


def test_arrays_twice(tmp_path):
    with zipfile.ZipFile(save(tmp_path / "field.npz"), "a") as archive, pytest.warns(UserWarning, match="Duplicate"):
        archive.writestr("gain.npy", b"")
    assert "gain is there 2 times" in refusal(tmp_path / "field.npz")


def element(kind: int, data: bytes) -> bytes:
    return struct.pack("<II", kind, len(data)) + data + b"\0" * (-len(data) % 8)


def mat_matrix(name: str, kind: int, shape, data: bytes, flags: int = 0) -> bytes:
    """A miMATRIX element of a .mat file: array flags, dimensions, name, data element."""
    parts = element(6, struct.pack("<II", kind | flags << 8, 0))
    parts += element(5, struct.pack(f"<{len(shape)}i", *shape)) + element(1, name.encode()) + data
    return struct.pack("<II", 14, len(parts)) + parts


def mat_file(path, *elements: bytes, keep=True, without="gain") -> Path:
    """A good file but for the array `without`, and the elements."""
    good = io.BytesIO()
    savemat(good, values(**{without: None}) if keep else {"x": 1})
    path.write_bytes(good.getvalue() + b"".join(elements))
    return path


DOUBLE, CHAR, CELL, STRUCT, OBJECT, SPARSE, FUNCTION, OPAQUE = 6, 4, 1, 2, 3, 5, 16, 17


@pytest.mark.parametrize(
    ("kind", "shape", "data"),
    [
        (DOUBLE, (BIG, 3), element(9, b"\0" * 64)),
        (DOUBLE, (4, 6, 3), element(9, b"\0" * 64)),
        (DOUBLE, (4, 6, 3), struct.pack("<II", 9, 2**31)),  # a data element longer than its matrix
        (DOUBLE, (-4, 6), element(9, b"\0" * 64)),
        (DOUBLE, (4, 6, 3), element(99, b"\0" * 576)),  # of a type that does not exist
        (CELL, (1000, BIG), b""),
        (CELL, (1, 1), mat_matrix("", CELL, (BIG, 1), b"")),
        (STRUCT, (1, 1), element(5, struct.pack("<i", 32)) + element(1, b"")),
        (SPARSE, (4, 6), element(5, b"\0" * 8)),
        (FUNCTION, (1, 1), mat_matrix("", DOUBLE, (1, 1), element(9, b"\0" * 8))),
        (OBJECT, (1, 1), element(1, b"inline\0\0")),
        (OPAQUE, (1, 1), element(1, b"MCOS")),
    ],
)
def test_hostile_matrices(tmp_path, kind, shape, data):
    said = refusal(mat_file(tmp_path / "field.mat", mat_matrix("gain", kind, shape, data)))
    assert "gain" in said or "cannot be read" in said


def test_lying_matrices_are_told_how_they_lie(tmp_path):
    short = mat_file(tmp_path / "a.mat", mat_matrix("gain", DOUBLE, (4, 6, 3), element(9, b"\0" * 64)))
    assert "gain says (4, 6, 3) and holds 8 numbers" in refusal(short)
    long = mat_file(tmp_path / "b.mat", mat_matrix("gain", DOUBLE, (4, 6, 3), struct.pack("<II", 9, 2**31)))
    assert "does not fit into its matrix" in refusal(long)


def test_char_matrix_that_is_all_header(tmp_path):
    """No data but 2e9 characters: the reader would write out as many blanks."""
    path = mat_file(
        tmp_path / "field.mat",
        mat_matrix("channel_names", CHAR, (1, 2**31 - 1), element(4, b"")),
        without="channel_names",
    )
    assert "channel_names must be at most" in refusal(path)


def test_cells_are_told_what_to_be(tmp_path):
    names = np.empty(4, dtype=object)
    names[:] = ["a", "b", "c", "d"]
    savemat(tmp_path / "field.mat", values(channel_names=None) | {"channel_names": names})
    assert "char(names)" in refusal(tmp_path / "field.mat")


def bomb(name, shape):
    """A compressed matrix of 32 MB in 32 KB."""
    packed = zlib.compress(mat_matrix(name, DOUBLE, shape, element(9, b"\0" * 2**25)), 9)
    assert len(packed) < 2**16
    return struct.pack("<II", 15, len(packed)) + packed


def test_mat_bombs_are_not_unfolded(tmp_path, monkeypatch):
    monkeypatch.setattr(array_limits, "LARGEST_FILE", 16 * 2**20)
    assert "at most 16 MiB" in refusal(mat_file(tmp_path / "a.mat", bomb("gain", (2**22, 1))))
    assert "cannot be read" in refusal(mat_file(tmp_path / "b.mat", bomb("gain", (4, 6, 3))))
    # under a name that nobody asked for it costs nothing
    path = mat_file(tmp_path / "c.mat", bomb("other", (2**22, 1)), without="comment")
    tracemalloc.start()
    read_lead_field(path)
    assert tracemalloc.get_traced_memory()[1] < 2**23
    tracemalloc.stop()


def test_mat_of_other_versions(tmp_path):
    savemat(tmp_path / "four.mat", {"gain": np.ones((4, 6))}, format="4")
    refusal(tmp_path / "four.mat")
    with h5py.File(tmp_path / "seven.mat", "w", userblock_size=512) as file:
        file["gain"] = np.ones((4, 6))
    content = bytearray((tmp_path / "seven.mat").read_bytes())
    content[:128] = b"MATLAB 7.3 MAT-file".ljust(124) + b"\x00\x02IM"
    (tmp_path / "seven.mat").write_bytes(content)
    assert "-v7" in refusal(tmp_path / "seven.mat")


def hdf5_without(path, name):
    save(path, **{name: None})
    return h5py.File(path, "a")


def test_hdf5_links_are_not_followed(tmp_path):
    save(tmp_path / "other.h5")
    for number, link in enumerate((h5py.ExternalLink("other.h5", "/gain"), h5py.SoftLink("/elsewhere"))):
        with hdf5_without(tmp_path / f"field{number}.h5", "gain") as file:
            file["elsewhere"] = made().gain
            file["gain"] = link
        assert "gain must lie in the file itself" in refusal(tmp_path / f"field{number}.h5")


def test_hdf5_storage_elsewhere_is_not_read(tmp_path):
    (tmp_path / "raw.bin").write_bytes(made().gain.tobytes())
    with hdf5_without(tmp_path / "external.h5", "gain") as file:
        size = made().gain.nbytes
        file.create_dataset("gain", (4, 6, 3), float, external=[(str(tmp_path / "raw.bin"), 0, size)])
    with hdf5_without(tmp_path / "virtual.h5", "gain") as file:
        layout = h5py.VirtualLayout((4, 6, 3), float)
        layout[:] = h5py.VirtualSource(str(save(tmp_path / "other.h5")), "gain", (4, 6, 3))
        file.create_virtual_dataset("gain", layout)
    for name in ("external", "virtual"):
        assert "its values are elsewhere" in refusal(tmp_path / f"{name}.h5")


def test_hdf5_sizes_are_checked_first(tmp_path):
    with hdf5_without(tmp_path / "shape.h5", "gain") as file:
        file.create_dataset("gain", (BIG, 1000, 3), float, chunks=(1, 1000, 3))  # nothing stored
    assert "MiB, but gain says (1000000000, 1000, 3)" in refusal(tmp_path / "shape.h5")
    with hdf5_without(tmp_path / "chunk.h5", "gain") as file:
        file.create_dataset("gain", (4, 6, 3), float, chunks=(4, 2**20, 90), maxshape=(None,) * 3, compression="gzip")
    assert "pieces of a sane size" in refusal(tmp_path / "chunk.h5")
    with hdf5_without(tmp_path / "names.h5", "channel_names") as file:
        file.create_dataset("channel_names", (BIG,), h5py.string_dtype(), chunks=(1000,))
    assert "channel_names must be at most" in refusal(tmp_path / "names.h5")
    with hdf5_without(tmp_path / "text.h5", "channel_names") as file:
        file["channel_names"] = np.array(["x" * 10**6] * 4, dtype=object)
    assert "channel_names must be at most" in refusal(tmp_path / "text.h5")


@pytest.mark.slow
def test_hdf5_of_strange_types(tmp_path):
    for number, strange in enumerate(
        (
            np.zeros((4, 6, 3), np.dtype([("a", float), ("b", int)])),
            h5py.Empty("f8"),
            np.zeros((4, 6, 3), bool),
        )
    ):
        with hdf5_without(tmp_path / f"{number}.h5", "gain") as file:
            file["gain"] = strange
        refusal(tmp_path / f"{number}.h5")
    with hdf5_without(tmp_path / "group.h5", "gain") as file:
        file.create_group("gain")
    assert "gain must be a data set" in refusal(tmp_path / "group.h5")
    with hdf5_without(tmp_path / "ref.h5", "gain") as file:
        file.create_dataset("gain", (4, 6), h5py.ref_dtype)
    refusal(tmp_path / "ref.h5")
    with hdf5_without(tmp_path / "filter.h5", "gain") as file:
        file.create_dataset("gain", data=np.ones((4, 6, 3)), chunks=(4, 6, 3), compression="lzf")
    assert "another compression" in refusal(tmp_path / "filter.h5")


def test_a_library_that_hangs_or_dies_is_one_sentence(tmp_path, monkeypatch):
    """The reading process is replaced by one that sleeps, then by one that is killed."""
    path = save(tmp_path / "field.h5")
    monkeypatch.setattr(lead_field_hdf5, "PATIENCE", 0.2)
    monkeypatch.setattr(lead_field_hdf5, "_READER", "import time; time.sleep(20)")
    assert "took longer" in refusal(path)
    monkeypatch.setattr(lead_field_hdf5, "PATIENCE", 20.0)
    monkeypatch.setattr(lead_field_hdf5, "_READER", "import os; os.abort()")
    assert "library failed" in refusal(path)


@pytest.mark.slow
def test_damaged_hdf5_never_gets_past_one_sentence(tmp_path, monkeypatch):
    """Of these, some hang the library."""
    monkeypatch.setattr(lead_field_hdf5, "PATIENCE", 3.0)
    content = bytearray(save(tmp_path / "field.h5").read_bytes())
    rng = np.random.default_rng(1)
    path = tmp_path / "spoilt.h5"
    refused = 0
    for _ in range(25):
        spoilt = content.copy()
        for place in rng.integers(0, len(spoilt), rng.integers(1, 9)):
            spoilt[place] = rng.integers(0, 256)
        path.write_bytes(spoilt)
        with contextlib.suppress(FileError):
            read_lead_field(path)
            continue
        refused += 1
    assert refused > 8
