"""One family of errors, so that a caller can catch everything gasphys refuses.

Every message names the quantity, the value, the unit and what would be accepted.
"""

from __future__ import annotations

__all__ = [
    "ExposureError",
    "GasphysError",
    "InputFileError",
    "NotReachableError",
    "NotTraceable",
    "ProvenanceError",
    "RangeError",
    "UnitError",
    "UnknownNameError",
    "ValidityError",
    "ValidityWarning",
    "unknown_name",
]


class GasphysError(Exception):
    """Base class of every error that gasphys raises on purpose."""


class UnitError(GasphysError, ValueError):
    """A unit is unknown, missing, or belongs to another kind of quantity."""


class RangeError(GasphysError, ValueError):
    """A value is not physically possible for its quantity."""


class ValidityError(GasphysError, ValueError):
    """A value is possible but outside the range an equation was made for."""


class ProvenanceError(GasphysError, ValueError):
    """A number of weaker provenance than the caller accepts would be used."""


class UnknownNameError(GasphysError, KeyError, ValueError):
    """A model, water, table, gas or quantity name that does not exist."""

    def __str__(self) -> str:  # KeyError would print the repr
        return str(self.args[0]) if self.args else ""


class ExposureError(GasphysError, ValueError):
    """An exposure is built in a way that has no meaning."""


class NotTraceable(GasphysError, TypeError):
    """A method that has no meaning for this kind of equation."""


class NotReachableError(GasphysError, ValueError):
    """No input in the possible range gives the wanted result."""


class InputFileError(GasphysError, ValueError):
    """A file that cannot be read as meant; carries file, line, column and a remedy."""

    def __init__(
        self,
        message: str,
        *,
        path: object = "",
        line: int | None = None,
        column: int | None = None,
        remedy: str = "",
    ) -> None:
        self.path = str(path)
        self.line = line
        self.column = column
        self.remedy = remedy
        where = self.path
        if line is not None:
            where += f", line {line}"
        if column is not None:
            where += f", column {column}"
        text = f"{where}: {message}" if where else message
        if remedy:
            text += f". Remedy: {remedy}"
        super().__init__(text)


class ValidityWarning(UserWarning):
    """A result lies outside the range its equation was made for, or an input is impossible."""


def unknown_name(kind: str, name: object, valid: object) -> UnknownNameError:
    """Return the error for an unknown name: it lists the valid ones and the nearest.

    >>> print(unknown_name("water", "salt", ["msw", "fsw", "fresh"]))
    unknown water 'salt'; valid: fresh, fsw, msw
    """
    import difflib

    names = sorted(str(v) for v in valid)  # type: ignore[attr-defined]
    near = difflib.get_close_matches(str(name), names, n=1, cutoff=0.5)
    hint = f"; nearest: {near[0]!r}" if near else ""
    return UnknownNameError(f"unknown {kind} {name!r}; valid: {', '.join(names)}{hint}")
