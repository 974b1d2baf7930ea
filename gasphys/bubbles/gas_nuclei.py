"""Nuclei along an exposure: crushed on every descent, healing ever after.

Of each compartment and gas one number is carried on: by how much the critical radius is below the initial
one, the deficit. Crushing can only raise it, healing lets it fall exponentially, so that
``deficit(t) = max over t' <= t of crushed(t') exp(-(t - t')/tau)``: the greatest crushing and its healing on
one dive, and nuclei carried over on several. States are ``(..., compartment, inert_gas)``.
"""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.bubbles.equations import (
    adjusted_crushing_pressure,
    closed_nucleus_radius,
    crushed_radius,
    minimum_gradient,
    regenerated_radius,
)
from gasphys.bubbles.model_choices import EVIDENCE, VaryingPermeability, varying_permeability
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.maths import find_root
from gasphys.policy import weakest
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.surroundings import depth_at_pressure
from gasphys.tissues.equations import tissue_pressure
from gasphys.tissues.kinetics import (
    Breath,
    Stretches,
    _zero_pressure,
    advance,
    along,
    breath_of,
    inert_pressure,
    stretches,
)
from gasphys.tissues.model import check_gases, initial_state, present

__all__ = [
    "Nuclei",
    "begin",
    "crush",
    "first_supersaturated_depth",
    "nuclei",
    "start_of",
    "supersaturation_start",
]

Array = NDArray[np.float64]

#: Shares of a stretch that are looked at; between them courses are taken to have one turn at most.
_LOOK = np.linspace(0.0, 1.0, 9)
#: Rounds of looking closer at a maximum: each is four times finer, its value sixteen times.
_CLOSER = 12


@dataclass(frozen=True)
class Nuclei:
    """Nuclei of every compartment and gas at one instant.

    Parameters
    ----------
    deficit : array
        Initial less present critical radius [um], ``(..., compartment, inert_gas)``.
    unsaturation : array
        Ambient pressure less gas tension at the very start [kPa], ``(..., compartment)``; 0 where the model
        does not subtract it.
    closed : array of bool
        Whether the skins are closed, ``(..., compartment)``.
    pressure, tension : array
        Ambient pressure and gas tension when they closed [kPa].
    since_surface : array
        Minutes since the surface was left, ``(...)``.
    """

    deficit: Array
    unsaturation: Array
    closed: NDArray[np.bool_]
    pressure: Array
    tension: Array
    since_surface: Array

    def radius(self, model: VaryingPermeability) -> Array:
        """Return the critical radius [um], ``(..., compartment, inert_gas)``.

        Parameters
        ----------
        model : VaryingPermeability
            The model.

        Returns
        -------
        array
            Not above the initial one.

        Examples
        --------
        >>> model = varying_permeability()
        >>> start_of(model, np.full((15, 2), 75.0), 101.325).radius(model)[0].tolist()
        [0.8, 0.7]
        """
        return model.radii - self.deficit


def start_of(model: VaryingPermeability, state: Array, pressure: Any) -> Nuclei:
    """Return uncrushed nuclei.

    Parameters
    ----------
    model : VaryingPermeability
        The model.
    state : array
        Tissues at the start [kPa].
    pressure : float or array
        Ambient pressure they are used to [kPa], ``(...)``.

    Returns
    -------
    Nuclei
        With the unsaturation of that state.

    Examples
    --------
    >>> model = varying_permeability()
    >>> float(start_of(model, np.full((15, 2), [75.0, 0.0]), 101.325).unsaturation[0].round(3))
    12.726
    """
    pressure = np.asarray(pressure, dtype=float)
    rest = pressure[..., None] - state.sum(axis=-1) - model.other_gases
    if not model.crushing_offset:
        rest = np.zeros_like(rest)
    lead = rest.shape[:-1]
    nothing = np.zeros(rest.shape)
    return Nuclei(
        np.zeros((*rest.shape, state.shape[-1])), rest, nothing > 0.0, nothing, nothing, np.zeros(lead)
    )


def _healed(model: VaryingPermeability, deficit: Any, minutes: Any) -> Array:
    """Return what is left of a deficit."""
    return -np.asarray(regenerated_radius.raw(-deficit, 0.0, minutes, model.regeneration_time))


