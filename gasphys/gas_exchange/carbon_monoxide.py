"""Carboxyhemoglobin along an exposure."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys import blood, lungs
from gasphys.breathing_gas import fraction_breathed, linear_in_piece
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import RangeError
from gasphys.exposure import Exposure
from gasphys.gas_exchange.model import _Chain, recorded
from gasphys.maths import find_root
from gasphys.person import Person
from gasphys.policy import validity, weakest
from gasphys.quantities import CAUTION, attributes, quantity

__all__ = ["HALF_LIFE_BAND", "carboxyhemoglobin"]

Array = NDArray[np.float64]

#: Factors on the half-life of the nonlinear equation that reach every mean seen in people, 47 to 80 min on O2
#: at 1 atm where it says 39, and 23 at 3 atm where it says 12. :data:`gasphys.blood.COHB_HALF_LIFE_BAND`, 0.7
#: to 1.5, was made for the linear equation with a smaller ventilation and falls short of them.
HALF_LIFE_BAND = (0.7, 2.1)

#: Longest step of the integration [min]; the fastest half-life is a quarter of an hour.
_STEP = 0.25


def carboxyhemoglobin(
    exposure: Exposure,
    person: Person | None = None,
    carbon_monoxide_ppm: Any = 0.0,
    *,
    target: float | None = None,
    alveolar_ventilation_btps: float | None = None,
    co_diffusing_capacity: float | None = None,
    blood_volume: float | None = None,
    haldane_affinity: float | None = None,
    co_production_stpd: float | None = None,
    half_life_band: tuple[float, float] = HALF_LIFE_BAND,
    at: Any = None,
) -> xr.Dataset:
    """Carboxyhemoglobin of a person along an exposure, with a band.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    person : Person, optional
        ``cohb_fraction`` at the start and hemoglobin.
    carbon_monoxide_ppm : float or array_like
        Carbon monoxide of the dry breathing gas [ppm]; a number, or one for each piece of the exposure.
    target : float, optional
        A value whose first crossing is sought [1].
    alveolar_ventilation_btps, co_diffusing_capacity, blood_volume : float, optional
        Of the person [L/min], [L/min/kPa], [L]; without them those of a resting adult.
    haldane_affinity, co_production_stpd : float, optional
        Affinity for CO over O2 [1] and CO made in the body [L/min].
    half_life_band : tuple of float
        Factors on the half-life that make the band [1].
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``cohb_fraction`` with ``_low`` and ``_high``, ``cohb_rate``,
        ``capillary_po2``, ``inspired_pco``; with a target ``time_at_target`` on ``half_life_factor``,
        NaN where it is not crossed.

    Raises
    ------
    RangeError
        If a value is not possible, or the gas leaves no capillary PO2.

    Notes
    -----
    The nonlinear equation of Coburn, Forster & Kane (:func:`gasphys.blood.cohb_rate`) with the capillary
    PO2 of each instant, integrated by a Runge-Kutta method of fourth order. ``_low`` and ``_high`` bound
    0.7 to 2.1 times its half-life. **On O2 the equation is too fast** with the default parameters: from 20
    to 10 % in 39 min at 1 atm (band 28 to 82) and 12 at 3 atm (8 to 25), where people took 74 (SD 25) or 80
    and 23. The band reaches the means that were seen, not every person: one of 93 poisoned took 148. For
    well-mixed blood over hours. A low COHb does not say that there is no harm.

    Examples
    --------
    >>> session = Exposure.start("oxygen").travel(pressure="2.8 atm", minutes=10).stay(80)
    >>> ds = carboxyhemoglobin(session, Person(cohb_fraction=0.31), target=0.05)
    >>> float(ds.cohb_fraction[-1].round(3))
    0.004
    >>> ds.time_at_target.values.round()
    array([37., 27., 75.])
    """
    person = Person() if person is None else person.one()
    start = person.value("cohb_fraction")
    given = {
        "alveolar_ventilation_btps": alveolar_ventilation_btps,
        "co_diffusing_capacity": co_diffusing_capacity,
        "blood_volume": blood_volume,
        "haldane_affinity": haldane_affinity,
        "co_production_stpd": co_production_stpd,
    }
    defaults = {a.name: a.default for a in blood.cohb_rate.arguments}
    values = {k: float(defaults[k] if v is None else v) for k, v in given.items()}  # type: ignore[arg-type]
    values["hemoglobin"] = person.value("hemoglobin")
    for name, value in values.items():
        low, high = quantity(name).possible
        if not low <= value <= high or not (value > 0.0 or name == "co_production_stpd"):
            raise quantity(name).range_error(value)
    low, high = half_life_band
    if not 0.0 < low <= 1.0 <= high < 100.0:
        raise RangeError(f"half_life_band = {half_life_band} must be two factors on either side of 1")
    factors = (1.0, float(low), float(high))
    if target is not None and not 0.0 < target < 1.0:
        raise RangeError(f"target = {target:g} must be a fraction between 0 and 1")
    out = exposure.to_dataset(at=at)
    gas = np.asarray(carbon_monoxide_ppm, dtype=float) * 1e-6
    low, high = quantity("carbon_monoxide").possible
    if not np.all((gas >= low) & (gas <= high)):
        raise quantity("carbon_monoxide").range_error(float(np.ravel(gas)[0]))
    out["carbon_monoxide"] = (
        "segment",
        np.broadcast_to(gas, (out.sizes["segment"],)).copy(),
        attributes("carbon_monoxide"),
    )
    chain = _Chain(out)
    with validity("ignore"):
        _breathed(chain)
    if not bool((out["capillary_po2"] > 0.0).all()):
        raise RangeError(
            "the inspired PO2 falls to 49 mmHg or less: the equation has no capillary PO2 there, and this "
            "gas cannot sustain life"
        )

    def rate(cohb: Array, driving: tuple[Any, Any]) -> Array:
        return np.asarray(
            blood.cohb_rate.raw(
                cohb,
                *driving,
                values["alveolar_ventilation_btps"],
                values["co_diffusing_capacity"],
                values["blood_volume"],
                values["haldane_affinity"],
                values["co_production_stpd"],
                values["hemoglobin"],
            )
        )

    found, crossing = _integrate(exposure, out, gas, start, rate, target, factors)
    dims = out["breathing_gas_po2"].dims
    for name, array in (
        ("cohb_fraction", found[0]),
        ("cohb_fraction_low", found.min(axis=0)),
        ("cohb_fraction_high", found.max(axis=0)),
    ):
        out[name] = (dims, array.reshape(out["breathing_gas_po2"].shape), attributes("cohb_fraction"))
    for name in ("cohb_fraction", "cohb_fraction_low", "cohb_fraction_high"):
        out[name].attrs["integral_of"] = "cohb_rate"
    out["cohb_fraction_low"].attrs["long_name"] += ", low end of the band"
    out["cohb_fraction_high"].attrs["long_name"] += ", high end of the band"
    with validity("ignore"):
        chain.put(
            "cohb_rate",
            "blood.cohb_rate",
            blood.cohb_rate,
            cohb_fraction="@cohb_fraction",
            inspired_pco="@inspired_pco",
            capillary_po2="@capillary_po2",
            **values,
        )
    if target is not None:
        out.coords["half_life_factor"] = list(factors)
        out["time_at_target"] = (
            ("half_life_factor", *dims[:-1]),
            crossing.reshape(len(factors), *out["breathing_gas_po2"].shape[:-1]),
            {
                **attributes("time"),
                "long_name": f"first time at a carboxyhemoglobin of {target:g}",
                "integral_of": "cohb_rate",
            },
        )
    out.attrs = {
        **out.attrs,
        "title": "carboxyhemoglobin along an exposure",
        "source": out.attrs["source"].replace(", exposure", ", Coburn-Forster-Kane, nonlinear"),
        "references": "coburn_forster_kane_1965",
        "assumed": ", ".join(
            f"{k} = {values[k]:g}"
            for k in values
            if (given.get(k) is None if k in given else not person.is_measured(k))
        ),
        "initial_cohb_fraction": start,
        "run": recorded(
            person,
            model="carboxyhemoglobin",
            carbon_monoxide_ppm=np.asarray(carbon_monoxide_ppm, dtype=float).tolist(),
            target=target,
            half_life_band=[float(f) for f in factors[1:]],
            **given,
        ),
        "half_life_band": list(factors[1:]),
        "evidence": "on O2 people took 74 (SD 25) or 80 min at 1 atm and 23 at 3 atm for half; with default "
        "parameters this takes 39 and 12: expect the slow end of the band; single persons took longer",
        "provenance": weakest(chain.provenance),
        "comment": CAUTION,
    }
    return out


def _breathed(chain: _Chain) -> None:
    ds = chain.ds
    vapor = float(BODY_VAPOR_PRESSURE)
    pressure = {"ambient_pressure": "@ambient_pressure"}
    chain.put(
        "fio2",
        "breathing_gas.fraction_breathed",
        fraction_breathed,
        breathing_gas_po2="@breathing_gas_po2",
        **pressure,
    )
    chain.put(
        "inspired_po2",
        "lungs.inspired_po2",
        lungs.inspired_po2,
        **pressure,
        fio2="@fio2",
        water_vapor_pressure=vapor,
    )
    chain.put("capillary_po2", "blood.co_capillary_po2", blood.co_capillary_po2, inspired_po2="@inspired_po2")
    of_time = ds["carbon_monoxide"].isel(segment=ds["segment_of_time"]).drop_vars("segment")
    chain.keep(
        "inspired_pco",
        lungs.inspired_pco(ds["ambient_pressure"], of_time, vapor).transpose(*ds["ambient_pressure"].dims),
        "lungs.inspired_pco",
        {**pressure, "carbon_monoxide": "@carbon_monoxide", "water_vapor_pressure": vapor},
    )


def _integrate(
    exposure: Exposure,
    ds: xr.Dataset,
    gas: Array,
    start: float,
    rate: Callable[[Array, tuple[Any, Any]], Array],
    target: float | None,
    band: tuple[float, ...],
) -> tuple[Array, Array]:
    """Return COHb (factor, ..., time) and the first crossing (factor, ...)."""
    pieces = exposure.pieces()
    index, shares = ds["segment_of_time"].values, ds["share_of_piece"].values
    lead = np.broadcast_shapes(pieces.duration.shape[:-1], pieces.start_po2.shape[:-1])
    factors = np.array(band).reshape(-1, *[1] * len(lead))
    gas = np.broadcast_to(gas, (pieces.duration.shape[-1],))
    vapor = float(BODY_VAPOR_PRESSURE)
    cohb = np.full((len(band), *lead), start)
    out = np.empty((*cohb.shape, len(index)))
    crossing = np.full(cohb.shape, np.nan)
    for k in range(pieces.duration.shape[-1]):
        length = pieces.duration[..., k]

        def driving(share: float, k: int = k) -> tuple[Any, Any]:
            p = linear_in_piece.raw(pieces.start_pressure[..., k], pieces.end_pressure[..., k], share)
            po2 = linear_in_piece.raw(pieces.start_po2[..., k], pieces.end_po2[..., k], share)
            inspired = lungs.inspired_po2.raw(p, fraction_breathed.raw(po2, p), vapor)
            return lungs.inspired_pco.raw(p, gas[k], vapor), blood.co_capillary_po2.raw(inspired)

        def step(c: Array, share: Any, by: Any, length: Array = length, driving: Any = driving) -> Array:
            h = by * length / factors
            middle = driving(share + 0.5 * by)
            a = rate(c, driving(share))
            b = rate(c + 0.5 * h * a, middle)
            d = rate(c + 0.5 * h * b, middle)
            e = rate(c + h * d, driving(share + by))
            return np.asarray(c + h / 6.0 * (a + 2.0 * b + 2.0 * d + e))

        here = np.flatnonzero(index == k)
        n = max(1, int(np.ceil(np.max(length, initial=0.0) / _STEP)))
        nodes = np.unique(np.concatenate([np.linspace(0.0, 1.0, n + 1), shares[here]]))
        _record(out, cohb, here, shares, 0.0)
        for share, to in itertools.pairwise(nodes):
            by = to - share
            new = step(cohb, share, by)
            if target is not None:
                crossed = np.isnan(crossing) & ((cohb > target) != (new > target))
                if crossed.any():
                    part = find_root(
                        lambda x, c=cohb, s=share, by=by, step=step: step(c, s, x * by) - target,  # type: ignore[misc]
                        np.zeros(cohb.shape),
                        np.ones(cohb.shape),
                    )
                    when = pieces.times[..., k] + (share + part * by) * length
                    crossing = np.where(crossed, when, crossing)
            cohb = new
            _record(out, cohb, here, shares, to)
    return out, crossing


def _record(out: Array, cohb: Array, here: Any, shares: Array, share: float) -> None:
    for i in here[shares[here] == share]:
        out[..., i] = cohb
