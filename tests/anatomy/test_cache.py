"""The head cache: what goes in comes out, and nothing damaged ever does."""

import os
import subprocess
import sys
from dataclasses import fields, is_dataclass

import numpy as np
import pytest
from built_heads import sphere, template

from layout.anatomy import build, cache, template_recipe
from layout.brief.objects import HeadBrief
from layout.errors import BriefError


@pytest.fixture
def folder(tmp_path, monkeypatch):
    monkeypatch.setenv(cache.FOLDER_VARIABLE, str(tmp_path / "kept"))
    return tmp_path / "kept"


class Builder:
    """Gives one head and counts how often it was asked."""

    def __init__(self, head):
        self.head, self.calls = head, 0

    def __call__(self):
        self.calls += 1
        return self.head


def assert_same(a, b):
    assert type(a) is type(b)
    if is_dataclass(a):
        for field in fields(a):
            assert_same(getattr(a, field.name), getattr(b, field.name))
    elif isinstance(a, tuple):
        assert len(a) == len(b)
        for x, y in zip(a, b, strict=True):
            assert_same(x, y)
    elif isinstance(a, np.ndarray):
        assert a.dtype == b.dtype
        np.testing.assert_array_equal(a, b)
    else:
        assert a == b


@pytest.mark.parametrize("kind", [template, sphere])
def test_a_head_comes_back_as_it_was(folder, kind):
    builder = Builder(kind("coarse"))
    first = cache.load_or_build("head", builder)
    second = cache.load_or_build("head", builder)
    assert builder.calls == 1
    assert first is builder.head
    assert_same(first, second)
    assert [p.name for p in folder.iterdir()] == ["head.npz"]


def flipped(data):
    middle = len(data) // 2
    return data[:middle] + bytes([data[middle] ^ 1]) + data[middle + 1 :]


@pytest.mark.parametrize(
    "damage",
    [flipped, lambda d: d[: len(d) // 2], lambda d: b"", lambda d: b"not a file of arrays"],
    ids=["one bit", "cut off", "empty", "other"],
)
def test_a_damaged_file_is_built_anew_and_mended(folder, damage):
    builder = Builder(sphere("coarse"))
    cache.load_or_build("head", builder)
    path = folder / "head.npz"
    whole = path.read_bytes()
    path.write_bytes(damage(whole))
    assert_same(cache.load_or_build("head", builder), builder.head)
    assert builder.calls == 2
    cache.load_or_build("head", builder)
    assert builder.calls == 2


def test_a_file_whose_checksums_hold_but_whose_content_changed_is_refused(folder):
    """Someone repacked the arrays: the archive is sound, the digest is not."""
    builder = Builder(sphere("coarse"))
    cache.load_or_build("head", builder)
    path = folder / "head.npz"
    with np.load(path) as file:
        arrays = dict(file)
    arrays["eyes"] = arrays["eyes"] * 1.01
    np.savez(path, **arrays)
    assert_same(cache.load_or_build("head", builder), builder.head)
    assert builder.calls == 2


def test_a_pickle_is_never_opened(folder):
    class Trap:
        def __reduce__(self):
            return os.mkdir, (str(folder / "sprung"),)

    folder.mkdir()
    np.savez(folder / "head.npz", digest=np.array([Trap()], dtype=object))
    cache.load_or_build("head", Builder(sphere("coarse")))
    assert not (folder / "sprung").exists()


def test_an_unwritable_folder_is_no_error(tmp_path, monkeypatch):
    """A file stands where the folder should be (a folder without write permission stops no superuser)."""
    (tmp_path / "kept").write_text("in the way")
    monkeypatch.setenv(cache.FOLDER_VARIABLE, str(tmp_path / "kept"))
    builder = Builder(sphere("coarse"))
    assert cache.load_or_build("head", builder) is builder.head
    assert (tmp_path / "kept").read_text() == "in the way"


def test_a_write_that_fails_leaves_nothing(folder, monkeypatch):
    def fail(*args, **kw):
        raise OSError("no space left on device")

    monkeypatch.setattr(cache.np, "savez", fail)
    builder = Builder(sphere("coarse"))
    assert cache.load_or_build("head", builder) is builder.head
    assert list(folder.iterdir()) == []


def test_another_recipe_version_is_built_anew(folder, monkeypatch):
    calls = []

    def counted(mesh):
        calls.append(mesh)
        return template(mesh)

    monkeypatch.setattr(build, "build_template", counted)
    brief = HeadBrief("template", (0.33, 0.0165, 0.33), "coarse")
    build.build_head(brief)
    build.build_head(brief)
    assert calls == ["coarse"]
    monkeypatch.setattr(template_recipe, "VERSION", template_recipe.VERSION + 1)
    build.build_head(brief)
    assert calls == ["coarse", "coarse"]


def test_sphere_needs_its_sizes():
    with pytest.raises(BriefError, match=r"^head\.radii_mm must be given"):
        build.build_head(HeadBrief("sphere", (0.33, 0.0165, 0.33)))
    with pytest.raises(BriefError, match=r"^head\.cortex_depth_mm must be given"):
        build.build_head(HeadBrief("sphere", (0.33, 0.0165, 0.33), radii=(0.08, 0.085, 0.092)))


@pytest.mark.slow
def test_cold_and_warm_start_agree_and_nilearn_is_not_imported(tmp_path):
    """Two fresh processes with one fresh cache folder give one head, and neither imports nilearn itself."""
    script = (
        "import sys, hashlib\n"
        "from layout.anatomy.build import build_head\n"
        "from layout.brief.objects import HeadBrief\n"
        "head = build_head(HeadBrief('template', (0.33, 0.0165, 0.33)))\n"
        "assert 'nilearn' not in sys.modules\n"
        "print(hashlib.sha256(head.scalp.vertices.tobytes() + head.cortex.positions.tobytes()).hexdigest())\n"
    )
    environment = {**os.environ, cache.FOLDER_VARIABLE: str(tmp_path)}
    runs = [
        subprocess.run([sys.executable, "-c", script], env=environment, capture_output=True, text=True, check=True)
        for _ in range(2)
    ]
    assert runs[0].stdout == runs[1].stdout
    assert len(list(tmp_path.glob("template-standard-*.npz"))) == 1
