"""Files that lie, burst, or point elsewhere: one sentence each, nothing executed, no memory exhausted."""

import base64
import gzip
import os
import pickle
import struct
import subprocess
import sys
import zlib
from pathlib import Path

import nibabel as nib
import numpy as np
import pytest
from exported_head import write_labels, write_mesh

from layout.anatomy.gifti_files import read_gifti_surface, read_gifti_values
from layout.anatomy.landmark_files import read_landmarks
from layout.anatomy.mesh_files import read_mesh
from layout.anatomy.nifti_masks import read_volume
from layout.anatomy.star_surface import icosphere
from layout.errors import FileError

VERTICES, FACES = icosphere(1)
ARRAY = (
    '<DataArray Intent="NIFTI_INTENT_POINTSET" DataType="NIFTI_TYPE_FLOAT32" ArrayIndexingOrder="RowMajorOrder" '
    'Dimensionality="2" Dim0="{n}" Dim1="3" Encoding="{encoding}" Endian="LittleEndian" {more}><Data>{data}</Data>'
    "</DataArray>"
)


def gifti(*arrays, before=""):
    inside = "".join(arrays)
    return f'<?xml version="1.0"?>{before}<GIFTI Version="1.0" NumberOfDataArrays="{len(arrays)}">{inside}</GIFTI>'


def array(n=4, encoding="ASCII", data="0 " * 12, more='ExternalFileName="" ExternalFileOffset=""'):
    return ARRAY.format(n=n, encoding=encoding, data=data, more=more)


def one_sentence(read, path):
    with pytest.raises(FileError) as refusal:
        read(path)
    said = str(refusal.value)
    assert path.name in said
    assert said.endswith(".")
    assert "\n" not in said
    assert len(said) < 400
    return said


LAUGHS = (
    "<!DOCTYPE GIFTI [<!ENTITY a0 'ha'>"
    + "".join(f"<!ENTITY a{i} '{f'&a{i - 1};' * 10}'>" for i in range(1, 12))
    + "]>"
)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (gifti(array(data="&a11;"), before=LAUGHS), "entities"),
        (gifti(array(data="&x;"), before='<!DOCTYPE GIFTI [<!ENTITY x SYSTEM "file:///etc/passwd">]>'), "entities"),
        (gifti(array(data="&x;"), before='<!DOCTYPE G [<!ENTITY % x SYSTEM "file:///etc/passwd"> %x;]>'), "entities"),
        (gifti(array(n=2_000_000_000)), "at most"),
        (gifti(array(n=-4)), "at most"),
        (gifti(array(n="many")), "whole numbers"),
        (gifti(array(encoding="ExternalFileBinary", more='ExternalFileName="/etc/passwd"')), "Encoding"),
        (gifti(array(more='ExternalFileName="/etc/passwd"')), "another file"),
        (gifti(array()).replace("FLOAT32", "OBJECT"), "DataType"),
        (
            gifti(array(encoding="GZipBase64Binary", data=base64.b64encode(zlib.compress(bytes(50_000_000))).decode())),
            "unpack",
        ),
        (gifti(array(encoding="GZipBase64Binary", data=base64.b64encode(zlib.compress(bytes(8))).decode())), "unpack"),
        (gifti(array(encoding="GZipBase64Binary", data="AAAA")), "cannot be read"),
        (gifti(array(encoding="Base64Binary", data="AAAA")), "cannot be read"),
        (gifti(array())[:-40], "cannot be read"),
        (gifti(array()), "one of triangles"),
        ("<a>" * 100_000, "cannot be read"),
        ("", "empty"),
        ("not XML at all", "cannot be read"),
    ],
    ids=lambda value: None if len(value) > 20 else value,
)
def test_hostile_gifti(tmp_path, content, words):
    path = tmp_path / "surface.gii"
    path.write_text(content)
    assert words in one_sentence(read_gifti_surface, path)
    one_sentence(read_gifti_values, path)


def test_entities_hidden_in_another_encoding(tmp_path):
    path = tmp_path / "surface.gii"
    path.write_bytes(
        gifti(array(data="&a11;"), before=LAUGHS).replace('"1.0"?', '"1.0" encoding="UTF-16"?').encode("utf-16")
    )
    assert "entities" in one_sentence(read_gifti_surface, path)


def stl(said, triangles):
    return bytes(80) + struct.pack("<I", said) + bytes(50 * triangles)


def ply(n_vertices, n_faces, body=b"", form="binary_little_endian"):
    return (
        f"ply\nformat {form} 1.0\nelement vertex {n_vertices}\nproperty float x\nproperty float y\nproperty float z\n"
        f"element face {n_faces}\nproperty list uint uint vertex_indices\nend_header\n"
    ).encode() + body


FOUR = np.eye(4, 3, dtype="<f4").tobytes()
HUGE_LIST = struct.pack("<I", 2**32 - 1) + bytes(12)


