"""The exposure: pressure, gas and workload against time, the one input of every model.

A row of pieces, not samples. In a piece ambient pressure is linear in time; gas, loop and workload
are constant; a switch is a boundary between pieces. Every builder method returns a new exposure.
"""

from __future__ import annotations

import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.breathing_gas import (
    linear_in_piece,
    loop_inert_pressure,
    loop_po2,
    open_circuit_inert_pressure,
    open_circuit_po2,
)
from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError, RangeError, UnitError, unknown_name
from gasphys.gas import FORMULAS, Gas
from gasphys.policy import outside_validity
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.surroundings import WATERS
from gasphys.units import parse_quantity, unit

__all__ = ["Exposure", "Pieces"]

Array = NDArray[np.float64]

#: Columns with one number a piece, besides the gas fractions.
_NUMERIC = (
    "segment_duration",
    "start_pressure",
    "end_pressure",
    "setpoint",
    "o2_uptake_stpd",
    "ventilation_btps",
)


@dataclass(frozen=True)
class Pieces:
    """The pieces as plain arrays ``(..., segment)``: what kernels read.

    Parameters
    ----------
    duration : array
        Length of each piece [min].
    start_pressure, end_pressure : array
        Ambient pressure at its ends [kPa absolute].
    start_po2, end_po2 : array
        Dry PO2 of the breathing gas at its ends [kPa].
    fractions : dict of array
        Dry mole fractions [1] by formula: of the gas breathed, on a loop of the diluent.
    setpoint : array
        Loop set-point [kPa]; NaN on open circuit.
    times : array
        Start of each piece and the end of the last [min], one more than pieces.
    """

    duration: Array
    start_pressure: Array
    end_pressure: Array
    start_po2: Array
    end_po2: Array
    fractions: dict[str, Array]
    setpoint: Array
    times: Array

    def inert_pressure(self, gas: str) -> tuple[Array, Array]:
        """Return the dry pressure of one inert gas at the start and end of each piece [kPa]."""
        fraction = self.fractions.get(gas, np.zeros_like(self.duration))
        loop = ~np.isnan(self.setpoint)
        ends = []
        for pressure, po2 in ((self.start_pressure, self.start_po2), (self.end_pressure, self.end_po2)):
            in_loop = loop_inert_pressure.raw(pressure, po2, fraction, self.fractions["O2"])
            ends.append(np.where(loop, in_loop, open_circuit_inert_pressure.raw(fraction, pressure)))
        return ends[0], ends[1]


