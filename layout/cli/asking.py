"""The questions of `layout new` on a terminal, on standard error: standard output is for the result."""

from __future__ import annotations

import sys
from collections.abc import Callable
from typing import TYPE_CHECKING, TypeVar

import click

from layout.errors import LayoutError

if TYPE_CHECKING:
    from layout.brief.starter import Answers

Answer = TypeVar("Answer")


def on_a_terminal() -> bool:
    """Whether somebody can be asked."""
    return sys.stdin.isatty() and sys.stderr.isatty()


def ask_kind() -> Answers:
    """Ask what kind of study it is; the usual answers of that kind."""
    from layout.brief.starter import STARTER_KINDS
    from layout.brief.starter_questions import KIND_HINT, KIND_WORDS, read_kind

    click.echo("A few questions; Enter takes the answer in brackets, Ctrl-C stops.\n", err=True)
    return _asked(KIND_WORDS, KIND_HINT, STARTER_KINDS[0], read_kind)


def ask_rest(usual: Answers) -> Answers:
    """Ask everything else, one question after the other."""
    from layout.brief.starter_questions import QUESTIONS

    answers = usual
    for question in QUESTIONS:
        if question.asked(answers):

            def take(text: str, before: Answers = answers, read: Callable = question.read) -> Answers:
                return _with_cortex(read(text, before), before)

            answers = _asked(question.words(answers), question.hint(answers), question.usual(answers), take)
    return answers


def _with_cortex(answers: Answers, before: Answers) -> Answers:
    """The answers; raises BriefError where a region just given by coordinates lies off the cortex."""
    from layout.brief.starter_questions import by_coordinates

    if answers.regions != before.regions:
        for place in by_coordinates(answers):
            from layout.design.region_reach import check_near_cortex  # takes a second: only where it is needed

            check_near_cortex(place.centre, place.side)
    return answers


def _asked(words: str, hint: str, usual: str, read: Callable[[str], Answer]) -> Answer:
    click.echo(click.wrap_text(f"{words}? ({hint})", width=_width()), err=True)
    while True:
        try:
            return read(_line(f"[{usual}] > ").strip() or usual)
        except LayoutError as problem:
            click.echo(click.wrap_text(str(problem), width=_width()), err=True)


def _line(prompt: str) -> str:
    """One line from the terminal. The prompt goes through `input` only where that does not write to a redirected
    standard output, since line editing needs to know it.
    """
    try:
        if sys.stdout.isatty():
            return input(prompt)
        click.echo(prompt, nl=False, err=True)
        return input()
    except EOFError:
        raise KeyboardInterrupt from None


def _width() -> int:
    import shutil

    return min(shutil.get_terminal_size().columns, 100) - 1
