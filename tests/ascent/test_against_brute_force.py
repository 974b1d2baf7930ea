"""The planner against one that steps by the second and shares no code with it, stop by stop."""

from __future__ import annotations

import os
from typing import Any

import numpy as np
import pytest

import gasphys as gp
from gasphys import Exposure, ascent, tissues
from gasphys.errors import NotReachableError

from .oracle import Oracle

#: Plans drawn: a hundred with GASPHYS_LONG set.
PLANS = 100 if os.environ.get("GASPHYS_LONG") else 12


def _case(draw: int) -> dict[str, Any]:
    rng = np.random.default_rng(1000 + draw)
    oxygen = float(rng.uniform(0.12, 0.24))
    helium = float(rng.uniform(0.1, 0.55))
    low = float(rng.uniform(0.35, 1.0))
    return {
        "model": str(rng.choice(["buhlmann_1995_a", "buhlmann_1995_b", "buhlmann_1995_c"])),
        "bottom": gp.Gas(oxygen=oxygen, helium=helium),
        "depth": float(rng.uniform(24.0, 75.0)),
        "minutes": float(rng.uniform(8.0, 45.0)),
        "gases": [
            (gp.Gas(oxygen=float(rng.uniform(0.35, 0.55))), float(rng.uniform(15.0, 23.0))),
            (gp.Gas(oxygen=1.0), 6.0),
        ][: int(rng.integers(0, 3))],
        "surface": float(rng.choice([101.325, 84.0])),
        "rules": {
            "ascent_rate": float(rng.choice([3.0, 9.0, 10.0])),
            "stop_spacing": 3.0,
            "last_stop": float(rng.choice([3.0, 6.0])),
            "gradient_low": low,
            "gradient_high": float(rng.uniform(max(low, 0.6), 1.0)),
        },
    }


@pytest.mark.parametrize("draw", range(PLANS))
def test_stop_by_stop(draw: int) -> None:
    c = _case(draw)
    one = tissues.load(c["model"])
    rules = c["rules"]
    with gp.validity("ignore"):
        bottom = Exposure.start(c["bottom"], surface_pressure=c["surface"])
        bottom = bottom.travel(depth=c["depth"], rate=20.0).stay(c["minutes"])
        try:
            ours = ascent.plan(bottom, c["gases"], one, ascent.Rules(**rules))
        except NotReachableError:
            ours = None
    oracle = Oracle(
        n2=[(float(one.half_time[i, 0]), float(one.a[i, 0]), float(one.b[i, 0])) for i in range(16)],
        he=[(float(one.half_time[i, 1]), float(one.a[i, 1]), float(one.b[i, 1])) for i in range(16)],
        vapor=6.27,
        surface=c["surface"],
        rate=rules["ascent_rate"],
        spacing=rules["stop_spacing"],
        last=rules["last_stop"],
        low=rules["gradient_low"],
        high=rules["gradient_high"],
        on_arrival="on_arrival" in one.tested,
    )
    gases = [((g.nitrogen, g.helium), d) for g, d in c["gases"]]
    oracle.start()
    mix = (c["bottom"].nitrogen, c["bottom"].helium)
    deep = c["surface"] + 10.0 * c["depth"]
    oracle.breathe(c["depth"] / 20.0, c["surface"], deep, mix)
    oracle.breathe(c["minutes"], deep, deep, mix)
    if ours is None:
        # Even staying at the last stop for ever would not allow the surface.
        there = c["surface"] + 10.0 * rules["last_stop"] - 6.27
        last = oracle.mix(rules["last_stop"], mix, gases)
        oracle.tensions = [(there * last[0], there * last[1])] * 16
        assert not oracle.allowed(c["surface"], rules["gradient_high"])
        return
    stops = oracle.climb(c["depth"], mix, gases)
    found = list(zip(ours.stops.depth.values.tolist(), ours.stops.duration.values.tolist(), strict=True))
    assert [(round(d, 6), m) for d, m in found] == [(round(d, 6), m) for d, m in stops]
    assert ours.total_time == pytest.approx(oracle.clock, rel=1e-9)
    again = tissues.tensions(ours.exposure, one).final.values
    np.testing.assert_allclose(again, np.array(oracle.tensions), rtol=1e-8, atol=1e-8)
