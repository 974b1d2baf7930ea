"""Closed lungs along an exposure: gas conserved, a second opinion, what was seen in divers."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from gasphys import Exposure, Person, explain, gas_exchange
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import ExposureError, RangeError

MMHG = 101.325 / 760.0

#: 33 ft, as in the chamber dives of Lanphier & Rahn, and 24 m in the lake.
SHALLOW = Exposure.start("air").travel(depth=10, minutes=0.3).stay(1.0).travel(depth=0, minutes=0.4)
DEEP = Exposure.start("air").travel(depth=24, minutes=0.5).stay(0.4).travel(depth=0, minutes=0.5)


def hold(exposure: Exposure, person: Person | None = None, **more: object) -> xr.Dataset:
    times = np.linspace(0.0, float(exposure.duration), 61)
    return gas_exchange.breath_hold(exposure, person, at=times, **more)  # type: ignore[arg-type]


@pytest.mark.parametrize("exposure", [SHALLOW, DEEP, Exposure.start("air").stay(3)])
def test_each_gas_is_conserved(exposure: Exposure) -> None:
    """Lungs, blood, and what the body used or made: to 1e-9 of a liter."""
    ds = hold(exposure)
    used = 0.25 * ds.time.values
    o2 = (ds.o2_in_lung + ds.o2_in_blood).values + used
    co2 = (ds.co2_in_lung + ds.co2_in_blood).values - 0.8 * used
    inert = (ds.inert_in_lung + ds.inert_given).values
    for total in (o2, co2, inert):
        assert np.abs(total - total[0]).max() < 1e-9
    pressure = (ds.alveolar_po2 + ds.alveolar_pco2 + ds.alveolar_inert_pressure).values
    assert pressure == pytest.approx(ds.ambient_pressure.values - float(BODY_VAPOR_PRESSURE), rel=1e-12)


def _content(po2: float) -> float:
    return 1.34 * 15.0 / (23400.0 / (po2**3 + 150.0 * po2) + 1.0) + 0.0031 * po2


def _co2(pco2: float, excess: float, s: float) -> float:
    """CO2 content at one base excess: pH by brentq on Lang & Zander, content by Douglas."""

    def miss(ph: float) -> float:
        be = (1.0 - 0.0143 * 15.0) * (
            0.0304 * pco2 * 10.0 ** (ph - 6.1) - 24.26 + (9.5 + 1.63 * 15.0) * (ph - 7.4)
        ) - 0.2 * 15.0 * (1.0 - s)
        return be - excess

    ph = brentq(miss, 6.5, 8.1, xtol=1e-14)
    pk = 6.086 + 0.042 * (7.4 - ph) + 1.0 * (0.00472 + 0.00139 * (7.4 - ph))
    plasma = 2.226 * 0.0307 * pco2 * (1.0 + 10.0 ** (ph - pk))
    return plasma * (1.0 - 0.0289 * 15.0 / ((3.352 - 0.456 * s) * (8.142 - ph)))


def test_against_an_independent_right_hand_side() -> None:
    """Typed again in mmHg and mL, contents by brentq instead of a curve; DEEP, largest 2e-7 relative."""
    ds = hold(DEEP)
    excess, s = None, 1.0 / (23400.0 / ((p := _start_po2()) ** 3 + 150.0 * p) + 1.0)
    ph = 7.4
    excess = (1.0 - 0.0143 * 15.0) * (0.0304 * 40.0 * 10.0 ** (ph - 6.1) - 24.26) - 0.2 * 15.0 * (1.0 - s)
    flow = 5000.0  # mL/min: 250 mL/min over 5 mL/dL
    n = 6000.0 * 713.0 / 760.0 * 273.15 / 310.15
    y = np.array(
        [
            n * p / 713.0,
            n * 40.0 / 713.0,
            n * (713.0 - p - 40.0) / 713.0,
            (_content(p) - 5.0) * 55.0,
            (_co2(40.0, excess, s) + 4.0) * 55.0,
        ]
    )
    n2 = 713.0 - p - 40.0

    def rate(t: float, y: np.ndarray, start: float, end: float, begin: float, length: float) -> list[float]:
        dry = start + (end - start) * (t - begin) / length - 47.0
        po2, pco2, pn2 = dry * y[:3] / y[:3].sum()
        o2 = flow / 100.0 * (_content(po2) - y[3] / 55.0)
        co2 = flow / 100.0 * (_co2(pco2, excess, s) - y[4] / 55.0)
        nitrogen = flow * 0.0127 * (pn2 - n2) / 760.0
        return [-o2, -co2, -nitrogen, o2 - 250.0, co2 + 200.0]

    surface, bottom = 760.0, 760.0 + 240.0 / MMHG
    rows = [(surface, bottom, 0.0, 0.5), (bottom, bottom, 0.5, 0.4), (bottom, surface, 0.9, 0.5)]
    for piece in rows:
        _, _, begin, length = piece
        y = solve_ivp(rate, (begin, begin + length), y, method="LSODA", rtol=1e-10, atol=1e-10, args=piece).y[
            :, -1
        ]
        here = ds.sel(time=begin + length, method="nearest")
        ours = [
            float(here[v]) * 1000.0 for v in ("o2_in_lung", "co2_in_lung", "inert_in_lung", "o2_in_blood")
        ]
        assert ours == pytest.approx(y[:4], rel=1e-6)
        assert float(here.co2_in_blood) * 1000.0 == pytest.approx(y[4], rel=1e-6)


def _start_po2() -> float:
    """Alveolar PO2 on air, PCO2 40 mmHg, R 0.8, by the alveolar gas equation."""
    return 0.21 * 713.0 - 40.0 * (0.21 + 0.79 / 0.8)


def test_squeezed_gas_stays_below_pure_compression() -> None:
    """CO2 flows into the blood in descent: PACO2 below what Boyle alone gives, PAO2 near it."""
    ds = hold(DEEP)
    bottom = ds.sel(time=0.5, method="nearest")
    factor = (float(bottom.ambient_pressure) - 47.0 * MMHG) / (101.325 - 47.0 * MMHG)
    assert float(bottom.alveolar_pco2) < 0.75 * 40.0 * MMHG * factor
    assert 0.8 < float(bottom.alveolar_po2) / (_start_po2() * MMHG * factor) < 1.0
    assert float(bottom.lung_volume_btps) == pytest.approx(6.0 / factor, rel=0.1)


def test_what_was_seen_in_the_chamber_at_33_feet() -> None:
    """Lanphier & Rahn 1963: O2 uptake near normal until ascent, CO2 reversed in descent, final PAO2 below
    that of the surface."""
    ds = hold(SHALLOW)
    bottom = ds.sel(time=slice(0.35, 1.25))
    assert np.all(np.abs(bottom.o2_transfer_stpd.values / 0.25 - 1.0) < 0.15)
    reversed_at = float(ds.begins.sel(event="co2_transfer_reversed"))
    assert 0.0 < reversed_at < 0.3
    assert float(ds.alveolar_po2[-1]) < float(ds.alveolar_po2[0])
    # With hyperventilation and work one diver came up with 24 mmHg and O2 reversed: so does the model.
    work = Exposure.start("air").work(o2_uptake_stpd=0.8).travel(depth=10, minutes=0.3).stay(1.2)
    after = hold(work.travel(depth=0, minutes=0.4), Person(arterial_pco2="25 mmHg"))
    assert 1.5 < float(after.begins.sel(event="o2_transfer_reversed")) < 1.9
    assert float(after.alveolar_po2[-1]) / MMHG < 30.0


def test_co2_lost_from_the_lung_in_descent() -> None:
    """Schaefer & Carey 1962: 45 % of the lung's CO2 gone at 90 ft, reversed by 50 ft."""
    dive = Exposure.start("air", depth_unit="fsw").travel(depth=90, rate=150)
    ds = hold(dive)
    lost = 1.0 - float(ds.co2_in_lung[-1]) / float(ds.co2_in_lung[0])
    assert 0.35 < lost < 0.65
    depth = (float(ds.begins.sel(event="co2_transfer_reversed"))) * 150.0
    assert depth < 50.0


