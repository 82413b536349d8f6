"""What `analyse` and `survey` show on the terminal: a line per photograph, and reasons for care."""

from __future__ import annotations

import math
from collections.abc import Sequence

import typer

from analyse.findings import Findings
from analyse.unseen import planted_sentence
from analyse.verdict import p_text
from detect.terminal import number_text, show_table

_HEADER = ("photograph", "count", "per cm2", "VMR", "X2/df", "p", "verdict")

_MOST_NOTES = 6
_MOST_NAMES = 4


def show_findings(findings: Sequence[Findings]) -> None:
    """Print a line per photograph or table on stdout, and reasons for care on stderr.

    Parameters
    ----------
    findings : sequence of Findings
        In order.
    """
    show_table(_HEADER, [_line(each) for each in findings])
    typer.echo(
        "VMR (variance-to-mean ratio) is of whole quadrats; X2/df (the same by area), p (two-sided,"
        " simulated) and verdict are of all. Both ratios are near 1 at random, above it where"
        f" clumped, below it where even; - where none can be given. Seed {findings[0].seed},"
        f" {findings[0].simulated.simulations:,} simulations."
    )
    for line in _planted(findings):
        typer.echo(line)
    for each in findings[:_MOST_NOTES]:
        if each.spot_check is not None:
            typer.echo(f"{each.name}: {each.spot_check.sentence}")
        if each.crowding is not None and each.crowding.by == "holes":
            typer.echo(f"{each.name}: {each.crowding.sentence}")
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
        _p(each.simulated.p_two_sided),
        each.verdict,
    )


def _p(value: float) -> str:
    """Return a p for a table, a dash for none."""
    if math.isnan(value):
        return number_text(None)
    return p_text(value).removeprefix("p ").removeprefix("= ")


def _planted(findings: Sequence[Findings]) -> list[str]:
    """Return what planted objects say of each photograph, or where it stands if of many."""
    said = [(each.name, planted_sentence(each.pattern)) for each in findings]
    told = [f"{name}: {sentence}" for name, sentence in said if sentence]
    if len(told) <= _MOST_NOTES:
        return told
    return [
        f"What planted objects say of {len(told)} photographs stands in the report and summary.csv."
    ]


def _notes(findings: Sequence[Findings]) -> list[str]:
    """Return reasons for care: those of all once, the others by name, or flag by flag if many."""
    about: dict[str, list[str]] = {}
    for each in findings:
        for sentence in each.flag_sentences:
            about.setdefault(sentence, []).append(each.name)
    common = [sentence for sentence, names in about.items() if len(names) == len(findings)]
    single = [
        f"{', '.join(names)}: {sentence}"
        for sentence, names in about.items()
        if sentence not in common
    ]
    if len(single) > _MOST_NOTES:
        single = _by_flag(findings, common)
    return common + single


def _by_flag(findings: Sequence[Findings], common: Sequence[str]) -> list[str]:
    """Return a note per flag with the first names it is raised for; the report has the sentences."""
    about: dict[str, list[str]] = {}
    for each in findings:
        for flag, sentence in zip(each.flags, each.flag_sentences, strict=True):
            if sentence not in common:
                about.setdefault(flag, []).append(each.name)
    return [
        f"{flag.replace('_', ' ')}: {', '.join(names[:_MOST_NAMES])}"
        + (f" and {len(names) - _MOST_NAMES} more" if len(names) > _MOST_NAMES else "")
        for flag, names in about.items()
    ]