@dataclass(frozen=True, eq=False, repr=False)
class Exposure:
    """Pressure, gas and workload against time.

    Begin with :meth:`start`, then chain :meth:`travel`, :meth:`stay`, :meth:`switch` and the
    others; or read a log with :meth:`from_csv`.

    Parameters
    ----------
    surface_pressure : float
        Pressure where depths are zero [kPa absolute].
    depth_unit : str
        Unit of depths given to :meth:`travel`: "msw", "fsw" or "m".
    water : str
        What "m" means, a name of :data:`gasphys.surroundings.WATERS`.
    columns : dict of array
        One number a piece, ``(..., segment)``.
    fractions : dict of array
        Dry mole fractions by formula, ``(..., segment)``.
    part : tuple of str
        Name of the part each piece belongs to.
    session : tuple of int
        Number of the session each piece belongs to.
    dims : tuple of str
        Names of the dimensions before ``segment``.
    coords : dict
        Coordinates along them.
    gas, pressure, setpoint_now
        State at the last instant: what the next piece begins with.
    history : tuple of str
        What was assumed or repaired.
    attrs : dict
        Further global attributes of the Dataset.
    chunks : dict
        Sizes of the blocks along dimensions that came in chunked: models over many scenarios stay lazy there.
        The exposure itself, a few numbers a scenario, is held in memory.

    Raises
    ------
    ExposureError
        If a step has no meaning.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=18, rate=20).stay(30).travel(depth=0, rate=10)
    >>> round(dive.duration, 1)
    32.7
    """

    surface_pressure: Any
    depth_unit: str
    water: str
    columns: dict[str, Array]
    fractions: dict[str, Array]
    part: tuple[str, ...]
    session: tuple[int, ...]
    dims: tuple[str, ...]
    coords: dict[str, Any]
    gas: dict[str, Any]
    pressure: Any
    setpoint_now: Any
    workload: tuple[Any, Any] = (np.nan, np.nan)
    part_now: str = ""
    history: tuple[str, ...] = ()
    attrs: dict[str, Any] = field(default_factory=dict)
    chunks: dict[str, tuple[int, ...]] = field(default_factory=dict)

    # -- building ----------------------------------------------------------------------------

    @classmethod
    def start(
        cls,
        gas: Gas | str | xr.DataArray,
        surface_pressure: Any = float(ATMOSPHERE),
        depth_unit: str = "msw",
        water: str = "en13319",
        *,
        pressure: Any = None,
        o2_uptake_stpd: Any = np.nan,
        ventilation_btps: Any = np.nan,
        part: str = "",
    ) -> Exposure:
        """Begin an exposure at the surface.

        Parameters
        ----------
        gas : Gas, str or DataArray
            Gas breathed.
        surface_pressure : float or str
            Pressure at the surface [kPa absolute], or text such as ``"760 mmHg"``.
        depth_unit : {"msw", "fsw", "m"}
            Unit of depths.
        water : str
            Water that gives "m" its meaning.
        pressure : float or str, optional
            Ambient pressure to begin at [kPa absolute], where it is not the surface.
        o2_uptake_stpd, ventilation_btps : float
            Workload [L/min]; NaN where it is not known.
        part : str
            Name of the part the next pieces belong to.

        Returns
        -------
        Exposure
            Of no duration yet.

        Raises
        ------
        UnknownNameError
            If the depth unit, water or gas is unknown.
        RangeError
            If the surface pressure is not possible.

        Examples
        --------
        >>> Exposure.start("air", surface_pressure=85.0).duration
        0.0
        """
        if depth_unit not in ("msw", "fsw", "m"):
            raise unknown_name("depth unit", depth_unit, ("msw", "fsw", "m"))
        if water not in WATERS:
            raise unknown_name("water", water, WATERS)
        begin = cls(
            surface_pressure=float(ATMOSPHERE),
            depth_unit=depth_unit,
            water=water,
            columns={name: np.empty(0) for name in _NUMERIC},
            fractions={"O2": np.empty(0), "N2": np.empty(0)},
            part=(),
            session=(),
            dims=(),
            coords={},
            gas={},
            pressure=float(ATMOSPHERE),
            setpoint_now=np.nan,
            part_now=part,
        )
        begin, surface = begin._value(surface_pressure, "surface_pressure")
        begin = replace(begin, surface_pressure=surface, pressure=surface)
        if pressure is not None:
            begin, now = begin._value(pressure, "ambient_pressure")
            begin = replace(begin, pressure=now)
        return begin.work(o2_uptake_stpd, ventilation_btps)._breathe(gas, np.nan)

    def work(self, o2_uptake_stpd: Any = np.nan, ventilation_btps: Any = np.nan) -> Exposure:
        """Set the workload of the pieces that follow.

        Parameters
        ----------
        o2_uptake_stpd : float
            O2 uptake [L/min STPD].
        ventilation_btps : float
            Minute ventilation [L/min BTPS].

        Returns
        -------
        Exposure
            With the new state.

        Raises
        ------
        RangeError
            If a value is not possible.

        Examples
        --------
        >>> Exposure.start("air").work(o2_uptake_stpd=1.2).stay(5).duration
        5.0
        """
        new, uptake = self._value(o2_uptake_stpd, "o2_uptake_stpd", missing=True)
        new, ventilation = new._value(ventilation_btps, "ventilation_btps", missing=True)
        return replace(new, workload=(uptake, ventilation))

    def name(self, part: str) -> Exposure:
        """Name the part that the pieces that follow belong to.

        Parameters
        ----------
        part : str
            Any words.

        Returns
        -------
        Exposure
            With the new state.

        Examples
        --------
        >>> Exposure.start("air").name("descent").stay(1).part
        ('descent',)
        """
        return replace(self, part_now=part)

    def travel(
        self,
        depth: Any = None,
        *,
        pressure: Any = None,
        minutes: Any = None,
        rate: Any = None,
    ) -> Exposure:
        """Change pressure linearly in time.

        Parameters
        ----------
        depth : float or str, optional
            Depth to reach [depth unit].
        pressure : float or str, optional
            Instead: ambient pressure to reach [kPa absolute], or text such as ``"2.4 atm"``.
        minutes : float, optional
            Time taken [min].
        rate : float, optional
            Instead: speed, positive [depth unit/min, with `pressure` kPa/min].

        Returns
        -------
        Exposure
            With one more piece (two where a loop meets its set-point on the way).

        Raises
        ------
        ExposureError
            If not exactly one of `depth` and `pressure` and one of `minutes` and `rate` is given.
        RangeError
            If a value is not possible.

        Examples
        --------
        >>> Exposure.start("air").travel(depth=18, minutes=2).pressure
        281.325
        """
        if (depth is None) == (pressure is None):
            raise ExposureError("travel needs depth= or pressure=, one of them")
        if (minutes is None) == (rate is None):
            raise ExposureError("travel needs minutes= or rate=, one of them")
        if depth is not None:
            new, target = self._depth_to_pressure(depth)
        else:
            new, target = self._value(pressure, "ambient_pressure")
        if minutes is not None:
            new, time = new._value(minutes, "duration")
            return new._piece(time, target)
        new, speed = new._plain(rate, "rate")
        if not np.all(speed > 0.0):
            raise RangeError(
                f"rate = {float(np.min(speed)):g} must be positive; the direction follows from the target"
            )
        if depth is not None:
            now, there = new._pressure_to_depth(new.pressure), new._pressure_to_depth(target)
            return new._piece(np.abs(there - now) / speed, target)
        return new._piece(np.abs(target - new.pressure) / speed, target)

    def stay(self, minutes: Any) -> Exposure:
        """Stay at the present pressure.

        Parameters
        ----------
        minutes : float or str
            Time [min], or text such as ``"1 h"``.

        Returns
        -------
        Exposure
            With one more piece.

        Raises
        ------
        RangeError
            If the time is negative.

        Examples
        --------
        >>> Exposure.start("air").stay("1 h").duration
        60.0
        """
        new, time = self._value(minutes, "duration")
        return new._piece(time, new.pressure)

    def switch(self, gas: Gas | str | xr.DataArray) -> Exposure:
        """Breathe another gas on open circuit from now on.

        Parameters
        ----------
        gas : Gas, str or DataArray
            The gas.

        Returns
        -------
        Exposure
            With the new state.

        Raises
        ------
        UnknownNameError
            If the gas is unknown.

        Examples
        --------
        >>> Exposure.start("air").stay(1).switch("oxygen").stay(1).duration
        2.0
        """
        return self._breathe(gas, np.nan)

    def open_circuit(self, gas: Gas | str | xr.DataArray) -> Exposure:
        """Leave the loop and breathe a gas on open circuit: the same as :meth:`switch`.

        Parameters
        ----------
        gas : Gas, str or DataArray
            The gas.

        Returns
        -------
        Exposure
            With the new state.

        Raises
        ------
        UnknownNameError
            If the gas is unknown.

        Examples
        --------
        >>> loop = Exposure.start("air").loop(setpoint="1.3 bar", diluent="air")
        >>> bool(np.isnan(loop.open_circuit("air").setpoint_now))
        True
        """
        return self._breathe(gas, np.nan)

    def loop(self, setpoint: Any, diluent: Gas | str | xr.DataArray) -> Exposure:
        """Breathe from a closed loop held at a PO2.

        Parameters
        ----------
        setpoint : float or str
            PO2 of the loop, dry [kPa absolute], or text such as ``"1.3 bar"``.
        diluent : Gas, str or DataArray
            Gas that fills the loop; its inert gases share what O2 leaves.

        Returns
        -------
        Exposure
            With the new state.

        Raises
        ------
        RangeError
            If the set-point is not possible; 1.3 is read as kPa.

        Notes
        -----
        PO2 = min(set-point, ambient pressure). A piece in which the ambient pressure crosses the
        set-point is split there. A diluent whose own PO2 exceeds the set-point is reported: the
        loop is above its set-point until the oxygen is used up.

        Examples
        --------
        >>> Exposure.start("air").loop("1.3 bar", "trimix 18/45").setpoint_now
        130.0
        """
        new, held = self._value(setpoint, "setpoint")
        return new._breathe(diluent, held)

    def then(self, minutes: Any, gas: Gas | str | xr.DataArray = "air", pressure: Any = None) -> Exposure:
        """Add an interval, at the surface unless a pressure is given.

        Parameters
        ----------
        minutes : float or str
            Length of the interval [min].
        gas : Gas, str or DataArray
            Gas breathed meanwhile.
        pressure : float or str, optional
            Ambient pressure of the interval [kPa absolute]; default the surface pressure.

        Returns
        -------
        Exposure
            With the interval; what follows begins at its pressure.

        Raises
        ------
        RangeError
            If a value is not possible.

        Examples
        --------
        >>> Exposure.start("air").stay(10).then(60).duration
        70.0
        """
        new, time = self._value(minutes, "duration")
        if pressure is None:
            there = new.surface_pressure
        else:
            new, there = new._value(pressure, "ambient_pressure")
        note = new.history
        if not np.array_equal(np.asarray(there), np.asarray(new.pressure)):
            note = (*note, "interval: the pressure changes at once at its start")
        new = replace(new, pressure=there, history=note)
        return replace(new._breathe(gas, np.nan), part_now="interval")._piece(time, there)

    @staticmethod
    def join(exposures: Sequence[Exposure]) -> Exposure:
        """Put exposures one after the other; each keeps its own pieces and gets a session number.

        Parameters
        ----------
        exposures : sequence of Exposure
            In order of time. Put intervals between them with :meth:`then`.

        Returns
        -------
        Exposure
            All pieces; the surface pressure and depth unit are the first one's.

        Raises
        ------
        ExposureError
            If there is none.

        Examples
        --------
        >>> one = Exposure.start("air").stay(10)
        >>> Exposure.join([one, one]).session
        (0, 1)
        """
        if not exposures:
            raise ExposureError("join needs at least one exposure")
        whole = exposures[0]
        for one in exposures[1:]:
            offset = (max(whole.session) + 1) if whole.session else 0
            whole = whole._extend(one, offset)
        return whole

    def delay(self, minutes: Any, at: Any) -> Exposure:
        """Insert a stop of some minutes at a time, at the pressure and on the gas of that moment.

        Parameters
        ----------
        minutes : float or str
            Length of the stop [min].
        at : float or str
            Time since the start [min].

        Returns
        -------
        Exposure
            Longer by `minutes`.

        Raises
        ------
        ExposureError
            If `at` is not within the exposure, or lies in other pieces in other scenarios.

        Examples
        --------
        >>> Exposure.start("air").stay(10).delay(5, at=3).duration
        15.0
        """
        if isinstance(at, xr.DataArray) and at.ndim:
            raise ExposureError("at: one time for all scenarios; pick one first")
        when = float(np.ravel(self._value(at, "time")[1])[0])
        new, time = self._value(minutes, "duration")
        whole = float(np.min(self.duration))
        if not 0.0 <= when <= whole:
            raise ExposureError(f"at = {when:g} min is not within the exposure of {whole:g} min")
        cut = new._split([when])
        apart = np.abs(cut.pieces().times - when).reshape(-1, len(cut.part) + 1).max(axis=0)
        place = int(np.argmin(apart))
        at_end = place == len(cut.part)
        model = place - 1 if at_end else place
        pressure = cut.columns["end_pressure" if at_end else "start_pressure"][..., model]

        def insert(column: Array, value: Any) -> Array:
            return np.insert(column, place, value, axis=-1)

        columns = {k: insert(v, v[..., model]) for k, v in cut.columns.items()}
        length = columns["segment_duration"]
        lead = np.broadcast_shapes(np.shape(time), length.shape[:-1])
        columns["segment_duration"] = length = np.broadcast_to(length, (*lead, length.shape[-1])).copy()
        length[..., place] = time
        columns["start_pressure"][..., place] = pressure
        columns["end_pressure"][..., place] = pressure
        return replace(
            cut,
            columns=columns,
            fractions={k: insert(v, v[..., model]) for k, v in cut.fractions.items()},
            part=(*cut.part[:place], "delay", *cut.part[place:]),
            session=(*cut.session[:place], cut.session[model], *cut.session[place:]),
        )

    def pick(self, **labels: Any) -> Exposure:
        """Return one scenario along one or more of the exposure's dimensions.

        Parameters
        ----------
        **labels
            Dimension to one of its labels.

        Returns
        -------
        Exposure
            Without those dimensions.

        Raises
        ------
        ExposureError
            If there is no such dimension or label.

        Examples
        --------
        >>> labels = {"draw": ["a", "b"]}
        >>> depths = xr.DataArray([18.0, 30.0], dims="draw", coords=labels, attrs={"units": "msw"})
        >>> Exposure.start("air").travel(depth=depths, minutes=2).pick(draw="b").pieces().end_pressure
        array([401.325])
        """
        new = self
        for dim, label in labels.items():
            if dim not in new.dims:
                raise ExposureError(
                    f"there is no dimension {dim!r}; there are: {', '.join(new.dims) or 'none'}"
                )
            place = np.flatnonzero(np.asarray(new.coords[dim]) == label)
            if place.size != 1:
                known = ", ".join(str(x) for x in np.asarray(new.coords[dim])[:10])
                raise ExposureError(f"dimension {dim!r} has no label {label!r}; it has {known}")
            new = new._at(new.dims.index(dim), int(place[0]))
        return new

    def scenarios(self) -> list[Exposure]:
        """Return every scenario as an exposure of its own, the last dimension fastest.

        Returns
        -------
        list of Exposure
            Itself, where it has no scenario dimension.

        Examples
        --------
        >>> times = xr.DataArray([5.0, 10.0], dims="draw", attrs={"units": "min"})
        >>> [x.duration for x in Exposure.start("air").stay(times).scenarios()]
        [5.0, 10.0]
        """
        found = [self]
        for dim in self.dims:
            found = [one._at(one.dims.index(dim), k) for one in found for k in range(len(self.coords[dim]))]
        return found

    def _at(self, axis: int, place: int) -> Exposure:
        """Take one place along a dimension."""
        dim = self.dims[axis]

        def one(values: Any) -> Any:
            values = np.asarray(values, dtype=float)
            if values.ndim <= axis:
                return values if values.ndim else float(values)
            taken = np.take(values, place if values.shape[axis] > 1 else 0, axis=axis)
            return taken if taken.ndim else float(taken)

        return replace(
            self,
            dims=tuple(d for d in self.dims if d != dim),
            coords={k: v for k, v in self.coords.items() if k != dim},
            columns={k: one(v) for k, v in self.columns.items()},
            fractions={k: one(v) for k, v in self.fractions.items()},
            gas={k: one(v) for k, v in self.gas.items()},
            pressure=one(self.pressure),
            surface_pressure=one(self.surface_pressure),
            setpoint_now=one(self.setpoint_now),
            workload=(one(self.workload[0]), one(self.workload[1])),
            chunks={k: v for k, v in self.chunks.items() if k != dim},
        )

    # -- what it holds -----------------------------------------------------------------------

    @property
    def duration(self) -> Any:
        """Total duration [min]; a DataArray where it differs between scenarios."""
        total = self.columns["segment_duration"].sum(axis=-1)
        if not self.dims:
            return float(total)
        if np.all(total == total.flat[0]):
            return float(total.flat[0])
        coords = {d: c for d, c in self.coords.items() if total.shape[self.dims.index(d)] > 1}
        shape = tuple(len(self.coords[d]) for d in self.dims)
        whole = np.broadcast_to(total, shape)
        return xr.DataArray(
            whole, dims=self.dims, coords=coords or self.coords, attrs=attributes("duration"), name="duration"
        )

    def _one_duration(self) -> float:
        total = self.duration
        if not isinstance(total, float):
            raise ExposureError("the duration differs between scenarios; pick one first")
        return total

    def pieces(self) -> Pieces:
        """Return the pieces as plain arrays for a kernel.

        Returns
        -------
        Pieces
            Arrays ``(..., segment)``.

        Examples
        --------
        >>> Exposure.start("air").stay(10).pieces().duration
        array([10.])
        """
        c = self.columns
        duration = c["segment_duration"]
        start, end = c["start_pressure"], c["end_pressure"]
        oxygen, setpoint = self.fractions["O2"], c["setpoint"]
        loop = ~np.isnan(setpoint)
        with np.errstate(invalid="ignore"):
            po2 = [
                np.where(loop, loop_po2.raw(setpoint, p), open_circuit_po2.raw(oxygen, p))
                for p in (start, end)
            ]
        times = np.concatenate([np.zeros((*duration.shape[:-1], 1)), np.cumsum(duration, axis=-1)], axis=-1)
        return Pieces(duration, start, end, po2[0], po2[1], dict(self.fractions), setpoint, times)

    def to_dataset(self, at: Any = None) -> xr.Dataset:
        """Return both views of the exposure: pieces, and values against time.

        Parameters
        ----------
        at : array_like, optional
            Times to add to the boundaries [min].

        Returns
        -------
        Dataset
            Dimension ``segment`` (lossless) and dimension ``time`` (all boundaries and `at`); where
            durations differ between scenarios the dimension is ``point`` and ``time`` a variable.
            A value at a boundary belongs to the piece that begins there, the last one to the piece
            that ends.

        Raises
        ------
        ExposureError
            If there is no piece, or a time of `at` is outside.

        Examples
        --------
        >>> ds = Exposure.start("air").travel(depth=10, minutes=1).to_dataset()
        >>> ds.ambient_pressure.values.round(3)
        array([101.325, 201.325])
        """
        if not self.part:
            raise ExposureError("the exposure has no piece yet")
        pieces = self.pieces()
        ds = self.segment_view()
        self._time_view(ds, pieces, at)
        common = dataset_attributes(
            self.attrs.get("title", "exposure: pressure and breathing gas against time"),
            "exposure",
            history=self.history,
        )
        ds.attrs = {**common, "references": "", **ds.attrs, **self.attrs, "title": common["title"]}
        return ds

    def segment_view(self) -> xr.Dataset:
        """Return the lossless view alone: what a result carries so that it can be explained.

        Returns
        -------
        Dataset
            On dimension ``segment``; :meth:`from_dataset` reads it back.

        Raises
        ------
        ExposureError
            If there is no piece.

        Examples
        --------
        >>> view = Exposure.start("air").stay(10).segment_view()
        >>> Exposure.from_dataset(view).duration
        10.0
        """
        if not self.part:
            raise ExposureError("the exposure has no piece yet")
        pieces = self.pieces()
        ds = xr.Dataset()
        coords = {d: np.asarray(v) for d, v in self.coords.items()}
        n = len(self.part)

        def put(name: str, dims: tuple[str, ...], values: Any, **attrs: Any) -> None:
            keep = [i for i, d in enumerate(self.dims) if values.shape[i] > 1 or len(coords[d]) == 1]
            squeezed = values[tuple(slice(None) if i in keep else 0 for i in range(len(self.dims)))]
            names = tuple(self.dims[i] for i in keep)
            ds[name] = ((*names, *dims), np.array(squeezed), attributes(name, **attrs))

        for name in _NUMERIC:
            put(name, ("segment",), self.columns[name])
        gases = [g for g in FORMULAS if g in self.fractions]
        stacked = np.stack([np.broadcast_to(self.fractions[g], self._shape()) for g in gases], axis=-2)
        put("gas_fraction", ("gas", "segment"), stacked)
        ds = ds.assign_coords({"gas": gases, "segment": np.arange(n), **coords})
        ds["part"] = ("segment", np.asarray(self.part, dtype=str), {"long_name": "part of the exposure"})
        ds["session"] = (
            "segment",
            np.asarray(self.session, dtype=np.int32),
            {"long_name": "number of the session"},
        )
        above = self._diluent_above_setpoint(pieces)
        if above.any():
            ds["diluent_above_setpoint"] = (
                "segment",
                above.reshape(-1, n).any(axis=0).astype(np.int8),
                {"long_name": "1 where the diluent's own PO2 exceeds the set-point"},
            )
        ds.attrs = {"depth_unit": self.depth_unit, "water": self.water}
        if np.size(self.surface_pressure) == 1:
            ds.attrs["surface_pressure"] = float(np.ravel(self.surface_pressure)[0])
        else:
            put("surface_pressure", (), np.asarray(self.surface_pressure))
        return ds

    def sample(self, at: Any = None) -> tuple[Array, NDArray[np.int64], Array]:
        """Return sampling times, the piece each belongs to, and how far into the piece it lies.

        Parameters
        ----------
        at : array_like, optional
            Times to add to the boundaries [min].

        Returns
        -------
        tuple of array
            Times [min], index of the piece, share of the piece passed [1].

        Raises
        ------
        ExposureError
            If a time is outside, or durations differ between scenarios.

        Examples
        --------
        >>> Exposure.start("air").stay(10).sample([5.0])[2]
        array([0. , 0.5, 1. ])
        """
        self._one_duration()
        times = self.pieces().times.reshape(-1, len(self.part) + 1)[0]
        wanted = np.unique(times)
        if at is not None:
            extra = np.atleast_1d(np.asarray(at, dtype=float)).ravel()
            if not np.all((extra >= 0.0) & (extra <= times[-1] * (1.0 + 1e-12))):
                raise ExposureError(f"at: times must lie within 0 to {times[-1]:g} min")
            wanted = np.unique(np.concatenate([wanted, np.minimum(extra, times[-1])]))
        index = np.clip(np.searchsorted(times, wanted, side="right") - 1, 0, len(self.part) - 1)
        length = times[index + 1] - times[index]
        share = np.where(length > 0.0, (wanted - times[index]) / np.where(length > 0.0, length, 1.0), 1.0)
        return wanted, index, share

    def _time_view(self, ds: xr.Dataset, pieces: Pieces, at: Any) -> None:
        if isinstance(self.duration, float) and self._same_times():
            times, index, share = self.sample(at)
            dims: tuple[str, ...] = ("time",)
            ds.coords["time"] = ("time", times, attributes("time"))
        else:
            if at is not None:
                raise ExposureError("at: the boundaries differ between scenarios; pick one first")
            n = len(self.part)
            index, share = np.append(np.arange(n), n - 1), np.append(np.zeros(n), 1.0)
            dims = ("point",)
            whole = np.broadcast_to(pieces.times, (*self._shape()[:-1], n + 1))
            ds["time"] = ((*self.dims, "point"), whole.copy(), attributes("time"))

        def at_times(start: Array, end: Array) -> Array:
            return np.asarray(linear_in_piece.raw(start[..., index], end[..., index], share))

        def put(name: str, extra: tuple[str, ...], values: Array, **attrs: Any) -> None:
            lead = self.dims if values.ndim > len(extra) + 1 else ()
            values = (
                np.broadcast_to(values, (*self._shape()[:-1], *values.shape[len(self.dims) :]))
                if lead
                else values
            )
            ds[name] = ((*lead, *extra, *dims), values.copy(), attributes(name, **attrs))

        ds["share_of_piece"] = (
            dims,
            share,
            {"units": "1", "long_name": "share of the piece passed at this time"},
        )
        put(
            "ambient_pressure",
            (),
            at_times(pieces.start_pressure, pieces.end_pressure),
            equation="breathing_gas.linear_in_piece",
            inputs='{"start_pressure": "@start_pressure", "end_pressure": "@end_pressure", '
            '"share_of_piece": "@share_of_piece"}',
        )
        put(
            "breathing_gas_po2",
            (),
            at_times(pieces.start_po2, pieces.end_po2),
            equation="breathing_gas.open_circuit_po2 | breathing_gas.loop_po2",
            inputs='{"o2_fraction": "@gas_fraction:O2", "setpoint": "@setpoint", '
            '"ambient_pressure": "@ambient_pressure"}',
        )
        inert = [g for g in self.fractions if g not in ("O2", "CO2")]
        values = [
            np.broadcast_to(at_times(*pieces.inert_pressure(g)), (*self._shape()[:-1], len(index)))
            for g in inert
        ]
        ds.coords["inert_gas"] = inert
        put(
            "breathing_gas_inert_pressure",
            ("inert_gas",),
            np.stack(values, axis=-2),
            equation="breathing_gas.open_circuit_inert_pressure | breathing_gas.loop_inert_pressure",
            inputs='{"inert_fraction": "@gas_fraction:inert_gas", "o2_fraction": "@gas_fraction:O2", '
            '"ambient_pressure": "@ambient_pressure", "loop_po2": "@breathing_gas_po2"}',
        )
        ds["segment_of_time"] = (
            dims,
            index.astype(np.int32),
            {"long_name": "piece that the value at this time belongs to"},
        )

    def _same_times(self) -> bool:
        duration = self.columns["segment_duration"].reshape(-1, len(self.part))
        return bool(np.all(duration == duration[:1]))

    def _shape(self) -> tuple[int, ...]:
        return (*(len(self.coords[d]) for d in self.dims), len(self.part))

    def _diluent_above_setpoint(self, pieces: Pieces) -> NDArray[np.bool_]:
        highest = np.maximum(pieces.start_pressure, pieces.end_pressure) * pieces.fractions["O2"]
        with np.errstate(invalid="ignore"):
            return np.asarray(highest > pieces.setpoint * (1.0 + 1e-9))

    # -- reading back ------------------------------------------------------------------------

    @classmethod
    def from_dataset(cls, ds: xr.Dataset) -> Exposure:
        """Read an exposure from the ``segment`` view of a Dataset.

        Parameters
        ----------
        ds : Dataset
            As :meth:`to_dataset` returns, or with at least ``segment_duration``,
            ``start_pressure``, ``end_pressure`` and ``gas_fraction`` along ``segment``.

        Returns
        -------
        Exposure
            The same pieces.

        Raises
        ------
        ExposureError
            If a variable is missing.
        UnitError
            If one carries no unit.

        Examples
        --------
        >>> dive = Exposure.start("air").travel(depth=10, minutes=1)
        >>> Exposure.from_dataset(dive.to_dataset()).duration
        1.0
        """
        needed = ("segment_duration", "start_pressure", "end_pressure", "gas_fraction")
        missing = [n for n in needed if n not in ds]
        if missing:
            raise ExposureError(f"the Dataset has no variable {', '.join(missing)}")
        dims = tuple(
            dict.fromkeys(
                str(d)
                for n in (*_NUMERIC, "gas_fraction")
                if n in ds
                for d in ds[n].dims
                if d not in ("segment", "gas")
            )
        )
        n = ds.sizes["segment"]

        def column(da: xr.DataArray, name: str) -> Array:
            given = da.attrs.get("units")
            if given is None:
                raise UnitError(f"{name} has no units attribute; it needs {quantity(name).unit!r}")
            values = da.transpose(*[d for d in dims if d in da.dims], "segment").values.astype(float)
            values = quantity(name).from_unit(values, str(given)) if given != quantity(name).unit else values
            shape = [da.sizes.get(d, 1) for d in dims]
            return np.array(values).reshape(*shape, n)

        columns = {
            name: column(ds[name], name) if name in ds else np.full((*[1] * len(dims), n), np.nan)
            for name in _NUMERIC
        }
        fractions = {str(g): column(ds["gas_fraction"].sel(gas=g), "gas_fraction") for g in ds["gas"].values}
        for needed_gas in ("O2", "N2"):
            fractions.setdefault(needed_gas, np.zeros((*[1] * len(dims), n)))
        surface: Any = ds.attrs.get("surface_pressure", float(ATMOSPHERE))
        if "surface_pressure" in ds:
            surface = ds["surface_pressure"].values
        part = tuple(str(p) for p in ds["part"].values) if "part" in ds else ("",) * n
        session = tuple(int(s) for s in ds["session"].values) if "session" in ds else (0,) * n
        known = {"Conventions", "source", "history", "comment", "depth_unit", "water", "surface_pressure"}
        history = str(ds.attrs.get("history", ""))
        new = cls(
            surface_pressure=surface,
            depth_unit=str(ds.attrs.get("depth_unit", "msw")),
            water=str(ds.attrs.get("water", "en13319")),
            columns=columns,
            fractions=fractions,
            part=part,
            session=session,
            dims=dims,
            coords={d: ds[d].values for d in dims},
            gas={g: v[..., -1] for g, v in fractions.items()},
            pressure=columns["end_pressure"][..., -1],
            setpoint_now=columns["setpoint"][..., -1],
            part_now=part[-1],
            history=() if history in ("", "as given") else tuple(history.split("\n")),
            attrs={str(k): v for k, v in ds.attrs.items() if k not in known},
            chunks={d: tuple(ds.chunks[d]) for d in dims if d in ds.chunks},
        )
        new._check()
        return new._split_clamps()

    @classmethod
    def from_csv(
        cls,
        path: str | os.PathLike[str] | Any,
        surface_pressure: Any = None,
        breathing: str | os.PathLike[str] | None = None,
    ) -> Exposure:
        """Read a recorder's log.

        Parameters
        ----------
        path : path or text file
            CSV with one time column (``time_min``, ``time_s``, ``time_hms`` or ISO ``time``), one
            of depth or pressure (``depth_msw``, ``pressure_abs_kPa``, ``pressure_gauge_bar``, ...)
            and ``gas``.
        surface_pressure : float or str, optional
            Pressure at the surface [kPa absolute]; needed for gauge pressures.
        breathing : path, optional
            CSV of breathing periods laid over the log.

        Returns
        -------
        Exposure
            One piece between two rows; harmless faults are mended and named in ``history``.

        Raises
        ------
        InputFileError
            With file, line, column and remedy, for everything else.

        Examples
        --------
        >>> import io
        >>> log = io.StringIO("time_min,depth_msw,gas\\n0,0,air\\n2,18,air\\n30,18,air\\n")
        >>> Exposure.from_csv(log).duration
        30.0
        """
        from gasphys.records import read_log

        if isinstance(surface_pressure, str):
            surface_pressure = quantity("surface_pressure").from_text(surface_pressure)
        log = read_log(path, surface_pressure=surface_pressure, breathing=breathing)
        names = {name: Gas.parse(name) for name in dict.fromkeys(log.gas)}
        gases = [names[g] for g in log.gas[:-1]]
        pieces = len(gases)
        columns = {
            "segment_duration": np.diff(log.time),
            "start_pressure": np.array(log.ambient_pressure[:-1]),
            "end_pressure": np.array(log.ambient_pressure[1:]),
            "setpoint": np.array(log.setpoint[:-1]),
            "o2_uptake_stpd": np.array(log.o2_uptake_stpd[:-1]),
            "ventilation_btps": np.array(log.ventilation_btps[:-1]),
        }
        present = [f for f in FORMULAS if f in ("O2", "N2") or any(g.fraction(f) for g in names.values())]
        table = {name: [gas.fraction(f) for f in present] for name, gas in names.items()}
        matrix = np.array([table[name] for name in log.gas[:-1]]).T.reshape(len(present), pieces)
        last = names[log.gas[-1]]
        new = cls(
            surface_pressure=float(log.surface_pressure),
            depth_unit=log.depth_unit or "msw",
            water="en13319",
            columns=columns,
            fractions={f: matrix[k].copy() for k, f in enumerate(present)},
            part=("",) * pieces,
            session=(0,) * pieces,
            dims=(),
            coords={},
            gas={f: last.fraction(f) for f in present},
            pressure=float(log.ambient_pressure[-1]),
            setpoint_now=float(log.setpoint[-1]),
            history=tuple(log.history),
            attrs={"title": f"exposure read from {os.path.basename(log.path)}"}
            | ({"start": log.start} if log.start else {}),
        )
        new._check()
        return new._split_clamps()._merge()

    # -- inner parts -------------------------------------------------------------------------

    def _check(self) -> None:
        duration = self.columns["segment_duration"]
        if not np.all(duration >= 0.0):
            raise ExposureError("a piece has a negative or unknown duration")
        for name in ("start_pressure", "end_pressure"):
            values = self.columns[name]
            low, high = quantity(name).possible
            bad = ~((values >= low) & (values <= high))
            if bad.any():
                raise quantity(name).range_error(float(values[bad][0]))
        total = sum(self.fractions.values())
        if not np.all(np.abs(total - 1.0) <= 1e-6):
            raise ExposureError("the gas fractions of a piece do not sum to 1 within 1e-6")

    def _merge(self) -> Exposure:
        """Join neighboring pieces that are one straight line on one gas (stays of a log)."""
        c = self.columns
        n = len(self.part)
        if n < 2 or self.dims:
            return self
        with np.errstate(divide="ignore", invalid="ignore"):
            slope = (c["end_pressure"] - c["start_pressure"]) / c["segment_duration"]
        same = (slope[1:] == 0.0) & (slope[:-1] == 0.0) & (c["end_pressure"][:-1] == c["start_pressure"][1:])
        for values in (*self.fractions.values(), c["setpoint"], c["o2_uptake_stpd"], c["ventilation_btps"]):
            same &= (values[1:] == values[:-1]) | (np.isnan(values[1:]) & np.isnan(values[:-1]))
        if not same.any():
            return self
        first = np.concatenate([[True], ~same])
        starts = np.flatnonzero(first)
        ends = np.append(starts[1:] - 1, n - 1)
        columns = {k: v[starts] for k, v in c.items()}
        columns["segment_duration"] = np.add.reduceat(c["segment_duration"], starts)
        columns["end_pressure"] = c["end_pressure"][ends]
        return replace(
            self,
            columns=columns,
            fractions={k: v[starts] for k, v in self.fractions.items()},
            part=tuple(self.part[i] for i in starts),
            session=tuple(self.session[i] for i in starts),
        )

    def _value(self, value: Any, name: str, missing: bool = False) -> tuple[Exposure, Any]:
        """Read a number, text or labelled array of a quantity; adopt the array's dimensions."""
        one = quantity(name)
        if isinstance(value, str):
            value = one.from_text(value)
        new = self
        if isinstance(value, xr.DataArray):
            new = new._chunked(value)
            given = value.attrs.get("units", one.unit)
            value = value.copy(data=one.from_unit(value.values.astype(float), str(given)))
        new, plain = new._plain(value, name)
        low, high = one.possible
        good = (plain >= low) & (plain <= high)
        if missing:
            good = good | np.isnan(plain)
        if not np.all(good):
            raise one.range_error(float(np.asarray(plain)[~np.asarray(good)].flat[0]))
        return new, plain

    def _plain(self, value: Any, name: str) -> tuple[Exposure, Any]:
        if isinstance(value, xr.DataArray) and value.ndim:
            new = self._chunked(value)
            for dim in value.dims:
                new = new._adopt(
                    str(dim), value[dim].values if dim in value.coords else np.arange(value.sizes[dim])
                )
            order = [d for d in new.dims if d in value.dims]
            values = value.transpose(*order).values.astype(float)
            return new, values.reshape([value.sizes.get(d, 1) for d in new.dims])
        if isinstance(value, bool):
            raise TypeError(f"{name} must be a number, not a truth value")
        try:
            number = float(value)
        except (TypeError, ValueError):
            raise TypeError(
                f"{name} must be a number, text with a unit, or a DataArray; got {type(value).__name__}"
            ) from None
        return self, np.full((1,) * len(self.dims), number) if self.dims else number

    def _chunked(self, value: xr.DataArray) -> Exposure:
        """Remember the blocks of a chunked input; the first one along a dimension decides."""
        if value.chunks is None:
            return self
        found = {str(d): tuple(c) for d, c in zip(value.dims, value.chunks, strict=True) if d != "gas"}
        return replace(self, chunks=found | self.chunks)

    def _adopt(self, dim: str, labels: Any) -> Exposure:
        if dim in self.dims:
            if not np.array_equal(np.asarray(self.coords[dim]), np.asarray(labels)):
                raise ExposureError(f"dimension {dim!r} has other labels than before")
            return self
        if dim in ("segment", "time", "point", "gas", "inert_gas"):
            raise ExposureError(
                f"{dim!r} is a dimension of the exposure itself; name the scenario's another way"
            )

        def widen(values: Any) -> Any:
            values = np.asarray(values, dtype=float)
            return values.reshape((*values.shape[: len(self.dims)], 1, *values.shape[len(self.dims) :]))

        def widen_state(value: Any) -> Any:
            return np.asarray(value, dtype=float).reshape(
                (*np.shape(value), *(1,) * (len(self.dims) + 1 - np.ndim(value)))
            )

        return replace(
            self,
            dims=(*self.dims, dim),
            coords={**self.coords, dim: np.asarray(labels)},
            columns={k: widen(v) for k, v in self.columns.items()},
            fractions={k: widen(v) for k, v in self.fractions.items()},
            gas={k: widen_state(v) for k, v in self.gas.items()},
            pressure=widen_state(self.pressure),
            surface_pressure=widen_state(self.surface_pressure),
            setpoint_now=widen_state(self.setpoint_now),
            workload=(widen_state(self.workload[0]), widen_state(self.workload[1])),
        )

    def _breathe(self, gas: Any, setpoint: Any) -> Exposure:
        new = self
        if isinstance(gas, xr.DataArray):
            if "gas" not in gas.dims:
                raise UnitError("a gas as DataArray needs the dimension gas, labelled by formula")
            unknown = [str(g) for g in gas["gas"].values if str(g) not in FORMULAS]
            if unknown:
                raise unknown_name("gas", unknown[0], FORMULAS)
            mix: dict[str, Any] = {}
            for formula in gas["gas"].values:
                new, mix[str(formula)] = new._plain(gas.sel(gas=formula, drop=True), "gas_fraction")
            # _plain may have added dimensions after the first formula was read
            mix = {
                k: np.asarray(v).reshape((*np.shape(v), *(1,) * (len(new.dims) - np.ndim(v))))
                for k, v in mix.items()
            }
            total = sum(mix.values())
            if not np.all(np.abs(total - 1.0) <= 1e-6):
                raise ExposureError("the gas fractions do not sum to 1 within 1e-6")
            fractions = mix
        else:
            one = Gas.parse(gas)
            fractions = {k: v for k, v in one.fractions.items() if v or k in ("O2", "N2")}
        return replace(new, gas={"O2": 0.0, "N2": 0.0, **fractions}, setpoint_now=setpoint)

    def _depth_to_pressure(self, depth: Any) -> tuple[Exposure, Any]:
        water = {"msw": "msw", "fsw": "fsw", "m": self.water}[self.depth_unit]
        if isinstance(depth, str):
            number, given = parse_quantity(depth)
            if given and given != self.depth_unit:
                if not unit(given).gauge:
                    raise UnitError(f"depth {depth!r}: write a depth in msw, fsw or m, or use pressure=")
                water = {"msw": "msw", "mfw": "fresh"}.get(given, given)
            depth = number
        new, plain = self._plain(depth, "depth")
        if not np.all(plain >= 0.0):
            raise RangeError(
                f"depth = {float(np.min(plain)):g} must not be negative; for altitude use pressure="
            )
        return new, _pressure(water, plain, new.surface_pressure)

    def _pressure_to_depth(self, pressure: Any) -> Any:
        water = {"msw": "msw", "fsw": "fsw", "m": self.water}[self.depth_unit]
        if self.depth_unit != "m":
            per_unit = _pressure(water, 1.0, 0.0)
            return (np.asarray(pressure) - self.surface_pressure) / per_unit
        from gasphys.surroundings import depth_at_pressure

        f = depth_at_pressure.pick(water=water)  # type: ignore[attr-defined]
        inputs = {"ambient_pressure": pressure, "surface_pressure": self.surface_pressure, "latitude": 45.0}
        values = [np.asarray(inputs[a.name]) for a in f.arguments]
        return f.raw(*values)

    def _piece(self, minutes: Any, target: Any) -> Exposure:
        minutes, target = np.asarray(minutes, dtype=float), np.asarray(target, dtype=float)
        if np.all(minutes == 0.0):
            if not np.all(target == np.asarray(self.pressure)):
                raise ExposureError("a change of pressure needs time")
            return self
        low, high = quantity("ambient_pressure").possible
        inside = (target >= low) & (target <= high)
        if not np.all(inside):
            raise quantity("ambient_pressure").range_error(float(target[~inside].flat[0]))
        rank = len(self.dims)

        def column(value: Any) -> Array:
            plain: Array = np.asarray(value, dtype=np.float64)
            return plain.reshape((*plain.shape, *(1,) * (rank - plain.ndim), 1))

        added = {
            "segment_duration": column(minutes),
            "start_pressure": column(self.pressure),
            "end_pressure": column(target),
            "setpoint": column(self.setpoint_now),
            "o2_uptake_stpd": column(self.workload[0]),
            "ventilation_btps": column(self.workload[1]),
        }
        gases = dict.fromkeys([*self.fractions, *self.gas])
        empty = np.zeros((*(1,) * rank, len(self.part)))
        new = replace(
            self,
            columns={k: _append(self.columns[k], v) for k, v in added.items()},
            fractions={g: _append(self.fractions.get(g, empty), column(self.gas.get(g, 0.0))) for g in gases},
            part=(*self.part, self.part_now),
            session=(*self.session, self.session[-1] if self.session else 0),
            pressure=target if rank else float(target),
        )
        return new._split_clamps(since=len(self.part))

    def _extend(self, other: Exposure, offset: int) -> Exposure:
        new = self
        for dim in other.dims:
            new = new._adopt(dim, other.coords[dim])
        for dim in new.dims:
            other = other._adopt(dim, new.coords[dim])
        order = [other.dims.index(d) for d in new.dims]

        def turn(values: Array) -> Array:
            return np.transpose(values, (*order, len(order)))

        gases = dict.fromkeys([*new.fractions, *other.fractions])
        here = np.zeros((*(1,) * len(new.dims), len(new.part)))
        there = np.zeros((*(1,) * len(new.dims), len(other.part)))
        return replace(
            new,
            columns={k: _append(new.columns[k], turn(other.columns[k])) for k in _NUMERIC},
            fractions={
                g: _append(
                    new.fractions.get(g, here), turn(other.fractions[g]) if g in other.fractions else there
                )
                for g in gases
            },
            part=(*new.part, *other.part),
            session=(*new.session, *(s + offset for s in other.session)),
            gas=other.gas,
            pressure=other.pressure,
            setpoint_now=other.setpoint_now,
            workload=other.workload,
            part_now=other.part_now,
            history=(*new.history, *(h for h in other.history if h not in new.history)),
        )

    def _split(self, at: Iterable[float]) -> Exposure:
        """Cut pieces at times; nothing else changes."""
        new = self
        for when in at:
            times = new.pieces().times
            inside = (times[..., :-1] < when) & (when < times[..., 1:])
            for index in np.flatnonzero(inside.reshape(-1, len(new.part)).any(axis=0))[::-1]:
                start, end = times[..., index], times[..., index + 1]
                if not np.all((start <= when) & (when <= end)):
                    raise ExposureError(
                        f"{when:g} min lies in another piece in another scenario; pick one first"
                    )
                length = np.where(end > start, end - start, 1.0)
                new = new._cut(int(index), np.where(end > start, (when - start) / length, 0.0))
        return new

    def _cut(self, index: int, share: Any) -> Exposure:
        """Cut one piece at a share of its duration."""

        def twice(values: Array) -> Array:
            return np.insert(values, index, values[..., index], axis=-1)

        columns = {k: twice(v) for k, v in self.columns.items()}
        length = self.columns["segment_duration"][..., index]
        start, end = self.columns["start_pressure"][..., index], self.columns["end_pressure"][..., index]
        middle = start + (end - start) * share
        shape = np.broadcast_shapes(
            np.shape(middle), np.shape(length * share), columns["segment_duration"].shape[:-1]
        )
        for name in ("segment_duration", "start_pressure", "end_pressure"):
            full = np.broadcast_to(columns[name], (*shape, columns[name].shape[-1])).copy()
            columns[name] = full
        columns["segment_duration"][..., index] = length * share
        columns["segment_duration"][..., index + 1] = length - length * share
        columns["end_pressure"][..., index] = middle
        columns["start_pressure"][..., index + 1] = middle
        return replace(
            self,
            columns=columns,
            fractions={k: twice(v) for k, v in self.fractions.items()},
            part=(*self.part[:index], self.part[index], *self.part[index:]),
            session=(*self.session[:index], self.session[index], *self.session[index:]),
        )

    def _split_clamps(self, since: int = 0) -> Exposure:
        """Cut every loop piece where the ambient pressure crosses the set-point, so PO2 is linear."""
        c = self.columns
        if np.isnan(c["setpoint"][..., since:]).all():
            return self
        new = self
        index = since
        while index < len(new.part):
            setpoint = new.columns["setpoint"][..., index]
            start, end = new.columns["start_pressure"][..., index], new.columns["end_pressure"][..., index]
            with np.errstate(invalid="ignore", divide="ignore"):
                crosses = (start - setpoint) * (end - setpoint) < 0.0
                share = np.where(crosses, (setpoint - start) / (end - start), 0.0)
            if np.any(crosses):
                new = new._cut(index, share)
                # The boundary is the set-point itself, not a rounded neighbor of it.
                for name, place in (("end_pressure", index), ("start_pressure", index + 1)):
                    column = new.columns[name]
                    column[..., place] = np.where(crosses, setpoint, column[..., place])
                index += 1
            index += 1
        pieces = new.pieces()
        if np.any(new._diluent_above_setpoint(pieces)[..., since:]):
            outside_validity(
                "loop: the diluent's own PO2 is above the set-point in part of the exposure; the loop "
                "stays above its set-point there until the oxygen is used up"
            )
        return new

    # -- showing -----------------------------------------------------------------------------

    def __repr__(self) -> str:
        if self.dims:
            shape = ", ".join(f"{d}: {len(self.coords[d])}" for d in self.dims)
            return f"<Exposure of {len(self.part)} pieces over {shape}>"
        return f"<Exposure of {len(self.part)} pieces, {self._one_duration():.4g} min>\n{self.as_text()}"

    def as_text(self, limit: int = 40) -> str:
        """Return the exposure as sentences.

        Parameters
        ----------
        limit : int
            Most pieces to write out.

        Returns
        -------
        str
            A line a step.

        Raises
        ------
        ExposureError
            If it holds several scenarios.

        Examples
        --------
        >>> print(Exposure.start("air").travel(depth=18, minutes=2).stay(30).as_text())
        start on air at 101.3 kPa
        travel to 281.3 kPa in 2 min
        stay 30 min
        """
        if self.dims:
            raise ExposureError("an exposure with several scenarios has no one text")
        lines: list[str] = []
        before = ""
        for i in range(min(len(self.part), limit)):
            breathing = self.gas_name(i)
            start, end = self.columns["start_pressure"][i], self.columns["end_pressure"][i]
            if i == 0:
                lines.append(f"start on {breathing} at {start:.4g} kPa")
            elif breathing != before:
                lines.append(f"breathe {breathing}")
            before = breathing
            minutes = self.columns["segment_duration"][i]
            lines.append(
                f"stay {minutes:.4g} min" if start == end else f"travel to {end:.4g} kPa in {minutes:.4g} min"
            )
        if len(self.part) > limit:
            lines.append(f"... {len(self.part) - limit} more pieces")
        return "\n".join(lines)

    def gas_name(self, index: int) -> str:
        """Return the name of the gas of one piece.

        Parameters
        ----------
        index : int
            Number of the piece.

        Returns
        -------
        str
            A name :meth:`Gas.parse` reads, or a loop with set-point and diluent.

        Examples
        --------
        >>> Exposure.start("nitrox 32").stay(1).gas_name(0)
        'nitrox 32'
        """
        mix = {FORMULAS[g]: float(v[..., index].flat[0]) for g, v in self.fractions.items() if g != "N2"}
        name = str(Gas(**mix))
        setpoint = float(self.columns["setpoint"][..., index].flat[0])
        return name if np.isnan(setpoint) else f"loop at {setpoint:.4g} kPa, diluent {name}"


def _pressure(water: str, depth: Any, surface_pressure: Any) -> Any:
    f = WATERS[water]
    inputs = {"depth": depth, "surface_pressure": surface_pressure, "latitude": 45.0}
    result = f.raw(*[np.asarray(inputs[a.name], dtype=float) for a in f.arguments])
    return float(result) if np.ndim(result) == 0 else result


def _append(column: Array, added: Array) -> Array:
    shape = np.broadcast_shapes(column.shape[:-1], added.shape[:-1])
    return np.concatenate(
        [
            np.broadcast_to(column, (*shape, column.shape[-1])),
            np.broadcast_to(added, (*shape, added.shape[-1])),
        ],
        axis=-1,
    )
