"""The command that opens the review page."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import typer

from detect.errors import OptionWrong
from detect.gather import gather_sheets
from detect.readers import whole

if TYPE_CHECKING:
    from detect.review.live import Panel


def review_sheets(path: Path, panel: Panel, *, port: str | None, open_page: bool) -> None:
    """Serve the page on which people check the spots of a sheet, or of all sheets of a folder.

    Parameters
    ----------
    path : Path
        A sheet, or a folder of sheets.
    panel : callable
        What the page shows of a sheet's statistics.
    port : str or None
        As typed.
    open_page : bool
        Whether to open the browser.

    Raises
    ------
    RequestWrong
        If there are no sheets, or the port cannot be used.
    """
    from detect.review.serving import serve  # loads the server, which help can do without

    sheets = gather_sheets([path])
    number = whole(port, "--port")
    if number is not None and not 0 <= number < 65536:
        raise OptionWrong(f"--port must be from 0 to 65535, not {number}; 0 is any free one.")
    serve(sheets, panel, port=number, open_page=open_page, say=_say)


def _say(line: str) -> None:
    """Show a line at once, also where it is read by a program."""
    typer.echo(line)
