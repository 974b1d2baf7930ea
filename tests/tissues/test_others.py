"""Counterdiffusion at switches, the oxygen window, and prebreathe."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from scipy.integrate import quad

import gasphys as gp
from gasphys import Exposure, tissues
from gasphys.errors import ExposureError, RangeError, ValidityError

from .printed import read

PSI = 6.894757293168361


def test_a_switch_raises_the_sum_as_a_fine_run_shows() -> None:
    dive = Exposure.start("air").travel(depth=30, rate=20).stay(60).switch("heliox 21/79").stay(400)
    found = tissues.counterdiffusion(dive)
    assert found.sizes["switch"] == 1
    assert float(found.switch_time[0]) == 61.5
    ds = tissues.tensions(dive, at=np.linspace(61.5, 461.5, 8001))
    total = ds.tissue_pressure.sum("inert_gas").sel(time=slice(61.5, None))
    rise = total.max("time") - total.isel(time=0)
    fast = found.rise_time.isel(switch=0).values < 400.0  # the run is long enough for these
    assert fast.sum() > 10
    np.testing.assert_allclose(found.rise.isel(switch=0).values[fast], rise[fast], rtol=1e-5, atol=1e-3)
    when = total.time[total.argmax("time")].values - 61.5
    np.testing.assert_allclose(found.rise_time.isel(switch=0).values[fast], when[fast], rtol=0.0, atol=0.06)
    slope = (total.isel(time=1) - total.isel(time=0)) / 0.05
    np.testing.assert_allclose(found.total_rate.isel(switch=0), slope, rtol=0.02, atol=0.02)
    np.testing.assert_allclose(found.total_tissue_pressure.isel(switch=0), total.isel(time=0), rtol=1e-12)
    # The inspired sum is the same before and after: 0.79 of what vapor leaves.
    change = found.inert_pressure_change.isel(switch=0)
    assert float(change.sum()) == pytest.approx(0.0, abs=1e-9)
    assert float(change.sel(inert_gas="He")) == pytest.approx(0.79 * (401.325 - 6.27))


def test_the_other_way_the_sum_only_falls() -> None:
    dive = Exposure.start("heliox 21/79").travel(depth=30, rate=20).stay(2000).switch("air").stay(1)
    found = tissues.counterdiffusion(dive)
    assert (found.total_rate < 0.0).all()
    assert (found.rise == 0.0).all()
    assert (found.rise_time == 0.0).all()


def test_what_is_and_is_not_a_switch() -> None:
    same = Exposure.start("air").stay(1).switch("air").stay(1)
    assert tissues.counterdiffusion(same).sizes["switch"] == 0
    loop = (
        Exposure.start("air")
        .travel(depth=40, minutes=4)
        .loop("1.3 bar", "trimix 10/60")
        .stay(5)
        .loop("1 bar", "trimix 10/60")
        .stay(5)
    )
    found = tissues.counterdiffusion(loop)
    assert found.switch_time.values.tolist() == [4.0, 9.0]
    for wrong in ("us_navy_1957", "thalmann_vval18", "kidd_stubbs_1983"):
        with pytest.raises(ValidityError, match="two inert gases"):
            tissues.counterdiffusion(same, wrong)
    with pytest.raises(ExposureError, match="no piece"):
        tissues.counterdiffusion(Exposure.start("air"))


def test_window_along_an_exposure() -> None:
    """Air at 760, 1520, 2280 mmHg: 63.7, 223.3, 382.9 mmHg [computed]; oxygen: all but vapor and veins."""
    mmhg = 0.133322387415
    dive = (
        Exposure.start("air").stay(1).travel(pressure=202.65, minutes=1).travel(pressure=303.975, minutes=1)
    )
    found = tissues.window(dive)
    for time, expected in ((0.0, 63.7), (2.0, 223.3), (3.0, 382.9)):
        value = float(found.oxygen_window.sel(time=time))
        assert value / mmhg == pytest.approx(expected, abs=0.05)
        again = gp.explain(found, "oxygen_window", time=time)
        assert again.value == pytest.approx(value, rel=1e-12)
    oxygen = tissues.window(Exposure.start("oxygen").stay(1)).oxygen_window[0]
    assert float(oxygen) / mmhg == pytest.approx(760.0 - 47.0 - 86.0, abs=2e-4)


def test_prebreathe_as_printed() -> None:
    for row in read("nasa_prebreathe"):
        minutes = {"240 min O2 at 14.7": 240.0, "210 min O2": 210.0}.get(row["steps"], 0.0)
        if row["PN2_start_psia"] == "":
            cabin = Exposure.start(gp.Gas(oxygen=0.34), pressure="8.2 psi").stay(20000.0)
            found = tissues.prebreathe(cabin, "4.3 psi", initial="11.6 psi")
        else:
            oxygen = Exposure.start("oxygen").stay(max(minutes, 1e-9))
            found = tissues.prebreathe(oxygen, "4.3 psi", initial=f"{row['PN2_start_psia']} psi")
        last = found.isel(time=-1)
        assert float(last.tissue_pressure) / PSI == pytest.approx(float(row["PN2_final_psia"]), abs=0.0051)
        assert float(last.supersaturation_ratio) == pytest.approx(float(row["ratio_R"]), abs=0.0051)
        assert gp.explain(found, "supersaturation_ratio", time=float(last.time)).value == pytest.approx(
            float(last.supersaturation_ratio)
        )


def test_work_speeds_prebreathe_and_the_rate_is_summed_not_averaged() -> None:
    mass = 80.0

    def uptake(each: float) -> float:
        return each * mass / 1000.0

    bout = Exposure.start("oxygen", o2_uptake_stpd=uptake(3.5)).stay(60)
    bout = bout.work(o2_uptake_stpd=uptake(25.0)).stay(10).work(o2_uptake_stpd=uptake(3.5)).stay(80)
    worked = tissues.prebreathe(bout, body_mass=mass)
    rest = tissues.prebreathe(bout)
    assert float(worked.tissue_pressure[-1]) < float(rest.tissue_pressure[-1])

    def rate(minute: float) -> float:
        v = 25.0 if 60.0 <= minute < 70.0 else 3.5
        return float((1.0 - np.exp(-0.03 * v)) / 51.937)

    total = sum(quad(rate, a, b)[0] for a, b in ((0.0, 60.0), (60.0, 70.0), (70.0, 150.0)))
    assert float(worked.tissue_pressure[-1]) == pytest.approx(0.79 * 101.325 * np.exp(-total), rel=1e-9)
    # Nitrogen comes back on air; the clock of time view and boundaries agree.
    back = tissues.prebreathe(bout.switch("air").stay(30), at=[165.0])
    assert (
        float(back.tissue_pressure[-1])
        > float(back.tissue_pressure.sel(time=165.0))
        > float(back.tissue_pressure.sel(time=150.0))
    )


def test_prebreathe_refuses() -> None:
    with pytest.raises(ValidityError, match="He"):
        tissues.prebreathe(Exposure.start("heliox 20/80").stay(1))
    with pytest.raises(RangeError, match="body_mass"):
        tissues.prebreathe(Exposure.start("oxygen").stay(1), body_mass=0.0)
    with pytest.raises(RangeError, match="suit_pressure"):
        tissues.prebreathe(Exposure.start("oxygen").stay(1), 0.3)
    depth = xr.DataArray([1.0, 2.0], dims="d", attrs={"units": "msw"})
    for f in (tissues.prebreathe, tissues.counterdiffusion):
        with pytest.raises(ExposureError, match="one scenario"):
            f(Exposure.start("oxygen").travel(depth=depth, minutes=1.0))
