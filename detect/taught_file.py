"""The small file in which what was learned is kept, for the tool and for people to read."""

from __future__ import annotations

import tomllib
from dataclasses import replace
from hashlib import sha256
from pathlib import Path
from typing import Any

from detect.amendments import explain
from detect.calibration import Calibration
from detect.doubt import FEATURES, DoubtModel
from detect.errors import DetectError, TaughtUnreadable
from detect.lengths import parse_pair
from detect.own_colour import OwnColour
from detect.taught import Lessons, Taught

SCHEMA = 1
TAUGHT_NAME = "taught.toml"
_IMPOSSIBLE = (KeyError, TypeError, ValueError, AttributeError, DetectError)
_AXES = ("lightness", "green_to_red", "blue_to_yellow")


def taught_text(taught: Taught) -> str:
    """Write what was learned so that a person can read it, and `read_taught` reads it back.

    Parameters
    ----------
    taught : Taught

    Returns
    -------
    str
        TOML; numbers are written so that they read back the same.
    """
    lessons = taught.lessons
    lines = [
        "# What corrections taught the detector; use it with: strewn detect --taught FILE",
        f"schema = {SCHEMA}",
        f"tool_version = {_quoted(taught.tool_version)}",
        f"kind = {_quoted(taught.kind)}",
        "",
        "[learned_from]",
        f"spots_real = {lessons.real}  # left counted, or placed",
        f"spots_placed = {lessons.placed}  # those of them that had been missed",
        f"spots_struck = {lessons.struck}",
        f"f1_before = {lessons.f1_before!r}  # on these photographs, as they had been detected",
        f"f1_after = {lessons.f1_after!r}  # each judged by what the others teach",
        "photographs = [",
        *(
            f"  {{ name = {_quoted(name)}, sha256 = {_quoted(digest)} }},"
            for name, digest in lessons.photographs
        ),
        "]",
        "",
        "[objects]",
    ]
    if taught.diameter is not None:
        smallest, largest = taught.diameter
        lines.append(f"diameter = {_quoted(f'{smallest}-{largest}')}")
        lines.append(f"diameter_learned = {'true' if taught.sized else 'false'}")
    lines += [f"colour = {_quoted(taught.colour)}", f"polarity = {_quoted(taught.polarity)}"]
    if taught.direction is not None:
        axes = zip(_AXES, taught.direction, strict=True)
        lines += ["", "[direction]  # from ground to object, in L*, a*, b*"]
        lines += [f"{name} = {value!r}" for name, value in axes]
    lines += ["", "[doubt]"]
    if taught.highest_doubt is not None:
        lines.append(f"highest = {taught.highest_doubt!r}  # what is more doubtful is left out")
    lines += [
        "",
        "[doubt.weights]  # logit(1 - doubt) = intercept + sum of weight x feature",
        *(f"{name} = {getattr(taught.model, name)!r}" for name in ("intercept", *FEATURES)),
        *_own_colour_lines(taught.own_colour),
    ]
    if taught.calibration is not None:
        lines += [
            "",
            "[doubt.calibration]  # logit(doubt shown) = intercept + slope x logit(doubt)",
            f"intercept = {taught.calibration.intercept!r}",
            f"slope = {taught.calibration.slope!r}",
        ]
    return "\n".join(lines) + "\n"


def identity_of(taught: Taught) -> str:
    """Return the sha256 of what was learned, whatever remarks its file holds."""
    return sha256(taught_text(taught).encode()).hexdigest()


def _own_colour_lines(own: OwnColour | None) -> list[str]:
    """Write how a candidate's own colour changes its doubt."""
    if own is None:
        return []
    lines = ["", "[doubt.own_colour]  # logit(1 - doubt) += sum of weight x (colour - usual)"]
    for name, values in (("usual", own.usual), ("weights", own.weights)):
        pairs = [f"{axis} = {v!r}" for axis, v in zip(_AXES, values, strict=True)]
        lines.append(f"{name} = {{ {', '.join(pairs)} }}")
    return lines


def read_taught(path: Path) -> Taught:
    """Read what was learned.

    Parameters
    ----------
    path : Path
        A file that `taught_text` wrote.

    Returns
    -------
    Taught

    Raises
    ------
    TaughtUnreadable
        If the file is missing, damaged, or written by a later version.
    """
    try:
        values = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except OSError as trouble:
        reason = (trouble.strerror or str(trouble)).lower()
        raise TaughtUnreadable(
            f"{path} cannot be read ({reason}); name a {TAUGHT_NAME} that --learn wrote."
        ) from trouble
    except ValueError as trouble:
        raise TaughtUnreadable(_damaged(path, trouble)) from trouble
    schema = values.get("schema")
    if schema is None:
        raise TaughtUnreadable(
            f"{path.name} holds nothing that was learned; name a {TAUGHT_NAME} that --learn wrote."
        )
    if schema != SCHEMA:
        raise TaughtUnreadable(
            f"{path.name} has schema {schema!r}, but this version reads {SCHEMA};"
            " use the version that wrote it, or learn again with --learn."
        )
    try:
        return _taught_from(values)
    except _IMPOSSIBLE as trouble:
        raise TaughtUnreadable(_damaged(path, trouble)) from trouble


def _taught_from(values: dict[str, Any]) -> Taught:
    """Build what a file's values describe."""
    learned, objects, doubt = values["learned_from"], values["objects"], values["doubt"]
    weights = doubt["weights"]
    unknown = set(weights) - {"intercept", *FEATURES}
    if unknown:
        raise ValueError(f"the weight {min(unknown)!r} is not known")
    model = DoubtModel(**{"intercept": weights["intercept"], **dict.fromkeys(FEATURES, 0.0)})
    diameter, own = objects.get("diameter"), doubt.get("own_colour")
    direction = values.get("direction")
    highest, calibration = doubt.get("highest"), doubt.get("calibration")
    return Taught(
        values["kind"],
        Lessons(
            tuple((str(entry["name"]), str(entry["sha256"])) for entry in learned["photographs"]),
            int(learned["spots_real"]),
            int(learned["spots_placed"]),
            int(learned["spots_struck"]),
            float(learned["f1_before"]),
            float(learned["f1_after"]),
        ),
        replace(model, **{name: float(value) for name, value in weights.items()}),
        None if highest is None else float(highest),
        None
        if calibration is None
        else Calibration(float(calibration["intercept"]), float(calibration["slope"])),
        None if own is None else OwnColour(_axes_from(own["usual"]), _axes_from(own["weights"])),
        objects["colour"],
        objects["polarity"],
        None if direction is None else _axes_from(direction),
        None if diameter is None else parse_pair(diameter, name="diameter", separator="-"),
        objects.get("diameter_learned") is True,
        str(values["tool_version"]),
    )


def _axes_from(values: dict[str, Any]) -> tuple[float, float, float]:
    """Read a direction or a colour by the names of its axes."""
    lightness, red, yellow = (float(values[name]) for name in _AXES)
    return lightness, red, yellow


def _damaged(path: Path, trouble: Exception) -> str:
    """Say what is damaged about a file, and what to do."""
    return f"{path.name} is damaged ({explain(trouble)}); learn again with --learn."


def _quoted(text: str) -> str:
    """Write a text as a TOML string, which holds control characters as escapes."""
    plain = text.encode("utf-8", errors="replace").decode("utf-8")
    plain = plain.replace("\\", "\\\\").replace('"', '\\"')
    return '"' + "".join(c if c.isprintable() else f"\\U{ord(c):08x}" for c in plain) + '"'