@pytest.mark.parametrize(
    ("name", "content", "words"),
    [
        ("s.stl", stl(4_000_000_000, 2), "4,000,000,000 triangles"),
        ("s.stl", stl(3, 2), "3 triangles"),
        ("s.stl", b"short", "triangles"),
        ("s.stl", b"solid x\nfacet normal 0 0 1\nouter loop\nvertex 0 0 one", "cannot be read|triangle"),
        ("s.ply", ply(10**12, 4), "at most"),
        ("s.ply", ply(900_000, 4, FOUR), "too many for its"),
        ("s.ply", ply(4, 4, FOUR + 4 * HUGE_LIST), "cannot be read|triangle|faces"),
        ("s.ply", b"ply\nformat binary_little_endian 1.0\n" + b"comment " * 20_000, "header that ends"),
        ("s.ply", ply(4, 4, b"0 0 0\n" * 3, "ascii"), "cannot be read|triangle|too many"),
        ("s.off", b"OFF\n99999999999 4 0\n", "at most"),
        ("s.off", b"OFF\n900000 4 0\n0 0 0\n", "too many"),
        ("s.off", b"OFF\nmany few none\n", "OFF"),
        ("s.off", b"OFF\n4 4 0\n0 0 0\n1 0 0\n0 1 0\n0 0 nan\n3 0 1 2\n3 0 1 3\n3 0 2 3\n3 1 2 3\n", "finite"),
        ("s.off", b"OFF\n4 4 0\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n3 0 1 2\n3 0 1 3\n3 0 2 3\n3 1 2 9\n", "faces|cannot"),
        ("s.obj", b"v 0 0 0\nv 1 0 0\nv 0 1 0\nv 0 0 1\n" + b"f 1 2 3\n" * 3 + b"f 1 2 999999999\n", "faces"),
        ("s.obj", b"v 0 0 0\nf 1 1 1\n", "triangle|cannot"),
        ("s.pkl", pickle.dumps(VERTICES), "ending in"),
        ("s.npy", b"", "ending in"),
    ],
)
def test_lying_meshes(tmp_path, name, content, words):
    path = tmp_path / name
    path.write_bytes(content)
    said = one_sentence(read_mesh, path)
    assert any(word in said for word in words.split("|")), said


class Trap:
    def __init__(self, path):
        self.path = path

    def __reduce__(self):
        return os.mkdir, (self.path,)


@pytest.mark.parametrize("name", ["s.gii", "s.ply", "s.stl", "s.off", "s.obj", "s.nii", "s.json"])
def test_a_pickle_under_any_name_is_never_opened(tmp_path, name):
    path = tmp_path / name
    path.write_bytes(pickle.dumps(Trap(str(tmp_path / "sprung"))))
    read = {".nii": read_volume, ".json": lambda p: read_landmarks(p, 1.0)}.get(path.suffix, read_mesh)
    one_sentence(read, path)
    assert not (tmp_path / "sprung").exists()


def test_materials_and_textures_are_not_looked_for(tmp_path, monkeypatch):
    """The reader gets the bytes of the one file, and opens nothing else."""
    write_mesh(tmp_path / "s.obj", VERTICES, FACES)
    plain = read_mesh(tmp_path / "s.obj")
    text = (tmp_path / "s.obj").read_text()
    (tmp_path / "s.obj").write_text(f"mtllib /etc/passwd\nmtllib stolen.mtl\nusemtl a\n{text}")
    (tmp_path / "stolen.mtl").write_text("newmtl a\nmap_Kd /etc/passwd\n")
    opened = []
    real = Path.open
    monkeypatch.setattr(Path, "open", lambda self, *a, **k: (opened.append(self.name), real(self, *a, **k))[1])
    monkeypatch.setattr("builtins.open", lambda file, *a, **k: pytest.fail(f"opened {file}"))
    found = read_mesh(tmp_path / "s.obj")
    assert opened == ["s.obj"]
    np.testing.assert_array_equal(found.vertices, plain.vertices)


def test_a_gzip_bomb_stops_at_the_limit(tmp_path, monkeypatch):
    monkeypatch.setattr("layout.anatomy.untrusted.LARGEST_FILE", 1_000_000)
    monkeypatch.setattr("layout.anatomy.untrusted.read_bytes.__defaults__", (1_000_000,))
    path = tmp_path / "s.gii.gz"
    path.write_bytes(gzip.compress(bytes(200_000_000), 1))
    assert "unpack to at most 1 MB" in one_sentence(read_mesh, path)
    whole = gzip.compress(os.urandom(10_000))
    path.write_bytes(whole[:-4000])
    assert "cut off" in one_sentence(read_mesh, path)


def test_a_large_file_is_not_even_opened(tmp_path):
    path = tmp_path / "s.stl"
    with path.open("wb") as file:
        file.truncate(300_000_000)  # a hole: takes no place on the disk
    assert "at most 250 MB" in one_sentence(read_mesh, path)