def test_events_are_bands_in_order_and_say_where_they_come_from() -> None:
    ds = hold(Exposure.start("air").stay(5))
    band = ds.sel(event="alveolar_po2_of_maximal_apnea")
    for edge, when in ((30.0, float(band.begins)), (20.0, float(band.ends))):
        there = gas_exchange.breath_hold(Exposure.start("air").stay(5), at=[when])
        assert float(there.alveolar_po2.sel(time=when)) / MMHG == pytest.approx(edge, rel=1e-6)
    assert float(band.begins) < float(band.ends)
    assert np.isnan(float(ds.begins.sel(event="lung_at_residual_volume")))
    assert str(band.event_provenance.values) == "memory_medium"
    text = " ".join(str(v) for v in ds.event.values) + " ".join(str(v) for v in ds.event_meaning.values)
    assert "blackout" not in text
    assert "Never a predicted time of blackout" in ds.attrs["comment"]
    # Hypercapnic from the start: the band has begun.
    assert (
        float(hold(SHALLOW, Person(arterial_pco2=6.5)).begins.sel(event="alveolar_pco2_of_struggle_phase"))
        == 0.0
    )


def test_residual_volume_is_reached_near_the_pressure_of_boyle() -> None:
    """A soft limit: told as an event, not refused."""
    dive = Exposure.start("air").travel(depth=40, rate=60)
    ds = hold(dive)
    when = float(ds.begins.sel(event="lung_at_residual_volume"))
    depth = 60.0 * when
    assert 24.0 < depth < 30.4  # CO2 and O2 taken up make it a little sooner than TLC/RV alone
    assert ds.attrs["squeeze_pressure"] == pytest.approx(405.3)


