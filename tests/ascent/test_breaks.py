"""Breaks on another gas, against a planner of seconds that takes them by the rule; measured mixes."""

from __future__ import annotations

import os
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, tissues
from gasphys.errors import NotReachableError, RangeError, UnknownNameError

from .oracle import Oracle

#: Plans drawn: forty with GASPHYS_LONG set.
PLANS = 40 if os.environ.get("GASPHYS_LONG") else 6


@dataclass
class Breaking(Oracle):
    """The planner of seconds with a clock of the uninterrupted minutes at high PO2."""

    every: float = 20.0
    pause: float = 5.0
    rest: tuple[float, float] = (0.79, 0.0)
    from_po2: float = 140.0
    since: float = 0.0
    left: float = 0.0
    climbing: bool = False

    def breathe(self, minutes: float, begin: float, end: float, mix: tuple[float, float]) -> None:
        oxygen = 1.0 - mix[0] - mix[1]
        high = oxygen * end >= self.from_po2 - 1e-6
        if not self.climbing or begin != end:
            super().breathe(minutes, begin, end, mix)
            if self.climbing:
                self.since = self.since + minutes if high else 0.0
                self.left = 0.0
            return
        done = 0.0
        while done < minutes - 1e-9:
            if self.left <= 1e-9 and high and self.since >= self.every - 1e-9:
                self.left, self.since = self.pause, 0.0
            if self.left > 1e-9:
                t = min(self.left, minutes - done)
                super().breathe(t, begin, end, self.rest)
                self.left -= t
            else:
                t = min(self.every - self.since, minutes - done) if high else minutes - done
                super().breathe(t, begin, end, mix)
                self.since = self.since + t if high else 0.0
            done += t

    def _may_go(self, *args: Any) -> bool:
        kept = self.since, self.left
        good = super()._may_go(*args)
        self.since, self.left = kept
        return good


@pytest.mark.parametrize("draw", range(PLANS))
def test_counted_breaks_stop_by_stop(draw: int) -> None:
    rng = np.random.default_rng(50 + draw)
    one = tissues.load(str(rng.choice(["buhlmann_1995_a", "buhlmann_1995_c"])))
    gas = gp.Gas(oxygen=float(rng.uniform(0.14, 0.22)), helium=float(rng.uniform(0.1, 0.5)))
    depth, minutes = float(rng.uniform(45.0, 70.0)), float(rng.uniform(20.0, 40.0))
    gases = [(gp.Gas(oxygen=0.5), 21.0), (gp.Gas(oxygen=1.0), 6.0)]
    every, pause = float(rng.uniform(4.0, 12.0)), float(rng.uniform(1.5, 5.0))
    rule = ascent.Breaks(every, pause, "air", 120.0)
    bottom = Exposure.start(gas).travel(depth=depth, rate=20.0).stay(minutes)
    found = ascent.plan(bottom, gases, one, ascent.Rules(breaks=rule))
    oracle = Breaking(
        n2=[(float(one.half_time[i, 0]), float(one.a[i, 0]), float(one.b[i, 0])) for i in range(16)],
        he=[(float(one.half_time[i, 1]), float(one.a[i, 1]), float(one.b[i, 1])) for i in range(16)],
        vapor=6.27,
        surface=101.325,
        rate=9.0,
        spacing=3.0,
        last=3.0,
        low=1.0,
        high=1.0,
        on_arrival=True,
        every=every,
        pause=pause,
        from_po2=120.0,
    )
    oracle.start()
    mix, deep = (gas.nitrogen, gas.helium), 101.325 + 10.0 * depth
    oracle.breathe(depth / 20.0, 101.325, deep, mix)
    oracle.breathe(minutes, deep, deep, mix)
    oracle.climbing = True
    stops = oracle.climb(depth, mix, [((g.nitrogen, g.helium), d) for g, d in gases])
    ours = list(zip(found.stops.depth.values.tolist(), found.stops.duration.values.tolist(), strict=True))
    assert [(round(d, 6), m) for d, m in ours] == [(round(d, 6), m) for d, m in stops]
    names = [found.exposure.gas_name(k) for k in range(len(found.exposure.part))]
    assert "air" in names
    again = tissues.tensions(found.exposure, one).final.values
    np.testing.assert_allclose(again, np.array(oracle.tensions), rtol=1e-8, atol=1e-8)


