"""What a command is doing and how long it still takes, on a terminal only; and Ctrl-C, which always stops it."""

from __future__ import annotations

import signal
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager

from layout.cli.course import Meter, Stage, in_words


@contextmanager
def progress_shown(stages: Sequence[Stage] = (), quiet: bool = False) -> Iterator[Callable[[str], None]]:
    """A function that shows what is being done, and at which Ctrl-C stops. stages: what the command will say.

    Nothing is shown where standard error is no terminal, a terminal that cannot move its cursor, or `quiet`.
    """
    with _remembered_interrupt() as stop_if_asked, _shown(stages, quiet) as show:

        def progress(doing: str) -> None:
            stop_if_asked()
            show(doing)

        yield progress


@contextmanager
def _remembered_interrupt() -> Iterator[Callable[[], None]]:
    """A function that raises KeyboardInterrupt if Ctrl-C was pressed.

    Some libraries swallow it, in a callback or while they load, and go on with what is then half done; so whatever
    comes of that counts as Ctrl-C, too.
    """
    pressed = []

    def note(number: int, frame: object) -> None:
        pressed.append(number)
        raise KeyboardInterrupt

    def check() -> None:
        if pressed:
            raise KeyboardInterrupt

    before = signal.getsignal(signal.SIGINT)
    if before is not signal.default_int_handler:  # a parent that wants it ignored keeps its way
        yield check
        return
    told = sys.unraisablehook

    def tell(problem: sys.UnraisableHookArgs) -> None:
        if problem.exc_type is not KeyboardInterrupt:  # one swallowed in a callback is remembered, not told
            told(problem)

    signal.signal(signal.SIGINT, note)
    sys.unraisablehook = tell
    try:
        yield check
        check()
    except Exception:
        check()
        raise
    finally:
        sys.unraisablehook = told
        signal.signal(signal.SIGINT, before)


@contextmanager
def _shown(stages: Sequence[Stage], quiet: bool) -> Iterator[Callable[[str], None]]:
    # Not rich's own judgement, which FORCE_COLOR turns: in a pipe a bar is never wanted.
    if quiet or not sys.stderr.isatty():
        yield lambda doing: None
        return
    from rich.console import Console
    from rich.markup import escape
    from rich.progress import Progress, ProgressColumn, SpinnerColumn, Task, TextColumn, TimeElapsedColumn
    from rich.progress_bar import ProgressBar
    from rich.table import Column
    from rich.text import Text

    class Bar(ProgressColumn):
        def render(self, task: Task) -> ProgressBar:
            return ProgressBar(1.0, meter.share(time.monotonic()), width=14, complete_style="cyan")

    class Left(ProgressColumn):
        def render(self, task: Task) -> Text:
            return Text(in_words(meter.left(time.monotonic())))

    meter = Meter(stages, time.monotonic())
    columns = (
        SpinnerColumn(),
        TextColumn("{task.description}", table_column=Column(ratio=1, no_wrap=True, overflow="ellipsis")),
        Bar(),
        TimeElapsedColumn(),
        Left(table_column=Column(width=18, no_wrap=True)),
    )
    with Progress(*columns, console=Console(stderr=True), transient=True, expand=True) as bar:
        task = bar.add_task("starting")

        def show(doing: str) -> None:
            meter.say(doing, time.monotonic())
            bar.update(task, description=escape(doing))

        yield show