def nifti_header(shape, kind=2, offset=352.0, bits=8):
    header = nib.Nifti1Header()
    header.set_data_shape((2, 2, 2))
    header["dim"][: len(shape) + 1] = [len(shape), *shape]
    header["datatype"], header["bitpix"], header["vox_offset"] = kind, bits, offset
    header["magic"] = b"n+1"
    header["srow_x"], header["srow_y"], header["srow_z"] = (1, 0, 0, 0), (0, 1, 0, 0), (0, 0, 1, 0)
    header["sform_code"] = 1
    return header.binaryblock + bytes(4)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (nifti_header((30_000, 30_000, 30_000)), "at most 300,000,000 voxels"),
        (nifti_header((700, 700, 600), 64, bits=64), "voxels"),
        (nifti_header((2, 2, 2, 50)), "three dimensions"),
        (nifti_header((4, 4)), "three dimensions"),
        (nifti_header((2, -2, 2)), "three dimensions"),
        (nifti_header((2, 2, 2), offset=3e38), "begin within"),
        (nifti_header((2, 2, 2), offset=float("nan")), "begin within|cannot"),
        (nifti_header((2, 2, 2), 128, bits=24) + bytes(24), "plain numbers"),
        (nifti_header((20, 20, 20)) + bytes(100), "ends after"),
        (nifti_header((2, 2, 2))[:200], "ends inside"),
        (nifti_header((2, 2, 2), 9999) + bytes(8), "cannot be read"),
        (bytes(1000), "cannot be read"),
    ],
)
@pytest.mark.parametrize("packed", [False, True])
def test_hostile_nifti(tmp_path, content, words, packed):
    path = tmp_path / ("mask.nii.gz" if packed else "mask.nii")
    path.write_bytes(gzip.compress(content) if packed else content)
    said = one_sentence(read_volume, path)
    assert any(word in said for word in words.split("|")), said


def test_a_packed_mask_is_unpacked_no_farther_than_its_header_says(tmp_path):
    small = nifti_header((2, 2, 2)) + bytes(8)
    path = tmp_path / "mask.nii.gz"
    path.write_bytes(gzip.compress(small + bytes(300_000_000), 1))
    assert read_volume(path).values.shape == (2, 2, 2)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ('{"NAS": [0, 1, 2], "LPA": [0, 1], "RPA": [1, 2, 3]}', "LPA must be a list of three numbers"),
        ('{"NAS": [0, 1, 1e999], "LPA": [0, 1, 2], "RPA": [1, 2, 3]}', "NAS must be"),
        ('{"NAS": [0, 1, NaN], "LPA": [0, 1, 2], "RPA": [1, 2, 3]}', "NAS must be"),
        (f'{{"NAS": [0, 1, {"9" * 500}], "LPA": [0, 1, 2], "RPA": [1, 2, 3]}}', "NAS must be"),
        ('{"NAS": [0, 1, 2], "LPA": [0, 1, 2]}', "RPA, but it does not"),
        ("[" * 200_000, "nested too deep"),
        ("[1, 2]", "landmarks by name"),
        ("{", "cannot be read"),
        ('{"AnatomicalLandmarkCoordinates": {}, "AnatomicalLandmarkCoordinateUnits": "ell"}', '"m", "cm" or "mm"'),
    ],
)
def test_bad_landmarks(tmp_path, content, words):
    path = tmp_path / "landmarks.json"
    path.write_text(content)
    assert words in one_sentence(lambda p: read_landmarks(p, 1.0), path)


@pytest.mark.parametrize("bad", [len(VERTICES), -1, 2**31 - 1])
def test_faces_of_vertices_that_are_not_there(tmp_path, bad):
    faces = FACES.copy()
    faces[3, 1] = bad
    write_mesh(tmp_path / "s.gii", VERTICES, faces)
    assert "faces must name the 42 vertices" in one_sentence(read_mesh, tmp_path / "s.gii")


def test_missing_and_odd_files(tmp_path):
    assert "there is none" in one_sentence(read_mesh, tmp_path / "no.gii")
    (tmp_path / "folder.gii").mkdir()
    assert "there is none" in one_sentence(read_mesh, tmp_path / "folder.gii")
    os.mkfifo(tmp_path / "pipe.stl")
    assert "there is none" in one_sentence(read_mesh, tmp_path / "pipe.stl")


def test_labels_of_the_wrong_kind(tmp_path):
    write_mesh(tmp_path / "surface.gii", VERTICES, FACES)
    assert "one number for each vertex" in one_sentence(read_gifti_values, tmp_path / "surface.gii")
    write_labels(tmp_path / "good.gii", range(42), ("none", "one"))
    values, names = read_gifti_values(tmp_path / "good.gii")
    assert values.tolist() == list(range(42))
    assert names == {0: "none", 1: "one"}


@pytest.mark.slow
def test_all_hostile_files_within_a_gigabyte(tmp_path):
    """The same checks in a process that may not have more than 1.5 GB of address space above its imports."""
    script = (
        "import resource, sys, pytest\n"
        "import nibabel, trimesh, numpy, scipy.ndimage\n"
        "used = int(open('/proc/self/statm').read().split()[0]) * resource.getpagesize()\n"
        "resource.setrlimit(resource.RLIMIT_AS, (used + 1_500_000_000,) * 2)\n"
        f"sys.exit(pytest.main([{str(__file__)!r}, '-q', '-n', '0', '-p', 'no:cacheprovider', '-m', 'not slow']))\n"
    )
    run = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert run.returncode == 0, run.stdout[-2000:]