AIR = Exposure.start("air").travel(depth=50.0, rate=20.0).stay(30.0)
OXYGEN = [("oxygen", 6.0)]


def _rule(**more: Any) -> ascent.Rules:
    return ascent.Rules(breaks=ascent.Breaks(10.0, 5.0, "air", "1.2 bar", **more))


def test_breaks_on_top_lengthen_the_stop_by_themselves() -> None:
    plain = ascent.plan(AIR, OXYGEN)
    counted, on_top = (
        ascent.plan(AIR, OXYGEN, rules=_rule()),
        ascent.plan(AIR, OXYGEN, rules=_rule(counted=False)),
    )
    assert plain.stops.duration.values.tolist() == [4.0, 7.0, 7.0, 12.0]
    # 7 min at 6 msw and a third of a minute on the way: the break falls due 2.67 min into the last stop.
    assert on_top.stops.duration.values.tolist() == [4.0, 7.0, 7.0, 17.0]
    assert plain.total_time < counted.total_time < on_top.total_time
    times = on_top.exposure.pieces().times
    pauses = [
        (times[k], times[k + 1])
        for k in range(len(times) - 1)
        if on_top.exposure.gas_name(k) == "air" and times[k] > float(on_top.stops.leave_time[-2])
    ]
    begin = float(on_top.stops.leave_time[-1]) - 17.0 + 10.0 - 7.0 - 1.0 / 3.0
    assert pauses == [(pytest.approx(begin), pytest.approx(begin + 5.0))]


def test_not_rounded() -> None:
    for more in ({}, {"counted": False}):
        rules = ascent.Rules(breaks=ascent.Breaks(10.0, 5.0, "air", 120.0, **more), whole_minutes=False)
        exact, whole = ascent.plan(AIR, OXYGEN, rules=rules), ascent.plan(AIR, OXYGEN, rules=_rule(**more))
        for plan in (exact, whole):
            share = tissues.tensions(plan.exposure).limit_fraction
            assert float(share.max()) <= 1.0 + 1e-9
        assert exact.total_time < whole.total_time


def test_no_break_where_none_falls_due() -> None:
    seldom = ascent.Rules(breaks=ascent.Breaks(200.0, 5.0, "air", 120.0))
    low = ascent.Rules(breaks=ascent.Breaks(1.0, 5.0, "air", 200.0))
    plain = ascent.plan(AIR, OXYGEN)
    for rules in (seldom, low):
        found = ascent.plan(AIR, OXYGEN, rules=rules)
        xr.testing.assert_equal(found.stops, plain.stops)


def test_lockstep_takes_each_its_own_breaks() -> None:
    stay = xr.DataArray([20.0, 30.0, 45.0], dims="stay", attrs={"units": "min"})
    many = ascent.plan(Exposure.start("air").travel(depth=50.0, rate=20.0).stay(stay), OXYGEN, rules=_rule())
    for k, minutes in enumerate(stay.values):
        one = ascent.plan(
            Exposure.start("air").travel(depth=50.0, rate=20.0).stay(minutes), OXYGEN, rules=_rule()
        )
        assert float(many.ascent_time[k]) == pytest.approx(one.ascent_time, rel=1e-12)
        mine = many.stops.isel(stay=k)
        real = mine.duration.values > 0.0
        assert mine.duration.values[real].tolist() == one.stops.duration.values.tolist()


