"""Grades of bubbles heard or seen: ordinal scales as they are defined, never averaged."""

from __future__ import annotations

import csv
import functools
import io
from collections.abc import Sequence
from dataclasses import dataclass
from importlib import resources

from gasphys.errors import UnknownNameError, ValidityError, unknown_name

__all__ = ["KISMAN_MASUREL", "Grade", "bubble_grades", "kisman_masurel_grade", "median_grade"]

#: The twelve levels of the ordinal scale, from the lowest.
KISMAN_MASUREL = ("0", "I-", "I", "I+", "II-", "II", "II+", "III-", "III", "III+", "IV-", "IV")


@dataclass(frozen=True)
class Grade:
    """One level of a scale.

    Parameters
    ----------
    scale, component, grade, definition, source, provenance : str
        Scale and what of it is graded, the level, what it means, who says so, how that is known.
    """

    scale: str
    component: str
    grade: str
    definition: str
    source: str
    provenance: str


def _rows(name: str) -> list[dict[str, str]]:
    text = resources.files("gasphys.bubbles").joinpath(name).read_text(encoding="utf-8")
    return list(csv.DictReader(io.StringIO(text), strict=True))


@functools.cache
def _grades() -> tuple[Grade, ...]:
    return tuple(Grade(**row) for row in _rows("bubble_grades.csv"))


@functools.cache
def _codes() -> dict[str, str]:
    return {row["code"]: row["grade"] for row in _rows("kisman_masurel_codes.csv")}


def bubble_grades(scale: str = "Spencer") -> tuple[Grade, ...]:
    """Return the levels of a scale in order.

    Parameters
    ----------
    scale : {"Spencer", "Kisman-Masurel", "Eftedal-Brubakk"}
        Name of the scale.

    Returns
    -------
    tuple of Grade
        From the lowest; of the Kisman-Masurel code by component.

    Raises
    ------
    UnknownNameError
        If there is no such scale.

    Notes
    -----
    Definitions from memory. The convention of grading after movement matters: 57 % of grade 4 by a rule of
    one cycle became 3 by a rule of six (abstract read).

    Examples
    --------
    >>> [one.grade for one in bubble_grades("Eftedal-Brubakk")]
    ['0', '1', '2', '3', '4', '5']
    """
    found = tuple(one for one in _grades() if one.scale == scale)
    if not found:
        raise unknown_name("scale of bubbles", scale, dict.fromkeys(one.scale for one in _grades()))
    return found


def kisman_masurel_grade(code: str) -> str:
    """Return the grade a Kisman-Masurel code stands for.

    Parameters
    ----------
    code : str
        Frequency, percentage or duration, and amplitude: three digits.

    Returns
    -------
    str
        One of :data:`KISMAN_MASUREL`.

    Raises
    ------
    ValidityError
        If the code is not in the table; it is not interpolated.

    Notes
    -----
    The table is from memory, to be verified.

    Examples
    --------
    >>> kisman_masurel_grade("323")
    'III'
    """
    text = str(code)
    if text not in _codes():
        raise ValidityError(f"Kisman-Masurel code {text!r} is not in the table: it has no grade")
    return _codes()[text]


def median_grade(grades: Sequence[str], levels: Sequence[str] = KISMAN_MASUREL) -> tuple[str, str]:
    """Return the lower and the upper median of ordinal grades.

    Parameters
    ----------
    grades : sequence of str
        Grades, one at least.
    levels : sequence of str
        Levels of the scale in order.

    Returns
    -------
    tuple of str
        Equal where there is one median; a mean would treat the levels as distances, which they are not.

    Raises
    ------
    UnknownNameError
        If a grade is not a level of the scale, or there is none.

    Examples
    --------
    >>> median_grade(["0", "I", "III", "IV"])
    ('I', 'III')
    """
    order = {level: place for place, level in enumerate(levels)}
    for one in grades:
        if one not in order:
            raise unknown_name("grade", str(one), levels)
    if not grades:
        raise UnknownNameError("a median needs one grade at least")
    ranked = sorted(grades, key=order.__getitem__)
    return ranked[(len(ranked) - 1) // 2], ranked[len(ranked) // 2]
