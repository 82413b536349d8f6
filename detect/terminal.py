"""What the commands show: plain tables on stdout, progress and troubles on stderr."""

from __future__ import annotations

import shlex
import sys
from collections.abc import Iterator, Sequence
from contextlib import ExitStack, contextmanager
from pathlib import Path

import typer

from detect.batch import Failure, Progress


def show_table(header: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Print a table with aligned columns, numbers to the right, or nothing without rows.

    Parameters
    ----------
    header : sequence of str
        Names of the columns.
    rows : sequence of sequences of str
        Cells as they shall appear.
    """
    if not rows:
        return
    columns = list(zip(header, *rows, strict=True))
    widths = [max(map(len, column)) for column in columns]
    right = [all(_is_number(cell) for cell in column[1:]) for column in columns]
    for row in (header, *rows):
        cells = [
            cell.rjust(width) if number else cell.ljust(width)
            for cell, width, number in zip(row, widths, right, strict=True)
        ]
        typer.echo("  ".join(cells).rstrip())


def show_path(label: str, path: Path) -> None:
    """Print where something was written."""
    typer.echo(f"{label}: {path}")


def quoted(path: Path) -> str:
    """Return a path as it can be typed after a command."""
    return shlex.quote(str(path))


def show_failures(failures: Sequence[Failure]) -> None:
    """Print one line on stderr for each photograph that could not be done."""
    for failure in failures:
        typer.echo(f"{failure.name}: {failure.reason}", err=True)


def exit_if_failed(failures: Sequence[Failure], total: int) -> None:
    """End the command with exit code 1 if some could not be done, 2 if the request is to blame.

    Parameters
    ----------
    failures : sequence of Failure
        Those that could not be done.
    total : int
        How many were asked for.
    """
    if failures:
        blamed = len(failures) == total and all(failure.request_wrong for failure in failures)
        raise typer.Exit(2 if blamed else 1)


@contextmanager
def progress_on_terminal(what: str, total: int) -> Iterator[Progress | None]:
    """Give a callback that draws a bar, or None where nobody watches or there is only one."""
    if total < 2 or not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeRemainingColumn
    from rich.progress import Progress as Bar

    columns = (TextColumn(what), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Bar(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(what, total=total)

        def advance(done: int, total: int) -> None:
            bar.update(task, completed=done, total=total)

        yield advance


@contextmanager
def tiles_on_terminal(what: str) -> Iterator[Progress | None]:
    """Give a callback that draws a bar from its first call on, or None where nobody watches."""
    with ExitStack() as stack:
        drawn: list[Progress | None] = []

        def advance(done: int, total: int) -> None:
            if not drawn:
                drawn.append(stack.enter_context(progress_on_terminal(what, total)))
            if drawn[0] is not None:
                drawn[0](done, total)

        yield advance if sys.stderr.isatty() else None


def number_text(value: float | None, digits: int = 3) -> str:
    """Return a number for a table with about `digits` significant digits, a dash for none."""
    if value is None or value != value:
        return "-"
    text = f"{value:.{digits}g}"
    return f"{value:.0f}" if "e" in text and abs(value) >= 1 else text


def _is_number(cell: str) -> bool:
    """Tell whether a cell is a number or stands for none."""
    return cell in ("", "-") or cell.lstrip("+-< ").replace(".", "", 1).replace("e-", "").isdigit()