def _open(model: VaryingPermeability, gradient: Array) -> Array:
    """Return the deficit of each gas that a crushing gradient leaves, the skin open."""
    g = np.maximum(gradient, 0.0)[..., None]
    return np.asarray(model.radii - crushed_radius.raw(model.radii, g, *model.skin))


def _closed(model: VaryingPermeability, pressure: Array, at_pressure: Array, tension: Array) -> Array:
    """Return the deficit of each gas in closed nuclei at an ambient pressure."""
    onset = np.asarray(crushed_radius.raw(model.radii, model.onset, *model.skin))
    shape = (*np.broadcast_shapes(pressure.shape, tension.shape), len(onset))
    p, p0, tau = (np.broadcast_to(v[..., None], shape) for v in (pressure, at_pressure, tension))
    # Pressure may have fallen since, while the gradient has not: the trapped gas then opens the radius.
    radius = closed_nucleus_radius.raw(np.maximum(p, p0), np.broadcast_to(onset, shape), p0, tau, *model.skin)
    return np.asarray(model.radii - radius)


def crush(
    model: VaryingPermeability, begin: Nuclei, state: Array, row: Stretches, surface: Any
) -> tuple[Nuclei, Array]:
    """Follow nuclei along a row of stretches.

    Parameters
    ----------
    model : VaryingPermeability
        The model.
    begin : Nuclei
        At the start.
    state : array
        Tissues at every boundary ``(..., compartment, inert_gas, boundary)``, from
        :func:`gasphys.tissues.kinetics.along`.
    row : Stretches
        The stretches.
    surface : float or array
        Pressure at the surface [kPa], ``(...)``.

    Returns
    -------
    tuple
        Nuclei at the end, and deficits at every boundary ``(..., compartment, inert_gas, boundary)`` [um].

    Examples
    --------
    >>> from gasphys.tissues.kinetics import equilibrium
    >>> model = varying_permeability()
    >>> dive = Exposure.start("air").travel(depth=30, minutes=1e-9)
    >>> row, _ = stretches(model.tissues, dive.pieces())
    >>> state = along(model.tissues, equilibrium(model.tissues, 101.325), row)
    >>> end, _ = crush(model, start_of(model, state[..., 0], 101.325), state, row, 101.325)
    >>> end.radius(model)[-1].round(4).tolist()
    [0.5327, 0.4864]
    """
    now, deficits = begin, [begin.deficit]
    for k in range(row.duration.shape[-1]):
        now = _Stretch(model, state[..., k], *row.at(k), np.asarray(surface, dtype=float)).follow(now)
        deficits.append(now.deficit)
    return now, np.stack(np.broadcast_arrays(*deficits), axis=-1)


