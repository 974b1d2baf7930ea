"""Loops along exposures: against an ODE solver in moles of each gas, conservation, failure, gas breathed."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import gasphys as gp
from gasphys import breathing
from gasphys.breathing import BreathKeyed, ClosedCircuit, ConstantFlow, ConstantRatio
from gasphys.errors import ExposureError, RangeError

UPTAKE, VENTILATION, VOLUME = 1.3, 32.0, 7.0
#: Liters STPD for a liter and kPa at 37 degC.
PER_KPA = 273.15 / 310.15 / 101.325
SPECIES = ("O2", "N2", "He")


def dive(uptake=UPTAKE, ventilation=VENTILATION):
    """A descent, work, two ascents of which one is fast, the surface."""
    start = gp.Exposure.start("air", o2_uptake_stpd=uptake, ventilation_btps=ventilation)
    down = start.travel(depth=36, minutes=1.5).stay(12).travel(depth=40, minutes=4).stay(6)
    return down.travel(depth=12, minutes=2.5).stay(8).travel(depth=0, minutes=0.4).stay(5)


def mix(gas):
    one = gp.Gas.parse(gas)
    return np.array([one.fraction(s) for s in SPECIES])


def reference(exposure, rates, begin, at, volume=VOLUME):
    """Integrate amounts, supply and discharge by species with an ODE solver, piece by piece.

    ``rates(amount, full, growth)`` returns inflow by species and the flow that leaves as mixed gas.
    """
    pieces = exposure.pieces()
    taken = np.array([1.0, 0.0, 0.0])
    state = np.concatenate([begin * volume * PER_KPA * pieces.start_pressure[0], np.zeros(6)])
    found = {float(pieces.times[0]): state}
    for k, length in enumerate(pieces.duration):
        uptake = exposure.columns["o2_uptake_stpd"][k]
        p0, p1 = pieces.start_pressure[k], pieces.end_pressure[k]
        growth = volume * PER_KPA * (p1 - p0) / length

        def rate(t, y, p0=p0, growth=growth, uptake=uptake):
            full = volume * PER_KPA * p0 + growth * t
            inflow, leaving = rates(y[:3], full, growth, uptake)
            out = leaving * y[:3] / y[:3].sum()
            return np.concatenate([inflow - out - uptake * taken, inflow, out])

        here = [t for t in at if pieces.times[k] < t < pieces.times[k + 1]]
        nodes = [*here, float(pieces.times[k + 1])]
        solved = solve_ivp(
            rate,
            (0.0, length),
            state,
            method="LSODA",
            rtol=1e-10,
            atol=1e-11,
            max_step=0.05,
            t_eval=[t - pieces.times[k] for t in nodes],
        )
        for t, y in zip(nodes, solved.y.T, strict=True):
            found[float(t)] = y
        state = solved.y[:, -1]
    return found


def semi_closed(flow, gas):
    def rates(amount, full, growth, uptake):
        surplus = flow - uptake
        added = max(0.0, growth - surplus)
        return (flow + added) * mix(gas), max(0.0, surplus - growth)

    return rates


def breath_keyed(share, gas):
    def rates(amount, full, growth, uptake):
        discharged = share * VENTILATION * full / VOLUME
        inflow = max(0.0, discharged + uptake + growth)
        return inflow * mix(gas), inflow - uptake - growth

    return rates


CASES = {
    "constant flow": (ConstantFlow(9.0, "nitrox 40"), semi_closed(9.0, "nitrox 40")),
    "constant flow, trimix": (ConstantFlow(12.0, "trimix 30/30"), semi_closed(12.0, "trimix 30/30")),
    "a flow just above uptake": (ConstantFlow(1.4, "oxygen"), semi_closed(1.4, "oxygen")),
    "a flow below uptake": (ConstantFlow(1.0, "oxygen"), semi_closed(1.0, "oxygen")),
    "constant ratio": (ConstantRatio(0.2, "nitrox 50"), semi_closed(0.2 * VENTILATION, "nitrox 50")),
    "breath-keyed": (BreathKeyed(0.1, "nitrox 40"), breath_keyed(0.1, "nitrox 40")),
    "breath-keyed, hardly": (BreathKeyed(0.01, "nitrox 80"), breath_keyed(0.01, "nitrox 80")),
}


@pytest.mark.parametrize("name", CASES)
def test_amounts_against_an_ode_solver(name):
    loop, rates = CASES[name]
    exposure, at = dive(), np.arange(0.0, 39.0, 0.7)
    ds = breathing.loop_oxygen(exposure, loop, volume=VOLUME, initial="air", at=at)
    expected = reference(exposure, rates, mix("air"), at)
    species = [s for s in SPECIES if s in ds.loop_gas.values]
    places = [SPECIES.index(s) for s in species]
    for t in ds.time.values:
        want = expected[float(t)]
        row = ds.sel(time=t)
        amount = row.loop_fraction.sel(loop_gas=species).values * float(row.loop_gas_stpd)
        np.testing.assert_allclose(amount, want[:3][places], rtol=0.0, atol=2e-6)
        np.testing.assert_allclose(
            row.gas_supplied.sel(loop_gas=species).values, want[3:6][places], rtol=1e-6, atol=1e-6
        )
        np.testing.assert_allclose(
            row.gas_discharged.sel(loop_gas=species).values, want[6:][places], rtol=1e-6, atol=2e-6
        )
        assert float(row.loop_fraction.sum()) == pytest.approx(1.0, abs=1e-12)


def test_closed_circuit_holds_its_set_point_against_an_ode_solver():
    """Against a stiff controller that opens its valve in proportion to what is missing."""
    exposure, at = dive(), np.arange(0.0, 39.0, 0.7)
    held, diluent = 70.0 * VOLUME * PER_KPA, mix("trimix 17/48")

    def rates(amount, full, growth, uptake):
        flow = float(np.clip(400.0 * (held - amount[0]), 0.0, 10.0))
        surplus = flow - uptake
        added = max(0.0, growth - surplus)
        return flow * np.array([1.0, 0.0, 0.0]) + added * diluent, max(0.0, surplus - growth)

    ds = breathing.loop_oxygen(
        exposure, ClosedCircuit("70 kPa", "trimix 17/48"), volume=VOLUME, initial="trimix 17/48", at=at
    )
    expected = reference(exposure, rates, diluent, at)
    order = [SPECIES.index(str(s)) for s in ds.loop_gas.values]
    for t in ds.time.values:
        row = ds.sel(time=t)
        amount = row.loop_fraction.values * float(row.loop_gas_stpd)
        # The slow valve lags behind by uptake over its gain.
        np.testing.assert_allclose(amount, expected[float(t)][:3][order], rtol=0.0, atol=0.03)


def test_closed_circuit_is_exactly_at_its_set_point_where_it_can_be():
    ds = breathing.loop_oxygen(
        dive(), ClosedCircuit("70 kPa", "trimix 17/48"), initial="trimix 17/48", at=np.arange(0.0, 39.0, 0.25)
    )
    late = ds.sel(time=slice(6.0, 34.0))
    assert late.loop_po2.values == pytest.approx(70.0, rel=1e-9)
    # Rising to it with the valve wide open: 10 L/min less what is used, the loop overflowing at 1 atm.
    assert float(ds.loop_po2[0]) == pytest.approx(0.17 * 101.325, rel=1e-9)
    # Through what was breathed it used its oxygen and no more than it vented besides.
    use = float(ds.gas_supplied.sel(loop_gas="O2")[-1] - ds.gas_discharged.sel(loop_gas="O2")[-1])
    stored = float((ds.loop_o2_fraction * ds.loop_gas_stpd)[-1] - (ds.loop_o2_fraction * ds.loop_gas_stpd)[0])
    assert use == pytest.approx(float(ds.o2_taken_up[-1]) + stored, rel=1e-9)


def test_set_point_and_diluent_come_from_the_exposure():
    start = gp.Exposure.start("air", o2_uptake_stpd=1.0).loop("0.7 bar", "trimix 17/48")
    exposure = start.travel(depth=30, minutes=3).stay(5).loop("1.3 bar", "trimix 17/48").stay(15)
    own = breathing.loop_oxygen(exposure, ClosedCircuit(), at=[7.9, 22.0])
    assert float(own.loop_po2.sel(time=7.9)) == pytest.approx(70.0, rel=0.01)
    assert float(own.loop_po2.sel(time=22.0)) == pytest.approx(130.0, rel=1e-9)
    with pytest.raises(ExposureError, match="set-point"):
        breathing.loop_oxygen(dive(), ClosedCircuit(None, "air"))


@pytest.mark.parametrize("volume", [3.0, 7.0])
@pytest.mark.parametrize("kind", list(CASES))
def test_each_gas_is_conserved(kind, volume):
    loop, _ = CASES[kind]
    ds = breathing.loop_oxygen(
        dive(), loop, volume=volume, initial="trimix 18/45", at=np.arange(0.0, 39.0, 1.0)
    )
    amount = ds.loop_fraction * ds.loop_gas_stpd
    taken = ds.o2_taken_up * (ds.loop_gas == "O2")
    balance = amount.isel(time=0) + ds.gas_supplied - ds.gas_discharged - taken - amount
    assert float(abs(balance).max()) < 1e-9
    # What is discharged never comes back, and nothing is made.
    assert float(ds.gas_discharged.diff("time").min()) > -1e-9
    assert float(ds.gas_supplied.diff("time").min()) > -1e-9
    full = volume * PER_KPA * ds.ambient_pressure
    assert ds.loop_gas_stpd.values == pytest.approx(full.values, rel=1e-9)


def test_cutting_a_piece_changes_nothing():
    coarse = breathing.loop_oxygen(dive(), ConstantFlow(9.0, "nitrox 40"), initial="air")
    fine = breathing.loop_oxygen(
        dive(), ConstantFlow(9.0, "nitrox 40"), initial="air", at=np.linspace(0, 39, 401)
    )
    same = fine.sel(time=coarse.time)
    assert same.loop_fraction.values == pytest.approx(coarse.loop_fraction.values, rel=1e-10)


def test_a_loop_at_one_depth_is_the_equation():
    exposure = gp.Exposure.start("air", pressure=401.3, o2_uptake_stpd=1.2).stay(20)
    at = np.linspace(0.0, 20.0, 9)
    ds = breathing.loop_oxygen(exposure, ConstantFlow(10.0, "nitrox 40"), initial="air", at=at)
    expected = breathing.loop_o2_after(at, 0.21, 10.0, 0.40, 1.2, float(ds.loop_gas_stpd[0]))
    assert ds.loop_o2_fraction.values == pytest.approx(expected, rel=1e-12)
    assert float(ds.steady_o2_fraction[0]) == pytest.approx(0.3182, abs=5e-5)
    assert float(ds.loop_po2[-1]) == pytest.approx(float(ds.loop_o2_fraction[-1]) * 401.3, rel=1e-12)


def test_the_surplus_fills_first_and_ascent_changes_no_fraction():
    """Traps: adding the whole demand in descent puts the fraction too high; venting mixed gas keeps it."""
    start = gp.Exposure.start("air", o2_uptake_stpd=1.0)
    slow = start.travel(depth=30, minutes=300)  # demand stays below the surplus
    ds = breathing.loop_oxygen(slow, ConstantFlow(10.0, "nitrox 40"), volume=7.0, initial="air")
    assert float(ds.gas_supplied.sum("loop_gas")[-1]) == pytest.approx(3000.0, rel=1e-12)
    fast = start.work(o2_uptake_stpd=1e-6).stay(1).travel(depth=30, minutes=1)
    up = fast.travel(depth=0, minutes=0.01)
    found = breathing.loop_oxygen(up, ConstantFlow(1e-5, "nitrox 40"), initial="air")
    assert float(found.loop_o2_fraction[-1]) == pytest.approx(float(found.loop_o2_fraction[-2]), abs=1e-5)


def test_a_bag_between_full_and_least_volume_keeps_its_inert_gas():
    exposure = gp.Exposure.start("air", pressure=300.0, o2_uptake_stpd=1.5).stay(6)
    loop = ConstantFlow(0.5, "nitrox 50")
    ds = breathing.loop_oxygen(exposure, loop, volume=6.0, least_volume=2.0, initial="nitrox 50", at=range(7))
    amount = 6.0 * PER_KPA * 300.0
    expected = breathing.shrinking_loop_o2_fraction(np.arange(7.0), 0.5, 0.5, 0.5, 1.5, amount)
    assert ds.loop_o2_fraction.values == pytest.approx(expected, rel=1e-12)
    assert ds.loop_gas_stpd.values == pytest.approx(amount - np.arange(7.0), rel=1e-12)
    # From the least volume on the valve makes up for what is used, and no more.
    long = gp.Exposure.start("air", pressure=300.0, o2_uptake_stpd=1.5).stay(20)
    later = breathing.loop_oxygen(long, loop, volume=6.0, least_volume=4.0, initial="oxygen", at=range(20))
    assert later.loop_gas_stpd.dropna("time").values[-2:] == pytest.approx(4.0 * PER_KPA * 300.0, rel=1e-12)


@pytest.mark.parametrize("loop", [ConstantFlow(9.0, "nitrox 40"), BreathKeyed(0.1, "nitrox 40")])
def test_a_sudden_change_of_pressure_vents_or_fills(loop):
    start = gp.Exposure.start("air", pressure=300.0, o2_uptake_stpd=1.0, ventilation_btps=25.0).stay(5)
    for pressure in (120.0, 500.0):
        ds = breathing.loop_oxygen(start.then(5, pressure=pressure), loop, initial="air", at=[5.0 + 1e-9])
        row = ds.sel(time=5.0 + 1e-9)
        assert float(row.loop_gas_stpd) == pytest.approx(7.0 * PER_KPA * pressure, rel=1e-6)
        before = float(ds.loop_o2_fraction.sel(time=5.0))
        kept = 300.0 / pressure * before + (1.0 - 300.0 / pressure) * 0.4
        expected = before if pressure < 300.0 else kept
        assert float(row.loop_o2_fraction) == pytest.approx(expected, rel=1e-6)


# -- a supply that fails ---------------------------------------------------------------------------


def test_time_to_hypoxia_of_a_closed_loop_is_the_equation():
    """Diluent without oxygen keeps the loop full: the rate of L7, PO2 from the set-point to the limit."""
    exposure = gp.Exposure.start("air", pressure=601.3, o2_uptake_stpd=1.0).stay(40)
    loop = ClosedCircuit("1.3 bar", "mix O2=0 He=1")
    ds = breathing.loop_oxygen(
        exposure,
        loop,
        volume=6.0,
        initial="mix O2=0.2161982 He=0.7838018",
        fails_at=10.0,
        lowest_po2="0.16 bar",
    )
    rate = breathing.closed_loop_po2_rate(0.0, 1.0, 6.0)
    assert rate / 100.0 == pytest.approx(-0.1918, abs=5e-5)
    expected = 10.0 + breathing.time_to_po2("1.3 bar", "0.16 bar", rate)
    assert float(ds.time_below_lowest_po2) == pytest.approx(expected, rel=1e-9)
    assert np.isnan(float(ds.loop_po2[-1]))
    assert float(ds.time_oxygen_used_up) == pytest.approx(10.0 - 130.0 / rate, rel=1e-9)


def test_without_diluent_the_bag_shrinks_and_the_first_rate_has_its_own_fraction():
    exposure = gp.Exposure.start("air", pressure=400.0, o2_uptake_stpd=1.0).stay(10)
    given = {"volume": 6.0, "initial": "nitrox 32", "fails_at": 0.0, "valve_after_failure": False}
    ds = breathing.loop_oxygen(exposure, ClosedCircuit("1.28 bar", "air"), **given, at=[1e-4, 3.0])
    fall = (float(ds.loop_po2.sel(time=1e-4)) - 128.0) / 1e-4
    assert fall == pytest.approx(breathing.closed_loop_po2_rate(0.0, 1.0, 6.0, 37.0, 0.32), rel=1e-4)
    amount = 6.0 * PER_KPA * 400.0
    expected = breathing.shrinking_loop_o2_fraction(3.0, 0.32, 0.0, 0.0, 1.0, amount)
    assert float(ds.loop_o2_fraction.sel(time=3.0)) == pytest.approx(expected, rel=1e-12)


def test_an_ascent_after_a_failure_brings_hypoxia_sooner():
    still = gp.Exposure.start("air", pressure=500.0, o2_uptake_stpd=1.5).stay(30)
    up = (
        gp.Exposure.start("air", pressure=500.0, o2_uptake_stpd=1.5)
        .stay(3)
        .travel(depth=0, minutes=4)
        .stay(23)
    )
    given = {"initial": "nitrox 40", "fails_at": 2.0}
    times = [
        float(
            breathing.loop_oxygen(
                e, ConstantFlow(10.0, "nitrox 40"), valve_after_failure=False, **given
            ).time_below_lowest_po2
        )
        for e in (still, up)
    ]
    assert 2.0 < times[1] < times[0]


def test_the_first_time_below_is_a_root():
    exposure = (
        gp.Exposure.start("air", pressure=500.0, o2_uptake_stpd=1.5)
        .stay(3)
        .travel(depth=0, minutes=4)
        .stay(9)
    )
    given = {"initial": "nitrox 40", "fails_at": 2.0, "valve_after_failure": False}
    loop = ConstantFlow(10.0, "nitrox 40")
    first = float(breathing.loop_oxygen(exposure, loop, **given, lowest_po2=30.0).time_below_lowest_po2)
    there = breathing.loop_oxygen(exposure, loop, **given, at=[first])
    assert float(there.loop_po2.sel(time=first)) == pytest.approx(30.0, rel=1e-9)


def test_what_cannot_be_followed_is_refused():
    with pytest.raises(ExposureError, match="o2_uptake_stpd"):
        breathing.loop_oxygen(gp.Exposure.start("air").stay(5), ConstantFlow(9.0, "nitrox 40"))
    with pytest.raises(ExposureError, match="ventilation_btps"):
        breathing.loop_oxygen(
            gp.Exposure.start("air").stay(5), BreathKeyed(0.1, "nitrox 40"), o2_uptake_stpd=1.0
        )
    with pytest.raises(ExposureError, match="breath-keyed"):
        breathing.loop_oxygen(dive(), BreathKeyed(0.1, "nitrox 40"), fails_at=3.0)
    with pytest.raises(ExposureError, match="constant flow only"):
        breathing.loop_oxygen(dive(), BreathKeyed(0.1, "nitrox 40"), least_volume=3.0)
    with pytest.raises(RangeError, match="above volume"):
        breathing.loop_oxygen(dive(), ConstantFlow(9.0, "nitrox 40"), least_volume=8.0)
    with pytest.raises(RangeError, match="loop_volume"):
        breathing.loop_oxygen(dive(), ConstantFlow(9.0, "nitrox 40"), volume=-1.0)
    with pytest.raises(RangeError, match="supply_flow_stpd"):
        ConstantFlow(float("nan"), "nitrox 40")


def test_scenarios_give_the_rows_of_single_runs():
    import xarray as xr

    depth = xr.DataArray([12.0, 30.0], dims="depth", coords={"depth": [12.0, 30.0]})
    uptake = xr.DataArray([0.8, 1.4, 2.0], dims="work", coords={"work": [1, 2, 3]})
    many = gp.Exposure.start("air", o2_uptake_stpd=uptake).travel(depth=depth, minutes=2).stay(9)
    ds = breathing.loop_oxygen(many, ConstantFlow(9.0, "nitrox 40"), initial="air", at=[5.0])
    for d, (w, u) in itertools.product((12.0, 30.0), zip((1, 2, 3), uptake.values, strict=True)):
        single = gp.Exposure.start("air", o2_uptake_stpd=float(u)).travel(depth=d, minutes=2).stay(9)
        one = breathing.loop_oxygen(single, ConstantFlow(9.0, "nitrox 40"), initial="air", at=[5.0])
        np.testing.assert_allclose(
            ds.loop_o2_fraction.sel(depth=d, work=w).values, one.loop_o2_fraction.values, rtol=1e-12
        )
        assert float(ds.loop_po2.sel(depth=d, work=w, time=5.0)) == pytest.approx(
            float(one.loop_po2.sel(time=5.0))
        )


# -- the loop as breathing gas ---------------------------------------------------------------------


def test_the_loop_becomes_the_gas_of_a_new_exposure():
    at = np.linspace(0.0, 39.0, 391)
    ds = breathing.loop_oxygen(dive(), ConstantFlow(9.0, "nitrox 40"), initial="air", at=at)
    new = breathing.breathed_from(ds)
    assert new.duration == pytest.approx(dive().duration, rel=1e-12)
    pieces = new.pieces()
    error = new.attrs["largest_po2_error"]
    assert np.abs(pieces.start_po2 - ds.loop_po2.values[:-1]).max() <= error * (1.0 + 1e-9)
    assert 0.0 < error < 1.7
    # Every other model takes it: the dose of the loop lies between those of its lean and rich ends.
    dose = float(gp.doses.oxygen(new, ["uptd"], count="all").dose[0])
    assert dose > 0.0
    assert gp.review(new).sizes["limit"] > 10
    np.testing.assert_allclose(sum(new.fractions.values()), 1.0, rtol=0.0, atol=1e-12)
    with pytest.raises(ExposureError, match="loop_oxygen"):
        breathing.breathed_from(dive().to_dataset())
    gone = breathing.loop_oxygen(dive(), ConstantFlow(0.5, "nitrox 40"), initial="air")
    with pytest.raises(ExposureError, match="used up"):
        breathing.breathed_from(gone)


@pytest.mark.parametrize("name", ["loop_po2", "steady_o2_fraction", "loop_o2_fraction", "loop_gas_stpd"])
@pytest.mark.parametrize(
    "loop",
    [
        ConstantRatio(0.25, "nitrox 40"),
        ConstantFlow(9.0, "trimix 30/30"),
        ClosedCircuit("0.7 bar", "trimix 17/48"),
    ],
)
def test_stored_numbers_are_explained(name, loop):
    ds = breathing.loop_oxygen(dive(), loop, initial="air", at=[7.0], fails_at=20.0)
    if name not in ds:
        assert isinstance(loop, ClosedCircuit)
        return
    found = gp.explain(ds, name, time=7.0)
    assert found.value == pytest.approx(found.stored, rel=1e-12)
    assert found.steps


@pytest.mark.parametrize("engine", ["scipy", "h5netcdf"])
def test_results_survive_a_file(tmp_path, engine):
    import xarray as xr

    ds = breathing.loop_oxygen(dive(), ClosedCircuit("0.7 bar", "trimix 17/48"), fails_at=9.0)
    ds.to_netcdf(tmp_path / "loop.nc", engine=engine)
    with xr.open_dataset(tmp_path / "loop.nc", engine=engine) as back:
        xr.testing.assert_identical(back.load(), ds)
