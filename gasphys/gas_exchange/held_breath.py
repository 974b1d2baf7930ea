"""Gas of the lungs through one breath-hold along an exposure."""

from __future__ import annotations

import csv
from collections.abc import Callable
from dataclasses import dataclass
from importlib import resources
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys import blood, lungs
from gasphys.blood.carbon_dioxide import content_of_buffered_blood, unbounded_pco2_at_base_excess
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import ExposureError, RangeError
from gasphys.exposure import Exposure
from gasphys.gas_exchange.equations import (
    alveolar_gas_pressure,
    gas_transfer,
    lung_gas,
    lung_volume_of_gas,
    squeeze_pressure,
)
from gasphys.gas_exchange.model import _Chain, recorded
from gasphys.person import Person
from gasphys.policy import validity, weakest
from gasphys.quantities import CAUTION, attributes, quantity
from gasphys.units import convert

__all__ = ["breath_hold"]

Array = NDArray[np.float64]

#: Relative error of a step of the integration.
_TOLERANCE = 1e-10

#: pH where CO2 content is known, and the nodes of its curve against PCO2.
_PH, _NODES = (7.0, 7.7), 1401

#: What is asked of the person.
_USED = (
    "arterial_pco2",
    "arterial_ph",
    "respiratory_exchange_ratio",
    "hemoglobin",
    "arteriovenous_difference",
    "o2_uptake_stpd",
    "cohb_fraction",
)

#: Alveolar PO2 below which the hold is not followed: no one is conscious long before.
_LOWEST_PO2 = 1.0

#: The transfers that what is integrated follows from.
_RATES = {
    **{f"{gas}_in_{place}": f"{gas}_transfer_stpd" for gas in ("o2", "co2") for place in ("lung", "blood")},
    **{f"mixed_venous_{gas}_content": f"{gas}_transfer_stpd" for gas in ("o2", "co2")},
    "lung_gas_stpd": "o2_transfer_stpd co2_transfer_stpd",
}

# Positions in the state, all L STPD: in the lungs, in the blood, inert gas given to the blood so far.
_O2, _CO2, _INERT, _BLOOD_O2, _BLOOD_CO2, _INERT_GIVEN = range(6)


def breath_hold(
    exposure: Exposure,
    person: Person | None = None,
    *,
    lung_volume_btps: Any = 6.0,
    residual_volume_btps: Any = 1.5,
    blood_volume: Any = 5.5,
    at: Any = None,
) -> xr.Dataset:
    """Gas of the lungs and the blood through one breath-hold along an exposure.

    Parameters
    ----------
    exposure : Exposure
        Pressure against time; the gas of its first piece is what was breathed before. O2 uptake of its
        pieces is used where given.
    person : Person, optional
        Arterial PCO2 at the start (lower after hyperventilation), hemoglobin, O2 uptake, R,
        arteriovenous difference.
    lung_volume_btps, residual_volume_btps : float or str
        Lung volume at the start and residual volume [L BTPS].
    blood_volume : float or str
        Blood that stores O2 and CO2 [L].
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On ``time``: ``lung_volume_btps``, ``alveolar_po2``, ``alveolar_pco2``, ``alveolar_inert_pressure``,
        transfers and contents, ``o2_in_lung`` and so on. On ``event``: ``begins`` and ``ends`` of the band
        [min], NaN where it is not reached, with meaning, source and provenance.

    Raises
    ------
    ExposureError
        If the exposure has scenarios: pick one first.
    RangeError
        If a value is not possible, the starting gas has no O2, or PCO2 leaves the range of CO2 content.

    Notes
    -----
    Amounts of O2, CO2 and inert gas in closed lungs; each passes to the blood by flow times end-capillary
    less mixed venous content, signed. O2 use and CO2 output go on in a well-mixed store of blood: venous
    contents follow. Flow is O2 uptake over the arteriovenous difference. The steady-state alveolar
    equation is used once, before the breath is held. Integrated with relative tolerance 1e-10 by pieces.

    What it leaves out: shunt of compressed lungs (arterial PO2 at depth was found well below alveolar in
    2 of 6 divers), the diving response, muscle stores, the delay from lung to brain. An event is a band of
    published observations, **never a time of blackout**: that comes without warning, and earlier than
    any band in some.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=20, rate=40).stay(1).travel(depth=0, rate=40)
    >>> ds = breath_hold(dive)
    >>> ds.lung_volume_btps.values.round(2)
    array([6.  , 1.82, 1.66, 5.16])
    """
    person = Person() if person is None else person.one()
    if exposure.dims:
        raise ExposureError("a breath-hold takes one exposure; pick one scenario first")
    lung = _value("lung_volume_btps", lung_volume_btps)
    residual = _value("residual_volume_btps", residual_volume_btps)
    store = _value("blood_volume", blood_volume)
    if not residual < lung:
        raise RangeError(f"residual_volume_btps = {residual:g} L must be below lung_volume_btps = {lung:g} L")
    out = exposure.to_dataset(at=at)
    body = _Body.of(person, exposure, store)
    with validity("ignore"):
        start = body.start(exposure, lung)
        states, crossings = _integrate(exposure, body, start, out["time"].values, residual)
        chain = _Chain(out)
        _describe(chain, body, exposure, states)
    _events(out, crossings, exposure, lung, residual)
    out.attrs = {
        **out.attrs,
        "title": "gas of lungs and blood through one breath-hold",
        "source": out.attrs["source"].replace(", exposure", ", breath-hold mass balance"),
        "references": "; ".join(dict.fromkeys([*chain.references, "lanphier_rahn_1963"])),
        "assumed": person.told(_USED, measured=False),
        "measured": person.told(_USED, measured=True),
        "run": recorded(
            person,
            model="breath_hold",
            lung_volume_btps=lung,
            residual_volume_btps=residual,
            blood_volume=store,
        ),
        "lung_volume_at_start": lung,
        "residual_volume": residual,
        "blood_volume": body.blood_volume,
        "squeeze_pressure": squeeze_pressure(lung, residual, float(out["ambient_pressure"][0])),
        "provenance": weakest([*chain.provenance, *(row["provenance"] for row in _bands())]),
        "comment": CAUTION + " Never a predicted time of blackout.",
    }
    return out


