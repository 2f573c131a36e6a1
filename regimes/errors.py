"""The errors that a user can meet, each with the exit code of the command line."""

import traceback
from pathlib import Path


class RegimesError(Exception):
    """Base of all errors raised on purpose; the message says what, got, allowed and what to do."""

    exit_code = 1


class CaseError(RegimesError):
    """The case file, or an argument of the command line, cannot be used."""

    exit_code = 2


class DataError(RegimesError):
    """The data cannot answer the question that was asked of them."""

    exit_code = 3


class FitError(RegimesError):
    """A fit could not be made; `partial` holds what was reached before it stopped, if anything."""

    exit_code = 4

    def __init__(self, message: str, partial: object = None):
        super().__init__(message)
        self.partial = partial


def defect(error: Exception) -> str:
    """One line on an error that was not raised on purpose, which lets a developer find the place."""
    place = traceback.extract_tb(error.__traceback__)[-1]
    words = " ".join(str(error).split())
    return (
        f"internal error: {type(error).__name__}: {words} (line {place.lineno} of "
        f"{Path(place.filename).name}); this is a defect of regimes, not of the data; please report it "
        "with this line and the case file"
    )