class _Stretch:
    """One stretch of every scenario."""

    def __init__(
        self,
        model: VaryingPermeability,
        state: Array,
        duration: Array,
        start: Array,
        end: Array,
        first: Array,
        last: Array,
        surface: Array,
    ) -> None:
        self.model, self.state = model, state
        self.duration, self.start, self.end = duration, start, end
        self.first, self.last, self.surface = first, last, surface

    def course(self, share: Array) -> tuple[Array, Array]:
        """Return ambient pressure and gas tension at shares of the stretch, ``(..., compartment)``."""
        part = share[..., None]
        inert = self.first[..., None, :] + (self.last - self.first)[..., None, :] * part
        held = tissue_pressure.raw(
            self.state,
            self.first[..., None, :],
            inert,
            self.duration[..., None, None] * part,
            self.model.tissues.half_time,
        )
        pressure = self.start[..., None] + (self.end - self.start)[..., None] * share
        return pressure, held.sum(axis=-1) + self.model.other_gases

    def follow(self, before: Nuclei) -> Nuclei:
        model = self.model
        cells = np.broadcast_shapes(self.state.shape[:-1], (*self.duration.shape, 1), before.closed.shape)
        if not self.duration.any() and (self.start == self.end).all():
            return before
        self.unsaturation = before.unsaturation
        # The clock of a nucleus: since it was crushed, or since the surface was left.
        top = self.surface * (1.0 + 1e-9)
        submerged, leaves = np.maximum(self.start, self.end) > top, self.start <= top
        earlier = np.where(leaves, 0.0, before.since_surface)
        self.earlier = np.broadcast_to(earlier[..., None], cells)
        shares = [np.broadcast_to(s, cells) for s in _LOOK]
        courses = [self.course(s) for s in shares]
        gradients = [p - tau - self.unsaturation for p, tau in courses]
        best = _healed(model, before.deficit, self.duration[..., None, None])
        over = before.closed | np.any([g >= model.onset for g in gradients], axis=0)
        now = before
        if over.any():
            now, best = self._closing(before, best, shares, courses, gradients)
        if not over.all():
            open_ = ~over[..., None]
            values = np.stack(
                [self._value(s, _open(model, g)) for s, g in zip(shares, gradients, strict=True)]
            )
            best = np.where(open_, np.maximum(best, values.max(axis=0)), best)
            best = self._closer(best, values, open_)
        done = np.where(submerged, earlier + self.duration, 0.0)
        return replace(now, deficit=best, since_surface=done)

    def _value(self, share: Array, deficit: Array) -> Array:
        """Return what is left at the end of the stretch of a deficit at a share of it."""
        if self.model.regeneration_clock == "greatest_crushing":
            minutes = self.duration[..., None] * (1.0 - share)
        else:
            minutes = self.earlier + self.duration[..., None]
        return _healed(self.model, deficit, minutes[..., None])

    def _closer(self, best: Array, values: Array, open_: NDArray[np.bool_]) -> Array:
        """Look closer where the greatest value of open skins lies between instants looked at."""
        top = values.argmax(axis=0)
        inside = open_ & (top > 0) & (top < len(_LOOK) - 1) & (values.max(axis=0) >= best)
        if not inside.any():
            return best
        low, high = _LOOK[np.maximum(top - 1, 0)], _LOOK[np.minimum(top + 1, len(_LOOK) - 1)]
        for _ in range(_CLOSER):
            width = (high - low) / (len(_LOOK) - 1)
            found = np.stack([self._of_gas(low + width * k) for k in range(len(_LOOK))])
            best = np.where(inside, np.maximum(best, found.max(axis=0)), best)
            k = found.argmax(axis=0)
            low, high = low + width * np.maximum(k - 1, 0), low + width * np.minimum(k + 1, len(_LOOK) - 1)
        return best

    def _of_gas(self, share: Array) -> Array:
        """Return the value of open skins where every gas is looked at at its own share."""
        out = []
        for j in range(share.shape[-1]):
            pressure, tension = self.course(share[..., j])
            deficit = _open(self.model, pressure - tension - self.unsaturation)
            out.append(self._value(share[..., j], deficit)[..., j])
        return np.stack(out, axis=-1)

    def _closing(
        self,
        before: Nuclei,
        best: Array,
        shares: list[Array],
        courses: list[tuple[Array, Array]],
        gradients: list[Array],
    ) -> tuple[Nuclei, Array]:
        """Follow skins that close and open between the instants looked at."""
        model, onset = self.model, self.model.onset
        shape = gradients[0].shape
        closed = np.broadcast_to(before.closed, shape) & (gradients[0] >= onset)
        p0, tau0 = (np.broadcast_to(v, shape).copy() for v in (before.pressure, before.tension))
        # A jump of pressure closes at once, at the tension of that instant.
        fresh = (gradients[0] >= onset) & ~closed
        p0 = np.where(fresh, courses[0][1] + self.unsaturation + onset, p0)
        tau0 = np.where(fresh, courses[0][1], tau0)
        closed = closed | fresh

        def note(share: Array, pressure: Array, gradient: Array, shut: NDArray[np.bool_]) -> None:
            nonlocal best
            deficit = _open(model, np.minimum(gradient, onset))
            if shut.any():
                where = shut[..., None]
                deficit = np.where(
                    where, _closed(model, pressure, np.where(shut, p0, pressure), tau0), deficit
                )
            best = np.maximum(best, self._value(share, deficit))

        note(shares[0], courses[0][0], gradients[0], closed)
        for j in range(1, len(shares)):
            one, two = gradients[j - 1], gradients[j]
            crossing = (one >= onset) != (two >= onset)
            if crossing.any():

                def rest(share: Array) -> Array:
                    pressure, tension = self.course(share)
                    return np.asarray(pressure - tension - self.unsaturation - onset)

                at = find_root(rest, shares[j - 1], shares[j])
                at = np.where(crossing, at, shares[j])
                pressure, tension = self.course(at)
                down = crossing & closed
                note(at, pressure, np.where(crossing, onset, 0.0), down)
                up = crossing & ~closed
                p0, tau0 = np.where(up, pressure, p0), np.where(up, tension, tau0)
                closed = (closed | up) & ~down
            note(shares[j], courses[j][0], two, closed)
        return replace(before, closed=closed, pressure=p0, tension=tau0), best


