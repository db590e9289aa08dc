"""The parts of README.md that are made, not written: kept output, tables of results, help of the commands.

Run `python tests/bench/readme_parts.py` after the benchmarks: it puts each part between its markers, `<!-- name -->`
and `<!-- /name -->`. tests/test_readme.py fails while one of them is stale.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

ROOT = Path(__file__).parents[2]
README = ROOT / "README.md"
RESULTS = ROOT / "results"
WIDTH = 78  # columns of the help on a terminal of 80


def ranking() -> str:
    """What the README's first command prints, up to the noise figures."""
    printed = (RESULTS / "readme" / "terminal.txt").read_text(encoding="utf-8")
    return _fenced(
        printed.split("Noise and model figures", maxsplit=1)[0].rstrip() + "\n[noise figures and notes follow]\n"
    )


def briefs() -> str:
    """The table of all briefs in configs/."""
    return _without_title((RESULTS / "briefs.md").read_text(encoding="utf-8"))


def search() -> str:
    """The table of search and bound alone."""
    return _without_title((RESULTS / "search_and_bound.md").read_text(encoding="utf-8"))


def commands() -> str:
    """The help of `layout` and of each of its commands."""
    from click.testing import CliRunner

    from layout.cli import cli

    def help_of(*words: str) -> str:
        asked = CliRunner().invoke(cli, [*words, "--help"], prog_name="layout", terminal_width=WIDTH)
        return _fenced(f"$ {' '.join(['layout', *words, '--help'])}\n{asked.output}")

    return "\n\n".join([help_of(), *(help_of(name) for name in sorted(cli.commands))])


PARTS: dict[str, Callable[[], str]] = {"ranking": ranking, "briefs": briefs, "search": search, "commands": commands}


def part_in(text: str, name: str) -> str:
    """What stands between the markers of a part. Raises ValueError unless each marker is there once, in order."""
    start, end = f"<!-- {name} -->", f"<!-- /{name} -->"
    if (text.count(start), text.count(end)) != (1, 1) or text.index(end) < text.index(start):
        raise ValueError(f"README.md: must hold {start} and {end} once each, in this order")
    return text[text.index(start) + len(start) : text.index(end)].strip("\n")


def with_part(text: str, name: str, part: str) -> str:
    """The text with another part between the markers."""
    part_in(text, name)
    before, rest = text.split(f"<!-- {name} -->")
    after = rest.split(f"<!-- /{name} -->")[1]
    return f"{before}<!-- {name} -->\n{part}\n<!-- /{name} -->{after}"


def _fenced(text: str) -> str:
    return f"```text\n{text.strip()}\n```"


def _without_title(text: str) -> str:
    return text.split("\n", 1)[1].strip()


def main() -> None:
    """Refresh README.md."""
    text = README.read_text(encoding="utf-8")
    for name, make in PARTS.items():
        text = with_part(text, name, make())
    README.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main()