def test_splitting_a_piece_changes_nothing() -> None:
    whole = hold(SHALLOW)
    parts = (
        Exposure.start("air").travel(depth=10, minutes=0.3).stay(0.4).stay(0.6).travel(depth=0, minutes=0.4)
    )
    again = gas_exchange.breath_hold(parts)
    for name in ("alveolar_po2", "alveolar_pco2", "lung_volume_btps"):
        assert float(again[name][-1]) == pytest.approx(float(whole[name][-1]), rel=1e-8)


def test_every_equation_is_explained() -> None:
    ds = hold(SHALLOW)
    names = [n for n in ds.data_vars if "equation" in ds[n].attrs and ds[n].dims == ("time",)]
    assert len(names) >= 7
    for name in names:
        found = explain(ds, str(name), time=float(ds.time[7]))
        assert found.value == pytest.approx(found.stored, rel=1e-12)


def test_refusals() -> None:
    with pytest.raises(RangeError, match="must be below lung_volume_btps"):
        gas_exchange.breath_hold(SHALLOW, lung_volume_btps=1.5, residual_volume_btps=1.5)
    with pytest.raises(RangeError, match="lung_volume_btps"):
        gas_exchange.breath_hold(SHALLOW, lung_volume_btps=float("nan"))
    with pytest.raises(RangeError, match="cannot sustain life"):
        gas_exchange.breath_hold(Exposure.start("trimix 2/60").stay(1))
    with pytest.raises(RangeError, match="not extrapolated"):
        gas_exchange.breath_hold(Exposure.start("oxygen").stay(16))
    with pytest.raises(RangeError, match="used up after"):
        gas_exchange.breath_hold(Exposure.start("air").stay(16))
    several = Exposure.start("air").stay(xr.DataArray([1.0, 2.0], dims="run", attrs={"units": "min"}))
    with pytest.raises(ExposureError, match="pick one scenario"):
        gas_exchange.breath_hold(several)