# -- Where supersaturation begins -------------------------------------------------------------------


def supersaturation_start(
    model: VaryingPermeability, state: Array, minutes: Array, start: Array, end: Array, breath: Breath
) -> Array:
    """Return the share of a stretch after which a compartment is supersaturated for the first time.

    Parameters
    ----------
    model : VaryingPermeability
        The model.
    state : array
        Tissues at its start [kPa], ``(..., compartment, inert_gas)``.
    minutes, start, end : array
        Its length [min] and ambient pressures [kPa], ``(...)``.
    breath : Breath
        What is breathed.

    Returns
    -------
    array
        ``(...)``, 0 to 1; NaN where none is.

    Examples
    --------
    One compartment of 20 min that holds 2.322078 atm, from 4 atm at 1 atm/min, dry, no other gases: after
    1.668224 min, a worked example.

    >>> from gasphys.tissues import load
    >>> import dataclasses
    >>> one = load("us_navy_1957", compartments=["20"])
    >>> model = varying_permeability(compartments=one, other_gases=0.0)
    >>> atm = 101.325
    >>> share = supersaturation_start(model, np.array([[2.322078 * atm]]), np.array(3.0), np.array(4 * atm),
    ...     np.array(atm), Breath(np.array(0.21), np.array([0.79]), np.array(np.nan)))
    >>> round(float(3.0 * share), 5)
    1.66822
    """
    first, last = (inert_pressure(model.tissues, p, breath) for p in (start, end))
    zero = _zero_pressure(model.tissues, breath)
    crosses = (start - zero) * (end - zero) < 0.0
    if not crosses.any():
        return _first_over(_Stretch(model, state, minutes, start, end, first, last, start))
    # The alveolar pressure has a kink where a loop leaves no room for inert gas.
    with np.errstate(divide="ignore", invalid="ignore"):
        part = np.where(crosses, (zero - start) / (end - start), 1.0)
    meets = np.where(crosses, zero, end)
    middle = inert_pressure(model.tissues, meets, breath)
    deep = _first_over(_Stretch(model, state, minutes * part, start, meets, first, middle, start))
    held = advance(model.tissues, state, minutes * part, start, meets, breath)
    left = minutes * (1.0 - part)
    shallow = _first_over(_Stretch(model, held, left, meets, end, middle, last, start))
    return np.where(np.isnan(deep), np.where(crosses, part + (1.0 - part) * shallow, np.nan), part * deep)


def _first_over(one: _Stretch) -> Array:
    """Return the share of a stretch at which a gas tension first exceeds the ambient pressure; NaN: none."""
    shape = (*np.broadcast_shapes(one.duration.shape, one.state.shape[:-2]), one.state.shape[-2])

    def over(share: Array) -> Array:
        pressure, tension = one.course(share)
        return np.asarray(np.broadcast_to(tension - pressure, shape))

    values = np.stack([over(np.full(shape, k / 16.0)) for k in range(17)])
    above = values > 0.0
    k = np.argmax(above, axis=0)
    low, high = np.maximum(k - 1, 0) / 16.0, k / 16.0
    root = find_root(over, low, high)
    root = np.where(k == 0, 0.0, np.where(np.isnan(root), high, root))
    root = np.where(above.any(axis=0), root, np.inf).min(axis=-1)
    return np.where(np.isinf(root), np.nan, root)


