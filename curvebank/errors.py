"""Errors of curvebank: one base, a code a program can act on, a message a person can act on.

A message says what is wrong and what to do next. ``path`` is the JSON path of the offending part of a
recipe (``$.panels[0].axes.flow``) or None. This module is on the cold path: standard library only.
"""


class CurvebankError(Exception):
    """Base of every error the library raises on purpose.

    ``code`` is stable and meant for programs; ``exit_code`` is what the command line returns.
    """

    code = "curvebank"
    exit_code = 1

    def __init__(self, message, *, path=None, code=None, details=None):
        super().__init__(message)
        self.message = message
        self.path = path
        if code is not None:
            self.code = code
        self.details = details or {}

    def to_dict(self):
        """The error as the result format wants it: ``{code, message, path}``."""
        return {"code": self.code, "message": self.message, "path": self.path}


class SheetError(CurvebankError, ValueError):
    """The scan cannot be used: not an image, truncated, too large, encrypted, page not there."""

    code = "sheet"


class OutputError(CurvebankError, OSError):
    """A file or folder cannot be written: full disk, no right to write, a name that is taken."""

    code = "output"


class RecipeError(CurvebankError, ValueError):
    """The recipe is not valid; ``path`` names the place, ``details["errors"]`` lists every fault."""

    code = "recipe"


class UnitError(CurvebankError, ValueError):
    """A unit is not known for its quantity, or a text is not a number."""

    code = "unit"


class CalibrationError(CurvebankError, ValueError):
    """The marks cannot place the axes: too few, coincident, equal values, log of a value <= 0."""

    code = "calibration"


class TraceError(CurvebankError, ValueError):
    """One curve could not be followed: too few clicks, clicks off the panel or off the ink."""

    code = "trace"


class FitError(CurvebankError, ValueError):
    """The points do not support the fit that was asked for."""

    code = "fit"


class LawError(CurvebankError, ValueError):
    """A pump law was asked for something outside its validity."""

    code = "law"


class BankError(CurvebankError):
    """The bank file cannot be used as asked (not a bank, read-only, locked, newer version)."""

    code = "bank"


class NotFound(BankError, LookupError):
    """No such pump, revision or curve; the message lists what there is."""

    code = "not-found"


class OutsideDomain(CurvebankError, ValueError):
    """A number was asked for beyond what was traced; the message names the domain."""

    code = "outside-domain"


class NumberError(CurvebankError, TypeError):
    """Something that is no number where one belongs: text, None, a truth value. Nothing is converted in silence."""

    code = "not-a-number"


class Cancelled(CurvebankError):
    """A progress callback asked to stop. Library code never swallows it."""

    code = "cancelled"


class ExtrapolationWarning(UserWarning):
    """A value was continued beyond the traced range at the reader's request."""


class WithdrawnWarning(UserWarning):
    """A pinned revision has been withdrawn; the message gives the reason and the successor."""
