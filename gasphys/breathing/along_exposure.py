"""Along an exposure: work of breathing, what it costs, what the gas leaves room for, heat lost."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr

from gasphys.breathing import heat, mechanics
from gasphys.constants import BODY_TEMPERATURE, BODY_VAPOR_PRESSURE, ZERO_CELSIUS
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.person import Person
from gasphys.policy import validity, weakest
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.real_gas import heat_capacity, humid_density, reference_density, viscosity

__all__ = ["effort", "gas_effort", "heat_loss"]

_BODY = float(BODY_TEMPERATURE) - float(ZERO_CELSIUS)

#: Ranges that a band shows: K2 [kPa s2/L2], exponent of density, share of maximum ventilation sustained.
_K2_HIGH = 0.06
_EXPONENTS = (0.40, 0.50)
_SHARES = {"low": 0.6, "high": 0.8}


class _Record:
    """A dataset to which equations are put, each with its inputs."""

    def __init__(self, ds: xr.Dataset) -> None:
        self.ds = ds
        self.references: dict[str, None] = {}
        self.provenance: list[str] = []

    def at_times(self, name: str) -> xr.DataArray:
        """Return a variable along time: of pieces, that of the piece a time belongs to."""
        found = self.ds[name]
        if "segment" in found.dims:
            attrs = found.attrs
            found = found.isel(segment=self.ds["segment_of_time"]).drop_vars("segment", errors="ignore")
            found.attrs = attrs
        return found

    def put(self, name: str, f: Any, end: str = "", /, **inputs: Any) -> None:
        """Add a variable; an input ``"@x"`` is the variable x, ``"@x:O2"`` its value for one gas."""
        result = f(**{k: self._read(v) for k, v in inputs.items()})
        self.provenance.append(result.attrs["provenance"])
        self.references.update(dict.fromkeys(result.attrs["references"].split("; ")))
        attrs = attributes(name)
        if end:
            attrs["long_name"] += f", {end} end of the band"
        whole = f"{name}_{end}" if end else name
        self.ds[whole] = result.transpose(..., "time")
        self.ds[whole].attrs = {**attrs, "equation": f.name, "inputs": json.dumps(inputs)}

    def _read(self, value: Any) -> Any:
        if not (isinstance(value, str) and value.startswith("@")):
            return value
        name, _, gas = value[1:].partition(":")
        found = self.at_times(name)
        return found.sel(gas=gas, drop=True).assign_attrs(units="1") if gas else found


def _number(value: Any, name: str) -> float:
    one = quantity(name)
    number = one.from_text(value) if isinstance(value, str) else float(value)
    if not one.possible[0] <= number <= one.possible[1]:
        raise one.range_error(number)
    return number


def _begin(exposure: Exposure, at: Any) -> _Record:
    ds = exposure.to_dataset(at=at)
    if "time" not in ds.dims:
        raise ExposureError("the boundaries differ between scenarios; pick one first")
    ambient = ds["ambient_pressure"]
    shares = [(ds["breathing_gas_po2"] / ambient).assign_coords(gas="O2")]
    shares += [
        (ds["breathing_gas_inert_pressure"].sel(inert_gas=g, drop=True) / ambient).assign_coords(gas=str(g))
        for g in ds["inert_gas"].values
    ]
    if "CO2" in ds["gas"].values:
        index = ds["segment_of_time"]
        on_loop = ds["setpoint"].isel(segment=index).notnull()
        of_gas = ds["gas_fraction"].sel(gas="CO2").isel(segment=index).drop_vars("segment", errors="ignore")
        shares.append(
            of_gas.where(~on_loop.drop_vars("segment", errors="ignore"), 0.0).assign_coords(gas="CO2")
        )
    breathed = xr.concat(shares, dim="gas", coords="minimal", compat="override")
    known = [f for f in FORMULAS if f in ds["gas"].values]
    breathed = breathed.reindex(gas=known).transpose("gas", ..., "time")
    ds["breathed_fraction"] = breathed
    ds["breathed_fraction"].attrs = attributes(
        "gas_fraction", long_name="dry mole fraction of the gas breathed, on open circuit and from a loop"
    )
    return _Record(ds)


def _of_gas(record: _Record) -> dict[str, Any]:
    """Return the fractions breathed as inputs of an equation."""
    present = set(record.ds["gas"].values)
    return {field: f"@breathed_fraction:{g}" if g in present else 0.0 for g, field in FORMULAS.items()}


def _ventilation(record: _Record, ventilation: Any, uptake: Any, per_o2: float) -> None:
    """Make sure that ventilation is known: given, of the exposure, or from O2 uptake."""
    ds = record.ds
    for name, value in (("ventilation_btps", ventilation), ("o2_uptake_stpd", uptake)):
        if value is not None:
            number = _number(value, name)
            attrs = ds[name].attrs
            ds[name] = xr.full_like(ds[name], number)
            ds[name].attrs = attrs
            if name == "o2_uptake_stpd" and ventilation is None:
                ds["ventilation_btps"] = xr.full_like(ds["ventilation_btps"], np.nan).assign_attrs(
                    attributes("ventilation_btps")
                )
    known = record.at_times("ventilation_btps")
    if known.isnull().all() and record.at_times("o2_uptake_stpd").notnull().all():
        del ds["ventilation_btps"]
        record.put(
            "ventilation_btps",
            mechanics.ventilation_for_o2_uptake,
            o2_uptake_stpd="@o2_uptake_stpd",
            ventilation_per_o2_uptake=per_o2,
        )
    elif known.isnull().any():
        raise ExposureError(
            "neither ventilation nor O2 uptake is known in every piece: give ventilation_btps or "
            "o2_uptake_stpd here or with Exposure.work"
        )


def effort(
    exposure: Exposure,
    person: Person | None = None,
    *,
    ventilation_btps: Any = None,
    o2_uptake_stpd: Any = None,
    ventilation_per_o2_uptake: float = 25.0,
    tidal_volume: float | None = None,
    elastance: float = 0.834,
    k1: float = 0.24,
    k2: float = 0.03,
    tissue_share: float = 0.0,
    exponent: float = 0.45,
    sustainable_share: float = 0.7,
    breathing_efficiency: float = 0.07,
    at: Any = None,
) -> xr.Dataset:
    """Work of breathing along an exposure, what it costs, and what the gas leaves room for.

    Parameters
    ----------
    exposure : Exposure
        Pressure, breathing gas and workload against time.
    person : Person, optional
        ``surface_maximum_ventilation_btps``; assumed and named where it was not measured.
    ventilation_btps, o2_uptake_stpd : float or str, optional
        Workload [L/min], in place of the exposure's.
    ventilation_per_o2_uptake : float
        Ventilation BTPS over O2 uptake STPD [1].
    tidal_volume : float, optional
        Volume of a breath [L]: with it elastic work is added; without it work is resistive only.
    elastance : float
        Of lungs and chest [kPa/L]; 0.834 is 8.5 cmH2O/L.
    k1, k2, tissue_share : float
        Of :func:`resistive_work`.
    exponent, sustainable_share : float
        Of :func:`maximum_ventilation` and :func:`sustainable_o2_uptake`.
    breathing_efficiency : float
        Of :func:`oxygen_cost_of_breathing`.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``density`` and ``viscosity`` at 37 degC, saturated, their ratios to air
        at the surface, ``gas_density`` at 0 degC (for density limits alone), ``resistive_work`` (``_high``:
        K2 0.06), ``elastic_work`` with a tidal volume, ``work_of_breathing``, ``breathing_power``,
        ``o2_cost_of_breathing``, ``maximum_ventilation_btps``, ``ventilatory_reserve``,
        ``sustainable_o2_uptake`` with ``_low`` and ``_high`` (exponent 0.50 to 0.40, share 0.6 to 0.8).

    Raises
    ------
    ExposureError
        If ventilation does not follow from what is given.
    RangeError
        If a value is not possible.

    Notes
    -----
    Internal work, of lungs and airways, both phases: not to be compared with limits of apparatus. Submersion,
    static lung load and apparatus are not in it. What the gas leaves room for is by ventilation alone.

    Examples
    --------
    >>> dive = Exposure.start("air", ventilation_btps=40.0).travel(depth=50, minutes=3).stay(10)
    >>> ds = effort(dive, Person(surface_maximum_ventilation_btps=150.0))
    >>> ds.resistive_work.values.round(2).tolist(), ds.sustainable_o2_uptake.values.round(1).tolist()
    ([0.97, 1.86, 1.86], [4.2, 1.9, 1.9])
    """
    person = (Person() if person is None else person).one()
    name = "surface_maximum_ventilation_btps"
    surface = person.value(name)
    with validity("ignore"):
        record = _begin(exposure, at)
        _ventilation(record, ventilation_btps, o2_uptake_stpd, ventilation_per_o2_uptake)
        _gas(record)
        ratios = {
            "density_ratio": "@breathing_density_ratio",
            "viscosity_ratio": "@breathing_viscosity_ratio",
        }
        airways = {"ventilation_btps": "@ventilation_btps", **ratios, "k1": k1, "tissue_share": tissue_share}
        work = mechanics.resistive_work.pick(phases="both", wave="sinusoid")  # type: ignore[attr-defined]
        named = _Named(work, "breathing.resistive_work[both,sinusoid]")
        record.put("resistive_work", named, **airways, k2=k2)
        record.put("resistive_work", named, "high", **airways, k2=max(k2, _K2_HIGH))
        elastic: Any = 0.0
        if tidal_volume is not None:
            held = xr.full_like(record.ds["density"], _number(tidal_volume, "tidal_volume"))
            held.attrs = attributes("tidal_volume")
            record.ds["tidal_volume"] = held
            record.put(
                "elastic_work", mechanics.elastic_work, tidal_volume="@tidal_volume", elastance=elastance
            )
            elastic = "@elastic_work"
        record.put(
            "work_of_breathing",
            mechanics.work_of_breathing,
            resistive_work="@resistive_work",
            elastic_work=elastic,
        )
        record.put(
            "breathing_power",
            mechanics.breathing_power,
            work_of_breathing="@work_of_breathing",
            ventilation_btps="@ventilation_btps",
        )
        record.put(
            "o2_cost_of_breathing",
            mechanics.oxygen_cost_of_breathing,
            breathing_power="@breathing_power",
            breathing_efficiency=breathing_efficiency,
        )
        # Of a gas thinner than air at the surface the larger exponent gives the larger ventilation.
        ratio, least, most = record.ds["breathing_density_ratio"], *_EXPONENTS
        dense = ratio >= 1.0
        for end, larger in (("low", dense), ("high", ~dense)):
            found = xr.full_like(ratio, most).where(larger, least)
            words = f"exponent of density of the {end} end of the band"
            found.attrs = attributes("density_exponent", long_name=words)
            record.ds[f"density_exponent_{end}"] = found
        for end in ("", "low", "high"):
            record.put(
                "maximum_ventilation_btps",
                mechanics.maximum_ventilation,
                end,
                surface_maximum_ventilation=surface,
                density_ratio=ratios["density_ratio"],
                exponent=f"@density_exponent_{end}" if end else exponent,
            )
            record.put(
                "sustainable_o2_uptake",
                mechanics.sustainable_o2_uptake,
                end,
                maximum_ventilation="@maximum_ventilation_btps" + (f"_{end}" if end else ""),
                sustainable_share=_SHARES.get(end, sustainable_share),
                ventilation_per_o2_uptake=ventilation_per_o2_uptake,
            )
        record.put(
            "ventilatory_reserve",
            mechanics.ventilatory_reserve,
            ventilation_btps="@ventilation_btps",
            maximum_ventilation="@maximum_ventilation_btps",
        )
    return _finished(
        record,
        exposure,
        "work of breathing, and the O2 uptake the gas leaves room for",
        "comparing internal work with limits of apparatus",
        assumed="" if person.is_measured(name) else f"{name} = {surface:g}",
    )


class _Named:
    """A member of a choice under its registry name."""

    def __init__(self, f: Callable[..., Any], name: str) -> None:
        self._f, self.name = f, name

    def __call__(self, **inputs: Any) -> Any:
        return self._f(**inputs)


def _gas(record: _Record) -> None:
    density = humid_density.pick(model="virial")  # type: ignore[attr-defined]
    record.put(
        "density",
        _Named(density, "real_gas.humid_density[virial]"),
        ambient_pressure="@ambient_pressure",
        **_of_gas(record),
        temperature=_BODY,
        water_vapor_pressure=float(BODY_VAPOR_PRESSURE),
    )
    record.ds["density"].attrs["long_name"] = "gas density at 37 degC, saturated"
    wilke = viscosity.pick(model="wilke_1950")  # type: ignore[attr-defined]
    record.put(
        "viscosity",
        _Named(wilke, "real_gas.viscosity[wilke_1950]"),
        **_of_gas(record),
        temperature=_BODY,
        density="@density",
    )
    at_zero = reference_density.pick(rule="scaled_1_atm")  # type: ignore[attr-defined]
    record.put(
        "gas_density",
        _Named(at_zero, "real_gas.reference_density[scaled_1_atm]"),
        ambient_pressure="@ambient_pressure",
        **_of_gas(record),
    )
    record.put("breathing_density_ratio", mechanics.density_ratio, density="@density")
    record.put("breathing_viscosity_ratio", mechanics.viscosity_ratio, viscosity="@viscosity")


def heat_loss(
    exposure: Exposure,
    *,
    inspired_temperature: Any,
    ventilation_btps: Any = None,
    o2_uptake_stpd: Any = None,
    ventilation_per_o2_uptake: float = 25.0,
    expired_temperature: Any = None,
    inspired_vapor_density: float = 0.0,
    at: Any = None,
) -> xr.Dataset:
    """Heat that breathing takes from the body along an exposure, and how cold the gas may be.

    Parameters
    ----------
    exposure : Exposure
        Pressure, breathing gas and workload against time.
    inspired_temperature : float or str
        Temperature of the gas inspired [degC].
    ventilation_btps, o2_uptake_stpd : float or str, optional
        Workload [L/min], in place of the exposure's.
    ventilation_per_o2_uptake : float
        Ventilation BTPS over O2 uptake STPD [1].
    expired_temperature : float or str, optional
        Measured [degC]; else :func:`gasphys.breathing.expired_temperature`, from memory.
    inspired_vapor_density : float
        Vapor of the gas inspired [g/L]; 0 for gas from a cylinder.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``volumetric_heat_capacity``, ``convective_heat_loss``,
        ``evaporative_heat_loss`` [W], and where helium is breathed ``minimum_inspired_temperature``, NaN
        outside the range of its table.

    Raises
    ------
    ExposureError
        If ventilation does not follow from what is given.
    RangeError
        If a value is not possible.

    Notes
    -----
    Of the lungs alone: skin and suit lose more. Expired gas leaves saturated. The lowest inspired temperature
    is a naval table remembered, not read.

    Examples
    --------
    >>> dive = Exposure.start("heliox 4/96", pressure=3101.325, ventilation_btps=30.0).stay(10)
    >>> ds = heat_loss(dive, inspired_temperature=20.0)
    >>> [float(ds[n][0].round(1)) for n in ("convective_heat_loss", "minimum_inspired_temperature")]
    [132.2, 20.5]
    """
    inspired = _number(inspired_temperature, "inspired_temperature")
    given = (
        heat.expired_temperature(inspired)
        if expired_temperature is None
        else _number(expired_temperature, "expired_temperature")
    )
    with validity("ignore"):
        record = _begin(exposure, at)
        _ventilation(record, ventilation_btps, o2_uptake_stpd, ventilation_per_o2_uptake)
        ideal = heat_capacity.pick(model="ideal_sum")  # type: ignore[attr-defined]
        record.put(
            "molar_heat_capacity",
            _Named(ideal, "real_gas.heat_capacity[ideal_sum]"),
            **_of_gas(record),
            temperature=_BODY,
        )
        record.put(
            "volumetric_heat_capacity",
            heat.volumetric_heat_capacity,
            ambient_pressure="@ambient_pressure",
            molar_heat_capacity="@molar_heat_capacity",
            temperature=_BODY,
        )
        record.put(
            "convective_heat_loss",
            heat.convective_heat_loss,
            ventilation_btps="@ventilation_btps",
            volumetric_heat_capacity="@volumetric_heat_capacity",
            expired_temperature=given,
            inspired_temperature=inspired,
        )
        record.put(
            "evaporative_heat_loss",
            heat.evaporative_heat_loss,
            ventilation_btps="@ventilation_btps",
            expired_vapor_density=heat.vapor_density(given),
            inspired_vapor_density=inspired_vapor_density,
        )
        if "He" in record.ds["gas"].values:
            held = record.ds["volumetric_heat_capacity"]
            (argument,) = (a for a in heat.minimum_inspired_temperature.arguments if a.name == held.name)
            record.put(
                "minimum_inspired_temperature",
                heat.minimum_inspired_temperature,
                volumetric_heat_capacity="@volumetric_heat_capacity",
            )
            known = record.ds["minimum_inspired_temperature"]
            inside = (
                (held >= argument.low)
                & (held <= argument.high)
                & (record.ds["breathed_fraction"].sel(gas="He", drop=True) > 0.0)
            )
            record.ds["minimum_inspired_temperature"] = known.where(inside).assign_attrs(known.attrs)
    return _finished(
        record,
        exposure,
        "heat lost in breathing",
        "heat lost by skin and suit",
        assumed="" if expired_temperature is not None else f"expired_temperature = {given:g}",
    )


def _finished(record: _Record, exposure: Exposure, title: str, not_for: str, *, assumed: str) -> xr.Dataset:
    ds = record.ds
    own = {k: v for k, v in ds.attrs.items() if k in ("depth_unit", "water", "surface_pressure")}
    ds.attrs = dataset_attributes(
        title,
        "breathing",
        history=exposure.history,
        references=record.references,
        not_for=not_for,
        assumed=assumed,
        provenance=weakest(record.provenance),
        **own,
    )
    return ds


def gas_effort(gas: Gas | str, pressures: Any, **options: Any) -> xr.Dataset:
    """Return :func:`effort` of one gas along ambient pressure instead of time.

    Parameters
    ----------
    gas : Gas or str
        The gas.
    pressures : array_like
        Ambient pressures [kPa absolute].
    **options
        As for :func:`effort`.

    Returns
    -------
    Dataset
        Along ``ambient_pressure``.

    Examples
    --------
    >>> ds = gas_effort("air", [101.325, 405.3], ventilation_btps=40.0)
    >>> ds.breathing_density_ratio.values.round(2).tolist()
    [1.0, 4.07]
    """
    along = xr.DataArray(
        np.asarray(pressures, dtype=float), dims="pressure", attrs=attributes("ambient_pressure")
    )
    still = Exposure.start(gas, pressure=along).stay(1)
    ds = effort(still, **options).isel(time=0, segment=0, drop=True)
    ds = ds.swap_dims(pressure="ambient_pressure").set_coords("ambient_pressure").drop_vars("pressure")
    ds["ambient_pressure"].attrs = attributes("ambient_pressure")  # given, not computed from a piece
    used = ("breathed_fraction", "density_exponent_low", "density_exponent_high")
    computed = [str(n) for n in ds.data_vars if "equation" in ds[n].attrs or n in used]
    given = [n for n in ("o2_uptake_stpd", "ventilation_btps") if n not in computed]
    for name in given:
        ds[name] = ds[name].broadcast_like(ds["ambient_pressure"]).assign_attrs(attributes(name))
    ds = ds[[*given, *computed]]
    ds.attrs["gas"] = str(gas if isinstance(gas, Gas) else Gas.parse(gas))
    return ds