def first_supersaturated_depth(
    exposure: Exposure,
    ascent_rate: float | None = None,
    model: str | VaryingPermeability = "yount_hoffman_1986",
    initial: Any = None,
) -> Any:
    """Depth at which a continuous ascent from an exposure's end first leaves a compartment supersaturated.

    Parameters
    ----------
    exposure : Exposure
        Ends at the bottom; the ascent is on what it ends with.
    ascent_rate : float, optional
        Rate [depth unit/min]; default 9, in fsw 30.
    model : str or VaryingPermeability
        Compartments and other gases.
    initial : Dataset, DataArray, float or str, optional
        As for :func:`nuclei`.

    Returns
    -------
    float or DataArray
        Depth [depth unit]; 0 where none is before the surface.

    Raises
    ------
    ExposureError
        If the exposure has no piece or the rate is not positive.

    Notes
    -----
    The deepest over the compartments of the depth where the tension of all gases meets the ambient pressure,
    on the exact course of a linear ascent. No stop is asked for below it; the decompression time of the model
    begins there.

    Examples
    --------
    >>> round(first_supersaturated_depth(Exposure.start("air").travel(depth=40, rate=20).stay(20)), 2)
    28.61
    """
    chosen = varying_permeability(model)
    rate = ({"fsw": 30.0}.get(exposure.depth_unit, 9.0)) if ascent_rate is None else float(ascent_rate)
    if not rate > 0.0:
        raise ExposureError(f"ascent_rate = {rate:g} {exposure.depth_unit}/min must be positive")
    state, _, _, _, _ = _followed(chosen, exposure, initial, None)
    pieces = exposure.pieces()
    whole = breath_of(chosen.tissues, pieces)
    breath = Breath(whole.oxygen[..., -1], whole.inert[..., -1, :], whole.setpoint[..., -1])
    surface = np.asarray(exposure.surface_pressure, dtype=float)
    start = pieces.end_pressure[..., -1]
    water = exposure.water if exposure.depth_unit == "m" else exposure.depth_unit
    pick = depth_at_pressure.pick(water=water)  # type: ignore[attr-defined]

    def depth(pressure: Array) -> Array:
        inputs = {"ambient_pressure": pressure, "surface_pressure": surface, "latitude": 45.0}
        return np.asarray(pick.raw(*[np.asarray(inputs[a.name]) for a in pick.arguments]), dtype=float)

    minutes = np.maximum(depth(start), 0.0) / rate
    end = np.broadcast_to(surface, start.shape)
    share = supersaturation_start(chosen, state[..., -1], minutes, start, end, breath)
    found = np.where(np.isnan(share), 0.0, depth(start + (end - start) * np.nan_to_num(share)))
    if not exposure.dims:
        return float(found.reshape(()))
    unit = {"m": "depth", "msw": "depth_msw", "fsw": "depth_fsw"}[exposure.depth_unit]
    meaning = {"long_name": "depth where a continuous ascent first leaves a compartment supersaturated"}
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    return xr.DataArray(
        np.broadcast_to(found, shape),
        dims=exposure.dims,
        coords=dict(exposure.coords),
        name="first_supersaturated_depth",
        attrs=attributes(unit) | meaning,
    )


# -- Along an exposure ------------------------------------------------------------------------------


def begin(model: VaryingPermeability, initial: Any, exposure: Exposure) -> tuple[Array, Nuclei]:
    """Return tissues and nuclei at the start of an exposure.

    Parameters
    ----------
    model : VaryingPermeability
        The model.
    initial : Dataset, DataArray, float, str or None
        As for :func:`nuclei`.
    exposure : Exposure
        Its surface pressure is the default.

    Returns
    -------
    tuple
        Tissues ``(..., compartment, inert_gas)`` [kPa], and nuclei.

    Raises
    ------
    ExposureError
        If the earlier result is of other compartments.

    Examples
    --------
    >>> _, found = begin(varying_permeability(), None, Exposure.start("air"))
    >>> float(found.deficit.max())
    0.0
    """
    state = initial_state(model.tissues, initial, exposure)
    if isinstance(initial, xr.Dataset) and "final_radius" in initial:
        return state, _carried(model, initial, exposure)
    pressure: Any = exposure.surface_pressure
    if isinstance(initial, (str, float, int)):
        one = quantity("ambient_pressure")
        pressure = one.from_text(initial) if isinstance(initial, str) else float(initial)
    return state, start_of(model, state, pressure)


