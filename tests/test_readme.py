"""The README keeps its word: its commands exist, and what it shows is what was kept."""

import re
from pathlib import Path

import pytest
from bench.readme_parts import PARTS, part_in, with_part

ROOT = Path(__file__).parent.parent
TEXT = (ROOT / "README.md").read_text(encoding="utf-8")
SHELL = re.findall(r"^```sh\n(.*?)^```", TEXT, re.MULTILINE | re.DOTALL)


def test_the_first_block_designs_a_brief_that_is_there():
    (brief,) = re.findall(r"\blayout design (\S+)", SHELL[0])
    assert (ROOT / brief).is_file()


def test_the_test_command_is_the_one_that_continuous_integration_runs():
    (command,) = (line for line in SHELL[1].splitlines() if line)
    assert command == "python -m pytest -q"
    assert command in (ROOT / ".ci" / "run").read_text().splitlines()


def test_the_engine_example_prints_what_it_says(capsys):
    (code,) = re.findall(r"^```python\n(.*?)^```", TEXT, re.MULTILINE | re.DOTALL)
    assert len(code.splitlines()) <= 12
    exec(compile(code, "README.md", "exec"), {})
    printed = capsys.readouterr().out.strip()
    assert code.splitlines()[-1] == f"# {printed}"


def test_every_file_it_points_to_is_there():
    links = re.findall(r"\]\(([^)#:]+)\)", TEXT)
    assert links
    assert [link for link in links if not (ROOT / link).exists()] == []


@pytest.mark.parametrize("name", PARTS)
def test_nothing_made_is_stale(name):
    """If this fails: python tests/bench/readme_parts.py."""
    assert part_in(TEXT, name) == PARTS[name]()


def test_the_generator_changes_its_own_part_only():
    text = "a\n<!-- one -->\nold\n<!-- /one -->\nb <!-- two -->x<!-- /two -->\n"
    changed = with_part(text, "one", "new\nlines")
    assert changed == text.replace("old", "new\nlines")
    assert (part_in(changed, "one"), part_in(changed, "two")) == ("new\nlines", "x")
    assert with_part(changed, "one", "new\nlines") == changed
    for broken in (text.replace("<!-- /one -->", ""), text + text):
        with pytest.raises(ValueError, match="once each"):
            with_part(broken, "one", "new")
