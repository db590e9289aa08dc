"""What a shell may fill in: brief files and kinds of starter briefs."""

from __future__ import annotations

import re
from pathlib import Path

import click
from click.shell_completion import CompletionItem

PLAIN = re.compile(r"[\w./+-]*")  # what a shell takes without quotes


def brief_files(context: click.Context, parameter: click.Parameter, begun: str) -> list[CompletionItem]:
    """The .toml files that go on from what is typed; any file where folders do too, or where names need quotes."""
    folder = Path(begun) if begun.endswith("/") else Path(begun).parent
    try:
        there = sorted(one for one in folder.expanduser().iterdir() if not one.name.startswith("."))
    except OSError:
        there = []
    ahead = "" if "/" not in begun else begun[: begun.rindex("/") + 1]
    names = {ahead + one.name: one for one in there if (ahead + one.name).startswith(begun)}
    briefs = [name for name, one in names.items() if one.suffix == ".toml" and one.is_file()]
    if not briefs or any(one.is_dir() for one in names.values()) or not all(map(PLAIN.fullmatch, briefs)):
        return [CompletionItem(begun, type="file")]
    return [CompletionItem(name) for name in briefs]


def starter_kinds(context: click.Context, parameter: click.Parameter, begun: str) -> list[CompletionItem]:
    """The kinds of starter briefs."""
    from layout.brief.starter import STARTER_KINDS

    return [CompletionItem(kind) for kind in STARTER_KINDS if kind.startswith(begun)]


brief_argument = click.argument("brief", type=click.Path(path_type=Path), shell_complete=brief_files)
