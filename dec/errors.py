"""The errors a caller can meet.

::

    DecError
    ├── InputError       (ValueError)        a file, a table or an argument cannot be used
    ├── TopologyError    (ValueError)        cells that do not fit together, or values on the wrong cells
    ├── UnsolvableError  (ArithmeticError)   the problem as posed has no solution
    ├── AccuracyError    (RuntimeError)      the tolerance asked for was not reached; carries the partial result
    └── OutputError      (OSError)           a result could not be written; nothing was replaced

A message says what must be, what was found, where, and a way out. Each class is also the built-in that a
caller would catch anyway. A check that fails is a Finding, not an exception.
"""

__all__ = ["AccuracyError", "DecError", "InputError", "OutputError", "TopologyError", "UnsolvableError"]


class DecError(Exception):
    """Any error that this package raises on purpose."""


class InputError(DecError, ValueError):
    """A file, a table or an argument that cannot be used as it stands."""


class TopologyError(DecError, ValueError):
    """Cells that do not fit together, or values combined on cells that differ."""


class UnsolvableError(DecError, ArithmeticError):
    """A problem that has no solution as posed; the message names the part and its surplus."""


class AccuracyError(DecError, RuntimeError):
    """The tolerance asked for was not reached.

    Attributes
    ----------
    partial : object
        What was computed so far, with its own residual.
    """

    def __init__(self, message: str, partial: object = None) -> None:
        super().__init__(message)
        self.partial = partial


class OutputError(DecError, OSError):
    """A result that could not be written; an existing file is untouched."""
