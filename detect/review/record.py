"""One sheet as it is being reviewed: its state, its log, and how a change gets into both."""

from __future__ import annotations

import errno
import hashlib
import os
import threading
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from io import FileIO
from pathlib import Path
from typing import Any

from detect.amended import Amended
from detect.amendment import Amendment, SchemaNewer
from detect.amendments import amendments_path, append_to, opened_log, read_log
from detect.changes import Changes, change_of_spot, changes_of_spots, summed
from detect.errors import AmendmentRefused, FolderNotWritable, LogCorrupt
from detect.sheet import Sheet, read_sheet

MOST_AMENDMENTS = 500  # in one request
LONGEST = {"id": 100, "who": 100, "text": 2000, "spot": 100, "time": 40}


def sheet_id(path: Path) -> str:
    """Return the name by which requests mean a sheet; it tells nothing and leads nowhere on disk."""
    name = path.name.encode("utf-8", errors="surrogateescape")
    return hashlib.sha256(name).hexdigest()[:16]


@dataclass(frozen=True, slots=True)
class Refusal:
    """A change that was not made.

    Parameters
    ----------
    id : str
        As it was sent.
    code : {"invalid", "id_taken", "refused"}
    message : str
        Why, as a sentence.
    """

    id: str
    code: str
    message: str


@dataclass(slots=True)
class Answer:
    """What became of the changes that were asked for.

    Parameters
    ----------
    before, revision : int
        Revisions of the sheet before and after.
    acknowledged : list of str
        Ids that are in the log, on the disk.
    refused : list of Refusal
    trouble : FolderNotWritable or None
        Why the changes after the acknowledged ones were not saved.
    """

    before: int
    revision: int = 0
    acknowledged: list[str] = field(default_factory=list)
    refused: list[Refusal] = field(default_factory=list)
    trouble: FolderNotWritable | None = None

    @property
    def disk_is_full(self) -> bool:
        """Whether it is room that is missing."""
        cause = None if self.trouble is None else self.trouble.__cause__
        return isinstance(cause, OSError) and cause.errno in (errno.ENOSPC, errno.EDQUOT)


