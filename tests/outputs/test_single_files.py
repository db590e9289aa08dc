"""Pictures and starter files: whole or not there."""

import pytest

from layout.errors import FileError
from layout.outputs import writer
from layout.outputs.pictures.figure import Picture
from layout.outputs.writer import write_new_text, write_picture

PICTURE = Picture(b"png", b"svg")


def _everything(folder):
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*"))


def test_a_picture_comes_in_both_forms_and_replaces_the_last(tmp_path):
    place = tmp_path / "deep" / "head.v1.png"
    write_picture(Picture(b"old", b"old"), place)
    assert write_picture(PICTURE, place) == place
    assert _everything(tmp_path) == ["deep", "deep/head.v1.png", "deep/head.v1.svg"]
    assert place.read_bytes() == b"png"
    assert place.with_suffix(".svg").read_bytes() == b"svg"


@pytest.mark.parametrize("problem", [KeyboardInterrupt(), OSError(28, "No space left")])
def test_a_picture_is_never_half_written(tmp_path, monkeypatch, problem):
    write = writer._write

    def fail(path, content):
        write(path, content[:1])
        if content == b"svg":
            raise problem

    monkeypatch.setattr(writer, "_write", fail)
    with pytest.raises(FileError if isinstance(problem, OSError) else KeyboardInterrupt):
        write_picture(PICTURE, tmp_path / "new" / "head.png")
    assert _everything(tmp_path) == []


def test_pictures_of_other_names_are_refused(tmp_path):
    (tmp_path / "folder.png").mkdir()
    for name, words in {"head.jpg": r"ends in \.png", "head": r"ends in \.png", "folder.png": "is a folder"}.items():
        with pytest.raises(FileError, match=words):
            write_picture(PICTURE, tmp_path / name)
    assert _everything(tmp_path) == ["folder.png"]


def test_new_text_is_written_once(tmp_path):
    place = tmp_path / "brief.toml"
    assert write_new_text("µ\n", place) == place
    assert place.read_bytes() == "µ\n".encode()
    with pytest.raises(FileError, match="must not exist yet"):
        write_new_text("other", place)
    assert place.read_bytes() == "µ\n".encode()


@pytest.mark.parametrize("name", ["none/brief.toml", "a" * 300, "nul\0"])
def test_new_text_where_nothing_can_be(tmp_path, name):
    with pytest.raises(FileError, match="cannot be written"):
        write_new_text("text", tmp_path / name)
    assert _everything(tmp_path) == []


def test_new_text_is_whole_or_not_there(tmp_path):
    with pytest.raises(UnicodeEncodeError):
        write_new_text("fine so far \ud800", tmp_path / "brief.toml")
    assert _everything(tmp_path) == []
