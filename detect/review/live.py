"""What happens to one sheet while pages are open: who must hear of it, and the statistics anew."""

from __future__ import annotations

import asyncio
import json
import traceback
from collections.abc import AsyncIterator, Callable
from concurrent.futures import Executor
from typing import TYPE_CHECKING, Any

from detect.changes import Changes
from detect.errors import DetectError
from detect.review.record import Record
from detect.sheet import Sheet

if TYPE_CHECKING:
    from detect.review.shapes import Shapes

Panel = Callable[[Sheet, Sheet, Changes], dict[str, Any]]
"""The sheet as found, as it is now, and what was changed -> what the page shows of its statistics."""

POLL_S = 0.4  # how often the log is looked at for what others have added
_NO_STATISTICS = (
    "The statistics could not be computed (see the terminal); edits are saved all the same."
)
_STILL_S = 10.0  # after so long without news a stream says that it is alive


class Live:
    """A sheet that pages are looking at.

    Parameters
    ----------
    record : Record
    panel : callable
        See `Panel`.
    shapes : Shapes
        How things are told to the page.
    pool : Executor
        On which statistics are computed.
    """

    def __init__(self, record: Record, panel: Panel, shapes: Shapes, pool: Executor) -> None:
        self.record = record
        self.tiles: dict[str, int] | None = None
        self.ending = False
        self._panel_of, self._shapes, self._pool = panel, shapes, pool
        self._panel: dict[str, Any] | None = None
        self._computing: asyncio.Task[None] | None = None
        self._bells: set[asyncio.Event] = set()

    def ring(self) -> None:
        """Let every open stream look for news; from the event loop only."""
        for bell in self._bells:
            bell.set()

    def is_newest(self, panel: dict[str, Any] | None) -> bool:
        """Whether a panel is about the sheet as it is known now."""
        key = (self.record.generation, self.record.revision)
        return panel is not None and (panel["generation"], panel["revision"]) == key

    def compute(self) -> asyncio.Task[None]:
        """See to it that the statistics follow the sheet; older ones on the way are dropped."""
        if self._computing is None or self._computing.done():
            self._computing = asyncio.create_task(self._follow())
        return self._computing

    async def panel(self) -> dict[str, Any]:
        """Return the statistics of the newest revision."""
        await asyncio.to_thread(self.record.refresh)
        while not self.is_newest(self._panel):
            await asyncio.shield(self.compute())
            await asyncio.to_thread(self.record.refresh)
        assert self._panel is not None
        return self._panel

    async def _follow(self) -> None:
        """Compute until the statistics are those of the newest revision."""
        loop = asyncio.get_running_loop()
        while not self.is_newest(self._panel):
            try:
                self._panel = await loop.run_in_executor(self._pool, self._newest_panel)
            except DetectError:
                return  # the sheet or its log cannot be read, which each stream tells
            self.ring()

    def _newest_panel(self) -> dict[str, Any]:
        """Compute the statistics of a snapshot, and say of which revision it is."""
        revision, generation, found, now, changes = self.record.snapshot()
        try:
            panel = self._panel_of(found, now, changes)
        except Exception:
            # A bug in statistics must not stop the review, nor be tried again without end.
            traceback.print_exc()
            panel = dict.fromkeys(("now", "before", "said", "frequencies", "quadrats"))
            panel |= {"trouble": _NO_STATISTICS, "verdict_changed": False}
        return {"revision": revision, "generation": generation, **panel}

    async def stream(self, after: int, generation: str | None) -> AsyncIterator[str]:
        """Yield what happens from a revision on, as server-sent events.

        Parameters
        ----------
        after : int
            The revision that the page knows.
        generation : str or None
            The generation that it knows; None for the present one.
        """
        bell = asyncio.Event()
        self._bells.add(bell)
        told: dict[str, Any] = {"revision": after, "generation": generation, "still": 0.0}
        try:
            while not self.ending:
                bell.clear()
                said = [text async for text in self._news(told)]
                told["still"] = 0.0 if said else told["still"] + POLL_S
                if told["still"] >= _STILL_S:
                    said, told["still"] = [": still here\n\n"], 0.0
                for text in said:
                    yield text
                try:
                    await asyncio.wait_for(bell.wait(), POLL_S)
                except TimeoutError:
                    continue
            yield event("bye", {})
        finally:
            self._bells.discard(bell)

    async def _news(self, told: dict[str, Any]) -> AsyncIterator[str]:
        """Yield what one page has not been told yet."""
        try:
            await asyncio.to_thread(self.record.refresh)
        except DetectError as trouble:
            error = {"error": self._shapes.trouble(trouble)}
            if told.get("trouble") != error:
                told["trouble"] = error
                yield event("trouble", error)
            return
        mended = told.pop("trouble", None) is not None
        generation, newest = self.record.generation, self.record.revision
        known = told["generation"] in (None, generation) and told["revision"] <= newest
        known = known and not mended
        told["generation"] = generation
        if not known:
            told["revision"] = newest
            yield event("reload", {"generation": generation})
        if told["revision"] < newest:
            changes = await asyncio.to_thread(
                self._shapes.changes, self.record, told["revision"], newest
            )
            told["revision"] = newest
            for change in changes:
                yield event("change", change, number=change["revision"])
        async for text in self._statistics(told):
            yield text
        if self.tiles is not None and told.get("tiles") != self.tiles:
            told["tiles"] = dict(self.tiles)
            yield event("tiles", told["tiles"])

    async def _statistics(self, told: dict[str, Any]) -> AsyncIterator[str]:
        """Yield the panel, if it is a new one, or that it is waited for."""
        key = (self.record.generation, self.record.revision)
        if self.is_newest(self._panel):
            if told.get("panel") != key:
                told["panel"] = key
                assert self._panel is not None
                yield event("panel", self._panel)
            return
        self.compute()
        if told.get("waiting") != key:
            told["waiting"] = key
            yield event("panel_wait", {"revision": key[1]})


def event(name: str, data: dict[str, Any], *, number: int | None = None) -> str:
    """Return one server-sent event.

    References
    ----------
    HTML Living Standard (WHATWG), section 9.2, "Server-sent events".
    """
    line = "" if number is None else f"id: {number}\n"
    text = json.dumps(data, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    return f"event: {name}\n{line}data: {text}\n\n"
