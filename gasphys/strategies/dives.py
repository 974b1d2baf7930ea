"""A space of dives with gas switches: what a candidate says is planned as an ascent."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.ascent import Plan, Rules, plan
from gasphys.errors import RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.gas import Gas

__all__ = ["Dives", "Planned"]

Array = NDArray[np.float64]

#: Names of a space that differ between the scenarios of one plan.
_ALONG = ("depth", "bottom_time", "bottom_o2", "bottom_helium", "setpoint")
#: Names that must be the same for all scenarios of one plan.
_APART = ("gradient_low", "gradient_high", "last_stop")
#: Names for each gas of the way up, by its number from 1.
_OF_SWITCH = ("switch_o2", "switch_helium", "switch_depth")


@dataclass(frozen=True)
class Dives:
    """Dives to one depth with the gases of the way up; a space names what differs between candidates.

    Parameters
    ----------
    depth : float, optional
        Depth [depth unit], unless the space gives ``depth``.
    bottom_time : float, optional
        From leaving the surface to leaving the bottom [min], unless the space gives ``bottom_time``.
    gas : Gas or str
        Gas of the bottom, on a loop the diluent; the space may give ``bottom_o2`` and ``bottom_helium``.
    gases : sequence of (gas, deepest)
        Gases of the way up, as for :func:`gasphys.ascent.plan`; of the k-th the space may give
        ``switch_o2_k``, ``switch_helium_k`` and ``switch_depth_k``.
    setpoint : float or str, optional
        Set-point of a loop [kPa]; the space may give ``setpoint`` [kPa].
    descent_rate : float
        Rate of the descent [depth unit/min].
    model : str, path or TissueSet
        Model of the ascent.
    rules : Rules, optional
        Rules of the ascent; the space may give ``gradient_low``, ``gradient_high`` and ``last_stop``.
    surface_pressure : float or str
        Pressure at the surface [kPa absolute].
    depth_unit, water : str
        As for :meth:`gasphys.exposure.Exposure.start`.

    Notes
    -----
    Scenarios that share gases and rules of the way up are planned together: give these as a few choices, and
    all else as finely as you like.

    Examples
    --------
    >>> dives = Dives(bottom_time=20, gas="trimix 17/48", gases=[("nitrox 48", 20), ("oxygen", 6)])
    >>> what = xr.Dataset({"depth": ("candidate", [45.0, 56.0])})
    >>> dives.build(what).plan.ascent_time.round(1).values.tolist()
    [15.0, 24.2]
    """

    depth: float | None = None
    bottom_time: float | None = None
    gas: Any = "air"
    gases: Sequence[tuple[Any, Any]] = ()
    setpoint: Any = None
    descent_rate: float = 20.0
    model: Any = "buhlmann_1995_c"
    rules: Rules | None = None
    surface_pressure: Any = 101.325
    depth_unit: str = "msw"
    water: str = "en13319"

    def names(self) -> tuple[str, ...]:
        """Return the names a space may give.

        Returns
        -------
        tuple of str
            Those that are planned together first.

        Examples
        --------
        >>> Dives().names()[:2]
        ('depth', 'bottom_time')
        """
        return (*_ALONG, *self.apart())

    def apart(self) -> tuple[str, ...]:
        """Return the names whose every value is planned apart.

        Returns
        -------
        tuple of str
            Gradients and the gases of the way up.

        Examples
        --------
        >>> "switch_depth_1" in Dives(gases=[("oxygen", 6)]).apart()
        True
        """
        return (*_APART, *(f"{n}_{k + 1}" for k in range(len(self.gases)) for n in _OF_SWITCH))

    def check(self, names: Sequence[str]) -> None:
        """Refuse a space with a name that says nothing, or without what is needed.

        Parameters
        ----------
        names : sequence of str
            Names of a space.

        Raises
        ------
        UnknownNameError
            If a name is unknown.
        RangeError
            If depth or bottom time is given nowhere.

        Examples
        --------
        >>> Dives(depth=30.0).check(["bottom_time"])
        """
        for name in names:
            if name not in self.names():
                raise unknown_name("name in the space of dives", name, self.names())
        for name in ("depth", "bottom_time"):
            if getattr(self, name) is None and name not in names:
                raise RangeError(f"{name} of the dives is given neither by them nor by the space")

    def bottom(self, candidates: xr.Dataset) -> Exposure:
        """Return the candidates from the surface to leaving the bottom.

        Parameters
        ----------
        candidates : Dataset
            Along ``candidate``.

        Returns
        -------
        Exposure
            A scenario each.

        Raises
        ------
        RangeError
            If a gas or time is not possible.

        Examples
        --------
        >>> what = xr.Dataset({"depth": ("candidate", [30.0, 40.0])})
        >>> Dives(bottom_time=20.0).bottom(what).duration
        20.0
        """
        size = candidates.sizes["candidate"]
        depth, time = (self._one(candidates, n) for n in ("depth", "bottom_time"))
        gas = self._bottom_gas(candidates)
        down = np.broadcast_to(depth / self.descent_rate, size)
        rest = np.broadcast_to(time, size) - down
        if not np.all(rest >= 0.0):
            k = int(np.argmin(rest))
            raise RangeError(
                f"bottom_time = {float(np.broadcast_to(time, size)[k]):g} min is shorter than the descent of "
                f"{down[k]:.3g} min"
            )
        start = Exposure.start(
            gas if isinstance(gas, Gas) else self._array(gas, candidates),
            self.surface_pressure,
            depth_unit=self.depth_unit,
            water=self.water,
        )
        if self.setpoint is not None or "setpoint" in candidates:
            held = (
                self._array(candidates["setpoint"].values, candidates)
                if "setpoint" in candidates
                else self.setpoint
            )
            if isinstance(held, xr.DataArray):
                held.attrs["units"] = "kPa"
            start = start.loop(held, gas if isinstance(gas, Gas) else self._array(gas, candidates))
        there = start.travel(
            depth=self._array(np.broadcast_to(depth, size), candidates), rate=self.descent_rate
        )
        return there.stay(self._array(rest, candidates))

    def _one(self, candidates: xr.Dataset, name: str) -> Array:
        given = candidates[name].values if name in candidates else getattr(self, name)
        return np.asarray(given, dtype=float)

    def _array(self, values: Any, candidates: xr.Dataset) -> xr.DataArray:
        if isinstance(values, xr.DataArray):
            return values
        return xr.DataArray(
            np.array(values, dtype=float),
            dims="candidate",
            coords={"candidate": np.arange(candidates.sizes["candidate"])},
            attrs={"units": "min"},
        )

    def _bottom_gas(self, candidates: xr.Dataset) -> Any:
        own = Gas.parse(self.gas)
        if "bottom_o2" not in candidates and "bottom_helium" not in candidates:
            return own
        size = candidates.sizes["candidate"]
        oxygen = np.broadcast_to(
            candidates["bottom_o2"].values if "bottom_o2" in candidates else own.oxygen, size
        )
        helium = np.broadcast_to(
            candidates["bottom_helium"].values if "bottom_helium" in candidates else own.helium, size
        )
        nitrogen = 1.0 - oxygen - helium
        if not np.all((oxygen >= 0.0) & (helium >= 0.0) & (nitrogen >= -1e-9)):
            k = int(np.argmin(nitrogen))
            raise RangeError(
                f"bottom_o2 = {oxygen[k]:g} with bottom_helium = {helium[k]:g} are no gas: leave such "
                "pairs out of the space with only="
            )
        mix = np.stack([oxygen, np.maximum(nitrogen, 0.0), helium], axis=-1)
        return xr.DataArray(
            mix,
            dims=("candidate", "gas"),
            coords={"candidate": np.arange(size), "gas": ["O2", "N2", "He"]},
            attrs={"units": "1"},
        )

    def build(self, candidates: xr.Dataset) -> Planned:
        """Plan the ascents of candidates that share gases and rules of the way up.

        Parameters
        ----------
        candidates : Dataset
            Along ``candidate``.

        Returns
        -------
        Planned
            A scenario each.

        Raises
        ------
        RangeError
            If candidates differ in what must be shared.
        """
        shared: dict[str, Any] = {}
        for name in self.apart():
            if name in candidates:
                values = np.unique(candidates[name].values)
                if len(values) > 1:
                    raise RangeError(f"{name} differs between candidates that are planned together")
                shared[name] = float(values[0])
        rules = self.rules or Rules()
        rules = replace(rules, **{n: shared[n] for n in _APART if n in shared})
        gases = [self._switch(k, shared) for k in range(len(self.gases))]
        bottom = self.bottom(candidates)
        found = plan(bottom, gases, self.model, rules)
        return Planned(self, candidates, bottom, found, gases, rules)

    def _switch(self, k: int, shared: dict[str, Any]) -> tuple[Any, Any]:
        gas, deepest = self.gases[k]
        oxygen, helium, depth = (shared.get(f"{n}_{k + 1}") for n in _OF_SWITCH)
        if oxygen is not None or helium is not None:
            own = Gas.parse(gas)
            gas = Gas(
                oxygen=round(own.oxygen if oxygen is None else oxygen, 9),
                helium=round(own.helium if helium is None else helium, 9),
            )
        return gas, deepest if depth is None else depth


@dataclass(frozen=True)
class Planned:
    """Candidates with their ascents.

    Parameters
    ----------
    dives : Dives
        Where they come from.
    candidates : Dataset
        What they are.
    bottom : Exposure
        Up to leaving the bottom.
    plan : Plan
        To the surface.
    gases : list of (gas, deepest)
        Gases of the way up.
    rules : Rules
        Rules of the ascent.
    """

    dives: Dives
    candidates: xr.Dataset
    bottom: Exposure
    plan: Plan
    gases: list[tuple[Any, Any]]
    rules: Rules
    _lost: dict[str, Plan] = field(default_factory=dict, repr=False, init=False)

    @property
    def exposure(self) -> Exposure:
        """The whole exposure, a scenario a candidate."""
        return self.plan.exposure

    def longer(self, minutes: Any) -> Planned:
        """Return the same dives with more minutes at the bottom.

        Parameters
        ----------
        minutes : array
            More time of each candidate [min].

        Returns
        -------
        Planned
            Planned anew.
        """
        time = np.broadcast_to(self.dives._one(self.candidates, "bottom_time"), np.shape(minutes))
        return self.dives.build(self.candidates.assign(bottom_time=("candidate", time + minutes)))

    def without(self) -> dict[str, Plan]:
        """Return the ascents when one gas of the way up is lost, by the name of the gas.

        Returns
        -------
        dict
            Planned from leaving the bottom.
        """
        for gas, _ in self.gases:
            name = str(gas)
            if name not in self._lost:
                self._lost[name] = plan(self.bottom, self.gases, self.dives.model, self.rules, without=gas)
        return self._lost
