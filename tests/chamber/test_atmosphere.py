"""The atmosphere of a chamber: closed form, an ODE solver, conservation, what follows from limits."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import gasphys as gp
from gasphys import Exposure, chamber
from gasphys.chamber import Chamber, atmosphere
from gasphys.chamber.model import AIR_O2
from gasphys.errors import ExposureError
from gasphys.limits import load
from gasphys.plots import atmosphere_figure
from gasphys.schedules import treatment

P0 = 101.325


def stay(minutes: float, gas: str = "oxygen", pressure: float = 2.4 * P0) -> Exposure:
    return Exposure.start(gas, pressure=pressure).stay(minutes)


def alone(**more: object) -> Chamber:
    """A chamber with nobody on chamber air."""
    given = {"volume": 20000.0, "attendants": 0, "patients": 1, "mask_leak": 8.0, "temperature": 20.0}
    return Chamber(**{**given, **more})


def test_a_stay_is_the_closed_form() -> None:
    """C20, C21: 20 m3, 8 L/min; 23.5 % in 81.97 min without supply, 175.44 min with 200 L/min."""
    for air, minutes in ((0.0, 81.97), (200.0, 175.44)):
        ds = atmosphere(stay(minutes), alone(air_flow=air))
        assert float(ds.chamber_o2_fraction.isel(time=-1, end=0)) == pytest.approx(0.235, abs=5e-6)
        plain = chamber.o2_fraction(minutes, 20000.0, 8.0, air)
        assert float(ds.chamber_o2_fraction.isel(time=-1, end=1)) == pytest.approx(plain, rel=1e-13)
    crossed = atmosphere(stay(120.0), alone()).first_crossing.sel(limit="chamber_o2_nfpa")
    np.testing.assert_allclose(crossed, 81.97, atol=0.005)


def test_carbon_dioxide_of_a_stay_is_the_closed_form() -> None:
    """20 m3, 1.0 L/min in all, 22 degC, no ventilation: 85 min to 0.5 %, 270 min to 1.5 % SEV."""
    room = Chamber(
        volume=20000.0,
        patients=0,
        attendants=4,
        co2_output_stpd=0.25,
        o2_uptake_stpd=0.25,
        supply_co2=0.0004,
    )
    ds = atmosphere(stay(300.0, "air", P0), room, at=[85.0, 270.0])
    sev = ds.chamber_co2_surface_equivalent.isel(end=0)
    assert float(sev.sel(time=85.0)) == pytest.approx(0.005, abs=5e-5)
    assert float(sev.sel(time=270.0)) == pytest.approx(0.015, abs=5e-5)
    plain = chamber.co2_pressure(270.0, 20000.0, 1.0, 0.0, temperature=22.0, initial=0.0004 * P0)
    # Output and uptake are equal, so no air is let in to make up for them.
    assert float(ds.chamber_pco2.isel(end=0).sel(time=270.0)) == pytest.approx(plain, rel=1e-12)
    wind = Chamber(
        volume=20000.0, patients=0, attendants=2, co2_output_stpd=0.5, air_flow=100.0, supply_co2=0.0
    )
    ds = atmosphere(stay(5000.0, "air", 3 * P0), wind)
    steady = chamber.steady_co2_pressure(1.0, 100.0, temperature=22.0)
    # The closed form neglects the volume that people add and take: 0.4 % of the flow here.
    assert float(ds.chamber_pco2.isel(end=0, time=-1)) == pytest.approx(steady, rel=5e-3)


ROOMS = {
    "masks dumped": Chamber(volume=18000.0, air_flow=150.0, mask_leak=6.0, patients=2),
    "masks not dumped": Chamber(volume=18000.0, air_flow=300.0, overboard_dump=False, mask_flow=12.0),
    "no ventilation": Chamber(volume=12000.0, mask_leak=3.0),
    "working": Chamber(volume=12000.0, air_flow=113.0, working=4.0, attendants=2),
}


@pytest.mark.parametrize("name", ["usn_6a", "clinical_2_4_atm"])
@pytest.mark.parametrize("room", list(ROOMS))
def test_against_an_ode_solver_and_conserved(room: str, name: str) -> None:
    one = ROOMS[room]
    exposure = treatment(name)
    nodes, weights = np.polynomial.legendre.leggauss(24)
    pieces = exposure.pieces()
    bounds = [
        (a + (b - a) * k / 8.0, a + (b - a) * (k + 1) / 8.0)
        for a, b in itertools.pairwise(pieces.times)
        for k in range(8)
    ]
    at = np.concatenate([a + (b - a) * 0.5 * (nodes + 1.0) for a, b in bounds])
    ds = atmosphere(exposure, one, at=at)
    to_pv = P0 * (one.temperature + 273.15) / 273.15
    for end in range(2):
        used = one.o2_uptake_stpd[1 - end] * to_pv
        made = one.co2_output_stpd[end] * to_pv

        def flows(t: float, k: int, used: float = used, made: float = made, end: int = end):
            """Pressure, slope, air in, and what is added of O2, CO2 and all gas, kPa L/min."""
            length = pieces.duration[k]
            slope = (pieces.end_pressure[k] - pieces.start_pressure[k]) / length
            p = pieces.start_pressure[k] + slope * (t - pieces.times[k])
            on = pieces.fractions["O2"][k] > 0.9
            breathing = one.attendants * one.working + (one.patients if not on else 0)
            o2, co2 = -breathing * used, breathing * made
            whole = o2 + co2
            if on:
                out = (
                    one.mask_leak[end] if one.overboard_dump else max(one.mask_flow[end], one.mask_leak[end])
                )
                o2 += one.patients * out * p
                whole += one.patients * out * p
                if not one.overboard_dump:
                    o2 -= one.patients * used
                    co2 += one.patients * made
                    whole += one.patients * (made - used)
            ends = (pieces.start_pressure[k], pieces.end_pressure[k])
            per = one.patients * out if on else 0.0
            fixed = whole - per * p
            short = max(0.0, *(-(fixed + (per + one.air_flow) * q) for q in ends))
            air = one.volume * max(slope, 0.0) + one.air_flow * p + short
            return p, slope, air, o2, co2, whole

        for gas, supplied, start, column in (
            ("O2", AIR_O2, AIR_O2, ds.chamber_o2_fraction),
            ("CO2", one.supply_co2, one.supply_co2, ds.chamber_pco2 / ds.ambient_pressure),
        ):
            place = 3 if gas == "O2" else 4
            f, worst = start, 0.0
            for k, (a, b) in enumerate(itertools.pairwise(pieces.times)):

                def slope_of(t, y, k=k, place=place, supplied=supplied):
                    p, _slope, air, *added = flows(t, k)
                    whole = added[2]
                    return [(supplied * air + added[place - 3] - y[0] * (air + whole)) / (one.volume * p)]

                f = solve_ivp(slope_of, (a, b), [f], rtol=1e-12, atol=1e-15, method="DOP853").y[0, -1]
                ours = float(column.isel(end=end).sel(time=b, method="nearest"))
                worst = max(worst, abs(ours - f) / f)
            assert worst < 1e-10
            # What came in less what went out is what is there: flows integrated by Gauss.
            came = went = 0.0
            for a, b in bounds:
                k = int(np.searchsorted(pieces.times, 0.5 * (a + b)) - 1)
                for node, weight in zip(nodes, weights, strict=True):
                    t = a + (b - a) * 0.5 * (node + 1.0)
                    _p, slope, air, o2, co2, whole = flows(t, k)
                    here = float(column.values[end, np.searchsorted(ds.time.values, t)])
                    step = 0.5 * (b - a) * weight
                    came += step * (supplied * air + (o2 if gas == "O2" else co2))
                    went += step * here * (air + whole - one.volume * slope)
            held = one.volume * (
                column.values[end, -1] * pieces.end_pressure[-1] - start * pieces.start_pressure[0]
            )
            assert came - went == pytest.approx(held, abs=1e-10 * (abs(came) + abs(went)))


def test_splitting_a_stay_changes_nothing() -> None:
    room = Chamber(air_flow=100.0, patients=3)
    whole = stay(60.0)
    parts = Exposure.start("oxygen", pressure=2.4 * P0).stay(13.0).stay(47.0)
    a, b = (atmosphere(e, room) for e in (whole, parts))
    for name in ("chamber_o2_fraction", "chamber_pco2"):
        np.testing.assert_allclose(a[name].isel(time=-1), b[name].isel(time=-1), rtol=1e-13)


def test_needed_ventilation_keeps_the_limit() -> None:
    """Sheet: q 10 L/min needs 300 L/min for 23.5 %."""
    room = alone(mask_leak=10.0)
    ds = atmosphere(stay(30.0), room)
    np.testing.assert_allclose(ds.air_flow_for_o2, 300.0, atol=0.5)
    kept = atmosphere(stay(1e5), room.narrowed(air_flow=float(ds.air_flow_for_o2[0])))
    assert float(kept.chamber_o2_fraction.isel(end=0, time=-1)) == pytest.approx(0.235, rel=1e-10)
    assert float(kept.chamber_o2_fraction.max()) <= 0.235 * (1.0 + 1e-12)


def test_a_range_of_leaks_is_a_range_of_fractions() -> None:
    ds = atmosphere(treatment("usn_6"), Chamber(air_flow=100.0), treatment("usn_6", attendant=True))
    low, high = (ds.chamber_o2_fraction.sel(end=e) for e in ("low", "high"))
    assert bool((low <= high).all())
    assert float(high[-1] - low[-1]) > 0.01
    assert ds.attrs["comment"].startswith("Model estimates")


def test_air_used() -> None:
    """20 m3 to 2.4 atm takes 28.0 m3 of free air."""
    up = Exposure.start("air").travel(pressure="2.4 atm", minutes=10)
    assert float(atmosphere(up, Chamber(volume="20 m3")).air_used) == pytest.approx(28000.0, rel=1e-12)
    blown = atmosphere(stay(10.0, "air"), Chamber(air_flow=100.0))
    assert float(blown.air_used) == pytest.approx(10 * 100.0 * 2.4, rel=1e-12)


def test_what_is_refused() -> None:
    with pytest.raises(ExposureError, match="lasts"):
        atmosphere(stay(10.0), Chamber(), stay(11.0))


def test_the_surface_equivalent_shows_its_working() -> None:
    ds = atmosphere(treatment("usn_9"), Chamber())
    at = {"time": 32.25, "end": "high"}
    told = gp.explain(ds, "chamber_co2_surface_equivalent", **at)
    assert "chamber.co2_surface_equivalent" in str(told)
    assert told.value == pytest.approx(float(ds.chamber_co2_surface_equivalent.sel(at)), rel=1e-12)


def test_the_figure_shows_every_limit() -> None:
    figure = atmosphere_figure(atmosphere(treatment("usn_6"), Chamber(mask_leak=(1, 8))))
    words = " ".join(t.get_text() for axes in figure.axes for t in axes.texts)
    for limit in load():
        if limit.quantity in ("chamber_o2_fraction", "chamber_co2_surface_equivalent"):
            assert limit.authority in words
    assert "Model estimates" in figure.get_supxlabel()
    with pytest.raises(ExposureError):
        atmosphere_figure(treatment("usn_6").to_dataset())
