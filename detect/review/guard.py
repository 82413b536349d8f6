"""Who is let in: only the page itself, on this computer, with the secret."""

from __future__ import annotations

import hmac
from dataclasses import dataclass
from typing import TYPE_CHECKING

from starlette.responses import JSONResponse, Response

if TYPE_CHECKING:
    from starlette.types import ASGIApp, Message, Receive, Scope, Send

MOST_BYTES = 4 * 1024 * 1024  # of a request's body
MOST_HEADER_BYTES = 32 * 1024
_POLICY = "; ".join(
    [
        "default-src 'none'",
        "script-src 'self'",
        "style-src 'self'",
        "img-src 'self' blob:",
        "connect-src 'self'",
        "base-uri 'none'",
        "form-action 'none'",
        "frame-ancestors 'none'",
        "require-trusted-types-for 'script'",
        "trusted-types 'none'",
    ]
)
HEADERS = {
    "content-security-policy": _POLICY,
    "x-content-type-options": "nosniff",
    "x-frame-options": "DENY",
    "referrer-policy": "no-referrer",
    "cross-origin-opener-policy": "same-origin",
    "cross-origin-resource-policy": "same-origin",
    "cross-origin-embedder-policy": "require-corp",
    "permissions-policy": "camera=(), microphone=(), geolocation=()",
}


def error(status: int, code: str, message: str, **more: object) -> Response:
    """Return an error in the one shape that all have."""
    headers = {"cache-control": "no-store"}
    return JSONResponse(
        {"error": {"code": code, "message": message, **more}}, status_code=status, headers=headers
    )


@dataclass(frozen=True, slots=True)
class Guard:
    """What stands before all routes.

    Parameters
    ----------
    app : ASGI application
        Gets addresses without the token.
    token : str
        First part of every address.
    port : int
        That is listened on.
    """

    app: ASGIApp
    token: str
    port: int

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Turn away what may not come in, and hand on the rest."""
        if scope["type"] == "lifespan":
            await self.app(scope, receive, send)
            return
        if scope["type"] != "http":
            return

        async def sent(message: Message) -> None:
            if message["type"] == "http.response.start":
                own = [(name.encode(), value.encode()) for name, value in HEADERS.items()]
                message = {**message, "headers": [*message.get("headers", []), *own]}
            await send(message)

        refused = self._refused(scope)
        if refused is not None:
            await refused(scope, receive, sent)
            return
        path = scope["path"][1 + len(self.token) :]
        inner = {**scope, "path": path, "raw_path": path.encode("utf-8")}
        await self.app(inner, receive, sent)

    def _refused(self, scope: Scope) -> Response | None:
        """Return the answer to a request that may not come in."""
        given: dict[str, list[str]] = {}
        for name, value in scope["headers"]:
            given.setdefault(name.decode("latin-1").lower(), []).append(value.decode("latin-1"))
        if sum(len(name) + len(value) for name, value in scope["headers"]) > MOST_HEADER_BYTES:
            return error(431, "too_large", "The request's head is too large.")
        if given.get("host") != [f"127.0.0.1:{self.port}"]:
            return error(421, "host", "This server answers to its own address alone.")
        path = scope["path"].encode("utf-8", errors="surrogateescape")
        own = self.token.encode("ascii")
        # The raw path too, so that no other spelling of the address gets in.
        raw = scope.get("raw_path") or path
        spelled = raw[1 : 1 + len(own)]
        if not (
            hmac.compare_digest(path.partition(b"/")[2].partition(b"/")[0], own)
            and hmac.compare_digest(spelled, own)
            and path[1 + len(own) : 2 + len(own)] == b"/"
        ):
            return error(
                403, "token", "The address lacks the secret; use the one that was printed."
            )
        if any(site not in ("same-origin", "none") for site in given.get("sec-fetch-site", [])):
            return error(403, "cross_site", "Another page may not ask this server.")
        if scope["method"] in ("GET", "HEAD"):
            return None
        if scope["method"] != "POST":
            return error(405, "method", "Only GET, HEAD and POST are answered.")
        return self._refused_post(given)

    def _refused_post(self, given: dict[str, list[str]]) -> Response | None:
        """Return the answer to a change that may not come in."""
        if given.get("origin") != [f"http://127.0.0.1:{self.port}"]:
            return error(403, "origin", "A change must come from the page itself.")
        kinds = given.get("content-type", [])
        kind = kinds[0].lower().replace(" ", "") if len(kinds) == 1 else ""
        if kind not in ("application/json", "application/json;charset=utf-8"):
            return error(415, "content_type", "A change must be sent as application/json.")
        lengths = given.get("content-length", [])
        if len(lengths) != 1 or not lengths[0].isdecimal() or "transfer-encoding" in given:
            return error(411, "length_missing", "A change must say how long it is.")
        if len(lengths[0]) > 12 or int(lengths[0]) > MOST_BYTES:
            return error(413, "too_large", f"A change may have {MOST_BYTES} bytes at most.")
        return None