def _carried(model: VaryingPermeability, initial: xr.Dataset, exposure: Exposure) -> Nuclei:
    """Read the nuclei an earlier result ended with."""

    wanted = {"compartment": list(model.tissues.compartments), "inert_gas": list(model.tissues.inert_gases)}

    def read(name: str, *dims: str) -> Array:
        chosen = initial[name].sel({d: wanted[d] for d in dims})
        order = [d for d in exposure.dims if d in chosen.dims]
        lead = [chosen.sizes.get(d, 1) for d in exposure.dims]
        values = chosen.transpose(*order, *dims).values.astype(float)
        return np.asarray(values.reshape((*lead, *(len(wanted[d]) for d in dims))))

    pressure, tension = read("closed_pressure", "compartment"), read("closed_tension", "compartment")
    return Nuclei(
        model.radii - read("final_radius", "compartment", "inert_gas"),
        read("initial_unsaturation", "compartment"),
        ~np.isnan(pressure),
        np.nan_to_num(pressure),
        np.nan_to_num(tension),
        read("since_surface"),
    )


def _followed(
    model: VaryingPermeability, exposure: Exposure, initial: Any, at: Any
) -> tuple[Array, Array, NDArray[np.int64], Nuclei, Nuclei]:
    """Return tissues and deficits at every boundary, where the instants stand, nuclei at both ends."""
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    pieces = exposure.pieces()
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    check_gases(model.tissues, pieces, shape)
    timed = pieces.times.ndim == 1
    row, before = stretches(model.tissues, pieces, *(exposure.sample(at)[1:] if timed else ()))
    state, first = begin(model, initial, exposure)
    cells = (*shape, *model.tissues.half_time.shape)
    states = along(model.tissues, np.broadcast_to(state, cells), row)
    last, deficits = crush(model, first, states, row, exposure.surface_pressure)
    return states, deficits, before, first, last


