"""What the page may ask, and what it is answered."""

from __future__ import annotations

import asyncio
import getpass
import json
import threading
from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from importlib.resources import files
from pathlib import Path
from typing import Any

from starlette.applications import Starlette
from starlette.exceptions import HTTPException
from starlette.requests import Request
from starlette.responses import Response, StreamingResponse
from starlette.routing import Route

from detect.amendment import SCHEMA
from detect.errors import DetectError, RequestWrong
from detect.outcome import write_points, write_views
from detect.requests import tool_version
from detect.review.asking import (
    Wrong,
    asked_changes,
    number_within,
    tell_bug,
    tell_missing,
    tell_wrong,
    whole_number,
)
from detect.review.checking import SpotChecker, asked_draw, drawn, told
from detect.review.fit import fit_circle, usual_radius
from detect.review.guard import MOST_BYTES, error
from detect.review.live import Live, Panel
from detect.review.pictures import PhotographMissing, Pictures, goes_whole
from detect.review.pyramid import NoSuchTile, Pyramid, TilesNotReady
from detect.review.record import LONGEST, MOST_AMENDMENTS, Answer, Record
from detect.review.shapes import Shapes, looked_for
from detect.sheet import Sheet

_TYPES = {
    ".html": "text/html; charset=utf-8",
    ".css": "text/css; charset=utf-8",
    ".js": "text/javascript; charset=utf-8",
    ".svg": "image/svg+xml",
    ".png": "image/png",
}
_NOT_STORED = {"cache-control": "no-store"}
_ASK_AGAIN = {"cache-control": "private, no-cache"}


