"""Errors that a user can mend, each one message.

::

    FewnmError
    ├── TableError (ValueError)             a table or its rows do not fit the schema
    ├── FormulaError (ValueError)           a formula cannot be read or is not a compound
    ├── UnknownMaterialError (LookupError)  readable, but nothing is known about it
    ├── PhysicsRangeError (ValueError)      a formula was asked outside its validity
    ├── CalibrationError (ValueError)       too few groups for the level asked
    ├── SpecificationError (ValueError)     a specification cannot be run as written
    ├── NothingQualifiesError (ValueError)  the run ended and nothing is left to list
    └── OutputError (OSError)               the output folder cannot take the results
"""

__all__ = [
    "CalibrationError",
    "FewnmError",
    "FormulaError",
    "NothingQualifiesError",
    "OutputError",
    "PhysicsRangeError",
    "SpecificationError",
    "TableError",
    "UnknownMaterialError",
    "explain",
]


class FewnmError(Exception):
    """Base of all errors that a user can mend."""


class TableError(FewnmError, ValueError):
    """A table or its rows do not fit the schema."""


class FormulaError(FewnmError, ValueError):
    """A formula cannot be read or is not a compound."""


class UnknownMaterialError(FewnmError, LookupError):
    """A readable material about which nothing is known."""


class PhysicsRangeError(FewnmError, ValueError):
    """A formula was asked outside its validity range."""


class CalibrationError(FewnmError, ValueError):
    """Too few groups for the level that was asked."""


class SpecificationError(FewnmError, ValueError):
    """A specification that cannot be run as written."""


class NothingQualifiesError(FewnmError, ValueError):
    """The run ended, and no candidate is left to list."""


class OutputError(FewnmError, OSError):
    """The output folder cannot take the results."""


def explain(
    what: str, *, where: str = "", expected: str = "", found: str = "", do: str = ""
) -> str:
    """Build one message: what is wrong, where, what was expected and found, what to do.

    Parameters
    ----------
    what, where, expected, found, do : str
        Parts of the message; empty parts are left out.

    Returns
    -------
    str
        One line of plain words.

    Examples
    --------
    >>> explain("negative diameter", where="row 3", expected="0.8 to 50 nm", found="-2.0")
    'negative diameter at row 3: expected 0.8 to 50 nm, found -2.0'
    """
    head = f"{what} at {where}" if where else what
    facts = ", ".join(
        f"{label} {text}" for label, text in (("expected", expected), ("found", found)) if text
    )
    message = f"{head}: {facts}" if facts else head
    return f"{message}; {do}" if do else message
