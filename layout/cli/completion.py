"""`layout completion`."""

from __future__ import annotations

import click
from click.shell_completion import get_completion_class

SHELLS = ("bash", "zsh", "fish")


@click.command()
@click.argument("shell", type=click.Choice(SHELLS))
@click.pass_context
def completion(ctx: click.Context, shell: str) -> None:
    """Print the lines that let SHELL complete commands, options and brief files; SHELL is bash, zsh or fish.

    \b
    bash, in ~/.bashrc:   eval "$(layout completion bash)"
    zsh, in ~/.zshrc:     eval "$(layout completion zsh)"
    fish:   layout completion fish > ~/.config/fish/completions/layout.fish

    \b
    Example: layout completion bash
    """
    root = ctx.find_root()
    script = get_completion_class(shell)(root.command, {}, "layout", "_LAYOUT_COMPLETE")
    click.echo(script.source())
