"""The command line: each command opens, calls one function of the library and prints. Heavy imports wait until used."""

from __future__ import annotations

import sys

import click

from layout import __version__
from layout.cli.assess import assess
from layout.cli.check import check
from layout.cli.completion import completion
from layout.cli.curve import curve
from layout.cli.design import design
from layout.cli.lead_field import lead_field
from layout.cli.many import many
from layout.cli.new import new
from layout.cli.noise import noise
from layout.cli.placement import placement
from layout.cli.shared import Commands
from layout.cli.simulate import simulate

COMMANDS = (
    assess,
    check,
    completion,
    curve,
    design,
    lead_field,
    many,
    new,
    noise,
    placement,
    simulate,
)


@click.group(cls=Commands, invoke_without_command=True, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="layout")
@click.pass_context
def cli(ctx: click.Context) -> None:
    """Choose where EEG electrodes and on-scalp magnetometers go, and prove how good the choice is.

    \b
    Example: layout design configs/readme.toml
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())


for command in COMMANDS:
    cli.add_command(command)


def main() -> None:
    """The `layout` command."""
    for stream in (sys.stdout, sys.stderr):
        stream.reconfigure(errors="replace")  # a terminal without µ or ² shows ? instead of a traceback
    cli(prog_name="layout")
