"""Ascents by several models on one exposure, side by side and each judged by all the others."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import xarray as xr

from gasphys.ascent.following import control_path, follow, limits_of
from gasphys.ascent.planner import Array, Plan, plan
from gasphys.ascent.rules import Rules
from gasphys.bubbles import bubble_model
from gasphys.doses.measures import piece_doses
from gasphys.errors import ExposureError, NotReachableError, ValidityError, unknown_name
from gasphys.exposure import Exposure
from gasphys.quantities import attributes, dataset_attributes
from gasphys.tissues.model import tensions
from gasphys.tissues.sets import TissueSet, load
from gasphys.tissues.tolerance import ROUNDING, m_values

__all__ = ["Comparison", "compare_ascents"]

#: Minutes at the surface, on air, in which an ascent may come back under a limit it has passed.
_SURFACE_INTERVAL = 1440.0
#: Step of the instants judged [min], and most of them.
_STEP, _INSTANTS = 0.25, 4000


def compare_ascents(
    exposure: Exposure,
    gases: Sequence[tuple[Any, Any]] = (),
    models: Sequence[Any] = ("buhlmann_1995_c", "workman_1965"),
    rules: Rules | None = None,
    without: Any = None,
    *,
    initial: Any = None,
    measured: Mapping[str, Any] | None = None,
) -> Comparison:
    """Plan one ascent by several models.

    Parameters
    ----------
    exposure : Exposure
        One scenario that ends at the bottom.
    gases : sequence of (gas, deepest)
        As for :func:`plan`.
    models : sequence of str, path or TissueSet
        Models, in the order of the tables.
    rules : Rules, optional
        Rates, stops, gradients, breaks: the same for all.
    without : Gas, str or Loop, optional
        One of the gases that is lost.
    initial : float or str, optional
        Pressure at which air was long breathed before [kPa absolute]; or a mapping from a model's name to
        what :func:`plan` takes.
    measured : mapping, optional
        Planned mixes to measured ones.

    Returns
    -------
    Comparison
        ``plans`` by model, ``refused`` with reasons, ``passing``, ``bands``, ``judgment``, ``control``.

    Raises
    ------
    ExposureError
        If there are several scenarios, no model, or one twice.
    ValidityError
        If every model refuses; the message gives each reason.

    Examples
    --------
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957", "kidd_stubbs_1983"])
    >>> {name: round(one.ascent_time, 1) for name, one in found.plans.items()}
    {'buhlmann_1995_c': 14.4, 'us_navy_1957': 9.4, 'kidd_stubbs_1983': 22.4}
    """
    if exposure.dims:
        raise ExposureError("ascents are compared on one scenario; pick one first")
    plans: dict[str, Plan] = {}
    refused: dict[str, str] = {}
    for model in models:
        name = _name(model)
        if name in plans or name in refused:
            raise ExposureError(f"the model {name} is named twice")
        try:
            plans[name] = plan(
                exposure, gases, model, rules, without, initial=_own(initial, name), measured=measured
            )
        except (NotReachableError, ValidityError) as error:
            refused[name] = str(error)
    if not plans and not refused:
        raise ExposureError("no model is named")
    if not plans:
        raise ValidityError("no model plans this ascent: " + "; ".join(refused.values()))
    return Comparison(float(exposure.duration), plans, refused, initial)


def _name(model: Any) -> str:
    return _set(model).name


def _set(model: Any) -> TissueSet:
    bubbles = bubble_model(model)
    return load(model) if bubbles is None else bubbles.tissues


def _own(initial: Any, name: str) -> Any:
    return (
        initial.get(name) if isinstance(initial, Mapping) and not isinstance(initial, xr.Dataset) else initial
    )


@dataclass(frozen=True, eq=False, repr=False)
class Comparison:
    """Ascents by several models from one bottom.

    Parameters
    ----------
    bottom_time : float
        From the start to leaving the bottom [min].
    plans : dict
        Model to :class:`Plan`, in the order asked for.
    refused : dict
        Model to the reason it plans nothing here.
    initial : optional
        What the tissues held at the start.
    """

    bottom_time: float
    plans: dict[str, Plan]
    refused: dict[str, str]
    initial: Any = None

    def __repr__(self) -> str:
        return f"<Comparison of {', '.join(self.plans)}>"

    def __str__(self) -> str:
        from gasphys.ascent.texts import comparison_text

        return comparison_text(self)

    @property
    def _one(self) -> Plan:
        return next(iter(self.plans.values()))

    def _depth_attributes(self) -> dict[str, Any]:
        unit = {"m": "depth", "msw": "depth_msw", "fsw": "depth_fsw"}[self._one.exposure.depth_unit]
        return attributes(unit)

    def _attributes(self, title: str, source: str, **more: Any) -> dict[str, Any]:
        models = [p.model for p in self.plans.values()]
        return dataset_attributes(
            title,
            f"ascent, {source}",
            history=self._one.exposure.history[:-1],
            references=[m.source for m in models],
            models="; ".join(f"{m.name}, {m.edition}, parameters {m.digest}" for m in models),
            refused="; ".join(self.refused.values()),
            rules=str(self._one.stops.attrs["rules"]),
            depth_unit=self._one.exposure.depth_unit,
            **more,
        )

    @cached_property
    def depths(self) -> Array:
        """Edges of the pressure bands [depth unit]: the bottom, every depth a model stops at, the surface."""
        one = self._one.exposure
        at_bottom = float(one._pressure_to_depth(one.columns["end_pressure"][self._bottom_piece(one)]))
        edges = {0.0} | {float(d) for p in self.plans.values() for d in p.stops["depth"].values}
        return np.array(sorted({at_bottom, *edges}, reverse=True))

    def _bottom_piece(self, exposure: Exposure) -> int:
        return int(np.searchsorted(exposure.pieces().times, self.bottom_time - 1e-9)) - 1

    @cached_property
    def passing(self) -> xr.Dataset:
        """When each ascent leaves each depth for good, and what it has cost by then.

        Returns
        -------
        Dataset
            On ``model`` and ``depth_edge`` (deepest first): ``leave_after`` [min since leaving the bottom],
            ``stop_half_time`` in control at the stop there (NaN without one), ``uptd`` since leaving the
            bottom, ``gas`` [min atm]: surface liters for each liter per minute breathed.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> found = compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957"])
        >>> found.passing.leave_after.sel(model="us_navy_1957").values.round(1).tolist()
        [0.0, 3.8, 9.1, 9.4]
        """
        edges = self.depths
        names = ("leave_after", "stop_half_time", "uptd", "gas")
        table: dict[str, list[Array]] = {n: [] for n in names}
        for one in self.plans.values():
            for n, values in zip(names, self._passes(one, edges), strict=True):
                table[n].append(values)
        ds = xr.Dataset(
            coords={
                "model": np.array(list(self.plans), dtype=str),
                "depth_edge": ("depth_edge", edges, self._depth_attributes()),
            }
        )
        for name, attrs, meaning in (
            ("leave_after", attributes("duration"), "from leaving the bottom to leaving this depth"),
            ("stop_half_time", attributes("half_time"), "half-time in control at the stop here"),
            ("uptd", attributes("uptd"), "pulmonary oxygen dose since leaving the bottom"),
            (
                "gas",
                {"units": "L/(L/min)"},
                "surface liters for each L/min breathed since leaving the bottom",
            ),
        ):
            ds[name] = (("model", "depth_edge"), np.array(table[name]), attrs | {"long_name": meaning})
        ds.attrs = self._attributes("when ascents pass each pressure", "ascents compared")
        return ds

    def _passes(self, one: Plan, edges: Array) -> tuple[Array, Array, Array, Array]:
        exposure = one.exposure
        pressures = [float(exposure._depth_to_pressure(d)[1]) for d in edges]
        times = []
        for p in pressures:
            starts, ends = exposure.columns["start_pressure"], exposure.columns["end_pressure"]
            clock = exposure.pieces().times
            # The last piece that begins at or below this pressure and ends above it.
            slack = 1e-6 * p
            k = np.flatnonzero((starts >= p - slack) & (ends < p - slack))
            if k.size:
                i = int(k[-1])
                share = min(max((starts[i] - p) / (starts[i] - ends[i]), 0.0), 1.0)
                times.append(clock[i] + share * (clock[i + 1] - clock[i]))
            else:
                times.append(float(clock[-1]))
        cut = exposure._split([self.bottom_time, *times])
        pieces = cut.pieces()
        spent = (pieces.start_pressure + pieces.end_pressure) / 2.0 * pieces.duration
        surface = float(exposure.surface_pressure)
        dose = np.append(0.0, np.cumsum(np.nan_to_num(piece_doses("uptd", pieces))))
        gas = np.append(0.0, np.cumsum(spent / surface))
        where = np.clip(np.searchsorted(pieces.times, np.array(times) - 1e-9), 0, len(gas) - 1)
        begin = int(np.searchsorted(pieces.times, self.bottom_time - 1e-9))
        half = np.full(len(edges), np.nan)
        for row in range(one.stops.sizes["stop"]):
            at = int(np.argmin(np.abs(edges - float(one.stops["depth"].values[row]))))
            half[at] = float(one.stops["controlling_half_time"].values[row])
        return (
            np.array(times) - self.bottom_time,
            half,
            dose[where] - dose[begin],
            gas[where] - gas[begin],
        )

    @cached_property
    def tracks(self) -> xr.Dataset:
        """Each ascent as a line: depth against minutes since leaving the bottom.

        Returns
        -------
        Dataset
            On ``model`` and ``point``: ``track_depth`` [depth unit] and ``track_minutes``; NaN after the
            last point.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> found = compare_ascents(bottom, models=["us_navy_1957"]).tracks
        >>> found.track_depth.values[0].tolist()
        [40.0, 3.0, 3.0, 0.0]
        """
        rows = []
        for one in self.plans.values():
            exposure, clock = one.exposure, one.exposure.pieces().times
            after = np.flatnonzero(clock[:-1] >= self.bottom_time - 1e-9)
            ends = exposure.columns["end_pressure"][after]
            pressure = np.append(exposure.columns["start_pressure"][after[:1]], ends)
            depth = np.round([float(exposure._pressure_to_depth(p)) for p in pressure], 9)
            minutes = np.append(0.0, clock[after + 1] - self.bottom_time)
            real = np.append(True, (np.diff(depth) != 0.0) | (np.diff(minutes) != 0.0))
            rows.append((depth[real], minutes[real]))
        most = max(len(d) for d, _ in rows)

        def padded(k: int) -> Array:
            return np.array([np.append(row[k], np.full(most - len(row[k]), np.nan)) for row in rows])

        ds = xr.Dataset(coords={"model": np.array(list(self.plans), dtype=str)})
        ds["track_depth"] = (
            ("model", "point"),
            padded(0),
            self._depth_attributes() | {"long_name": "depth on the way up"},
        )
        attrs = attributes("duration") | {"long_name": "since leaving the bottom"}
        ds["track_minutes"] = (("model", "point"), padded(1), attrs)
        ds.attrs = self._attributes("ascents by several models", "ascents compared")
        return ds

    def to_dataset(self, *, judged: bool = True, worked: bool = False) -> xr.Dataset:
        """Return all of a comparison in one Dataset.

        Parameters
        ----------
        judged : bool
            Whether the cross-judgment is among it.
        worked : bool
            Whether what the first model's tissues hold on surfacing is among it, for :func:`gasphys.explain`.

        Returns
        -------
        Dataset
            ``tracks``, ``passing``, ``bands`` and ``judgment`` (with the dimension ``judge`` for its
            columns).

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> found = compare_ascents(bottom, models=["us_navy_1957"]).to_dataset()
        >>> found.status.values.tolist()
        [['within']]
        """
        parts = [self.tracks, self.passing, self.bands]
        if judged:
            parts.append(self.judgment.rename(model="judge"))
        if worked and self._one.model.limited:
            parts.append(self.surfacing())
        ds = xr.merge(parts, combine_attrs="drop_conflicts", join="exact", compat="override")
        ds["ascent_time"] = (
            "model",
            np.array([float(p.ascent_time) for p in self.plans.values()]),
            attributes("duration") | {"long_name": "from leaving the bottom to the surface"},
        )
        ds.attrs = self._attributes("ascents by several models, compared", "ascents compared")
        return ds

    @cached_property
    def bands(self) -> xr.Dataset:
        """Table per pressure band: who passes first, who last, why, and what the difference costs.

        Returns
        -------
        Dataset
            On ``band``, deepest first: ``from_depth``, ``to_depth``, ``earliest`` and ``latest`` [min since
            leaving the bottom by which the upper edge is left], ``earliest_model``, ``latest_model``,
            ``latest_half_time`` (in control at the latest one's stop at the upper edge; NaN without one),
            ``more_minutes``, ``more_uptd``, ``more_gas`` of the latest over the earliest up to there.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> found = compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957"]).bands
        >>> found.latest_model.values.tolist()
        ['buhlmann_1995_c', 'buhlmann_1995_c', 'buhlmann_1995_c']
        """
        ds = self.passing
        after = ds["leave_after"].values[:, 1:]
        columns = np.arange(after.shape[1])
        first, last = after.argmin(axis=0), after.argmax(axis=0)
        names = np.array(list(self.plans), dtype=str)
        unit = ds["depth_edge"].attrs
        minutes = attributes("duration")
        out = xr.Dataset(coords={"band": columns})

        def more(name: str) -> Array:
            values = ds[name].values[:, 1:]
            return np.asarray(values[last, columns] - values[first, columns])

        text: dict[str, Any] = {}
        for name, values, attrs, meaning in (
            ("from_depth", ds["depth_edge"].values[:-1], unit, "lower edge"),
            ("to_depth", ds["depth_edge"].values[1:], unit, "upper edge"),
            ("earliest", after[first, columns], minutes, "earliest time by which the upper edge is left"),
            ("latest", after[last, columns], minutes, "latest time by which the upper edge is left"),
            ("earliest_model", names[first], text, "model that leaves it first"),
            ("latest_model", names[last], text, "model that leaves it last"),
            (
                "latest_half_time",
                ds["stop_half_time"].values[last, columns + 1],
                attributes("half_time"),
                "half-time in control at the latest one's stop there",
            ),
            ("more_minutes", more("leave_after"), minutes, "minutes the difference costs up to there"),
            ("more_uptd", more("uptd"), attributes("uptd"), "oxygen dose the difference costs up to there"),
            ("more_gas", more("gas"), ds["gas"].attrs, "gas the difference costs up to there"),
        ):
            out[name] = ("band", values, attrs | {"long_name": meaning})
        out.attrs = self._attributes("how far ascents part, band by band", "ascents compared")
        return out

    @cached_property
    def judgment(self) -> xr.Dataset:
        """Each ascent judged by every model's own published limit.

        Returns
        -------
        Dataset
            On ``ascent`` (followed) and ``model`` (judging): ``minutes_beyond`` the limit,
            ``beyond_at_surface`` the part of them at the surface, on air, until it is met again (looked at
            for 24 h), ``worst_ratio`` of tissue pressure to M-value, ``time_of_worst``, ``status``
            ("beyond", "within", "not judged"), ``reason``.

        Notes
        -----
        The limit is the published one, whatever gradients the ascents were planned with. It is looked at all
        along, which is more than some sets ask; crossings are found to a second. A set of surfacing values
        judges at the surface only; a bubble model with the gradients of its own last pass, which hang on its
        own ascent. Within another model's limit is no proof of anything.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> found = compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957"]).judgment
        >>> found.status.values.tolist()
        [['within', 'within'], ['beyond', 'within']]
        """
        names = [*self.plans]
        judges = [_set(n) if n in self.refused else self.plans[n].model for n in (*self.plans, *self.refused)]
        shape = (len(names), len(judges))
        numbers = {n: np.full(shape, np.nan) for n in _JUDGED}
        status = np.full(shape, "not judged", dtype=object)
        reason = np.full(shape, "", dtype=object)
        for i, name in enumerate(names):
            for j, judge in enumerate(judges):
                try:
                    own = limits_of(self.plans[judge.name]) if judge.name in self.plans else judge
                    found = beyond(
                        self.plans[name].exposure, own, self.bottom_time, _own(self.initial, judge.name)
                    )
                except ValidityError as error:
                    reason[i, j] = str(error)
                    continue
                status[i, j] = "beyond" if found[0] > 0.0 else "within"
                for key, value in zip(_JUDGED, found, strict=True):
                    numbers[key][i, j] = value
        ds = xr.Dataset(
            coords={
                "ascent": np.array(names, dtype=str),
                "model": np.array([j.name for j in judges], dtype=str),
            }
        )
        for key, (kind, meaning) in _JUDGED.items():
            ds[key] = (("ascent", "model"), numbers[key], attributes(kind) | {"long_name": meaning})
        ds["status"] = (
            ("ascent", "model"),
            status.astype(str),
            {"long_name": "beyond, within or not judged"},
        )
        ds["reason"] = (("ascent", "model"), reason.astype(str), {"long_name": "why it is not judged"})
        ds.attrs = self._attributes(
            "ascents judged by each model's own limit",
            "cross-judgment",
            judges="; ".join(f"{j.name}, {j.edition}, parameters {j.digest}" for j in judges),
        )
        return ds

    def surfacing(self, model: str | None = None) -> xr.Dataset:
        """What one model's tissues hold on surfacing, in the compartment nearest to its limit.

        Parameters
        ----------
        model : str, optional
            Whose; default the first.

        Returns
        -------
        Dataset
            ``limit_fraction`` and what :func:`gasphys.explain` needs to work it out; attribute
            ``compartment``.

        Raises
        ------
        UnknownNameError
            If that model planned none.
        ValidityError
            If it has no M-values: a bubble model.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> found = compare_ascents(bottom, models=["us_navy_1957"]).surfacing()
        >>> found.attrs["compartment"], round(float(found.limit_fraction), 3)
        ('20', 0.995)
        """
        one = self.followed(model)
        if not one.model.limited:
            raise ValidityError(f"{one.model.name} has no M-values to work out")
        ds = tensions(one.exposure, one.model, initial=one.initial).isel(time=-1, drop=True)
        worst = int(ds["limit_fraction"].fillna(-np.inf).argmax("compartment"))
        ds = ds.isel(compartment=worst, drop=True)
        kept = ds[["limit_fraction", "total_tissue_pressure", "m_value", "ambient_pressure"]]
        for name in ("m_value_a", "m_value_b"):
            if name in ds:
                kept[name] = ds[name]
        kept.attrs["compartment"] = one.model.compartments[worst]
        return kept

    def followed(self, model: str | None = None) -> Plan:
        """Return one of the plans.

        Parameters
        ----------
        model : str, optional
            Whose; default the first.

        Returns
        -------
        Plan
            The plan.

        Raises
        ------
        UnknownNameError
            If that model planned none.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> compare_ascents(bottom, models=["us_navy_1957"]).followed().stops.sizes["stop"]
        1
        """
        name = next(iter(self.plans)) if model is None else model
        if name not in self.plans:
            raise unknown_name("ascent", name, self.plans)
        return self.plans[name]

    def sheet(self, model: str | None = None, title: str = "") -> str:
        """Return one of the plans as a page to print that tells how long the others are.

        Parameters
        ----------
        model : str, optional
            Whose; default the first.
        title : str
            Words for the top; plain text.

        Returns
        -------
        str
            HTML.

        Raises
        ------
        UnknownNameError
            If that model planned none.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> compare_ascents(bottom, models=["us_navy_1957"]).sheet(title="<b>")[:15]
        '<!doctype html>'
        """
        from gasphys.ascent.sheet import ascent_sheet

        return ascent_sheet(self.followed(model), title, self)

    def control(self, followed: str | None = None) -> xr.Dataset:
        """Half-times in control along one of the ascents, by every model.

        Parameters
        ----------
        followed : str, optional
            Model whose ascent is followed; default the first.

        Returns
        -------
        Dataset
            As :func:`control_path`.

        Raises
        ------
        UnknownNameError
            If that model planned none.

        Examples
        --------
        >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
        >>> compare_ascents(bottom, models=["us_navy_1957"]).control().attrs["followed"]
        'us_navy_1957'
        """
        one = self.followed(followed)
        judges = [limits_of(p) for p in self.plans.values()]
        initial = None if isinstance(self.initial, Mapping) else self.initial
        ds = control_path(one.exposure, judges, one.rules, initial=initial, since=self.bottom_time)
        ds.attrs["followed"] = one.model.name
        return ds


#: Numbers of a judgment: quantity and meaning.
_JUDGED = {
    "minutes_beyond": ("duration", "minutes beyond the judging model's limit, at the surface included"),
    "beyond_at_surface": ("duration", "of these at the surface, on air"),
    "worst_ratio": ("limit_fraction", "largest ratio of tissue pressure to M-value"),
    "time_of_worst": ("time", "time of the worst ratio since the start"),
}


def beyond(
    exposure: Exposure, model: TissueSet, bottom_time: float = 0.0, initial: Any = None
) -> tuple[float, float, float, float]:
    """Return how far one exposure that ends at the surface passes a model's published limit.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    model : TissueSet
        Who judges.
    bottom_time : float
        Time before which nothing is looked at but the exposure's own boundaries [min].
    initial : optional
        As for :func:`gasphys.tissues.tensions`.

    Returns
    -------
    tuple of float
        Minutes beyond, of these at the surface, worst ratio, time of the worst.

    Raises
    ------
    ValidityError
        If the model refuses the exposure or has no limits.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=40, rate=20).stay(20).travel(depth=0, rate=9)
    >>> [round(v, 1) for v in beyond(dive, load("us_navy_1957"))[:3]]
    [4.2, 4.0, 1.1]
    """
    if not model.limited:
        raise ValidityError(f"{model.name} has no limits to judge with")
    end = float(exposure.duration)
    whole = exposure.then(_SURFACE_INTERVAL)
    surface = float(exposure.surface_pressure)
    step, count = max(_STEP, (end - bottom_time) / _INSTANTS), 160
    if model.kinetics == "serial":  # each instant costs an integration
        step, count = max(2.0, step), 16
    at = np.append(np.arange(bottom_time, end, step), end + np.geomspace(0.05, _SURFACE_INTERVAL, count))
    # Once to see where it crosses, once more between the instants where it does.
    for _ in range(2):
        seen = follow(whole, model, initial, np.minimum(at, whole.duration))
        ratio = _worst(model, seen.state, seen.pressure, surface)
        over = ratio - (1.0 + ROUNDING)
        cross = np.flatnonzero((over[:-1] > 0.0) != (over[1:] > 0.0))
        between = [np.linspace(seen.time[k], seen.time[k + 1], 33) for k in cross]
        at = np.unique(np.concatenate([at, *between]))
    length = np.diff(seen.time)
    one, two = over[:-1], over[1:]
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where((one > 0.0) == (two > 0.0), one > 0.0, np.maximum(one, two) / np.abs(one - two))
    part = np.where(np.isnan(part), np.maximum(one, two) > 0.0, part)
    minutes = length * part
    later = seen.time[:-1] >= end - 1e-9
    k = int(np.argmax(ratio))
    return float(minutes.sum()), float(minutes[later].sum()), float(ratio[k]), float(seen.time[k])


def _worst(model: TissueSet, state: Array, pressure: Array, surface: float) -> Array:
    """Return the largest ratio of tissue pressure to M-value at each instant."""
    total, limit = m_values(model, state, pressure, time=True)
    ratio = np.where(np.isnan(limit), 0.0, total / limit).max(axis=0)
    if model.surfacing_only:
        return np.where(pressure <= surface * (1.0 + 1e-9), ratio, 0.0)
    return np.asarray(ratio)
