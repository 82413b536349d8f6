"""How far to trust a result, each reason in one sentence."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from analyse.reviewing import review_sentence
from analyse.wording import number, percent, several

if TYPE_CHECKING:
    from analyse.draws import UnderDoubt
    from analyse.findings import Findings

_PLANTED = "detect with --planted"


def trust_said(findings: Findings) -> list[tuple[str, str]]:
    """Return what a grower or an auditor should know before relying on a result.

    Parameters
    ----------
    findings : Findings
        Of one photograph or table.

    Returns
    -------
    list of (str, str)
        What each sentence is about, and the sentence; empty without points.
    """
    trust = findings.trust
    if trust is None:
        return []
    said = [("Review", _review(findings))]
    if trust.doubt is not None:
        said += [
            ("False spots", _false(trust.doubt)),
            ("Missed objects", _missed(trust.doubt)),
            ("Neighbours", _blind(findings)),
            ("Count", _count(trust.doubt)),
        ]
    said.append(("Breaking point", trust.breaking.sentence))
    if trust.doubt is not None:
        said.append(("Verdict", _stands(findings, trust.doubt)))
    if trust.look is not None:
        said.append(("Where to look", trust.look.sentence))
    if findings.spot_check is not None:
        said.append(("Spot check", findings.spot_check.sentence))
    if findings.shown is not None:
        said.append(("Power", findings.shown.sentence))
    return [(about, sentence) for about, sentence in said if sentence]


def trust_alt(findings: Findings) -> str:
    """Return what the picture of the section shows, for those who do not see it."""
    doubt = None if findings.trust is None else findings.trust.doubt
    if doubt is None:
        return ""
    shares = "; ".join(f"{name} {percent(share)}" for name, share in doubt.verdicts)
    return (
        f"Counted {doubt.n:,}, with detection error {doubt.count.low:,.0f} to"
        f" {doubt.count.high:,.0f}. Share of {doubt.draws:,} draws with each verdict: {shares}."
    )


def _review(findings: Findings) -> str:
    """Say who has checked the spots."""
    if findings.pattern is None or findings.pattern.changes is None:
        return "The numbers come from a table and are taken as they stand."
    if "unreviewed" in findings.flags:
        return "Nobody has checked the spots of this photograph."
    return review_sentence(findings)


def _false(doubt: UnderDoubt) -> str:
    """Say how many spots are likely no objects."""
    if doubt.source == "checked":
        return "A person has checked the spots, so none is taken to be false."
    if doubt.false < 0.05:
        return "Nothing speaks for a false spot among those counted."
    return (
        f"By their doubts about {number(doubt.false, 2)} of the {several(doubt.n, 'spot')} are no"
        " objects."
    )


def _missed(doubt: UnderDoubt) -> str:
    """Say how many objects are likely missed, and how that is known."""
    if doubt.recall is None:
        whole = (
            "A person has checked the photograph" if doubt.source == "checked" else "No detector"
        )
        return (
            f"{whole}, so nothing is taken to be missed."
            if doubt.source == "checked"
            else "No detector was at work, so nothing is taken to be missed."
        )
    found = f"{percent(doubt.recall.value)} ({percent(doubt.recall.low)} to {percent(doubt.recall.high)})"
    about = f"about {several(max(1, round(doubt.missed)), 'object')}"
    if doubt.source == "planted":
        return (
            f"Judged by copies of its own spots set into the photograph, {found} of such objects"
            f" are found, so that {about} may be missing."
        )
    return (
        f"Nobody has measured how much is missed here; on drawn scenes {found} of the objects are"
        f" found, so that {about} may be missing ({_PLANTED} to measure it)."
    )


def _blind(findings: Findings) -> str:
    """Say how near two objects may lie to be seen as one."""
    pattern = findings.pattern
    if pattern is None or pattern.changes is None:
        return ""
    if pattern.planted is None or pattern.planted.blind is None or math.isnan(pattern.blind):
        return f"How near two objects may lie to be seen as one was not measured ({_PLANTED})."
    return (
        f"Two objects nearer than {number(pattern.blind, 2)} {pattern.unit} are mostly seen as one."
    )


def _count(doubt: UnderDoubt) -> str:
    """Say how many there may be."""
    low, high = doubt.count.low, doubt.count.high
    if low == high:
        return f"The count of {doubt.n:,} is taken as exact."
    return (
        f"Where {doubt.n:,} were counted there are, with {percent(doubt.count.level)} confidence,"
        f" {low:,.0f} to {high:,.0f} objects."
    )


def _stands(findings: Findings, doubt: UnderDoubt) -> str:
    """Say in which share of the draws the verdict is the same."""
    if doubt.source == "checked" or (doubt.false == 0 and doubt.recall is None):
        return ""
    share = (
        f"{percent(doubt.stands)} of {doubt.draws:,} draws of what the detector may have got wrong"
    )
    others = [name for name, _ in doubt.verdicts if name != findings.verdict]
    other = f"; else it would mostly be: {others[0]}" if others else ""
    return f"In {share} the verdict stands{other}."
