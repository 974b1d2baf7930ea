"""Nuclei and the planner at their limits: no critical volume, no crushing, one gas of two."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, bubbles
from gasphys.bubbles import EVIDENCE, varying_permeability
from gasphys.errors import ExposureError, RangeError, UnknownNameError, ValidityError, ValidityWarning

ATM = 101.325
MODEL = "yount_hoffman_1986"


def bottom(gas: Any = "air", depth: Any = 40.0, minutes: Any = 20.0) -> Exposure:
    """Return an exposure that ends at depth."""
    return Exposure.start(gas).travel(depth=depth, minutes=2.0).stay(minutes)


def chain() -> bubbles.VaryingPermeability:
    """Return the model of the worked chain: one nitrogen compartment of 20 min, dry, no other gases."""
    return varying_permeability(
        compartments=gp.tissues.load("us_navy_1957", compartments=["20"]), other_gases=0.0
    )


# -- The worked chain of the reference ---------------------------------------------------------------


def test_worked_chain() -> None:
    """Compression 1 to 4 atm, 30 min: radius 0.530718 um, adjusted crushing 2.993276 atm."""
    dive = Exposure.start("air").travel(pressure=4.0 * ATM, minutes=1e-9).stay(30.0)
    ds = bubbles.nuclei(dive, chain())
    crushed, healed = ds.nucleus_radius.sel(compartment="20", inert_gas="N2").values[1:]
    assert crushed == pytest.approx(0.530317, abs=5e-7)
    assert healed == pytest.approx(0.530718, abs=5e-7)
    assert float(ds.final.item()) / ATM == pytest.approx(2.322078, abs=5e-7)
    assert float(ds.crushing_pressure[..., -1].item()) / ATM == pytest.approx(2.993276, abs=5e-7)
    assert float(ds.minimum_gradient[..., -1].item()) / ATM == pytest.approx(0.619369, abs=5e-7)
    # 1 atm/min up: supersaturated after 1.668224 min, at 2.331776 atm.
    found = bubbles.first_supersaturated_depth(dive, ATM / 10.0, chain())
    assert (ATM + 10.0 * found) / ATM == pytest.approx(2.331776, abs=5e-7)


def test_closed_skins_as_printed() -> None:
    """Fast compression from 1 atm, nothing taken up: radii of the table at 10, 15 and 21 atm."""
    air = gp.Gas(oxygen=0.21)
    for pressure, radius in ((10.0, 0.31989), (15.0, 0.25370), (21.0, 0.20775)):
        with gp.validity("ignore"):
            dive = Exposure.start(air).travel(pressure=pressure * ATM, minutes=1e-9)
            slow = _held(1e9)
            ds = bubbles.nuclei(dive, slow)
        assert float(ds.final_radius.item()) == pytest.approx(radius, abs=5e-6)


def _held(half_time: float) -> bubbles.VaryingPermeability:
    """Return a model of one compartment that holds 1 atm of gas whatever happens."""
    import dataclasses

    one = gp.tissues.load("us_navy_1957", compartments=["120"])
    slow = dataclasses.replace(one, half_time=np.array([[half_time]]))
    # 0.79 atm of nitrogen and 0.21 of other gases: 1 atm.
    return varying_permeability(compartments=slow, other_gases=0.21 * ATM)


# -- Limits -------------------------------------------------------------------------------------------


def test_without_critical_volume_the_least_gradients_stay() -> None:
    found = ascent.plan(bottom(), model=varying_permeability(critical_volume=0.0))
    np.testing.assert_allclose(
        found.stops.allowed_gradient, found.stops.minimum_gradient, rtol=1e-12, atol=0.0
    )
    assert int(found.stops.passes) == 2
    small = ascent.plan(bottom(), model=varying_permeability(critical_volume=1e-6))
    np.testing.assert_allclose(
        small.stops.allowed_gradient, found.stops.allowed_gradient, rtol=1e-9, atol=0.0
    )
    published = ascent.plan(bottom(), model=MODEL)
    assert (published.stops.allowed_gradient > found.stops.allowed_gradient).all()
    assert published.total_time < found.total_time


def test_without_crushing_nuclei_keep_their_radius() -> None:
    """A descent slower than the tissues: nothing is crushed, and the least gradient is 41.633 kPa."""
    fast = varying_permeability(
        compartments=gp.tissues.load("us_navy_1957", compartments=["5"]), regeneration_time=1e5
    )
    ds = bubbles.nuclei(Exposure.start("oxygen").stay(60.0), fast)
    # On oxygen at the surface gas leaves: some crushing, by as much as the nitrogen lost.
    lost = 0.79 * ATM * (1.0 - 0.5**12)
    assert float(ds.crushing_pressure[..., -1].item()) == pytest.approx(lost, rel=1e-3)
    still = bubbles.nuclei(Exposure.start("air").stay(600.0), MODEL)
    assert float(still.final_radius.sel(inert_gas="N2").min()) == pytest.approx(0.8, rel=1e-12)
    assert float(still.minimum_gradient.sel(inert_gas="N2")[..., -1].max()) == pytest.approx(41.633, abs=5e-4)
    assert float(still.minimum_gradient.sel(inert_gas="He")[..., -1].max()) == pytest.approx(47.581, abs=5e-4)


@pytest.mark.parametrize("mixing", ["tension", "smaller"])
def test_one_gas_is_the_limit_of_two(mixing: str) -> None:
    model = varying_permeability(mixing=mixing)
    alone = ascent.plan(bottom("nitrox 28", 36.0, 30.0), model=model)
    trace = ascent.plan(bottom(gp.Gas(oxygen=0.28, helium=1e-9), 36.0, 30.0), model=model)
    assert trace.stops.duration.values.tolist() == alone.stops.duration.values.tolist()
    n2 = {"inert_gas": "N2"}
    # Gradients of nitrogen do not hang on helium that is not there.
    np.testing.assert_allclose(
        trace.stops.allowed_gradient.sel(n2), alone.stops.allowed_gradient.sel(n2), rtol=1e-7, atol=0.0
    )


def test_nitrogen_alone_by_a_set_of_nitrogen() -> None:
    """The same compartments with and without a place for helium plan the same air dive."""
    import dataclasses

    both = varying_permeability()
    one = dataclasses.replace(
        both.tissues,
        inert_gases=("N2",),
        half_time=both.tissues.half_time[:, :1],
        a=both.tissues.a[:, :1],
        b=both.tissues.b[:, :1],
    )
    single = ascent.plan(bottom(), model=dataclasses.replace(both, tissues=one))
    double = ascent.plan(bottom(), model=both)
    assert single.stops.duration.values.tolist() == double.stops.duration.values.tolist()
    assert single.total_time == double.total_time


def test_boyle_expansion_only_tightens() -> None:
    plain, last, every = (
        ascent.plan(bottom("trimix 17/48", 56.0), model=varying_permeability(boyle_expansion=choice))
        for choice in (False, True, "every_pass")
    )
    assert plain.total_time < last.total_time <= every.total_time
    assert plain.stops.depth[0] == last.stops.depth[0]


def test_every_choice_does_something() -> None:
    """Each option of the model that sources disagree on changes radius, gradient or schedule."""
    deep = bottom("trimix 17/48", 56.0, 25.0)
    start = ascent.plan(deep, model=MODEL).stops
    for name, values in bubbles.varying_permeability.__globals__["OPTIONS"].items():
        for value in values[1:]:
            other = ascent.plan(deep, model=varying_permeability(**{name: value})).stops
            same = other.sizes == start.sizes and other.equals(start)
            assert not same, f"{name}={value} changes nothing"


def test_no_stop_lies_deeper_than_the_supersaturated_depth() -> None:
    for depth, minutes in ((24.0, 60.0), (40.0, 20.0), (60.0, 25.0)):
        found = ascent.plan(bottom(depth=depth, minutes=minutes), model=MODEL).stops
        assert float(found.depth.max()) <= float(found.first_supersaturated_depth)


def test_a_minute_less_is_too_little() -> None:
    """On leaving the last stop a minute earlier a compartment would surface over its gradient."""
    model = varying_permeability()
    found = ascent.plan(bottom(), model=model)
    stops = found.stops
    for cut, over in ((0.0, False), (1.0, True)):
        dive = bottom()
        for k in range(stops.sizes["stop"]):
            last = k == stops.sizes["stop"] - 1
            dive = dive.travel(depth=float(stops.depth[k]), rate=9.0)
            dive = dive.stay(float(stops.duration[k]) - (cut if last else 0.0))
        final = gp.tissues.tensions(dive.travel(depth=0.0, rate=9.0), model.tissues).final
        excess = final.sum("inert_gas") + model.other_gases - ATM - stops.allowed_gradient.sel(inert_gas="N2")
        assert bool(excess.max() > 1e-6) is over


# -- Carried over, joined, batches --------------------------------------------------------------------


def test_joined_is_chained() -> None:
    first = (
        Exposure.start("air").travel(depth=33.0, rate=20.0).stay(18.0).travel(depth=0.0, rate=9.0).then(90.0)
    )
    with gp.validity("ignore"):
        second = Exposure.start("trimix 17/48").travel(depth=95.0, rate=30.0).stay(6.0)
        for clock in ("greatest_crushing", "leaving_surface"):
            model = varying_permeability(regeneration_clock=clock)
            whole = bubbles.nuclei(Exposure.join([first, second]), model)
            part = bubbles.nuclei(second, model, bubbles.nuclei(first, model))
            np.testing.assert_allclose(part.final_radius, whole.final_radius, rtol=1e-12, atol=0.0)
            one = ascent.plan(Exposure.join([first, second]), model=model)
            two = ascent.plan(second, model=model, initial=bubbles.nuclei(first, model))
            assert one.stops.duration.values.tolist() == two.stops.duration.values.tolist()
            np.testing.assert_allclose(
                one.stops.allowed_gradient, two.stops.allowed_gradient, rtol=1e-9, atol=0.0
            )


def test_closed_skins_stay_closed_from_piece_to_piece() -> None:
    with gp.validity("ignore"):
        down = Exposure.start("air").travel(depth=110.0, rate=40.0)
        halves = Exposure.start("air").travel(depth=95.0, rate=40.0)
        first = bubbles.nuclei(halves)
        assert np.isfinite(first.closed_pressure).any()
        whole = bubbles.nuclei(down)
        split = bubbles.nuclei(halves.travel(depth=110.0, rate=40.0))
    np.testing.assert_allclose(split.final_radius, whole.final_radius, rtol=1e-9, atol=0.0)


def test_nuclei_stay_crushed_for_days() -> None:
    """A second dive finds smaller nuclei: 3 atm of crushing are 1.516 atm a week later."""
    dive = Exposure.start("air").travel(pressure=4.0 * ATM, minutes=1e-9).travel(pressure=ATM, minutes=1e-9)
    week = dive.then(7.0 * 1440.0)
    ds = bubbles.nuclei(week, chain())
    assert float(ds.crushing_pressure[..., -1].item()) / ATM == pytest.approx(1.5162, abs=5e-5)
    assert float(ds.final_radius.item()) == pytest.approx(0.63643, abs=5e-6)


def test_splitting_a_segment_changes_nothing() -> None:
    with gp.validity("ignore"):
        one = Exposure.start("trimix 17/48").travel(depth=95.0, rate=30.0).stay(12.0)
        two = (
            Exposure.start("trimix 17/48")
            .travel(depth=31.0, rate=30.0).travel(depth=84.0, rate=30.0).travel(depth=95.0, rate=30.0)
            .stay(5.0).stay(7.0)
        )  # fmt: skip
        np.testing.assert_allclose(
            bubbles.nuclei(two).final_radius, bubbles.nuclei(one).final_radius, rtol=1e-9, atol=0.0
        )


def test_a_maximum_inside_a_piece_is_found() -> None:
    """On oxygen gas leaves while one goes up slowly: the greatest crushing lies inside the ascent."""
    dive = (
        Exposure.start("air").travel(depth=20.0, rate=20.0).stay(60.0).switch("oxygen")
        .travel(depth=5.0, minutes=40.0)
    )  # fmt: skip
    with gp.validity("ignore"):
        fine = bubbles.nuclei(dive, at=np.linspace(0.0, 101.0, 4_001))
        coarse = bubbles.nuclei(dive)
    np.testing.assert_allclose(coarse.final_radius, fine.final_radius, rtol=1e-9, atol=0.0)


@pytest.mark.parametrize("choices", [{}, {"boyle_expansion": True, "mixing": "smaller"}])
def test_every_scenario_of_a_batch_is_its_single_plan(choices: dict[str, Any]) -> None:
    depths = xr.DataArray(
        [11.0, 33.5, 92.0], dims="d", coords={"d": [11.0, 33.5, 92.0]}, attrs={"units": "msw"}
    )
    times = xr.DataArray([8.0, 25.0], dims="t", coords={"t": [8.0, 25.0]}, attrs={"units": "min"})
    gases = [("nitrox 50", 21.0)]
    model = varying_permeability(**choices)
    with gp.validity("ignore"):
        batch = ascent.plan(bottom("trimix 20/30", depths, times), gases, model)
        assert batch.stops.allowed_gradient.dims == ("d", "t", "compartment", "inert_gas")
        for d in depths.values:
            for t in times.values:
                alone = ascent.plan(bottom("trimix 20/30", float(d), float(t)), gases, model)
                here = batch.stops.sel(d=d, t=t)
                real = here.isel(stop=np.flatnonzero(here.duration.values > 0.0))
                assert real.depth.values.tolist() == alone.stops.depth.values.tolist()
                assert real.duration.values.tolist() == alone.stops.duration.values.tolist()
                assert int(here.passes) == int(alone.stops.passes)
                np.testing.assert_allclose(
                    here.allowed_gradient, alone.stops.allowed_gradient, rtol=1e-9, atol=0.0
                )
                assert float(batch.total_time.sel(d=d, t=t)) == pytest.approx(alone.total_time, rel=1e-12)


def test_breaks_go_with_nuclei() -> None:
    rules = ascent.Rules(breaks=ascent.Breaks(6, 4, "air", "1.2 bar"))
    found = ascent.plan(bottom(depth=50.0, minutes=30.0), [("oxygen", 6.0)], MODEL, rules)
    plain = ascent.plan(bottom(depth=50.0, minutes=30.0), [("oxygen", 6.0)], MODEL)
    assert found.total_time > plain.total_time


# -- What is said beside it -----------------------------------------------------------------------------


def test_the_evidence_stands_beside_every_plan() -> None:
    found = ascent.plan(bottom(), model=MODEL)
    for text in (
        EVIDENCE,
        found.stops.attrs["comment"],
        str(found),
        bubbles.nuclei(bottom()).attrs["comment"],
    ):
        assert "11 of 198" in text
        assert "3 of 192" in text
    assert found.stops.attrs["comment"].startswith(gp.quantities.CAUTION)
    assert "mixing tension" in found.stops.attrs["choices"]
    assert found.stops.attrs["provenance"] == "memory_medium"
    helium = ascent.plan(bottom("trimix 17/48"), model=MODEL)
    assert helium.stops.attrs["provenance"] == "memory_low"


def test_gradients_of_the_rules_are_not_used() -> None:
    rules = ascent.Rules(gradient_low=0.4, gradient_high=0.8)
    with pytest.warns(ValidityWarning, match="has no M-values"):
        found = ascent.plan(bottom(), model=MODEL, rules=rules)
    assert found.total_time == ascent.plan(bottom(), model=MODEL).total_time


def test_what_cannot_be() -> None:
    with pytest.raises(UnknownNameError, match="yount_hoffman_1986"):
        varying_permeability("yount_hofman_1986")
    with pytest.raises(UnknownNameError, match="tension"):
        varying_permeability(mixing="tensions")
    with pytest.raises(UnknownNameError, match="boyle_expansion"):
        varying_permeability(boyle_expansion=1)
    with pytest.raises(UnknownNameError, match="critical_volume"):
        varying_permeability(critical_volumes=1.0)
    for wrong in ({"nitrogen_radius": 0.0}, {"critical_volume": -1.0}, {"skin_compression": 0.01}):
        with pytest.raises(RangeError, match=next(iter(wrong))):
            varying_permeability(**wrong)
    with pytest.raises(ValidityError, match="exponential"):
        varying_permeability(compartments="thalmann_vval18")
    with pytest.raises(ValidityError, match="refuses"):
        ascent.plan(bottom(gp.Gas(oxygen=0.2, neon=0.3)), model=MODEL)
    with pytest.raises(ExposureError, match="no piece"):
        bubbles.nuclei(Exposure.start("air"))
    with pytest.raises(ExposureError, match="ascent_rate"):
        bubbles.first_supersaturated_depth(bottom(), 0.0)


def test_the_command_tells_the_evidence(tmp_path: Any, capsys: pytest.CaptureFixture[str]) -> None:
    """Whatever ascent is printed: the comparison, the list of one model, the page and the log of it."""
    from gasphys.__main__ import main

    file = tmp_path / "dive.csv"
    file.write_text("time_min,depth_msw,gas\n0,0,trimix 17/48\n3,56,trimix 17/48\n22,56,trimix 17/48\n")
    given = ["ascent", str(file), "--models", f"buhlmann_1995_c,{MODEL}", "--follow", MODEL]
    saved = [tmp_path / "plan.html", tmp_path / "plan.csv"]
    with gp.validity("ignore"):
        assert main([*given, "--sheet", str(saved[0]), "--csv", str(saved[1])]) in (0, None)
    printed = " ".join(capsys.readouterr().out.split())
    assert printed.count("11 of 198") == 2
    assert "Evidence against deeper stops" in printed
    for one in saved:
        assert "11 of 198" in one.read_text(encoding="utf-8")
    other = ascent.compare_ascents(bottom(), models=["buhlmann_1995_c", "workman_1965"])
    assert "11 of 198" not in str(other)
