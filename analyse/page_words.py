"""What the report says about one photograph or table: plain texts for the template."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from analyse.curve_words import curves_said
from analyse.look import MOST_COUNTS
from analyse.marks import photograph_inches
from analyse.reviewing import review_sentence
from analyse.trust_words import trust_alt, trust_said
from analyse.unseen import planted_sentence
from analyse.wording import (
    area_words,
    clumped_words,
    density_words,
    frequencies_alt,
    interval,
    law_words,
    marks_words,
    method_words,
    number,
    number_rows,
    p_words,
    plain,
    poisson_words,
    quadrats_words,
    residuals_alt,
    scale_words,
    several,
)

if TYPE_CHECKING:
    from analyse.findings import Findings
    from analyse.verdict import Verdict
    from detect.sheet import Sheet

KINDS: dict[Verdict, str] = {
    "clumped": "clumped",
    "evenly spaced": "evenly-spaced",
    "no departure from random found": "nothing-found",
    "too few to tell": "too-few",
}
_ASKED = {"request": "Asked for", "detector": "Detector", "notes": "Notes on the file"}


def page_words(
    findings: Findings, sheet: Sheet | None, factors: Mapping[str, str]
) -> dict[str, Any]:
    """Return all texts of a page.

    Parameters
    ----------
    findings : Findings
        The numbers.
    sheet : Sheet or None
        Current state of its sheet; None for a table.
    factors : mapping of str to str
        Treatment, block, dilution.

    Returns
    -------
    dict
        Strings, lists of strings and numbers only.
    """
    whole, everything = findings.dispersion_whole, findings.dispersion_all
    return {
        "verdict": findings.verdict,
        "kind": KINDS[findings.verdict],
        "sentence": findings.sentence.replace("X2/df", "X\u00b2/df"),
        "flags": list(findings.flag_sentences),
        "flag_names": ", ".join(flag.replace("_", " ") for flag in findings.flags),
        "unreviewed": "unreviewed" in findings.flags,
        "in_review": "in_review" in findings.flags,
        "review": review_sentence(findings),
        "factors": [(str(name), str(value)) for name, value in factors.items()],
        "row": {
            "count": f"{findings.n:,}",
            "density": number(findings.density.value) if findings.density else number(None),
            "interval": interval(findings.density),
            "vmr": number(whole.vmr if whole else None),
            "ratio": number(everything.vmr),
            "p": p_words(findings.simulated.p_two_sided),
        },
        "facts": _facts(findings, sheet),
        "planted": planted_sentence(findings.pattern),
        "holes": _holes(findings),
        "picture": None if sheet is None else _picture(findings, sheet),
        "numbered": len(findings.counts) <= MOST_COUNTS,
        "points_alt": _points_alt(findings),
        "residuals_alt": residuals_alt(findings),
        "frequencies_alt": frequencies_alt(findings),
        "poisson": " ".join(filter(None, (poisson_words(findings), law_words(findings)))),
        "beside": _beside(findings),
        "curves": curves_said(findings),
        "trust": trust_said(findings),
        "trust_alt": trust_alt(findings),
        "columns": _columns(findings),
        "numbers": number_rows(findings),
        "method": method_words(findings),
        "settings": _settings(findings, sheet),
    }


def _holes(findings: Findings) -> str:
    """Say what filled holes of a sampler's plates come to; empty for anything else."""
    seen = findings.crowding
    return "" if seen is None or seen.by != "holes" else seen.sentence


def _beside(findings: Findings) -> list[str]:
    """Return what is said of gradients, of the order of the counts, and of what would have shown."""
    said = []
    if findings.trend is not None:
        clearest = findings.trend.clearest
        said.append(findings.trend.sentence if clearest is None else clearest.sentence)
    if findings.blocks is not None:
        said.append(findings.blocks.sentence)
    if findings.shown is not None and findings.verdict == "no departure from random found":
        said.append(findings.shown.sentence)
    return [sentence for sentence in said if sentence]


def _facts(findings: Findings, sheet: Sheet | None) -> list[tuple[str, str]]:
    """Return the count, where the spots come from, the area and the density."""
    facts = [("Count", several(findings.n, "spot"))]
    if sheet is not None:
        many = marks_words(sheet)
        if many["placed"] or many["struck"]:
            text = f"{many['found']:,} found and kept, {many['placed']:,} placed by hand"
            facts.append(("Of these", f"{text}; {many['struck']:,} struck"))
    facts.append(("Study area", area_words(findings)))
    facts.append(("Density", density_words(findings)))
    clumped = clumped_words(findings)
    if clumped is not None:
        facts.append(clumped)
    return facts


def _picture(findings: Findings, sheet: Sheet) -> dict[str, Any]:
    """Return size, alternative text and key of the photograph."""
    inches = photograph_inches(sheet.photograph.width, sheet.photograph.height)
    many = marks_words(sheet)
    pattern = findings.pattern
    doubtful = 0 if pattern is None else pattern.doubtful
    key = [
        ("counted", "counted", many["found"] - doubtful),
        ("doubtful", "counted, but more likely false than real", doubtful),
        ("placed", "placed by a person", many["placed"]),
        ("struck", "struck by a person, not counted", many["struck"]),
    ]
    counts = findings.counts.counts
    return {
        "width": round(96 * inches[0]),
        "height": round(96 * inches[1]),
        "alt": f"{findings.name} with {several(findings.n, 'counted spot')}, the study area and"
        f" {several(len(counts), 'quadrat')} holding {counts.min()} to {counts.max()} spots each."
        f" Verdict: {findings.verdict}.",
        "key": [(sign, text, f"{count:,}") for sign, text, count in key if count],
    }


def _points_alt(findings: Findings) -> str:
    """Return what the picture of a table's points shows."""
    counts = findings.counts.counts
    return (
        f"{several(findings.n, 'point')} in the study area and {several(len(counts), 'quadrat')}"
        f" holding {counts.min()} to {counts.max()} each. Verdict: {findings.verdict}."
    )


def _columns(findings: Findings) -> list[str]:
    """Return the heads of the table of numbers."""
    whole, q = findings.dispersion_whole, len(findings.counts)
    if whole is not None and whole.q == q:
        return [f"All {q:,} quadrats, every one whole"]
    return ["Whole quadrats only", f"All {q:,} quadrats, by area"]


def _settings(findings: Findings, sheet: Sheet | None) -> list[tuple[str, str]]:
    """Return everything needed to get the same numbers again."""
    listed = []
    if sheet is not None:
        identity = sheet.photograph
        size = f"{identity.name}, {identity.width:,} \u00d7 {identity.height:,} pixels"
        listed += [
            ("Photograph", size + (f", taken {identity.taken}" if identity.taken else "")),
            ("sha256 of the photograph", identity.sha256),
            ("Scale", scale_words(sheet.scale)),
            ("Study area", f"{sheet.area.kind}: {sheet.area.note}"),
        ]
    elif findings.pattern is not None:
        listed.append(("Study area", f"{findings.pattern.area_kind}, as given"))
    listed += [
        ("Quadrats", quadrats_words(findings)),
        ("Seed; simulations", f"{findings.seed}; {findings.simulated.simulations:,}"),
    ]
    if sheet is not None:
        listed += [
            (title, plain(sheet.settings[name]))
            for name, title in _ASKED.items()
            if sheet.settings.get(name)
        ]
        listed.append(("Detected with version", sheet.tool_version))
    return listed