class Record:
    """A sheet on disk with its log, kept up with what anybody adds to it.

    Parameters
    ----------
    path : Path
        The sheet. It is read when first needed.

    Notes
    -----
    All methods may be called from any thread. A change is checked, appended and forced to the disk,
    and applied, in this order, while this process and all others are kept from the log.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self.id = sheet_id(path)
        self.lock = threading.RLock()
        self._log_path = amendments_path(path)
        self._amended: Amended | None = None
        self._rereadings = 0
        self._forget()

    def _forget(self) -> None:
        """Know nothing of sheet and log, so that both are read anew."""
        self._amended = None
        self._sheet_state, self._end, self._lines, self.torn = "", 0, 0, False
        self._log_inode = 0
        self._kinds: dict[str, str] = {}
        self._counted: Counter[str] = Counter()

    @property
    def amended(self) -> Amended:
        """The sheet with all changes read so far; call `refresh` first."""
        if self._amended is None:
            self.refresh()
        assert self._amended is not None
        return self._amended

    @property
    def revision(self) -> int:
        """How many changes there are."""
        return len(self.amended.log)

    def refresh(self) -> None:
        """Take up what anybody has added to the log, or that the photograph was detected again.

        Raises
        ------
        SheetUnreadable
            If sheet or log cannot be read; `LogCorrupt` and `LogNewer` are such.
        """
        with self.lock:
            try:
                self._refresh()
            except Exception:
                self._forget()
                raise

    def _refresh(self) -> None:
        state = _state_of(self.path)
        size, inode = _size_and_inode(self._log_path)
        replaced = size < self._end or (inode != self._log_inode and self._log_inode != 0)
        if self._amended is None or state != self._sheet_state or replaced:
            self._read_anew(state, replaced)
        elif size == self._end:
            return
        assert self._amended is not None
        self._log_inode = _size_and_inode(self._log_path)[1]
        part = read_log(self._log_path, start=self._end, lines=self._lines)
        for number, amendment in enumerate(part.amendments, start=self._lines + 1):
            self._take_up(amendment, number)
        self._end, self._lines, self.torn = part.end, part.lines, part.torn

    def _read_anew(self, state: str, replaced: bool) -> None:
        """Read the sheet, because it or its log are other than those known."""
        self._forget()
        self._rereadings += replaced
        self._amended, self._sheet_state = Amended(read_sheet(self.path)), state

    @property
    def generation(self) -> str:
        """What tells one detection, or a log put right by hand, from the next."""
        return f"{self._sheet_state}-{self._rereadings}"

    def _take_up(self, amendment: Amendment, number: int) -> None:
        """Apply one line of the log."""
        amended = self.amended
        known = amended.at_id.get(amendment.id)
        if known is not None:
            if not known.is_same_as(amendment):
                raise LogCorrupt(
                    f"Line {number} of {self._log_path.name} repeats the id {amendment.id!r} for"
                    " another change; put that line right or remove it."
                )
            return
        try:
            amended.check(amendment)
        except AmendmentRefused as trouble:
            raise LogCorrupt(
                f"Line {number} of {self._log_path.name} cannot be applied: the amendment"
                f" {amendment.id!r} {trouble}; put that line right or remove it."
            ) from trouble
        self._apply(amendment)

    def _apply(self, amendment: Amendment) -> None:
        """Apply a change that was checked, and keep count of the kinds of change."""
        amended = self.amended
        amended.apply(amendment)
        for name in self.touched(amendment):
            before = self._kinds.pop(name, None)
            if before is not None:
                self._counted[before] -= 1
            kind = change_of_spot(amended, name) if name in amended else None
            if kind is not None:
                self._kinds[name] = kind
                self._counted[kind] += 1

    def touched(self, amendment: Amendment) -> tuple[str, ...]:
        """Return the ids of all spots that a change is about, for an undo those of what it undoes."""
        if amendment.what in ("undo", "redo"):
            return self.amended.at_id[str(amendment.of)].touched
        return amendment.touched

    def kind(self, name: str) -> str | None:
        """Return what happened to a spot: placed, struck, moved, resized, or None."""
        return self._kinds.get(name)

    def changes(self) -> Changes:
        """Return what all changes come to."""
        with self.lock:
            return summed(self.amended, self._counted)

    def snapshot(self) -> tuple[int, str, Sheet, Sheet, Changes]:
        """Return revision, generation, the sheet as found and as it is now, and the changes."""
        with self.lock:
            amended = self.amended
            now = amended.state()
            return self.revision, self.generation, amended.sheet, now, self.changes()

    def amend(self, asked: Sequence[Any]) -> Answer:
        """Make changes: each is checked, written and forced to the disk, applied, and acknowledged.

        Parameters
        ----------
        asked : sequence
            Amendments as plain values, in order. `time` may be missing.

        Returns
        -------
        Answer
            Those that do not fit are refused one by one. Once one cannot be written, neither it nor
            any after it is made.

        Raises
        ------
        SheetUnreadable
            If sheet or log cannot be read.
        """
        with self.lock:
            self.refresh()
            answer = Answer(self.revision)
            try:
                with opened_log(self._log_path) as file:
                    self.refresh()
                    for values in asked:
                        self._make(values, file, answer)
            except FolderNotWritable as trouble:
                answer.trouble = trouble
            answer.revision = self.revision
            return answer

    def _make(self, values: Any, file: FileIO, answer: Answer) -> None:
        """Make one change, or say why not."""
        name = str(values.get("id", "")) if isinstance(values, dict) else ""
        try:
            amendment = _read(values)
            known = self.amended.at_id.get(amendment.id)
            if known is None:
                self.amended.check(amendment)
        except SchemaNewer as trouble:
            answer.refused.append(Refusal(name, "invalid", f"This change is of {trouble}."))
            return
        except (ValueError, TypeError) as trouble:
            message = f"This change is not understood: {str(trouble).rstrip('.')}."
            answer.refused.append(Refusal(name, "invalid", message))
            return
        except AmendmentRefused as trouble:
            answer.refused.append(Refusal(name, "refused", f"This change {trouble}."))
            return
        if known is None:
            self._end = append_to(file, self._log_path, amendment)
            self._lines += 1
            self.torn = False
            self._log_inode = os.fstat(file.fileno()).st_ino
            self._apply(amendment)
        elif not known.is_same_as(amendment):
            message = f"Another change bears the id {name!r}."
            answer.refused.append(Refusal(name, "id_taken", message))
            return
        answer.acknowledged.append(amendment.id)


def changed_kinds(record: Record) -> list[str | None]:
    """Return for each spot, in the order of the state's, what happened to it."""
    spots = record.amended.state().spots
    return [kind or None for kind in changes_of_spots(record.amended.sheet.spots, spots).tolist()]


def _read(values: Any) -> Amendment:
    """Read an amendment from a request, with the server's clock where it has no time."""
    if isinstance(values, Mapping) and values.get("time") is None:
        now = datetime.now(UTC).isoformat(timespec="milliseconds")
        values = {**values, "time": now}
    amendment = Amendment.from_dict(values)
    texts = [(name, getattr(amendment, name)) for name in LONGEST]
    texts += [("spot", spot) for spot in amendment.touched]
    for name, text in texts:
        if text is not None and len(text) > LONGEST[name]:
            raise ValueError(f"{name} may have {LONGEST[name]} characters, not {len(text)}")
    return amendment


def _state_of(path: Path) -> str:
    """Return what tells one file from what is written in its place."""
    try:
        state = path.stat()
    except OSError:
        return ""
    return f"{state.st_mtime_ns:x}-{state.st_size:x}"


def _size_and_inode(path: Path) -> tuple[int, int]:
    """Return the size of a log and which file it is; zeros where there is none."""
    try:
        state = path.stat()
    except OSError:
        return 0, 0
    return state.st_size, state.st_ino
