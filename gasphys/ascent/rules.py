"""The rules of an ascent: rates, the grid of stops, gradients, and the gases to switch to."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from gasphys.errors import RangeError, UnitError, unknown_name
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.quantities import quantity
from gasphys.units import parse_quantity, unit

__all__ = ["Breaks", "Loop", "Rules", "Source"]

#: Depth unit to the default ascent rate, spacing of stops and last stop.
DEFAULTS = {"m": (9.0, 3.0, 3.0), "msw": (9.0, 3.0, 3.0), "fsw": (30.0, 10.0, 10.0)}


@dataclass(frozen=True)
class Breaks:
    """Breaks on another gas, taken at stops while a gas of high PO2 is breathed.

    Parameters
    ----------
    every : float
        Uninterrupted minutes at or above `from_po2` after which a break is due [min].
    minutes : float
        Length of a break [min].
    gas : Gas or str
        What is breathed in it, on open circuit.
    from_po2 : float or str
        PO2 from which minutes are counted [kPa absolute], or text such as ``"1.4 bar"``.
    counted : bool
        True: a break is part of the stop. False: it comes on top, so that the minutes on the stop's own gas
        are at least those the model asks for without it.

    Raises
    ------
    RangeError
        If a value is not possible.

    Notes
    -----
    Either way the tissues follow what is breathed and the limit is kept as breathed. A break is taken at
    stops only; one that falls due on the way is taken at the next stop, and one under way when the stop may
    end is not finished. Minutes below `from_po2` set the count back to none. How often and how long is
    custom, not measured: this library has no default.

    Examples
    --------
    >>> str(Breaks(20, 5, "air", "1.4 bar"))
    'break of 5 min on air after 20 min at 140 kPa or more, counted as stop time'
    """

    every: float
    minutes: float
    gas: Any
    from_po2: Any
    counted: bool = True

    def __post_init__(self) -> None:
        for name in ("every", "minutes"):
            if not 0.0 < float(getattr(self, name)) < math.inf:
                raise RangeError(f"breaks: {name} = {getattr(self, name)} min must be positive")
        one = quantity("breathing_gas_po2")
        value = one.from_text(self.from_po2) if isinstance(self.from_po2, str) else float(self.from_po2)
        if not one.possible[0] <= value <= one.possible[1]:
            raise one.range_error(value)
        object.__setattr__(self, "from_po2", value)
        object.__setattr__(self, "gas", Gas.parse(self.gas))

    def source(self) -> Source:
        """Return the gas of the break as an entry of the gases that no depth asks for.

        Returns
        -------
        Source
            Of negative deepest depth.

        Examples
        --------
        >>> Breaks(20, 5, "air", 140.0).source().name
        'air'
        """
        return Source(str(self.gas), self.gas, math.nan, -1.0)

    def __str__(self) -> str:
        how = "counted as stop time" if self.counted else "on top of the stop time"
        return (
            f"break of {self.minutes:g} min on {self.gas} after {self.every:g} min at "
            f"{self.from_po2:.4g} kPa or more, {how}"
        )


@dataclass(frozen=True)
class Rules:
    """How an ascent is made, in the exposure's depth unit.

    Parameters
    ----------
    ascent_rate : float or mapping, optional
        Rate [depth unit/min]; or the depth above which each rate holds: ``{0: 3, 6: 9}`` is 3 up from 6 and
        9 deeper. Default 9, in fsw 30.
    stop_spacing, last_stop : float, optional
        Distance of stops and depth of the shallowest [depth unit]. Default 3 and 3, in fsw 10 and 10.
    whole_minutes : bool
        Whether a stop is rounded up to whole minutes.
    gradient_low, gradient_high : float
        Share of the tolerated supersaturation used at the first stop and at the surface [1]; 1 is the
        model as published.
    shortest_stop : float
        A stop, where there is one, lasts at least this long [min].
    switch_minutes : float
        Time taken at the depth of a switch, on the new gas [min].
    breaks : Breaks, optional
        Breaks on another gas at stops.

    Raises
    ------
    RangeError
        If a value is not possible.

    Examples
    --------
    >>> Rules(gradient_low=0.4, gradient_high=0.8).filled("msw").stop_spacing
    3.0
    """

    ascent_rate: float | Mapping[float, float] | None = None
    stop_spacing: float | None = None
    last_stop: float | None = None
    whole_minutes: bool = True
    gradient_low: float = 1.0
    gradient_high: float = 1.0
    shortest_stop: float = 0.0
    switch_minutes: float = 0.0
    breaks: Breaks | None = None

    def __post_init__(self) -> None:
        for name in ("stop_spacing", "last_stop"):
            value = getattr(self, name)
            if value is not None and not 0.0 < float(value) < math.inf:
                raise RangeError(f"{name} = {value} must be positive")
        for name in ("shortest_stop", "switch_minutes"):
            if not 0.0 <= float(getattr(self, name)) < math.inf:
                raise RangeError(f"{name} = {getattr(self, name)} min must not be negative")
        for name in ("gradient_low", "gradient_high"):
            if not 0.0 < float(getattr(self, name)) <= 1.0:
                raise RangeError(f"{name} = {getattr(self, name)} must be above 0 and at most 1")
        if not self.gradient_low <= self.gradient_high:
            raise RangeError(
                f"gradient_low = {self.gradient_low} must not exceed gradient_high = {self.gradient_high}"
            )
        if self.ascent_rate is not None:
            self.bands()

    def bands(self) -> tuple[tuple[float, float], ...]:
        """Return the rates as (upper edge of the band [depth unit], rate), deepest band first.

        Returns
        -------
        tuple
            The last band begins at the surface.

        Examples
        --------
        >>> Rules(ascent_rate={0: 3, 6: 9}).bands()
        ((6.0, 9.0), (0.0, 3.0))
        """
        given = self.ascent_rate
        pairs = given.items() if isinstance(given, Mapping) else [(0.0, given)]
        found = sorted(((float(edge), float(rate or 0.0)) for edge, rate in pairs), reverse=True)
        if not found or found[-1][0] != 0.0:
            raise RangeError("ascent_rate: one of the bands must begin at depth 0")
        for edge, rate in found:
            if not (edge >= 0.0 and 0.0 < rate < math.inf):
                raise RangeError(f"ascent_rate = {rate} above {edge}: rates must be positive")
        return tuple(found)

    def filled(self, depth_unit: str) -> Rules:
        """Return the rules with the defaults of a depth unit where nothing is given.

        Parameters
        ----------
        depth_unit : {"msw", "fsw", "m"}
            Unit of depths.

        Returns
        -------
        Rules
            Complete.

        Examples
        --------
        >>> Rules().filled("fsw").ascent_rate
        30.0
        """
        rate, spacing, last = DEFAULTS[depth_unit]
        return replace(
            self,
            ascent_rate=rate if self.ascent_rate is None else self.ascent_rate,
            stop_spacing=spacing if self.stop_spacing is None else float(self.stop_spacing),
            last_stop=last if self.last_stop is None else float(self.last_stop),
        )


@dataclass(frozen=True)
class Loop:
    """A loop that may stand in the list of gases of a plan.

    Parameters
    ----------
    setpoint : float or str
        PO2 [kPa absolute], or text such as ``"1.3 bar"``.
    diluent : Gas or str
        Diluent.

    Raises
    ------
    RangeError
        If the set-point is not possible.

    Examples
    --------
    >>> Loop("1.3 bar", "air").setpoint
    130.0
    """

    setpoint: Any
    diluent: Any

    def __post_init__(self) -> None:
        one = quantity("setpoint")
        value = one.from_text(self.setpoint) if isinstance(self.setpoint, str) else float(self.setpoint)
        if not one.possible[0] <= value <= one.possible[1]:
            raise one.range_error(value)
        object.__setattr__(self, "setpoint", value)
        object.__setattr__(self, "diluent", Gas.parse(self.diluent))

    def __str__(self) -> str:
        return f"loop at {self.setpoint:.4g} kPa, diluent {self.diluent}"


@dataclass(frozen=True)
class Source:
    """One entry of the list of gases: what is breathed, and down to which depth.

    Parameters
    ----------
    name : str
        Name for the plan.
    gas : Gas
        Gas, on a loop the diluent.
    setpoint : float
        Loop set-point [kPa]; NaN on open circuit.
    deepest : float
        Deepest depth of use [depth unit]; NaN where `po2_limit` decides.
    po2_limit : float
        Highest PO2 it is breathed at [kPa]; NaN where `deepest` decides.
    """

    name: str
    gas: Gas
    setpoint: float
    deepest: float
    po2_limit: float = math.nan


def read_gases(gases: Sequence[tuple[Any, Any]], without: Any, depth_unit: str) -> tuple[Source, ...]:
    """Read the list of gases of a plan.

    Parameters
    ----------
    gases : sequence of (gas, deepest)
        A Gas, its name or a :class:`Loop`; the deepest depth of use [depth unit], or text: a depth such as
        ``"21 msw"`` or a PO2 such as ``"1.6 bar"``.
    without : Gas, str or None
        A gas of the list that is not to be used.
    depth_unit : str
        Unit of depths.

    Returns
    -------
    tuple of Source
        In the order given.

    Raises
    ------
    UnknownNameError
        If `without` is not in the list.
    RangeError
        If a depth is negative.

    Examples
    --------
    >>> read_gases([("oxygen", 6.0)], None, "msw")[0].deepest
    6.0
    """
    found = []
    for entry in gases:
        try:
            gas, deepest = entry
        except (TypeError, ValueError):
            raise UnitError("gases is a list of pairs: (gas, deepest depth of use)") from None
        loop = isinstance(gas, Loop)
        mix = gas.diluent if loop else Gas.parse(gas)
        limit = math.nan
        if isinstance(deepest, str):
            number, given = parse_quantity(deepest)
            if given and given != depth_unit:
                if unit(given).gauge:
                    raise UnitError(f"{deepest!r}: depths of this exposure are in {depth_unit}")
                limit, number = quantity("breathing_gas_po2").from_text(deepest), math.nan
            deepest = number
        depth = float(deepest)
        if not (depth >= 0.0 or limit > 0.0):
            raise RangeError(f"deepest depth of {mix} = {depth:g} {depth_unit} must not be negative")
        found.append(
            Source(str(gas) if loop else str(mix), mix, gas.setpoint if loop else math.nan, depth, limit)
        )
    if without is None:
        return tuple(found)
    lost = str(without) if isinstance(without, Loop) else str(Gas.parse(without))
    if lost not in [s.name for s in found]:
        raise unknown_name("gas of the plan", lost, [s.name for s in found])
    return tuple(s for s in found if s.name != lost)


def as_measured(
    exposure: Exposure, gases: Sequence[tuple[Any, Any]], without: Any, measured: Mapping[str, Any]
) -> tuple[Exposure, list[tuple[Any, Any]], Any]:
    """Put measured mixes where the planned ones stand.

    Parameters
    ----------
    exposure : Exposure
        The way to the bottom.
    gases : sequence of (gas, deepest)
        As for :func:`read_gases`.
    without : Gas, str, Loop or None
        The gas that is lost, by its planned name.
    measured : mapping
        Name of a planned mix to the Gas found.

    Returns
    -------
    tuple
        Exposure, gases and `without`, with the measured mixes.

    Raises
    ------
    UnknownNameError
        If a planned mix is neither breathed at the bottom nor listed.

    Examples
    --------
    >>> bottom = Exposure.start("air").travel(depth=30, rate=20)
    >>> _, gases, _ = as_measured(bottom, [("nitrox 48", 20.0)], None, {"nitrox 48": "nitrox 46.5"})
    >>> str(gases[0][0])
    'nitrox 46.5'
    """
    pairs = [(Gas.parse(planned), Gas.parse(found)) for planned, found in measured.items()]

    def found_for(gas: Any) -> Any:
        if isinstance(gas, Loop):
            return replace(gas, diluent=found_for(gas.diluent))
        own = Gas.parse(gas)
        return next((found for planned, found in pairs if planned == own), own)

    listed = [entry[0].diluent if isinstance(entry[0], Loop) else Gas.parse(entry[0]) for entry in gases]
    for planned, found in pairs:
        changed = _rebreathed(exposure, planned, found)
        if changed is None and planned not in listed:
            here = [exposure.gas_name(len(exposure.part) - 1)] if not exposure.dims else []
            raise unknown_name("planned mix", str(planned), [*here, *map(str, listed)])
        note = f"{found} as measured in place of the planned {planned}"
        exposure = replace(changed or exposure, history=(*exposure.history, note))
    return (
        exposure,
        [(found_for(gas), deepest) for gas, deepest in gases],
        (None if without is None else found_for(without)),
    )


def _rebreathed(exposure: Exposure, planned: Gas, found: Gas) -> Exposure | None:
    """Return the exposure with one gas, or diluent, in place of another; None where it is not breathed."""
    formulas = [f for f in FORMULAS if f in exposure.fractions or found.fraction(f) or planned.fraction(f)]

    def alike(given: Mapping[str, Any]) -> Any:
        return np.all(
            [np.abs(np.asarray(given.get(f, 0.0)) - planned.fraction(f)) < 1e-9 for f in formulas], axis=0
        )

    def turned(given: Mapping[str, Any]) -> dict[str, Any]:
        same = alike(given)
        return {f: np.where(same, found.fraction(f), given.get(f, 0.0)) for f in formulas}

    there = {f: np.asarray(v) for f, v in exposure.fractions.items()}
    if not (np.any(alike(there)) or np.any(alike(exposure.gas))):
        return None
    state = {f: (v if v.ndim else float(v)) for f, v in turned(exposure.gas).items()}
    return replace(exposure, fractions=turned(there), gas=state)
