"""What a request says, read with suspicion, and the answer to a wrong one."""

from __future__ import annotations

import math
from typing import Any

from starlette.exceptions import HTTPException
from starlette.requests import Request
from starlette.responses import Response

from detect.amendments import load_json
from detect.review.guard import error
from detect.review.record import MOST_AMENDMENTS


class Wrong(Exception):
    """A request that cannot be answered: status, code and sentence."""

    def __init__(self, status: int, code: str, message: str) -> None:
        super().__init__(message)
        self.status, self.code = status, code


def asked_changes(body: bytes) -> tuple[list[Any], int | None]:
    """Read the changes that a request asks for, and the last revision that its page knows."""
    try:
        values = load_json(body)
    except ValueError as trouble:
        raise Wrong(400, "json", "The request is no JSON; nothing was changed.") from trouble
    asked = (
        values.get("amendments")
        if isinstance(values, dict) and values.keys() <= {"amendments", "after"}
        else None
    )
    if not isinstance(asked, list) or not 1 <= len(asked) <= MOST_AMENDMENTS:
        raise Wrong(
            400,
            "request",
            f"The request must hold 1 to {MOST_AMENDMENTS} amendments and nothing else;"
            " nothing was changed.",
        )
    after = values.get("after")
    if after is not None and (isinstance(after, bool) or not isinstance(after, int) or after < 0):
        raise Wrong(400, "request", "after must be a revision; nothing was changed.")
    return asked, after


def whole_number(text: str | None) -> int:
    """Read a whole number from an address."""
    if text is None or not (text.isascii() and text.isdecimal() and len(text) <= 12):
        raise Wrong(400, "request", "A whole number is missing in the address.")
    return int(text)


def number_within(request: Request, name: str, low: float, high: float) -> float:
    """Read a number within bounds from an address."""
    try:
        value = float(request.query_params.get(name, ""))
    except ValueError:
        value = math.nan
    if not low <= value <= high:
        raise Wrong(400, "request", f"{name} must be a number from {low:g} to {high:g}.")
    return value


async def tell_wrong(_request: Request, trouble: Exception) -> Response:
    """Answer a wrong request."""
    assert isinstance(trouble, Wrong)
    return error(trouble.status, trouble.code, str(trouble))


async def tell_missing(_request: Request, trouble: Exception) -> Response:
    """Answer a request for what there is not, or in a way that is not meant."""
    assert isinstance(trouble, HTTPException)
    if trouble.status_code == 405:
        return error(405, "method", "This is not asked for in that way.")
    return error(trouble.status_code, "not_found", "There is nothing of that name.")


async def tell_bug(_request: Request, _trouble: Exception) -> Response:
    """Answer where the program is at fault; the traceback goes to the terminal."""
    return error(
        500, "bug", "The program made a mistake; see the terminal. Nothing shown as saved is lost."
    )
