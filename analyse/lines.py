"""What `analyse` and `survey` show on the terminal: a line per photograph, and reasons for care."""

from __future__ import annotations

from collections.abc import Sequence

import typer

from analyse.findings import Findings
from analyse.verdict import p_text
from detect.terminal import number_text, show_table

_HEADER = ("photograph", "count", "per cm2", "VMR", "X2/df", "p", "verdict")


def show_findings(findings: Sequence[Findings]) -> None:
    """Print a line per photograph or table on stdout, and reasons for care on stderr.

    Parameters
    ----------
    findings : sequence of Findings
        In order.
    """
    show_table(_HEADER, [_line(each) for each in findings])
    typer.echo(
        "VMR is of whole quadrats; X2/df, p (two-sided, simulated) and verdict are of all"
        " quadrats by area."
    )
    for note in _notes(findings):
        typer.echo(f"Note: {note}", err=True)


def _line(each: Findings) -> tuple[str, ...]:
    """Return the cells of one photograph."""
    whole = each.dispersion_whole
    density = "no scale" if each.unit == "px" else "-"
    return (
        each.name,
        str(each.n),
        number_text(each.density.value) if each.density is not None else density,
        number_text(None if whole is None else whole.vmr),
        number_text(each.dispersion_all.vmr),
        p_text(each.simulated.p_two_sided).removeprefix("p ").removeprefix("= "),
        each.verdict,
    )


def _notes(findings: Sequence[Findings]) -> list[str]:
    """Return reasons for care, each sentence once with the photographs it is about."""
    about: dict[str, list[str]] = {}
    for each in findings:
        for sentence in each.flag_sentences:
            about.setdefault(sentence, []).append(each.name)
    return [
        sentence if len(names) == len(findings) else f"{', '.join(names)}: {sentence}"
        for sentence, names in about.items()
    ]
