"""Reading a brief from a file; every way it can go wrong is one sentence."""

from __future__ import annotations

import hashlib
import tomllib
from pathlib import Path

from pydantic import ValidationError

from layout.brief.build import build_brief
from layout.brief.build_own_head import HEAD_FILES
from layout.brief.messages import first_refusal, shown, where
from layout.brief.objects import Brief
from layout.brief.schema import SCHEMA_VERSION, BriefForm
from layout.brief.schema_regions import REGION_FILES
from layout.errors import BriefError

LARGEST_FILE = 1_000_000  # bytes


def load_brief(path: Path | str) -> Brief:
    """The brief in the TOML file at `path`, checked as far as it can be without building the head.

    Raises BriefError with one sentence naming the key (or the file), the rule and the value. The files a
    brief names must exist; their contents are not looked at.
    """
    path = Path(path)
    content = read_bytes(path)
    raw = parsed_toml(content, path)
    form = _checked(raw, path)
    brief = build_brief(form, hashlib.sha256(content).hexdigest(), path.parent.resolve())
    _check_files(brief, raw, path)
    return brief


def refusal(path: Path, said: str) -> BriefError:
    """The error of a file in one sentence."""
    sentence = f"{path}: {said}."
    return BriefError("".join(c if c.isprintable() else " " for c in sentence))


def read_bytes(path: Path, what: str = "the brief") -> bytes:
    """The file's bytes; BriefError where there is none, or it is empty or too large. what: as errors call it."""
    try:
        if path.is_dir():
            raise refusal(path, f"{what} must be a file, not a folder")
        if not path.exists():
            raise refusal(path, f"{what} must be a file that exists, and there is none of this name")
        if not path.is_file():
            raise refusal(path, f"{what} must be an ordinary file")
        with path.open("rb") as file:
            content = file.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise refusal(path, f"{what} cannot be read ({reason.lower()})") from None
    if not content.strip():
        raise refusal(path, f"{what} must not be empty, and it holds nothing in {len(content)} bytes")
    if len(content) > LARGEST_FILE:
        raise refusal(path, f"{what} must be at most {LARGEST_FILE} bytes, and it is larger")
    return content


def parsed_toml(content: bytes, path: Path, what: str = "the brief") -> dict:
    """What these bytes say; BriefError where they are no TOML."""
    try:
        text = content.decode("utf-8-sig")  # some editors put a byte order mark in front
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        byte = content[error.start]
        raise refusal(path, f"{what} must be UTF-8 text, and line {line} holds the byte 0x{byte:02x}") from None
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise refusal(path, f"{what} must not nest lists and tables hundreds deep") from None
    except tomllib.TOMLDecodeError as error:
        raise refusal(path, f"{what} must be valid TOML, but holds this: {str(error)[:200]}") from None
    except ValueError:  # Python reads no whole number of more than some thousand digits
        raise refusal(path, f"{what} must not hold whole numbers of thousands of digits") from None


def _checked(raw: dict, path: Path) -> BriefForm:
    version = raw.get("schema")
    if type(version) is not int or version != SCHEMA_VERSION:  # before all else: another version has other keys
        given = "it is missing" if version is None else f"{shown(version)} was given"
        raise refusal(path, f"schema must be {SCHEMA_VERSION}, the version of brief read here, but {given}")
    try:
        return BriefForm.model_validate(raw)
    except ValidationError as error:
        raise refusal(path, first_refusal(error, raw)) from None


def _check_files(brief: Brief, raw: dict, path: Path) -> None:
    for i, entry in enumerate(brief.stock):
        for key in ("electrodes_tsv", "slots_csv"):
            named = getattr(entry.sites, key)
            if named is not None and not is_file(named):
                given = shown(raw["stock"][i]["sites"][key])
                place = where(("stock", i, "sites", key), raw)
                raise refusal(path, f"{place} must be a file that exists (seen from the brief), but {given} was given")
    named = [("head", key) for key in HEAD_FILES if key in raw["head"]]
    named += [("regions", i, key) for i, one in enumerate(raw["regions"]) for key in REGION_FILES if key in one]
    for place in named:
        table = raw["head"] if place[0] == "head" else raw["regions"][place[1]]
        if not is_file(brief.folder / table[place[-1]]):
            rule = "must be a file that exists (seen from the brief)"
            raise refusal(path, f"{where(place, raw)} {rule}, but {shown(table[place[-1]])} was given")
    for key in ("file", "electrodes_tsv"):
        one = getattr(brief.noise.recording, key, None)
        if one is not None and not is_file(one):
            given = shown(raw["noise"]["recording"][key])
            rule = "must be a file that exists (seen from the brief)"
            raise refusal(path, f"noise.recording.{key} {rule}, but {given} was given")
    layout = brief.existing.layout_tsv if brief.existing is not None else None
    if layout is not None and not is_file(layout):
        given = shown(raw["existing"]["layout_tsv"])
        rule = "must be a file that exists (seen from the brief)"
        raise refusal(path, f"existing.layout_tsv {rule}, but {given} was given")


def is_file(path: Path) -> bool:
    """Whether there is such a file that can be looked at."""
    try:
        return path.is_file()
    except OSError:  # a name too long for the system, a folder that may not be entered
        return False
