"""Numbers and results in the words of a report."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from analyse.dispersion import Dispersion
from analyse.seeing import rests_words
from analyse.verdict import p_text

if TYPE_CHECKING:
    from analyse.density import Limits
    from analyse.findings import Findings
    from detect.scale import Scale
    from detect.sheet import Sheet

NOTHING = "\u2013"
MINUS = "\u2212"
_SOURCES = {
    "mm-per-pixel": "given in millimetres per pixel",
    "line": "from a line of known length",
    "ruler": "from a banded bar of known length, found in the picture",
    "dish": "from the dish's inner diameter",
    "corners": "from the four corners of a rectangle",
    "plates": "from the four corner plates of a plot, found in the picture",
    "fiducials": "from the four fiducial marks of a plot, found in the picture",
    "height": "from the camera's height, focal length and sensor",
    "georeference": "from the raster's own georeference",
}
_CLASSES_READ = 12  # frequencies of more classes are not read out


def number(value: float | None, figures: int = 3) -> str:
    """Return a number with some significant figures, and a dash for what is not known.

    Examples
    --------
    >>> number(0.0117), number(1234.5), number(-2.0), number(None)
    ('0.0117', '1,234', '\u22122.00', '\u2013')
    """
    if value is None or not math.isfinite(value):
        return NOTHING
    digits = figures - 1 - (math.floor(math.log10(abs(value))) if value else 0)
    return f"{value:,.{max(0, digits)}f}".replace("-", MINUS)


def signed(value: float) -> str:
    """Return a residual with its sign and one decimal.

    Examples
    --------
    >>> signed(1.25), signed(-0.75), signed(-0.01)
    ('+1.2', '\u22120.8', '0.0')
    """
    text = f"{value:+.1f}"
    return "0.0" if text in ("+0.0", "-0.0") else text.replace("-", MINUS)


def percent(share: float) -> str:
    """Return a share in percent, such as 0.05 as "5 %" with a space that does not break."""
    return f"{100 * share:.0f}\u00a0%"


def several(count: int, word: str) -> str:
    """Return a count and its noun.

    Examples
    --------
    >>> several(1, "spot"), several(1250, "quadrat")
    ('1 spot', '1,250 quadrats')
    """
    return f"{count:,} {word}{'' if count == 1 else 's'}"


def p_words(p: float) -> str:
    """Return a p without its name: "0.002", "< 0.001", or a dash."""
    return p_text(p).removeprefix("p ").removeprefix("= ") if math.isfinite(p) else NOTHING


def interval(limits: Limits | None) -> str:
    """Return confidence limits in words, or a dash."""
    return NOTHING if limits is None else f"{number(limits.low)} to {number(limits.high)}"


def area_words(findings: Findings) -> str:
    """Return the study area in a unit that suits its size."""
    if findings.area is None:
        return "not known"
    if findings.unit == "px":
        return f"{findings.area:,.0f} square pixels"
    cm2 = findings.area / 100.0
    return (
        f"{number(cm2 / 10_000.0)}\u00a0m\u00b2" if cm2 >= 1000 else f"{number(cm2)}\u00a0cm\u00b2"
    )


def density_words(findings: Findings) -> str:
    """Return the density with its interval; per square metre too where spots are sparse."""
    density = findings.density
    if density is None:
        return "not given: no scale is known" if findings.unit == "px" else "not given"
    text = f"{number(density.value)} per\u00a0cm\u00b2"
    limits = f"{percent(density.level)} interval {interval(density)}"
    if 0 < density.value < 0.1:
        text += f", or {number(1e4 * density.value)} per\u00a0m\u00b2"
        limits += f" per\u00a0cm\u00b2, {number(1e4 * density.low)} to {number(1e4 * density.high)} per\u00a0m\u00b2"
    return f"{text} ({limits})"


def scale_words(scale: Scale | None) -> str:
    """Return where the scale comes from and how sure it is."""
    if scale is None:
        return "not known; everything is in pixels"
    return (
        f"{_SOURCES[scale.source]} ({scale.note}); standard uncertainty of a length"
        f" {100 * scale.relative_uncertainty:.2g}\u00a0%"
    )


def quadrats_words(findings: Findings) -> str:
    """Return how the quadrats were laid."""
    settings, q = findings.settings, len(findings.counts)
    kind, side, unit = settings["quadrats"], settings["side"], settings["unit"]
    if kind == "counted":
        return f"{q:,} quadrats as counted in the table"
    if kind == "sectors":
        made = f"{q:,} sectors of equal area, {settings['rows']} rings of {settings['columns']}"
    elif kind == "rectangle":
        made = f"{q:,} rectangles, {settings['rows']} rows by {settings['columns']} columns"
    else:
        made = f"{q:,} squares" + (f" of {side:g} {unit}" if side else "")
    if settings["side_by_rule"]:
        made += ", a side that follows from the area and the number of spots alone"
    return made


def method_words(findings: Findings) -> list[str]:
    """Return how the numbers came about, as sentences."""
    settings, n = findings.settings, several(findings.n, "spot")
    text = [f"The counts are of {quadrats_words(findings)}."]
    clipped = int((~findings.counts.whole).sum())
    if clipped:
        joined = settings["joined"]
        cut = f"{several(clipped, 'quadrat')} {'is' if clipped == 1 else 'are'} not whole"
        also = (
            f"; cells joined to a neighbour, because less than {percent(settings['join_below'])} of"
            f" them lies inside: {joined:,}"
        )
        text.append(f"{cut}{also if joined else ''}. Expected counts go by area.")
    if findings.n:
        few = findings.verdict == "too few to tell"
        rests = (
            "No verdict rests on the p values; they are those of" if few else "The verdict rests on"
        )
        text.append(
            f"{rests} X\u00b2 = \u03a3 (x \u2212 E)\u00b2 / E over all quadrats, compared with"
            f" {findings.simulated.simulations:,} sets of {n} placed at random in the same quadrats{_as_seen(findings)}"
            f" (seed {findings.seed}); two-sided at {percent(settings['level'])}."
        )
    return text


def _as_seen(findings: Findings) -> str:
    """Say with which eyes the random spots were seen, and what plain chance gives."""
    if findings.eyes is None or findings.plain is None:
        return ""
    words, p = rests_words(findings.eyes), p_text(findings.plain.simulated.p_two_sided)
    return f"{words} (with points as they are, the plain null: {p})"


def marks_words(sheet: Sheet) -> dict[str, int]:
    """Return how many spots were found and counted, placed and struck."""
    spots = sheet.spots
    return {
        "found": int((spots.found & spots.counted).sum()),
        "placed": int((~spots.found & spots.counted).sum()),
        "struck": int((~spots.counted).sum()),
    }


def number_rows(findings: Findings) -> list[tuple[str, list[str], bool]]:
    """Return the table of numbers: name, cells (whole quadrats, all), whether the verdict rests on it.

    Where every quadrat is whole, there is one cell a row.
    """
    whole, everything, simulated = (
        findings.dispersion_whole,
        findings.dispersion_all,
        findings.simulated,
    )
    one = whole is not None and whole.q == everything.q
    columns: list[Dispersion | None] = [everything] if one else [whole, everything]
    judgeable = findings.verdict != "too few to tell"
    ratio = "VMR" if one else "VMR; X\u00b2/df for all"

    def row(name: str, value: Any) -> tuple[str, list[str], bool]:
        return name, [NOTHING if d is None else value(d) for d in columns], False

    def judged(name: str, p: float, rests: bool = False) -> tuple[str, list[str], bool]:
        return name, [p_words(p)] if one else [NOTHING, p_words(p)], rests

    return [
        row("Quadrats", lambda d: f"{d.q:,}"),
        row("Spots in them", lambda d: f"{d.n:,}"),
        row("Mean count", lambda d: number(d.mean)),
        row("Variance", lambda d: number(d.variance)),
        row(ratio, lambda d: number(d.vmr)),
        row("X\u00b2", lambda d: number(d.chi2, 4)),
        row("Degrees of freedom", lambda d: f"{d.df:,}"),
        row("p, chi-square, two-sided", lambda d: p_words(d.p_two_sided)),
        row("p, chi-square, clumped side", lambda d: p_words(d.p_clumped)),
        row("p, chi-square, even side", lambda d: p_words(d.p_even)),
        judged("p, simulated, two-sided", simulated.p_two_sided, rests=judgeable),
        judged("p, simulated, clumped side", simulated.p_clumped),
        judged("p, simulated, even side", simulated.p_even),
    ]


def residuals_alt(findings: Findings) -> str:
    """Return what the map of residuals shows, for those who do not see it."""
    known = findings.residuals[np.isfinite(findings.residuals)]
    if not known.size:
        return "Map of the quadrats; without spots there are no residuals."
    beyond = int((np.abs(known) >= 2).sum())
    return (
        f"Map of the standardised residuals of {several(known.size, 'quadrat')}, from"
        f" {signed(float(known.min()))} to {signed(float(known.max()))};"
        f" {beyond} of them 2 or more away from 0."
    )


def frequencies_alt(findings: Findings) -> str:
    """Return what the picture of frequencies shows, for those who do not see it."""
    fit, law = findings.poisson, findings.negative_binomial
    if fit is None:
        return ""
    both = law is not None and not law.poisson_limit
    expected = "expected at random" + (" and by a negative binomial law" if both else "")
    if len(fit.classes) > _CLASSES_READ:
        return f"Frequencies of counts in {len(fit.classes)} classes, seen and {expected}."
    also = (
        law.expected_in(fit.classes) if law is not None and both else [math.nan] * len(fit.labels)
    )
    pairs = "; ".join(
        f"{label}: {seen} and {number(float(chance))}"
        + (f" and {number(float(clumped))}" if both else "")
        for label, seen, chance, clumped in zip(
            fit.labels, fit.observed, fit.expected, also, strict=True
        )
    )
    return f"Quadrats by count, seen and {expected}. {pairs}."


def law_words(findings: Findings) -> str:
    """Return what the negative binomial law says of the counts, in words; empty where none is fitted."""
    law = findings.negative_binomial
    if law is None:
        return ""
    if law.poisson_limit:
        return (
            "The counts vary no more than chance makes them, so a negative binomial law is no better"
            f" than the Poisson law (no finite k; {number(law.k_low)} or more)."
        )
    return (
        f"Negative binomial law: k\u00a0{law.k_text}, the smaller the more clumped; of the weight by"
        f" AIC it has {_weight(law.weight)}, the Poisson law {_weight(1 - law.weight)}."
    )


def _weight(share: float) -> str:
    """Return a weight in percent that is never said to be all or nothing."""
    if share >= 0.995:
        return f"over {percent(0.99)}"
    return f"under {percent(0.01)}" if share < 0.005 else percent(share)


def clumped_words(findings: Findings) -> tuple[str, str] | None:
    """Return the limits that allow for clumping: of the density, or else of the mean count."""
    name, unit, limits = (
        "Density, allowing for clumping",
        " per\u00a0cm\u00b2",
        findings.clumped_density,
    )
    if limits is None:
        name, unit, limits = "Mean count, allowing for clumping", "", findings.clumped_mean
    shown = None if limits is None else limits.profile or limits.bootstrap
    if shown is None or findings.n == 0:
        return None
    high = "no upper limit" if math.isinf(shown.high) else number(shown.high)
    value = "" if unit else f"{number(shown.value)}, "
    return name, f"{value}{percent(shown.level)} interval {number(shown.low)} to {high}{unit}"


def poisson_words(findings: Findings) -> str:
    """Return the fit of the Poisson law in words."""
    fit = findings.poisson
    if fit is None or not math.isfinite(fit.p):
        return "Too few classes to test the fit of the Poisson law."
    few = len(fit.labels) <= _CLASSES_READ
    classes = f"the classes {', '.join(fit.labels)}" if few else f"{len(fit.labels)} classes"
    return (
        f"Fit of the Poisson law on {classes}: chi-square"
        f" {number(fit.chi2)}, {several(fit.df, 'degree')} of freedom, {p_text(fit.p)}."
    )


def plain(value: Any) -> str:
    """Return a setting as text: lists with commas, floats to six figures.

    Examples
    --------
    >>> plain([1.0, 0.123456789]), plain({"low": 1, "high": None}), plain(True)
    ('1, 0.123457', 'low 1; high none', 'yes')
    """
    if isinstance(value, Mapping):
        return "; ".join(f"{key} {plain(entry)}" for key, entry in value.items())
    if isinstance(value, list | tuple):
        return ", ".join(plain(entry) for entry in value)
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.6g}"
    return "none" if value is None else str(value)