def _value(name: str, value: Any) -> float:
    one = quantity(name)
    found = one.from_text(value) if isinstance(value, str) else float(value)
    if not one.possible[0] <= found <= one.possible[1]:
        raise one.range_error(found)
    return found


@dataclass(frozen=True)
class _Body:
    """What does not change during the hold, and the contents of blood."""

    uptake: Array
    exchange: float
    difference: float
    hemoglobin: float
    cohb: float
    liganded: float
    ph: float
    arterial_pco2: float
    blood_volume: float
    inert_pressure: float
    co2_content: Callable[[Any], Any]
    pco2: tuple[float, float]

    @classmethod
    def of(cls, person: Person, exposure: Exposure, blood_volume: float) -> _Body:
        from scipy.interpolate import CubicSpline

        hemoglobin = person.value("hemoglobin")
        cohb = person.value("cohb_fraction")
        pco2, ph = person.value("arterial_pco2"), person.value("arterial_ph")
        po2 = cls.breathed(person, exposure)
        if not po2 > 0.0:
            raise RangeError(f"alveolar_po2 = {po2:.4g} kPa at the start: this gas cannot sustain life")
        saturation = blood.liganded_fraction.raw(blood.o2_saturation_beside_cohb.raw(po2, cohb, ph), cohb)
        excess = blood.base_excess.raw(pco2, ph, hemoglobin, saturation)
        # Content against PCO2 at one base excess: both follow from pH, nodes from alkaline to acid.
        nodes = np.linspace(_PH[1], _PH[0], _NODES)
        pressures = unbounded_pco2_at_base_excess.raw(excess, nodes, hemoglobin, saturation)
        contents = content_of_buffered_blood.raw(nodes, excess, hemoglobin, saturation)
        usable = pressures > 0.0
        work = exposure.columns["o2_uptake_stpd"]
        return cls(
            uptake=np.where(np.isnan(work), person.value("o2_uptake_stpd"), work),
            exchange=person.value("respiratory_exchange_ratio"),
            difference=person.value("arteriovenous_difference"),
            hemoglobin=hemoglobin,
            cohb=cohb,
            liganded=float(saturation),
            ph=ph,
            arterial_pco2=pco2,
            blood_volume=blood_volume,
            inert_pressure=float(exposure.columns["start_pressure"][0])
            - float(BODY_VAPOR_PRESSURE)
            - po2
            - pco2,
            co2_content=CubicSpline(pressures[usable], contents[usable], extrapolate=True),
            pco2=(float(pressures[usable][0]), float(pressures[-1])),
        )

    @staticmethod
    def breathed(person: Person, exposure: Exposure) -> float:
        """Return alveolar PO2 before the breath is held, on the gas of the first piece."""
        pieces = exposure.pieces()
        pressure = float(pieces.start_pressure[0])
        return float(
            lungs.alveolar_po2.raw(
                pressure,
                float(pieces.start_po2[0]) / pressure,
                person.value("arterial_pco2"),
                person.value("respiratory_exchange_ratio"),
                0.0,
                float(BODY_VAPOR_PRESSURE),
            )
        )

    def flow(self, piece: int) -> float:
        """Cardiac output of a piece [L/min]: Fick."""
        return float(100.0 * self.uptake[piece] / self.difference)

    def start(self, exposure: Exposure, lung: float) -> Array:
        pressure = float(exposure.columns["start_pressure"][0])
        dry = pressure - float(BODY_VAPOR_PRESSURE)
        amount = lung_gas.raw(lung, pressure)
        po2 = dry - self.inert_pressure - self.arterial_pco2
        o2 = self.o2_content(po2) - self.difference
        co2 = self.co2_content(self.arterial_pco2) + blood.co2_load.raw(self.exchange, self.difference)
        if not o2 > 0.0:
            raise RangeError("the arteriovenous difference exceeds the arterial O2 content")
        in_lung = amount / dry * np.array([po2, self.arterial_pco2, self.inert_pressure])
        return np.array([*in_lung, *(self.blood_volume / 100.0 * np.array([o2, co2])), 0.0])

    def o2_content(self, po2: Any) -> Any:
        # A trial step of the solver may overdraw the lungs; an accepted one is stopped before.
        return blood.o2_content_beside_cohb.raw(np.maximum(po2, 0.0), self.hemoglobin, self.cohb, self.ph)

    def pressures(self, state: Any, pressure: Any) -> Any:
        total = state[_O2] + state[_CO2] + state[_INERT]
        return [alveolar_gas_pressure.raw(state[i], total, pressure) for i in (_O2, _CO2, _INERT)]

    def transfers(self, state: Any, pressure: Any, flow: Any) -> Any:
        """Return O2, CO2 and inert gas that pass from lung to blood [L/min STPD]."""
        po2, pco2, inert = self.pressures(state, pressure)
        store = self.blood_volume / 100.0
        return (
            gas_transfer.raw(flow, self.o2_content(po2), state[_BLOOD_O2] / store),
            gas_transfer.raw(flow, self.co2_content(pco2), state[_BLOOD_CO2] / store),
            blood.nitrogen_delivery.raw(inert, flow) - blood.nitrogen_delivery.raw(self.inert_pressure, flow),
        )

    def rates(self, state: Array, pressure: float, piece: int) -> Array:
        o2, co2, inert = self.transfers(state, pressure, self.flow(piece))
        used = self.uptake[piece]
        return np.array([-o2, -co2, -inert, o2 - used, co2 + self.exchange * used, inert])


