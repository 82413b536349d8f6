"""Troubles of the first half, each named for what went wrong.

    DetectError
    ├── RequestWrong            the request cannot be carried out as asked (exit 2)
    │   ├── OptionWrong         an option's value is impossible or does not apply
    │   ├── AreaWrong           a study area given by hand cannot be used
    │   ├── AmendmentRefused    a change does not fit the sheet as it is
    │   ├── TaughtUnreadable    a file of what was learned cannot be used
    │   └── NothingLearned      corrections from which nothing can be learned
    └── PhotographFailed        one photograph cannot be done (exit 1; others go on)
        ├── PhotographUnreadable    the file is no image, is damaged or is too large
        ├── AreaNotFound            the dish or leaf cannot be found in the picture
        ├── ScaleNotFound           the marks or the bar of known length cannot be found in the picture
        ├── SheetUnreadable         a sheet, or its amendments, cannot be read
        │   ├── LogCorrupt          a line of the amendments is no amendment, or does not fit
        │   └── LogNewer            a line of the amendments is of a later version
        └── AmendmentsPresent       a sheet with hand edits would be overwritten
    FolderNotWritable (a RequestWrong) results cannot be written

A message says what is wrong, the value seen, and what to do.
"""

from __future__ import annotations


class DetectError(Exception):
    """Anything a user can cause in the first half; catch this for all of it."""


class RequestWrong(DetectError):
    """The request cannot be carried out as asked; change it and ask again."""


class OptionWrong(RequestWrong):
    """An option's value is impossible, or the option cannot apply here."""


class AreaWrong(RequestWrong):
    """A study area given by hand cannot be used: it crosses itself or misses the picture."""


class AmendmentRefused(RequestWrong):
    """A change does not fit the sheet as it is: no such spot, a taken id, outside the photograph."""


class TaughtUnreadable(RequestWrong):
    """A file of what was learned is missing, damaged, or of a later version."""


class NothingLearned(RequestWrong):
    """Nothing can be learned from these sheets: none reviewed, too few spots, unlike each other."""


class FolderNotWritable(RequestWrong):
    """Results cannot be written where they were asked for."""


class PhotographFailed(DetectError):
    """One photograph cannot be done; the others go on."""


class PhotographUnreadable(PhotographFailed):
    """The file is no image, is damaged, or claims an absurd size."""


class AreaNotFound(PhotographFailed):
    """The dish or the leaf cannot be found in the picture."""


class ScaleNotFound(PhotographFailed):
    """The corner marks, or the bar of known length, cannot be found in the picture."""


class SheetUnreadable(PhotographFailed):
    """A sheet or its amendments cannot be read."""


class LogCorrupt(SheetUnreadable):
    """A line of the amendments cannot be read, or cannot be applied."""


class LogNewer(SheetUnreadable):
    """A line of the amendments was written by a later version."""


class AmendmentsPresent(PhotographFailed):
    """Hand edits exist that a new detection would leave without their sheet."""
