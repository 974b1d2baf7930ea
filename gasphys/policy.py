"""How strict to be: what happens outside an equation's validity, and how sure numbers must be.

Both are context managers and hold for the current thread or task only.
"""

from __future__ import annotations

import contextlib
import contextvars
import sys
import warnings
from collections.abc import Iterator
from typing import Literal

from gasphys.errors import ProvenanceError, ValidityError, ValidityWarning, unknown_name

__all__ = [
    "PROVENANCE",
    "outside_validity",
    "provenance",
    "require_provenance",
    "validity",
    "validity_mode",
    "weakest",
]

#: How a number is known, strongest first: primary text seen; arithmetic from a stated formula;
#: seen quoted elsewhere; remembered, with confidence.
PROVENANCE = (
    "read",
    "computed",
    "secondary",
    "memory_high",
    "memory_medium",
    "memory_low",
)

_RANK = {word: rank for rank, word in enumerate(PROVENANCE)}


class _Strict:
    """Count of open ``provenance`` contexts: 0 lets the scalar fast path skip the check."""

    active = 0


STRICT = _Strict()

_mode: contextvars.ContextVar[str] = contextvars.ContextVar("gasphys_validity", default="warn")
_weakest_allowed: contextvars.ContextVar[str] = contextvars.ContextVar(
    "gasphys_provenance", default=PROVENANCE[-1]
)


@contextlib.contextmanager
def validity(mode: Literal["raise", "warn", "ignore"]) -> Iterator[None]:
    """Choose what happens to values outside an equation's validity.

    Parameters
    ----------
    mode : {"raise", "warn", "ignore"}
        Raise :class:`~gasphys.errors.ValidityError`, warn (the default), or say nothing.
        Impossible values are not affected: one number raises, an element of an array becomes NaN.

    Returns
    -------
    context manager
        Restores the previous mode on leaving.

    Raises
    ------
    UnknownNameError
        If the mode is none of the three.

    Examples
    --------
    >>> import gasphys as gp
    >>> with gp.validity("ignore"):
    ...     round(gp.lungs.water_vapor_pressure(150.0), 1)
    476.2
    """
    if mode not in ("raise", "warn", "ignore"):
        raise unknown_name("validity mode", mode, ("raise", "warn", "ignore"))
    token = _mode.set(mode)
    try:
        yield
    finally:
        _mode.reset(token)


@contextlib.contextmanager
def provenance(at_least: str) -> Iterator[None]:
    """Refuse equations and numbers of weaker provenance than named.

    Parameters
    ----------
    at_least : str
        One of :data:`PROVENANCE`: ``"secondary"`` refuses every number from memory.

    Returns
    -------
    context manager
        Restores the previous rule on leaving.

    Raises
    ------
    UnknownNameError
        If the word is unknown.

    Examples
    --------
    >>> import gasphys as gp
    >>> with gp.provenance("secondary"):
    ...     gp.laws.boyle_volume(1.0, 101.325, 202.65)
    0.5
    """
    if at_least not in _RANK:
        raise unknown_name("provenance", at_least, PROVENANCE)
    token = _weakest_allowed.set(at_least)
    STRICT.active += 1
    try:
        yield
    finally:
        STRICT.active -= 1
        _weakest_allowed.reset(token)


def validity_mode() -> Literal["raise", "warn", "ignore"]:
    """Return the mode that holds now: what work handed to another thread or process must take along.

    Returns
    -------
    str
        As :func:`validity` takes it.

    Examples
    --------
    >>> with validity("ignore"):
    ...     validity_mode()
    'ignore'
    """
    return _mode.get()  # type: ignore[return-value]


def require_provenance(word: str, what: str) -> None:
    """Raise if `word` is weaker than the current context allows.

    Parameters
    ----------
    word : str
        Provenance of the number about to be used.
    what : str
        What the number belongs to, for the message.

    Raises
    ------
    ProvenanceError
        If it is refused.

    Examples
    --------
    >>> require_provenance("memory_low", "an example")
    """
    allowed = _weakest_allowed.get()
    if _RANK[word] > _RANK[allowed]:
        raise ProvenanceError(f"{what} rests on a number of provenance {word!r}; {allowed!r} was asked for")


def weakest(words: Iterator[str] | tuple[str, ...] | list[str]) -> str:
    """Return the weakest of several provenance words.

    Parameters
    ----------
    words : iterable of str
        Words of :data:`PROVENANCE`.

    Returns
    -------
    str
        The weakest ("read" for none).

    Examples
    --------
    >>> weakest(["read", "memory_high", "secondary"])
    'memory_high'
    """
    return max(words, key=_RANK.__getitem__, default=PROVENANCE[0])


def _callers_level() -> int:
    """Return the stack level of the line that called gasphys, whatever lies between."""
    frame, level = sys._getframe(2), 2
    # Generated shells have no module name.
    while frame and frame.f_globals.get("__name__", "gasphys").partition(".")[0] in _BETWEEN:
        frame, level = frame.f_back, level + 1  # type: ignore[assignment]
    return level


_BETWEEN = ("gasphys", "xarray", "numpy")


def outside_validity(message: str) -> None:
    """Report a value outside validity as the current mode asks.

    Parameters
    ----------
    message : str
        Names quantity, value, unit and range.

    Raises
    ------
    ValidityError
        In mode "raise".

    Examples
    --------
    >>> with validity("ignore"):
    ...     outside_validity("nothing is said")
    """
    mode = _mode.get()
    if mode == "raise":
        raise ValidityError(message)
    if mode == "warn":
        warnings.warn(message, ValidityWarning, stacklevel=_callers_level())