def _bands() -> list[dict[str, str]]:
    text = (
        resources.files("gasphys.gas_exchange").joinpath("breath_hold_events.csv").read_text(encoding="utf-8")
    )
    return list(csv.DictReader(text.splitlines(), strict=True))


def _edges(row: dict[str, str], residual: float) -> tuple[float, float]:
    """Return a band's two edges in canonical units; the second NaN where it has one only."""
    if row["id"] == "lung_at_residual_volume":
        return residual, np.nan
    unit = quantity(row["quantity"]).unit if row["quantity"].startswith("alveolar") else "L/min"
    return tuple(  # type: ignore[return-value]
        float(convert(float(row[k]), row["unit"], unit)) if row[k] else np.nan
        for k in ("from_value", "to_value")
    )


def _integrate(
    exposure: Exposure, body: _Body, start: Array, times: Array, residual: float
) -> tuple[Array, list[tuple[float, float]]]:
    """Return the state at each time, and for each band when its two edges are first passed."""
    from scipy.integrate import solve_ivp

    c = exposure.columns
    rows = _bands()
    edges = [_edges(row, residual) for row in rows]
    found = np.full((len(rows), 2), np.nan)
    states = np.empty((len(start), len(times)))
    states[:, 0], state, begin = start, start, 0.0

    for k in range(len(exposure.part)):
        length = float(c["segment_duration"][k])
        low, high = float(c["start_pressure"][k]), float(c["end_pressure"][k])

        def pressure(
            t: float, begin: float = begin, length: float = length, low: float = low, high: float = high
        ) -> float:
            return low + (high - low) * (t - begin) / length if length else high

        def measured(t: float, y: Array, name: str, k: int = k, pressure: Any = pressure) -> float:
            p = pressure(t)
            if name == "lung_volume_btps":
                return float(lung_volume_of_gas.raw(y[_O2] + y[_CO2] + y[_INERT], p))
            if name.startswith("alveolar"):
                return float(body.pressures(y, p)[("alveolar_po2", "alveolar_pco2").index(name)])
            return float(
                body.transfers(y, p, body.flow(k))[("o2_transfer_stpd", "co2_transfer_stpd").index(name)]
            )

        def rate(t: float, y: Array, k: int = k, pressure: Any = pressure) -> Array:
            return body.rates(y, pressure(t), k)

        watched, places = [], []
        for i, (row, pair) in enumerate(zip(rows, edges, strict=True)):
            # Rising is towards the band for CO2, falling for all others.
            rising = row["quantity"].startswith(("alveolar_pco2", "co2_transfer"))
            for j, edge in enumerate(pair):
                if np.isnan(edge) or not np.isnan(found[i, j]):
                    continue
                if (measured(begin, state, row["quantity"]) - edge) * (1.0 if rising else -1.0) > 0.0:
                    found[i, j] = begin
                    continue

                def passed(
                    t: float,
                    y: Array,
                    name: str = row["quantity"],
                    edge: float = edge,
                    measured: Any = measured,
                ) -> float:
                    return float(measured(t, y, name) - edge)

                passed.direction = 1.0 if rising else -1.0  # type: ignore[attr-defined]
                watched.append(passed)
                places.append((i, j))

        def used_up(t: float, y: Array, measured: Any = measured) -> float:
            return float(measured(t, y, "alveolar_po2") - _LOWEST_PO2)

        used_up.terminal = True  # type: ignore[attr-defined]
        end = begin + length
        if length:
            solved = solve_ivp(
                rate,
                (begin, end),
                state,
                method="DOP853",
                rtol=_TOLERANCE,
                atol=1e-13,
                dense_output=True,
                events=[*watched, used_up],
            )
            if solved.t[-1] < end:
                raise RangeError(
                    f"the O2 of the lungs is used up after {solved.t[-1]:.3g} of {end:.3g} min: "
                    "no such breath-hold is possible"
                )
            for (i, j), when in zip(places, solved.t_events[:-1], strict=True):
                if len(when):
                    found[i, j] = float(when[0])
            steps = zip(solved.t, solved.y.T, strict=True)
            pco2 = np.array([body.pressures(y, pressure(t))[1] for t, y in steps])
            least, most = body.pco2
            if not (pco2.min() >= least and pco2.max() <= most):
                raise RangeError(
                    f"alveolar_pco2 reaches {pco2.min():.3g} to {pco2.max():.3g} kPa, outside {least:.3g} to "
                    f"{most:.3g} kPa (pH 7.0 to 7.7) where CO2 content is known; it is not extrapolated"
                )
            here = (times > begin) & (times < end)
            if here.any():
                states[:, here] = solved.sol(times[here])
            state = solved.y[:, -1]
        begin = end
        states[:, np.isclose(times, end, rtol=1e-12, atol=1e-12)] = state[:, None]
    return states, [tuple(row) for row in found.tolist()]


