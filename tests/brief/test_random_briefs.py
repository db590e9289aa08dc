"""Whatever is done to a brief, loading it gives a Brief or a BriefError of one sentence."""

import tempfile
from pathlib import Path

from good_brief import GOOD_BRIEF
from hypothesis import given, settings
from hypothesis import strategies as st
from rich_brief import RICH_BRIEF

from layout.brief.objects import Brief
from layout.brief.parse import load_brief
from layout.errors import BriefError

LINES = GOOD_BRIEF.splitlines()
RICH_LINES = RICH_BRIEF.splitlines()
VALUES = st.sampled_from(
    [
        "0",
        "-1",
        "1",
        "2",
        "1e400",
        "-1e400",
        "nan",
        "inf",
        "-inf",
        "1e308",
        "9223372036854775807",
        "true",
        "false",
        '""',
        '"any"',
        '"eyes"',
        '"10-10"',
        '"a\\u0000b"',
        "[]",
        "[[]]",
        "[1]",
        "[1,2]",
        "[1,2,3]",
        '["Cz"]',
        "[[1,0,0],[0,1,0],[0,0,1]]",
        '["Cz",[1,2,3],[1,2]]',
        "{left=1}",
        '{shape="housing"}',
        "[{}]",
        "{}",
        "{a=1}",
        '{kind="electrode"}',
        "{family=1}",
        "2024-01-01",
        "12:00:00",
        "0x10",
        "1_0",
        '"\u2028"',
        '"\U0001f9e0"',
    ]
)
ALL_LINES = LINES + RICH_LINES
KEYS = sorted({line.split(" = ")[0] for line in ALL_LINES if " = " in line} | {"x", "''", '"\\n"', "a.b", "kind.x"})
TABLES = sorted({line for line in ALL_LINES if line.startswith("[")} | {"[stock]", "[regions]", "[[head]]", "[x]"})
LINE = st.one_of(
    st.sampled_from(LINES),
    st.sampled_from(TABLES),
    st.builds("{} = {}".format, st.sampled_from(KEYS), VALUES),
    st.text(max_size=20),
)
EDIT = st.tuples(st.integers(0, len(LINES)), st.integers(0, 3), st.lists(LINE, max_size=2))


def assert_brief_or_one_sentence(content):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "study.toml"
        path.write_bytes(content)
        try:
            brief = load_brief(path)
        except BriefError as refusal:
            message = str(refusal)
            assert message.isprintable()
            assert message.endswith(".")
            assert len(message) < 2000
        else:
            assert isinstance(brief, Brief)


@settings(max_examples=400, deadline=None)
@given(st.lists(EDIT, min_size=1, max_size=4))
def test_lines_changed_at_random(edits):
    lines = list(LINES)
    for place, removed, added in edits:
        lines[place : place + removed] = added
    assert_brief_or_one_sentence("\n".join(lines).encode())


@settings(max_examples=400, deadline=None)
@given(st.sampled_from([i for i, line in enumerate(LINES) if " = " in line]), VALUES)
def test_one_value_changed_at_random(i, value):
    key = LINES[i].split(" = ")[0]
    assert_brief_or_one_sentence("\n".join([*LINES[:i], f"{key} = {value}", *LINES[i + 1 :]]).encode())


@settings(max_examples=400, deadline=None)
@given(st.sampled_from([i for i, line in enumerate(RICH_LINES) if " = " in line]), VALUES)
def test_one_value_of_a_rich_brief_changed_at_random(i, value):
    key = RICH_LINES[i].split(" = ")[0]
    text = "\n".join([*RICH_LINES[:i], f"{key} = {value}", *RICH_LINES[i + 1 :]])
    assert_brief_or_one_sentence(text.encode())


@settings(max_examples=100, deadline=None)
@given(st.integers(0, len(GOOD_BRIEF)), st.binary(max_size=6), st.integers(0, 10))
def test_bytes_changed_at_random(place, added, removed):
    content = GOOD_BRIEF.encode()
    assert_brief_or_one_sentence(content[:place] + added + content[place + removed :])


def test_very_deep_tables():
    for text in (
        "x = " + "[" * 900,
        "a." * 2_000 + "a = 1",
        "[" + "a." * 2_000 + "a]",
        "x = " + "{a=" * 900,
    ):
        assert_brief_or_one_sentence(f"schema = 1\n{text}\n".encode())
        assert_brief_or_one_sentence(f"{GOOD_BRIEF}\n{text}\n".encode())
    nested = "x = " + "[" * 300 + "]" * 300
    assert_brief_or_one_sentence(f"{GOOD_BRIEF}\n{nested}\n".encode())