class Server:
    """The review of some sheets.

    Parameters
    ----------
    sheets : sequence of Path
        In the order of the queue.
    panel : callable
        What the page shows of a sheet's statistics; see `detect.review.live.Panel`.
    checker : SpotChecker or None
        What draws and judges spot checks; None where the review is none.
    """

    def __init__(
        self, sheets: Sequence[Path], panel: Panel, checker: SpotChecker | None = None
    ) -> None:
        self._checker = checker
        self.pictures, self.shapes = Pictures(), Shapes()
        self._pool = ThreadPoolExecutor(1, thread_name_prefix="statistics")
        records = [Record(path) for path in sheets]
        self.lives = {record.id: Live(record, panel, self.shapes, self._pool) for record in records}
        self._pyramids: dict[str, Pyramid] = {}
        self._making: set[asyncio.Task[None]] = set()
        self._writing = threading.Lock()
        self._files = dict(_page_files())
        self.app = Starlette(
            routes=list(self._routes()),
            exception_handlers={
                Wrong: tell_wrong,
                DetectError: self._trouble,
                HTTPException: tell_missing,
                Exception: tell_bug,
            },
        )
        self.app.router.redirect_slashes = False

    def _routes(self) -> Iterator[Route]:
        """Yield every route; addresses come without the token."""
        yield Route("/", self.page)
        yield Route("/page/{name}", self.page)
        yield Route("/api/session", self.session)
        yield Route("/api/queue", self.queue)
        sheet = "/api/sheets/{sheet}"
        yield Route(sheet, self.sheet)
        yield Route(f"{sheet}/amendments", self.amend, methods=["POST"])
        yield Route(f"{sheet}/events", self.events)
        yield Route(f"{sheet}/panel", self.panel)
        yield Route(f"{sheet}/spot_check", self.spot_check, methods=["GET", "POST"])
        yield Route(f"{sheet}/fit", self.fit)
        yield Route(f"{sheet}/picture", self.picture)
        yield Route(f"{sheet}/tiles/{{level}}/{{column}}/{{row}}", self.tile)

    def end(self) -> None:
        """Let every event stream say good-bye; from any thread."""
        for live in self.lives.values():
            live.ending = True

    def close(self) -> None:
        """Wait for no statistics any more."""
        self._pool.shutdown(wait=False, cancel_futures=True)

    async def page(self, request: Request) -> Response:
        """Answer with a file of the page."""
        name = request.path_params.get("name", "index.html")
        if name not in self._files:
            raise Wrong(404, "not_found", "The page has no such file.")
        kind, data = self._files[name]
        return Response(data, headers={"content-type": kind} | _NOT_STORED)

    async def session(self, _request: Request) -> Response:
        """Say what this review is."""
        first = next(iter(self.lives.values()), None)
        answer = {
            "version": tool_version(),
            "schema": SCHEMA,
            "folder": "" if first is None else first.record.path.resolve().parent.name,
            "who": _login_name(),
            "first": None if first is None else first.record.id,
            "spot_check": self._checker is not None,
            "limits": {"body_bytes": MOST_BYTES, "amendments": MOST_AMENDMENTS, **LONGEST},
        }
        return _json(answer)

    async def queue(self, _request: Request) -> Response:
        """List the sheets with their states."""
        records = [live.record for live in self.lives.values()]
        rows = await asyncio.to_thread(lambda: [self.shapes.row(each) for each in records])
        return _json({"sheets": rows})

    async def sheet(self, request: Request) -> Response:
        """Tell all of one sheet."""
        record = self._live(request).record

        def told() -> dict[str, Any]:
            record.refresh()
            return self.shapes.sheet(record)

        return _json(await asyncio.to_thread(told))

    async def amend(self, request: Request) -> Response:
        """Make changes."""
        live = self._live(request)
        asked, after = asked_changes(await request.body())

        def made() -> tuple[Answer, dict[str, Any]]:
            answer = live.record.amend(asked)
            return answer, self._said(live.record, answer, after)

        answer, said = await asyncio.to_thread(made)
        live.ring()
        if any(change["amendment"]["what"] == "checked" for change in said["changes"]):
            self._in_background(asyncio.to_thread(self._write_views, live.record))
        status = 200 if answer.trouble is None else 507
        return _json(said, status)

    def _write_views(self, record: Record) -> None:
        """Write the table of points and the overlay of a photograph that was marked as checked."""
        folder = record.path.parent
        with self._writing:
            _, _, _, state, _ = record.snapshot()
            try:
                write_points(state, folder)
                photograph = self.pictures.photograph(state, folder)
                with self.pictures.reading(photograph):
                    write_views(photograph, state, folder)
            except DetectError:
                return  # every edit is in the log; what is drawn from it can be drawn again

    def _said(self, record: Record, answer: Answer, after: int | None) -> dict[str, Any]:
        """Return what became of changes, for the page."""
        said: dict[str, Any] = {
            "generation": record.generation,
            "revision": answer.revision,
            "acknowledged": answer.acknowledged,
            "refused": [
                {"id": each.id, "code": each.code, "message": each.message}
                for each in answer.refused
            ],
            "changes": self.shapes.changes(
                record, answer.before if after is None else after, answer.revision
            ),
        }
        if answer.trouble is not None:
            code = "disk_full" if answer.disk_is_full else "not_writable"
            said["error"] = {"code": code, "message": str(answer.trouble)}
        return said

    async def events(self, request: Request) -> Response:
        """Stream what happens to a sheet."""
        live = self._live(request)
        after = whole_number(
            request.headers.get("last-event-id") or request.query_params.get("after")
        )
        await asyncio.to_thread(live.record.refresh)
        stream = live.stream(after, request.query_params.get("generation"))
        return StreamingResponse(stream, media_type="text/event-stream", headers=_NOT_STORED)

    async def panel(self, request: Request) -> Response:
        """Answer with the newest statistics."""
        return _json(await self._live(request).panel())

    async def spot_check(self, request: Request) -> Response:
        """Draw the quadrats of a spot check where asked to, and tell how far it is."""
        live, checker = self._live(request), self._checker
        if checker is None:
            raise Wrong(
                404, "not_found", "This review is no spot check; start it with --spot-check."
            )
        if request.method == "POST":
            who, again = asked_draw(await request.body())
            try:
                answer = await asyncio.to_thread(drawn, live.record, checker, who, again=again)
            except RequestWrong as trouble:
                raise Wrong(409, "request", str(trouble)) from trouble
            live.ring()
            if answer is not None and answer.trouble is not None:
                code = "disk_full" if answer.disk_is_full else "not_writable"
                return error(507, code, str(answer.trouble))
        return _json(await asyncio.to_thread(told, live.record, checker))

    async def fit(self, request: Request) -> Response:
        """Fit a circle to the picture at a point."""
        record = self._live(request).record
        await asyncio.to_thread(record.refresh)
        state = record.amended.sheet
        size = state.photograph
        x = number_within(request, "x", -0.5, size.width - 0.5)
        y = number_within(request, "y", -0.5, size.height - 0.5)
        usual = usual_radius(state.spots, looked_for(state))
        if "radius" in request.query_params:
            usual = number_within(request, "radius", 0.5, max(size.width, size.height))

        def fitted() -> dict[str, Any]:
            photograph = self.pictures.photograph(state, record.path.parent)
            with self.pictures.reading(photograph):
                found = fit_circle(photograph, x, y, usual)
            return {"x": found.x, "y": found.y, "radius": found.radius, "fitted": found.fitted}

        return _json(await asyncio.to_thread(fitted))

    async def picture(self, request: Request) -> Response:
        """Send the whole photograph."""
        record = self._live(request).record
        await asyncio.to_thread(record.refresh)
        sheet = record.amended.sheet
        if not goes_whole(sheet):
            raise Wrong(404, "not_found", "This photograph is too large to be sent whole.")
        tag = f'"{sheet.photograph.sha256}"'
        headers = _ASK_AGAIN | {"etag": tag}
        if request.headers.get("if-none-match") == tag:
            return Response(status_code=304, headers=headers)
        sent = await asyncio.to_thread(self.pictures.whole, sheet, record.path.parent)
        # What a click needs next, so that the first one does not wait for it.
        self._in_background(asyncio.to_thread(self._warm, sheet, record.path.parent))
        return Response(sent.data, headers=headers | {"content-type": sent.type})

    def _warm(self, sheet: Sheet, folder: Path) -> None:
        """Decode a photograph that will soon be asked about."""
        try:
            self.pictures.photograph(sheet, folder)
        except DetectError:
            return  # the request that needs it tells why

    async def tile(self, request: Request) -> Response:
        """Send a tile."""
        live = self._live(request)
        await asyncio.to_thread(live.record.refresh)
        place = [whole_number(request.path_params[name]) for name in ("level", "column", "row")]
        if goes_whole(live.record.amended.sheet):
            raise Wrong(404, "not_found", "This photograph is sent whole, not in tiles.")
        pyramid = await asyncio.to_thread(self._pyramid, live.record)
        try:
            data = await asyncio.to_thread(pyramid.tile, *place)
        except NoSuchTile:
            raise Wrong(404, "not_found", "The picture has no tile there.") from None
        except TilesNotReady:
            self._make_tiles(live, pyramid)
            done = live.tiles or {"done": 0, "total": pyramid.total}
            answer = error(503, "tiles_not_ready", "The tiles are being made.", **done)
            answer.headers["retry-after"] = "1"
            return answer
        return Response(data, headers=_ASK_AGAIN | {"content-type": "image/jpeg"})

    def _pyramid(self, record: Record) -> Pyramid:
        """Return the tiles of a photograph."""
        sheet = record.amended.sheet
        photograph = self.pictures.photograph(sheet, record.path.parent)
        known = self._pyramids.get(record.id)
        if known is None or known.photograph is not photograph:
            known = self._pyramids[record.id] = Pyramid(
                photograph, reading=self.pictures.reading(photograph)
            )
            for other in list(self._pyramids)[:-2]:
                del self._pyramids[other]
        return known

    def _make_tiles(self, live: Live, pyramid: Pyramid) -> None:
        """Make a picture's tiles beside everything else, once."""
        if live.tiles is not None:
            return
        live.tiles = {"done": 0, "total": pyramid.total}

        def progress(done: int, total: int) -> None:
            live.tiles = {"done": done, "total": total}

        async def make() -> None:
            try:
                await asyncio.to_thread(pyramid.make, progress)
            except DetectError:
                live.tiles = None  # the next tile asked for tells why

        self._in_background(make())

    def _in_background(self, work: Any) -> None:
        """Do something without making the page wait."""
        task = asyncio.ensure_future(work)
        self._making.add(task)
        task.add_done_callback(self._making.discard)

    def _live(self, request: Request) -> Live:
        """Return the sheet a request is about, of those reviewed here and no others."""
        live = self.lives.get(request.path_params["sheet"])
        if live is None:
            raise Wrong(404, "not_found", "There is no such sheet in this review.")
        return live

    async def _trouble(self, _request: Request, trouble: Exception) -> Response:
        """Tell what is wrong with a sheet, its log, or its photograph."""
        assert isinstance(trouble, DetectError)
        told = self.shapes.trouble(trouble)
        status = 404 if isinstance(trouble, PhotographMissing) else 409
        return error(status, told["code"], told["message"])


def _page_files() -> Iterator[tuple[str, tuple[str, bytes]]]:
    """Yield the files of the page; a request names one of these or nothing."""
    for entry in files("detect.review").joinpath("page").iterdir():
        kind = _TYPES.get(Path(entry.name).suffix)
        if entry.is_file() and kind is not None:
            yield entry.name, (kind, entry.read_bytes())


def _login_name() -> str:
    """Return the name a person is logged in under, as a suggestion; "" where it is not known."""
    try:
        return getpass.getuser()[: LONGEST["who"]]
    except (OSError, KeyError, ImportError):
        return ""


def _json(values: Any, status: int = 200) -> Response:
    """Return an answer in plain ASCII, so that odd bytes of file names pass too."""
    text = json.dumps(values, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    headers = {"content-type": "application/json"} | _NOT_STORED
    return Response(text, status, headers=headers)