def test_minutes_on_a_loop_count_by_its_setpoint() -> None:
    loop = Exposure.start("air").loop(130.0, "trimix 10/50").travel(depth=50.0, minutes=3.0).stay(30.0)
    plain = ascent.plan(loop)
    held = float(plain.stops.duration.sum())
    for limit, breaks in ((129.0, True), (131.0, False)):
        rules = ascent.Rules(breaks=ascent.Breaks(12.0, 4.0, "nitrox 40", limit))
        found = ascent.plan(loop, rules=rules)
        names = [found.exposure.gas_name(k) for k in range(len(found.exposure.part))]
        assert ("nitrox 40" in names) is breaks
    assert held > 24.0


def test_a_break_that_lets_nothing_out_is_an_explained_error() -> None:
    bottom = Exposure.start("air").travel(depth=60.0, rate=20.0).stay(60.0)
    rules = ascent.Rules(breaks=ascent.Breaks(1.0, 60.0, "nitrox 1", 100.0), last_stop=9.0)
    with pytest.raises(
        NotReachableError, match=r"with a break of 60 min on nitrox 1 after 1 min .* within 3200 min"
    ):
        ascent.plan(bottom, [("oxygen", 9.0)], rules=rules)


@pytest.mark.parametrize(
    ("values", "match"),
    [
        ((0.0, 5.0, "air", 140.0), "every = 0.0 min must be positive"),
        ((10.0, float("nan"), "air", 140.0), "minutes = nan min must be positive"),
        ((10.0, 5.0, "air", -1.0), "breathing_gas_po2 = -1"),
    ],
)
def test_impossible_rules(values: tuple[Any, ...], match: str) -> None:
    with pytest.raises(RangeError, match=match):
        ascent.Breaks(*values)


# -- Measured in place of planned mixes -------------------------------------------------------------

TRIMIX = Exposure.start("trimix 17/48").travel(depth=56.0, rate=20.0).stay(19.2)
GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]


def test_measured_mixes_are_those_breathed() -> None:
    found = ascent.plan(
        TRIMIX, GASES, measured={"trimix 17/48": "trimix 16.4/47", "nitrox 48": "nitrox 45.5"}
    )
    by_hand = Exposure.start("trimix 16.4/47").travel(depth=56.0, rate=20.0).stay(19.2)
    other = ascent.plan(by_hand, [("nitrox 45.5", 20.0), ("oxygen", 6.0)])
    assert found.total_time == other.total_time
    np.testing.assert_array_equal(found.exposure.fractions["O2"], other.exposure.fractions["O2"])
    notes = " ".join(found.exposure.history)
    assert "trimix 16.4/47 as measured in place of the planned trimix 17/48" in notes
    assert "nitrox 45.5 as measured in place of the planned nitrox 48" in notes


def test_a_po2_limit_follows_the_measured_mix() -> None:
    found = ascent.plan(
        TRIMIX, [("nitrox 48", "1.5 bar"), ("oxygen", 6.0)], measured={"nitrox 48": "nitrox 40"}
    )
    pressure, gas = found.exposure.columns["start_pressure"], found.exposure.fractions["O2"]
    assert pressure[np.isclose(gas, 0.40)].max() == pytest.approx(150.0 / 0.40)


def test_measured_diluent_lost_gas_and_unknown_mix() -> None:
    loop = ascent.Loop("1.3 bar", "trimix 10/60")
    one = ascent.plan(TRIMIX, [(loop, 56.0)], measured={"trimix 10/60": "trimix 12/58"})
    assert "loop at 130 kPa, diluent trimix 12/58" in one.stops.gas.values
    lost = ascent.plan(TRIMIX, GASES, without="nitrox 48", measured={"nitrox 48": "nitrox 45"})
    assert "nitrox 45" not in lost.stops.gas.values
    with pytest.raises(
        UnknownNameError, match="unknown planned mix 'nitrox 36'; valid: nitrox 48, oxygen, trimix 17/48"
    ):
        ascent.plan(TRIMIX, GASES, measured={"nitrox 36": "nitrox 35"})