def _describe(chain: _Chain, body: _Body, exposure: Exposure, states: Array) -> None:
    ds = chain.ds
    store = body.blood_volume / 100.0
    flows = np.array([body.flow(k) for k in range(len(exposure.part))])
    ds["cardiac_output"] = ("segment", flows, attributes("cardiac_output"))

    def put(name: str, values: Array, of: str, what: str) -> None:
        attrs = {**attributes(of), "long_name": what, "integral_of": _RATES.get(name, "")}
        ds[name] = ("time", np.asarray(values), attrs)

    for index, gas in ((_O2, "o2"), (_CO2, "co2"), (_INERT, "inert")):
        name = {"o2": "O2", "co2": "CO2", "inert": "inert gas"}[gas]
        put(f"{gas}_in_lung", states[index], "gas_amount_stpd", f"{name} in the lungs, STPD")
    put("lung_gas_stpd", states[: _INERT + 1].sum(axis=0), "lung_gas_stpd", "dry gas in the lungs, STPD")
    put("o2_in_blood", states[_BLOOD_O2], "gas_amount_stpd", "O2 in the blood, STPD")
    put("co2_in_blood", states[_BLOOD_CO2], "gas_amount_stpd", "CO2 in the blood, STPD")
    put("inert_given", states[_INERT_GIVEN], "gas_transfer_stpd", "inert gas given to the blood so far, STPD")
    ds["inert_given"].attrs["units"] = "L"
    put("mixed_venous_o2_content", states[_BLOOD_O2] / store, "mixed_venous_o2_content", "mixed venous O2")
    put(
        "mixed_venous_co2_content", states[_BLOOD_CO2] / store, "mixed_venous_co2_content", "mixed venous CO2"
    )
    pressure = {"ambient_pressure": "@ambient_pressure"}
    chain.put(
        "lung_volume_btps",
        "gas_exchange.lung_volume_of_gas",
        lung_volume_of_gas,
        lung_gas_stpd="@lung_gas_stpd",
        **pressure,
    )
    for name, gas in (("alveolar_po2", "o2"), ("alveolar_pco2", "co2"), ("alveolar_inert_pressure", "inert")):
        chain.put(
            name,
            "gas_exchange.alveolar_gas_pressure",
            alveolar_gas_pressure,
            gas_amount_stpd=f"@{gas}_in_lung",
            lung_gas_stpd="@lung_gas_stpd",
            **pressure,
        )
    chain.put(
        "functional_hemoglobin",
        "blood.functional_hemoglobin",
        blood.functional_hemoglobin,
        hemoglobin=body.hemoglobin,
        cohb_fraction=body.cohb,
    )
    chain.values = {"hemoglobin": body.hemoglobin, "cohb_fraction": body.cohb}
    chain.content("end_capillary_o2_content", po2="@alveolar_po2", ph=body.ph)
    held = {"hemoglobin": body.hemoglobin, "o2_saturation": body.liganded}
    chain.put(
        "base_excess", "blood.base_excess", blood.base_excess, pco2=body.arterial_pco2, ph=body.ph, **held
    )
    pco2 = {"pco2": "@alveolar_pco2"}
    chain.put(
        "end_capillary_ph",
        "blood.ph_at_base_excess",
        blood.ph_at_base_excess,
        base_excess="@base_excess",
        **pco2,
        **held,
    )
    chain.put(
        "end_capillary_co2_content",
        "blood.co2_content",
        blood.co2_content,
        **pco2,
        ph="@end_capillary_ph",
        **held,
        model="douglas_1988",
    )
    for name, what in (("end_capillary_ph", "pH"), ("end_capillary_co2_content", "CO2 content")):
        ds[name].attrs["long_name"] = f"{what} of end-capillary blood"
    output = ds["cardiac_output"].isel(segment=ds["segment_of_time"]).drop_vars("segment")
    for gas in ("o2", "co2"):
        inputs = {
            "cardiac_output": "@cardiac_output",
            "end_capillary_content": f"@end_capillary_{gas}_content",
            "mixed_venous_content": f"@mixed_venous_{gas}_content",
        }
        result = gas_transfer(output, *(ds[inputs[k][1:]] for k in list(inputs)[1:]))
        name = f"{gas}_transfer_stpd"
        ds[name] = result
        ds[name].attrs = {
            **attributes("gas_transfer_stpd"),
            "long_name": f"{gas.upper()} from lung to blood, STPD",
            "equation": "gas_exchange.gas_transfer",
            "inputs": _json(inputs),
        }


def _json(inputs: dict[str, str]) -> str:
    import json

    return json.dumps(inputs)


def _events(
    ds: xr.Dataset, crossings: list[tuple[float, float]], exposure: Exposure, lung: float, residual: float
) -> None:
    rows = _bands()
    ds.coords["event"] = [row["id"] for row in rows]
    for column, name, word in ((0, "begins", "begins"), (1, "ends", "is passed")):
        ds[name] = (
            "event",
            np.array([pair[column] for pair in crossings]),
            {
                "units": "min",
                "long_name": f"first time at which the band {word}; missing: never",
                "integral_of": "o2_transfer_stpd co2_transfer_stpd",
            },
        )
    for name in ("meaning", "source", "provenance"):
        ds[f"event_{name}"] = ("event", [row[name] for row in rows], {"long_name": f"{name} of the band"})
