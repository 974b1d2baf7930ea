"""What a command line or a sentence says of an ascent: gases, breaks, rates; and a log cut at its bottom."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from typing import Any

import numpy as np

from gasphys.ascent.rules import Breaks, Loop
from gasphys.constants import MSW
from gasphys.errors import ExposureError, GasphysError, UnitError
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.units import parse_quantity

__all__ = ["breaks_from_text", "gas_from_text", "rate_from_text", "until_leaving"]

_LOOP = re.compile(r"loop\s+(?P<setpoint>.+?)\s+(?:on|diluent)\s+(?P<diluent>.+)", re.IGNORECASE)
_BREAKS = re.compile(
    r"(?P<minutes>\S+)\s*min\s+on\s+(?P<gas>.+?)\s+every\s+(?P<every>\S+)\s*min\s+from\s+(?P<po2>.+?)"
    r"(?P<top>,?\s+on\s+top)?",
    re.IGNORECASE,
)
#: A log has left its bottom when it is this much above its deepest point for good [msw].
_LEFT = 1.0


def gas_from_text(text: str) -> tuple[Any, Any]:
    """Read one gas of the way up.

    Parameters
    ----------
    text : str
        ``"nitrox 48 from 20 msw"``, ``"nitrox 48@20"``, ``"oxygen from 1.6 bar"`` (a PO2), ``"loop 1.3 bar on
        trimix 10/60 from 56"``.

    Returns
    -------
    tuple
        Gas or :class:`Loop`, and its deepest depth of use as :func:`plan` takes it.

    Raises
    ------
    GasphysError
        If it cannot be read.

    Examples
    --------
    >>> gas, deepest = gas_from_text("nitrox 48 from 20 msw")
    >>> str(gas), deepest
    ('nitrox 48', '20 msw')
    """
    parts = re.split(r"\s+from\s+|\s*@\s*", text.strip(), flags=re.IGNORECASE)
    if len(parts) != 2 or not all(parts):
        raise UnitError(
            f"{text!r}: write a gas and its deepest depth of use, such as 'nitrox 48 from 20 msw'"
        )
    parse_quantity(parts[1])
    loop = _LOOP.fullmatch(parts[0])
    if loop is not None:
        return Loop(loop["setpoint"], loop["diluent"]), parts[1]
    return Gas.parse(parts[0]), parts[1]


def breaks_from_text(text: str) -> Breaks:
    """Read the rule of breaks.

    Parameters
    ----------
    text : str
        ``"5 min on air every 20 min from 1.4 bar"``; with ``", on top"`` it is not counted as stop time.

    Returns
    -------
    Breaks
        The rule.

    Raises
    ------
    GasphysError
        If it cannot be read.

    Examples
    --------
    >>> breaks_from_text("5 min on air every 20 min from 1.4 bar, on top").counted
    False
    """
    found = _BREAKS.fullmatch(text.strip())
    if found is None:
        raise UnitError(
            f"{text!r}: write breaks as '5 min on air every 20 min from 1.4 bar' and, if so, ', on top'"
        )
    return Breaks(
        _number(found["every"], text),
        _number(found["minutes"], text),
        found["gas"],
        found["po2"],
        not found["top"],
    )


def rate_from_text(text: str) -> float | dict[float, float]:
    """Read an ascent rate, or rates by depth.

    Parameters
    ----------
    text : str
        ``"9"``, or ``"9, 3 above 6"`` [depth unit/min, depth unit].

    Returns
    -------
    float or dict
        As :class:`Rules` takes it.

    Raises
    ------
    GasphysError
        If it cannot be read.

    Examples
    --------
    >>> rate_from_text("9, 3 above 6")
    {6.0: 9.0, 0.0: 3.0}
    """
    first, *others = (part.strip() for part in text.split(","))
    if not others:
        return _number(first, text)
    edges, rates = [], [_number(first, text)]
    for part in others:
        rate, word, edge = part.partition(" above ")
        if not word:
            raise UnitError(f"{text!r}: write rates as '9, 3 above 6': the deepest first")
        edges.append(_number(edge, text))
        rates.append(_number(rate, text))
    return dict(zip([*edges, 0.0], rates, strict=True))


def _number(text: str, whole: str) -> float:
    try:
        value = float(text)
    except ValueError:
        raise UnitError(f"{whole!r}: {text!r} is not a number") from None
    if not math.isfinite(value):
        raise UnitError(f"{whole!r}: {text!r} is not a finite number")
    return value


def until_leaving(exposure: Exposure, leave: float | None = None) -> tuple[Exposure, list[tuple[Any, Any]]]:
    """Cut an exposure where it leaves its bottom, and name the gases breathed after that.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    leave : float, optional
        When the ascent begins [min]; default the last instant within 1 msw of the greatest depth.

    Returns
    -------
    tuple
        The exposure up to there, and the gases of the rest as :func:`plan` takes them: each with the depth
        at which it was first breathed, rounded up to a tenth.

    Raises
    ------
    ExposureError
        If the time lies outside the exposure, or at the surface.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=40, rate=20).stay(20).travel(depth=6, rate=9)
    >>> bottom, gases = until_leaving(dive.switch("oxygen").stay(5).travel(depth=0, rate=9))
    >>> bottom.duration, [(str(gas), deepest) for gas, deepest in gases]
    (22.0, [('oxygen', 6.0)])
    """
    if exposure.dims:
        raise ExposureError("an exposure is cut in one scenario; pick one first")
    clock = exposure.pieces().times
    end = exposure.columns["end_pressure"]
    if leave is None:
        top = float(max(end.max(), exposure.columns["start_pressure"].max()))
        deep = np.flatnonzero(end >= top - _LEFT * MSW)
        leave = float(clock[int(deep[-1]) + 1]) if deep.size else 0.0
    if not 0.0 < leave <= clock[-1] * (1.0 + 1e-12):
        raise ExposureError(
            f"the ascent cannot begin at {leave:g} min: the exposure lasts {clock[-1]:.4g} min"
        )
    cut = exposure._split([leave])
    keep = int(np.searchsorted(cut.pieces().times, leave - 1e-9))
    gases: dict[str, tuple[Any, float]] = {}
    for k in range(keep, len(cut.part)):
        name = cut.gas_name(k)
        depth = max(float(cut._pressure_to_depth(cut.columns["start_pressure"][k])), 0.0)
        mix = Gas(**{FORMULAS[g]: float(v[k]) for g, v in cut.fractions.items() if g != "N2"})
        setpoint = float(cut.columns["setpoint"][k])
        if name != cut.gas_name(keep - 1) and depth > 0.0:
            deepest = math.ceil(max(depth, gases.get(name, (None, 0.0))[1]) * 10.0 - 1e-6) / 10.0
            gases[name] = (mix if math.isnan(setpoint) else Loop(setpoint, mix), deepest)
    bottom = replace(
        cut,
        columns={k: v[:keep] for k, v in cut.columns.items()},
        fractions={k: v[:keep] for k, v in cut.fractions.items()},
        part=cut.part[:keep],
        session=cut.session[:keep],
        gas={k: float(v[keep - 1]) for k, v in cut.fractions.items()},
        pressure=float(cut.columns["end_pressure"][keep - 1]),
        setpoint_now=float(cut.columns["setpoint"][keep - 1]),
        workload=(
            float(cut.columns["o2_uptake_stpd"][keep - 1]),
            float(cut.columns["ventilation_btps"][keep - 1]),
        ),
    )
    if not float(bottom._pressure_to_depth(bottom.pressure)) > 0.0:
        raise GasphysError(f"at {leave:g} min the exposure is at the surface; there is no ascent to plan")
    return bottom, list(gases.values())