def nuclei(
    exposure: Exposure,
    model: str | VaryingPermeability = "yount_hoffman_1986",
    initial: Any = None,
    *,
    at: Any = None,
) -> xr.Dataset:
    """Critical radii of nuclei along an exposure: crushed on descents, healing ever after.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    model : str or VaryingPermeability
        A name of :func:`models`, or a model with other choices.
    initial : Dataset, DataArray, float or str, optional
        An earlier result, whose tissues and nuclei are carried over; or tissues, or the pressure at which air
        was long breathed [kPa absolute], with nuclei uncrushed. Default: air at the surface pressure.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``nucleus_radius(compartment, inert_gas, time)``,
        ``crushing_pressure`` (what the radius stands for), ``minimum_gradient``, ``tissue_pressure``,
        ``supersaturation(compartment, time)`` (tension of all gases over ambient pressure); and what an
        exposure that follows takes up: ``final``, ``final_radius``, ``initial_unsaturation``, ...

    Raises
    ------
    ExposureError
        If the exposure has no piece.
    ValidityError
        If the model refuses a gas.

    Notes
    -----
    The skins are open up to the onset of impermeability, and closed while the crushing gradient is beyond it.
    Exposures joined give what they give one after the other. No nucleus was ever seen in a person: the radii
    are parameters of a model.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=30, rate=30).stay(20)
    >>> nuclei(dive).nucleus_radius.sel(compartment="720", inert_gas="N2").values.round(4).tolist()
    [0.8, 0.5327, 0.533]
    """
    chosen = varying_permeability(model)
    states, deficits, before, _, last = _followed(chosen, exposure, initial, at)
    view = exposure.to_dataset(at=at)
    dim = "time" if "time" in view.dims else "point"
    tissues, lead = chosen.tissues, exposure.dims
    shape = tuple(len(exposure.coords[d]) for d in lead)
    count = len(before)
    cells = (*shape, *tissues.half_time.shape)
    radius = np.broadcast_to(chosen.radii[:, None] - deficits[..., before], (*cells, count))
    state = np.broadcast_to(states[..., before], (*cells, count))
    given = view["ambient_pressure"]
    sizes = [given.sizes.get(d, 1) for d in lead]
    values = given.transpose(*(d for d in lead if d in given.dims), ...).values.reshape(*sizes, -1)
    over = state.sum(axis=-2) + chosen.other_gases - values[..., None, :]
    known = weakest([tissues.provenance_of[g] for g in present(tissues, exposure.pieces())])
    more = {"provenance": known, "references": tissues.source}
    ds = xr.Dataset(
        coords={
            "compartment": np.array(tissues.compartments, dtype=str),
            "inert_gas": np.array(tissues.inert_gases, dtype=str),
            **exposure.coords,
        }
    )
    if dim == "time":
        ds = ds.assign_coords(time=view["time"])
    else:
        ds["time"] = view["time"]
    ds["ambient_pressure"] = (given.dims, given.values, attributes("ambient_pressure"))
    both, one = ("compartment", "inert_gas"), ("compartment",)
    ds["initial_radius"] = ("inert_gas", chosen.radii, attributes("initial_nucleus_radius", **more))
    ds["half_time"] = (both, tissues.half_time.copy(), attributes("half_time", **more))
    skin = dict(zip(("surface_tension", "skin_compression"), chosen.skin, strict=True))
    at_gas = (*lead, *both, dim)
    ds["nucleus_radius"] = (at_gas, radius, attributes("nucleus_radius", **more))
    initial_radius = chosen.radii[:, None]
    ds["crushing_pressure"] = (
        at_gas,
        adjusted_crushing_pressure.raw(radius, initial_radius, *chosen.skin),
        attributes("crushing_pressure", **more)
        | _explained(
            "adjusted_crushing_pressure", radius="@nucleus_radius", initial_radius="@initial_radius", **skin
        ),
    )
    ds["minimum_gradient"] = (
        at_gas,
        minimum_gradient.raw(radius, *chosen.skin),
        attributes("bubble_gradient", **more)
        | {"long_name": "least supersaturation that makes a bubble of a nucleus"}
        | _explained("minimum_gradient", radius="@nucleus_radius", **skin),
    )
    ds["tissue_pressure"] = (at_gas, state, attributes("tissue_pressure", **more))
    text = {
        "units": "kPa",
        "long_name": "gas tension of a compartment, other gases counted, over ambient pressure",
    }
    ds["supersaturation"] = ((*lead, *one, dim), over, text)
    shut = np.broadcast_to(last.closed, cells[:-1])
    for name, dims, numbers, attrs, meaning in (
        ("final", both, states[..., -1], attributes("tissue_pressure"), "tissue pressure at the end"),
        ("final_radius", both, last.radius(chosen), attributes("nucleus_radius"), "radius at the end"),
        ("initial_unsaturation", one, last.unsaturation, {"units": "kPa"},
         "ambient pressure less gas tension at the very start"),
        ("closed_pressure", one, np.where(shut, last.pressure, np.nan), attributes("onset_pressure"),
         "ambient pressure at which the skins closed; NaN: open at the end"),
        ("closed_tension", one, np.where(shut, last.tension, np.nan), attributes("onset_tension"),
         "gas tension at which the skins closed; NaN: open at the end"),
        ("since_surface", (), last.since_surface, attributes("duration"), "since leaving the surface"),
    ):  # fmt: skip
        full = np.broadcast_to(numbers, (*shape, *[len(ds[d]) for d in dims]))
        ds[name] = ((*lead, *dims), np.array(full), attrs | {"long_name": meaning})
    ds.attrs = dataset_attributes(
        f"nuclei of the model {chosen.name} along an exposure",
        f"bubbles, model {chosen.name}, parameters {tissues.digest}",
        history=exposure.history,
        references=tissues.references,
        comment=f"Evidence: {EVIDENCE}.",
        provenance=known,
        does_not_claim=tissues.does_not_claim,
        depth_unit=exposure.depth_unit,
        choices=", ".join(f"{k} {v}" for k, v in chosen.choices().items()),
    )
    return ds


def _explained(equation: str, **inputs: Any) -> dict[str, str]:
    return {"equation": f"bubbles.{equation}", "inputs": json.dumps(inputs)}
