"""What goes to stderr: notes, errors, progress; and the options that every command shares."""

from __future__ import annotations

import os
import sys
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any, TextIO, TypeVar

import click

from smallbody.errors import Note, SmallbodyError
from smallbody.workers import SILENT, Meter

_F = TypeVar("_F", bound=Callable[..., Any])


class Interrupted(SmallbodyError):
    """Ctrl-C, where there is more to say than that."""

    exit_code = 130  # 128 + SIGINT, as shells have it


class Messages:
    """How much to say on stderr, and what has been noted so far.

    loudness : below 0 errors only, 0 notes and progress, above 0 details too
    notes : texts of all notes, each once, shown or not
    """

    def __init__(self) -> None:
        self.loudness = 0
        self.notes: list[str] = []

    def note(self, text: str) -> None:
        """Something worth knowing that stops nothing; said once."""
        text = " ".join(text.split())
        if text not in self.notes:
            self.notes.append(text)
            if self.loudness >= 0:
                click.echo(f"note: {text}", err=True)

    def has_said(self, text: str) -> bool:
        """Whether this has been noted already."""
        return " ".join(text.split()) in self.notes

    def say(self, text: str, loudness: int = 0) -> None:
        """One line, if we are to be at least this loud."""
        if self.loudness >= loudness:
            click.echo(text, err=True)

    def meter(self) -> Meter:
        """A progress bar with time left where somebody is watching a terminal, else silence."""
        return Bar() if self.loudness >= 0 and sys.stderr.isatty() else SILENT


class Bar:
    """A progress bar on stderr, gone when the work is done."""

    def __init__(self) -> None:
        self._progress: Any = None
        self._task: Any = None

    def start(self, task: str, total: int) -> None:
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn

        self.stop()
        self._progress = Progress(
            TextColumn("{task.description}", markup=False),
            BarColumn(),
            TaskProgressColumn(),
            TextColumn("left", style="dim"),
            TimeRemainingColumn(compact=True),
            console=Console(stderr=True),
            transient=True,
        )
        self._task = self._progress.add_task(task or "working", total=max(total, 1))
        self._progress.start()

    def step(self, n: int = 1) -> None:
        if self._progress is not None:
            self._progress.advance(self._task, n)

    def stop(self) -> None:
        if self._progress is not None:
            self._progress.stop()
            self._progress = None


def messages_of(ctx: click.Context) -> Messages:
    """What this run has to say, made at its first mention."""
    return ctx.find_root().ensure_object(Messages)


@contextmanager
def listening(messages: Messages) -> Iterator[None]:
    """Show warnings of category Note as notes, other warnings only to those who want details."""

    def show(
        message: Warning | str,
        category: type[Warning],
        filename: str,
        lineno: int,
        file: TextIO | None = None,
        line: str | None = None,
    ) -> None:
        if issubclass(category, Note):
            messages.note(str(message))
        else:
            messages.say(f"{category.__name__}: {message} ({filename}:{lineno})", 1)

    with warnings.catch_warnings():
        warnings.simplefilter("always", Note)
        warnings.showwarning = show
        yield


def error_lines(error: SmallbodyError) -> list[str]:
    """One line for each fault that the error names."""
    lines = error.details.get("lines") or [str(error)]
    return [" ".join(str(line).split()) for line in lines]


def common(function: _F) -> _F:
    """The options of every command: -v, -q, --threads."""

    def louder(ctx: click.Context, param: click.Parameter, value: int) -> None:
        messages_of(ctx).loudness += value

    def quieter(ctx: click.Context, param: click.Parameter, value: int) -> None:
        messages_of(ctx).loudness -= value

    def threads(ctx: click.Context, param: click.Parameter, value: int | None) -> None:
        if value is not None:
            os.environ["SMALLBODY_THREADS"] = str(value)

    for option in (
        click.option("-q", "--quiet", count=True, expose_value=False, callback=quieter, help="Say errors only."),
        click.option("-v", "--verbose", count=True, expose_value=False, callback=louder, help="Say more."),
        click.option(
            "--threads", type=click.IntRange(1, 1024), metavar="N", expose_value=False, callback=threads,
            help="Threads to work with; else all cores, or what SMALLBODY_THREADS says.",
        ),
    ):  # fmt: skip
        function = option(function)
    return function
