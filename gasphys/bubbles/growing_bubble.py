"""Growth of free bubbles in tissue along an exposure: any number of radii at once.

State of a bubble: the square of its radius, which vanishes at a finite rate; the shares of its inert gases
but the first; and of each gas all that a volume of tissue holds, dissolved and in bubbles, so that exchange
between the two conserves gas to rounding whatever the step.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.bubbles.equations import (
    bubble_pressure,
    composition_rate,
    gas_inflow,
    perfusion_boundary,
    squared_radius_rate,
    unstirred_boundary,
)
from gasphys.bubbles.model_choices import varying_permeability
from gasphys.bubbles.stiff import integrate
from gasphys.constants import ATMOSPHERE, LN2
from gasphys.errors import ExposureError, RangeError, ValidityError, unknown_name
from gasphys.exposure import Exposure
from gasphys.maths import find_root
from gasphys.quantities import attributes, dataset_attributes
from gasphys.tissues.equations import tissue_pressure
from gasphys.tissues.kinetics import Stretches, breath_of, inert_pressure, stretches
from gasphys.tissues.model import check_gases

__all__ = ["TissueGas", "growth"]

Array = NDArray[np.float64]

#: Below this share of its radius at the start a bubble is taken to be on its way out, in a straight line.
_GONE = 1e-3
#: um3 in a mL.
_PER_ML = 1e-12


@dataclass(frozen=True)
class TissueGas:
    """What one inert gas does in tissue.

    Parameters
    ----------
    diffusivity : float
        In tissue [m2/s]; values of 1 to 3e-9 are in use for nitrogen, from memory.
    solubility : float
        In tissue, volume per volume at the reference pressure [1].
    half_time : float
        Of the tissue's exchange with blood [min]; infinite: closed.
    blood_solubility : float or None
        In blood, likewise; None: as in tissue.

    Raises
    ------
    RangeError
        If a value is not possible.

    Examples
    --------
    >>> TissueGas(half_time=20.0).diffusivity
    2e-09
    """

    diffusivity: float = 2e-9
    solubility: float = 0.0144
    half_time: float = 40.0
    blood_solubility: float | None = None

    def __post_init__(self) -> None:
        for name in ("solubility", "half_time"):
            if not float(getattr(self, name)) > 0.0:
                raise RangeError(f"{name} = {getattr(self, name)} must be positive")
        if not self.diffusivity >= 0.0:
            raise RangeError(f"diffusivity = {self.diffusivity} m2/s must not be negative")


#: Nitrogen in watery tissue: every number from memory, weak.
_NITROGEN = {"N2": TissueGas()}


@dataclass(frozen=True)
class _Surroundings:
    """What lies around the bubbles, in arrays over the gases."""

    gases: tuple[str, ...]
    diffusivity: Array
    solubility: Array
    blood: Array
    half_time: Array
    tension: float
    modulus: float
    metabolic: float
    per_volume: float
    boundary: Callable[[_Surroundings, Array], Array]
    thickness: float
    perfusion: float


def _shell(around: _Surroundings, time: Array) -> Array:
    return np.full((*time.shape, len(around.gases)), 1.0 / around.thickness)


def _perfused(around: _Surroundings, time: Array) -> Array:
    with np.errstate(divide="ignore"):
        one = perfusion_boundary.raw(around.perfusion, around.blood, around.solubility, around.diffusivity)
    return np.broadcast_to(np.where(np.isfinite(one), one, 0.0), (*time.shape, len(around.gases)))


def _unstirred(around: _Surroundings, time: Array) -> Array:
    d = np.maximum(around.diffusivity, 1e-30)
    return np.asarray(unstirred_boundary.raw(np.maximum(time, 1e-12)[..., None], d))


def _quasi_steady(around: _Surroundings, time: Array) -> Array:
    return np.zeros((*time.shape, len(around.gases)))


#: What adds to 1/R: the registry of boundaries.
BOUNDARIES: dict[str, Callable[[_Surroundings, Array], Array]] = {
    "shell": _shell,
    "perfused": _perfused,
    "unstirred": _unstirred,
    "quasi_steady": _quasi_steady,
}


def growth(
    exposure: Exposure,
    radius: Any = 5.0,
    *,
    gases: Mapping[str, TissueGas] | None = None,
    boundary: str = "shell",
    shell_thickness: float = 10.0,
    perfusion: float = 0.01,
    surface_tension: float = 0.05,
    tissue_modulus: float = 0.0,
    metabolic_pressure: float = 0.18 * float(ATMOSPHERE),
    bubbles_per_ml: float = 0.0,
    since: float | None = None,
    initial: xr.Dataset | None = None,
    at: Any = None,
    tolerance: float = 1e-8,
) -> xr.Dataset:
    """Radius of free bubbles in one tissue along an exposure.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time, one scenario.
    radius : float or array
        Radii at the start [um], each a bubble that knows nothing of the others' radii.
    gases : mapping, optional
        ``"N2"`` and ``"He"`` to :class:`TissueGas`; a gas that is breathed must be there. Default: nitrogen
        in watery tissue, half-time 40 min.
    boundary : {"shell", "perfused", "unstirred", "quasi_steady"}
        What surrounds a bubble: a diffusion shell in stirred tissue (three regions), endless perfused
        tissue (two regions), endless tissue that nothing stirs, or nothing but 1/R.
    shell_thickness : float
        Thickness of the shell [um].
    perfusion : float
        Blood flow per volume of tissue [1/min], two regions.
    surface_tension : float
        Surface tension [N/m].
    tissue_modulus : float
        Modulus by which tissue confines a bubble [kPa/um^3]; 1e-3 are 1e18 Pa/m3.
    metabolic_pressure : float
        O2, CO2 and water vapor in bubble and tissue [kPa].
    bubbles_per_ml : float
        Bubbles of each radius in a mL of tissue; above 0 they take from the tissue what they hold: three
        regions only.
    since : float, optional
        When the bubbles appear [min]; default: each when the tissue first exceeds its pressure, held as a
        nucleus of its radius until then.
    initial : Dataset, optional
        An earlier result that goes on; radius and since are then not used.
    at : array_like, optional
        Times to add to the exposure's own [min].
    tolerance : float
        Relative error allowed in a step [1].

    Returns
    -------
    Dataset
        On ``bubble`` and the exposure's ``time``: ``bubble_radius`` (0 when gone, NaN before it appears),
        ``bubble_pressure``, ``bubble_fraction(inert_gas)``, ``tissue_pressure(inert_gas)``;
        ``appearance_time`` and ``vanishing_time`` (NaN: never) and ``growth_index`` (greatest radius over
        that at the start), and the ``final_...`` that go on.

    Raises
    ------
    ExposureError
        If the exposure has no piece or several scenarios.
    ValidityError
        If bubbles are to take gas from endless tissue, a gas is breathed that `gases` lacks, or the ambient
        pressure falls to that of metabolism.
    UnknownNameError
        If there is no such boundary or gas.

    Notes
    -----
    Every parameter is an assumption: no fitted set is published that could be read. A bubble of surface
    tension alone is either on its way out or grows: there is no steady one. Two-region models hold for
    endless tissue and one bubble. A persistent bubble alone needed a tissue time constant of 80 min and
    more to imitate the delay of a linear washout (abstract read). The growth index was fitted to outcomes
    of laboratory dives; its coefficients are not at hand and no risk is given.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=30, rate=20).stay(30).travel(depth=0, rate=9).stay(60)
    >>> found = growth(dive, [1.0, 2.0, 5.0], bubbles_per_ml=1000.0)
    >>> found.growth_index.values.round(1).tolist()
    [1.0, 77.1, 30.9]
    """
    if exposure.dims:
        raise ExposureError("growth takes one scenario; pick one first")
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    if boundary not in BOUNDARIES:
        raise unknown_name("boundary", str(boundary), BOUNDARIES)
    around = _around(
        _NITROGEN if gases is None else gases,
        tension=surface_tension,
        modulus=tissue_modulus,
        metabolic=metabolic_pressure,
        per_volume=bubbles_per_ml * _PER_ML,
        boundary=BOUNDARIES[boundary],
        thickness=shell_thickness,
        perfusion=perfusion,
    )
    if bubbles_per_ml > 0.0 and boundary != "shell":
        raise ValidityError(
            f"boundary {boundary!r} is of endless tissue: bubbles that take from the tissue need 'shell'"
        )
    tissues = varying_permeability().tissues
    pieces = exposure.pieces()
    check_gases(tissues, pieces, ())
    breathed = breath_of(tissues, pieces).inert.max(axis=0)
    for name, share in zip(tissues.inert_gases, breathed, strict=True):
        if share > 0.0 and name not in around.gases:
            raise ValidityError(
                f"{name} is breathed: give its TissueGas in gases, no value is published for all"
            )
    lowest = float(np.minimum(pieces.start_pressure, pieces.end_pressure).min())
    if not lowest > metabolic_pressure:
        raise ValidityError(f"ambient pressure falls to {lowest:.1f} kPa, not above that of metabolism")
    view = exposure.to_dataset(at=at)
    times = view["time"].values.astype(float)
    row, before = stretches(tissues, pieces, *exposure.sample(at)[1:])
    pick = [tissues.inert_gases.index(g) for g in around.gases]
    start = None if initial is None else _carried(initial, around)
    if initial is not None:
        first_radius = initial["initial_radius"].values.astype(float)
        begin = np.where(np.isnan(initial["appearance_time"].values), np.nan, -1.0)
    else:
        first_radius = np.atleast_1d(np.asarray(radius, dtype=float))
        if first_radius.ndim != 1 or not ((first_radius > 0.0) & np.isfinite(first_radius)).all():
            raise RangeError("radius must be one or several positive radii in um")
        begin = np.full(len(first_radius), np.nan if since is None else float(since))
        if since is not None and not 0.0 <= float(since) < times[-1]:
            raise RangeError(f"since = {since:g} min lies outside the exposure, 0 to {times[-1]:g} min")
    run = _Run(
        around, row, pick, np.concatenate([[0.0], np.cumsum(row.duration)]), begin, first_radius, tolerance
    )
    first_inert = inert_pressure(tissues, float(exposure.surface_pressure), _air(tissues))[pick]
    record = run.follow(first_inert if start is None else start[2], start)
    return _dataset(exposure, view, around, boundary, run, record, before)


def _air(tissues: Any) -> Any:
    from gasphys.tissues.kinetics import Breath

    nitrogen = tissues.convention["air_nitrogen"]
    return Breath(
        np.array(1.0 - nitrogen),
        np.array([nitrogen if g == "N2" else 0.0 for g in tissues.inert_gases]),
        np.array(np.nan),
    )


def _around(gases: Mapping[str, TissueGas], **rest: Any) -> _Surroundings:
    names = tuple(g for g in ("N2", "He") if g in gases)
    for g in gases:
        if g not in names:
            raise unknown_name("gas of a bubble", str(g), ("N2", "He"))
    if not names:
        raise ValidityError("gases: name one at least")
    for key in ("tension", "modulus", "metabolic", "per_volume", "perfusion"):
        if not 0.0 <= float(rest[key]) < np.inf:
            raise RangeError(f"{key} = {rest[key]} must not be negative")
    if not rest["thickness"] > 0.0:
        raise RangeError(f"shell_thickness = {rest['thickness']} um must be positive")
    own = [gases[g] for g in names]
    return _Surroundings(
        gases=names,
        diffusivity=np.array([g.diffusivity for g in own]),
        solubility=np.array([g.solubility for g in own]),
        blood=np.array([g.solubility if g.blood_solubility is None else g.blood_solubility for g in own]),
        half_time=np.array([g.half_time for g in own]),
        **rest,
    )


@dataclass
class _Run:
    """One integration: bubbles are lanes, gases columns."""

    around: _Surroundings
    row: Stretches
    pick: list[int]
    times: Array
    begin: Array
    radius: Array
    tolerance: float

    def ambient(self, k: int) -> tuple[float, float, Array, Array]:
        """Return pressure and alveolar inert gas at the ends of a stretch."""
        r = self.row
        return (
            float(r.start_pressure[k]),
            float(r.end_pressure[k]),
            r.start_inert[k, self.pick],
            r.end_inert[k, self.pick],
        )

    def held(self, u: Array, share: Array, pressure: Any) -> tuple[Array, Array, Array]:
        """Return radius, pressure of the gases in bubbles, and what a volume of tissue holds in them."""
        a = self.around
        r = np.sqrt(np.maximum(u, 1e-30))
        inside = bubble_pressure.raw(pressure, r, a.tension, a.modulus, a.metabolic)
        each = share * inside[..., None]
        volume = a.per_volume * (4.0 / 3.0) * np.pi * r * r * r
        return r, each, each * volume[..., None]

    def shares(self, y: Array) -> Array:
        """Return the shares of all gases of a state."""
        n = len(self.around.gases)
        rest = y[..., 1:n]
        return np.concatenate([1.0 - rest.sum(axis=-1, keepdims=True), rest], axis=-1)

    def rates(self, k: int) -> Callable[[Array, Array, NDArray[np.int64]], Array]:
        """Return the right-hand side on a stretch: of time since its start, states and their lanes."""
        a, n = self.around, len(self.around.gases)
        p0, p1, a0, a1 = self.ambient(k)
        length = float(self.row.duration[k])
        slope = (p1 - p0) / length
        speed = float(LN2) / a.half_time
        age = float(self.times[k]) - self.begin

        def rate(time: Array, y: Array, lanes: NDArray[np.int64]) -> Array:
            part = time / length
            pressure = p0 + (p1 - p0) * part
            share = self.shares(y)
            r, each, stored = self.held(y[..., 0], share, pressure)
            dissolved = (y[..., n:] - stored) / a.solubility
            term = a.boundary(a, time + age[lanes])
            flow = gas_inflow.raw(r[..., None], dissolved, each, a.diffusivity, a.solubility, term)
            whole = flow.sum(axis=-1)
            out = np.empty_like(y)
            out[..., 0] = squared_radius_rate.raw(
                r, whole, pressure, slope, a.tension, a.modulus, a.metabolic
            )
            if n > 1:
                inside = each.sum(axis=-1)
                out[..., 1:n] = composition_rate.raw(
                    share[..., 1:], flow[..., 1:], whole[..., None], r[..., None], inside[..., None]
                )
            arriving = a0 + (a1 - a0) * part[..., None]
            out[..., n:] = a.solubility * speed * (arriving - dissolved)
            return out

        return rate

    def quiet(self, k: int, tissue: Array, begin: Any, end: Any) -> Array:
        """Return the tissue without bubbles from one time since the start of a stretch to another."""
        _, _, a0, a1 = self.ambient(k)
        length = float(self.row.duration[k])
        first, last = (a0 + (a1 - a0) * np.asarray(t)[..., None] / length for t in (begin, end))
        minutes = np.asarray(end - begin, dtype=float)[..., None]
        return np.asarray(tissue_pressure.raw(tissue, first, last, minutes, self.around.half_time))

    def appearing(self, k: int, tissue: Array, waiting: NDArray[np.int64]) -> Array:
        """Return when in a stretch the tissue exceeds the pressure of waiting bubbles; NaN: not."""
        a, (p0, p1, _, _) = self.around, self.ambient(k)
        length, radius, zero = float(self.row.duration[k]), self.radius[waiting], np.zeros(len(waiting))

        def over(time: Array) -> Array:
            inside = bubble_pressure.raw(
                p0 + (p1 - p0) * time / length, radius, a.tension, a.modulus, a.metabolic
            )
            return np.asarray(self.quiet(k, tissue[waiting], zero, time).sum(axis=-1) - inside)

        values = np.stack([over(np.full(len(waiting), length * j / 16.0)) for j in range(17)])
        above = values > 0.0
        j = np.argmax(above, axis=0)
        found = find_root(over, length * np.maximum(j - 1, 0) / 16.0, length * j / 16.0)
        found = np.where(j == 0, 0.0, np.where(np.isnan(found), length * j / 16.0, found))
        return np.where(above.any(axis=0), found, np.nan)

    def follow(self, inert: Array, start: tuple[Array, Array, Array] | None) -> dict[str, Array]:
        """Return radius, shares and tissue at every boundary, and when bubbles appeared and vanished."""
        a, n, lanes = self.around, len(self.around.gases), len(self.radius)
        count = len(self.times)
        out = {
            "radius": np.full((lanes, count), np.nan),
            "share": np.full((lanes, n, count), np.nan),
            "tissue": np.full((lanes, n, count), np.nan),
            "gone": np.full(lanes, np.nan),
            "greatest": self.radius.copy(),
        }
        tissue = np.broadcast_to(inert, (lanes, n)).copy()
        y = np.full((lanes, 2 * n), np.nan)
        there, fixed = np.zeros(lanes, dtype=bool), ~np.isnan(self.begin)
        alive = np.zeros(lanes, dtype=bool)
        if start is not None:
            there = ~np.isnan(start[0])
            alive = there & (np.nan_to_num(start[0]) > 0.0)
            y[alive] = self.state(start[0][alive] ** 2, start[1][alive], tissue[alive], self.ambient(0)[0])
        for k in range(count):
            self.note(out, k, y, tissue, there, alive)
            if k == count - 1:
                break
            length = float(self.row.duration[k])
            if length == 0.0:
                continue
            waiting = np.flatnonzero(~there)
            when = np.full(lanes, np.nan)
            if waiting.size:
                due = self.begin[waiting] - self.times[k]
                when[waiting] = np.where(due < length, due, np.nan)
                free = waiting[~fixed[waiting]]
                when[free] = self.appearing(k, tissue, free)
            new = ~np.isnan(when)
            before = np.where(new, when, 0.0)
            if new.any():
                self.begin = np.where(new & ~fixed, self.times[k] + before, self.begin)
                tissue[new] = self.quiet(k, tissue[new], np.zeros(int(new.sum())), before[new])
                whole = tissue[new].sum(axis=-1, keepdims=True)
                # Born with the composition of what is dissolved.
                share = np.where(whole > 0.0, tissue[new] / np.where(whole > 0.0, whole, 1.0), 1.0 / n)
                p0, p1, _, _ = self.ambient(k)
                y[new] = self.state(
                    self.radius[new] ** 2, share, tissue[new], p0 + (p1 - p0) * before[new] / length
                )
                there, alive = there | new, alive | new
            end, over, top = integrate(
                self.rates(k),
                y,
                before,
                length,
                alive,
                gone=(_GONE * self.radius) ** 2,
                tolerance=self.tolerance,
            )
            out["greatest"] = np.fmax(out["greatest"], np.sqrt(np.maximum(top, 0.0)))
            lost = alive & ~np.isnan(over)
            out["gone"][lost] = self.times[k] + over[lost]
            # Without its bubble a tissue goes on by itself, from the moment of vanishing or all along.
            tissue = np.where(lost[:, None], end[:, n:] / a.solubility, tissue)
            alive = alive & ~lost
            tissue = self.quiet(k, tissue, np.where(lost, over, 0.0), np.full(lanes, length))
            y = end
        return out

    def note(
        self,
        out: dict[str, Array],
        k: int,
        y: Array,
        tissue: Array,
        there: NDArray[np.bool_],
        alive: NDArray[np.bool_],
    ) -> None:
        """Write down what stands at a boundary; of living bubbles bring their tissue up to date."""
        n = len(self.around.gases)
        pressure = self.ambient(k)[0] if k < len(self.times) - 1 else self.ambient(k - 1)[1]
        _, _, stored = self.held(y[:, 0], self.shares(y), pressure)
        tissue[alive] = ((y[:, n:] - stored) / self.around.solubility)[alive]
        with np.errstate(invalid="ignore"):
            out["radius"][:, k] = np.where(alive, np.sqrt(y[:, 0]), np.where(there, 0.0, np.nan))
        out["share"][:, :, k] = np.where(alive[:, None], self.shares(y), np.nan)
        out["tissue"][:, :, k] = tissue

    def state(self, u: Array, share: Array, tissue: Array, pressure: Any) -> Array:
        """Lay out the state: what the tissue holds counts what is in the bubbles."""
        _, _, stored = self.held(u, share, pressure)
        return np.concatenate([u[:, None], share[:, 1:], tissue * self.around.solubility + stored], axis=1)


def _carried(initial: xr.Dataset, around: _Surroundings) -> tuple[Array, Array, Array]:
    if "final_radius" not in initial or "final_tissue_pressure" not in initial:
        raise ExposureError("initial must be an earlier result of growth")
    names = [str(g) for g in initial["inert_gas"].values]
    if names != list(around.gases):
        raise ExposureError(f"initial holds {', '.join(names)}, gases are {', '.join(around.gases)}")
    radius = np.where(
        np.isnan(initial["appearance_time"].values), np.nan, initial["final_radius"].values.astype(float)
    )
    share = np.nan_to_num(initial["final_fraction"].values.astype(float), nan=1.0 / len(names))
    return radius, share, initial["final_tissue_pressure"].values.astype(float)


def _dataset(
    exposure: Exposure,
    view: xr.Dataset,
    around: _Surroundings,
    boundary: str,
    run: _Run,
    record: dict[str, Array],
    before: NDArray[np.int64],
) -> xr.Dataset:
    one, both = ("bubble", "time"), ("bubble", "inert_gas", "time")
    radius = record["radius"][:, before]
    pressure = view["ambient_pressure"].values
    with np.errstate(divide="ignore", invalid="ignore"):
        inside = bubble_pressure.raw(pressure, radius, around.tension, around.modulus, around.metabolic)
    inside = np.where(radius > 0.0, inside, np.nan)
    more = {"provenance": "memory_low", "references": "srinivasan_1999"}
    ds = xr.Dataset(
        coords={
            "bubble": np.arange(len(run.radius)),
            "inert_gas": np.array(around.gases, dtype=str),
            "time": view["time"],
        }
    )
    ds["ambient_pressure"] = ("time", pressure, attributes("ambient_pressure"))
    inputs = {
        "ambient_pressure": "@ambient_pressure",
        "radius": "@bubble_radius",
        "surface_tension": around.tension,
        "tissue_modulus": around.modulus,
        "metabolic_pressure": around.metabolic,
    }
    told = attributes("bubble_radius", **more)
    worked = {"equation": "bubbles.bubble_pressure", "inputs": json.dumps(inputs)}
    there = ~np.isnan(record["radius"][:, -1])
    held = ("bubble", "inert_gas")
    for name, dims, values, attrs, meaning in (
        ("bubble_radius", one, radius, told, "radius; 0 gone, NaN not yet there"),
        ("bubble_pressure", one, inside, attributes("bubble_pressure", **more) | worked, ""),
        (
            "bubble_fraction",
            both,
            record["share"][:, :, before],
            attributes("fraction"),
            "share in the bubble",
        ),
        ("tissue_pressure", both, record["tissue"][:, :, before], attributes("tissue_pressure", **more), ""),
        ("initial_radius", ("bubble",), run.radius, told, "radius at the start"),
        (
            "appearance_time",
            ("bubble",),
            np.where(there, run.begin, np.nan),
            attributes("time"),
            "when the bubble appears; NaN: never, negative: before",
        ),
        ("vanishing_time", ("bubble",), record["gone"], attributes("time"), "when it is gone; NaN: never"),
        (
            "growth_index",
            ("bubble",),
            record["greatest"] / run.radius,
            {"units": "1"},
            "greatest radius over that at the start",
        ),
        ("final_radius", ("bubble",), record["radius"][:, -1], told, "radius at the end"),
        ("final_fraction", held, record["share"][:, :, -1], attributes("fraction"), "share at the end"),
        (
            "final_tissue_pressure",
            held,
            record["tissue"][:, :, -1],
            attributes("tissue_pressure"),
            "tissue pressure at the end",
        ),
    ):
        ds[name] = (dims, np.array(values), attrs | ({"long_name": meaning} if meaning else {}))
    ds.attrs = dataset_attributes(
        "bubbles in tissue along an exposure",
        "bubbles, growth",
        history=exposure.history,
        references=("srinivasan_1999", "gernhardt_1991", "van_liew_burkard_1993", "solano_altamirano_2014"),
        provenance="memory_low",
        boundary=boundary,
        parameters=", ".join(
            f"{g} D {d:g} m2/s, solubility {s:g}, half-time {h:g} min"
            for g, d, s, h in zip(
                around.gases, around.diffusivity, around.solubility, around.half_time, strict=True
            )
        )
        + f"; surface tension {around.tension:g} N/m, modulus {around.modulus:g} kPa/um^3, metabolic "
        f"{around.metabolic:g} kPa, {around.per_volume / _PER_ML:g} bubbles/mL, shell "
        f"{around.thickness:g} um, perfusion {around.perfusion:g} /min",
        not_validated="no parameter is fitted; no risk follows from a radius",
    )
    return ds
