"""Ascents of the varying-permeability model against a march by the second that shares no code with it."""

from __future__ import annotations

import os
from typing import Any

import numpy as np
import pytest

import gasphys as gp
from gasphys import Exposure, ascent, bubbles

from .oracle import Mix, Slow

#: Dives drawn: sixty with GASPHYS_LONG set.
DIVES = 60 if os.environ.get("GASPHYS_LONG") else 14

#: A few compartments for the slow one, from the fastest to the slowest: nitrogen and helium.
FEW = [(2.0, 0.75), (10.0, 3.8), (40.0, 15.0), (160.0, 60.0), (720.0, 272.0)]


def _case(draw: int) -> dict[str, Any]:
    rng = np.random.default_rng(4200 + draw)
    trimix = draw % 3 != 0
    mix = gp.Gas(
        oxygen=float(rng.uniform(0.14, 0.25)), helium=float(rng.uniform(0.1, 0.5)) if trimix else 0.0
    )
    return {
        "bottom": mix,
        "depth": float(rng.uniform(25.0, 60.0)) if draw % 4 else float(rng.uniform(90.0, 120.0)),
        "minutes": float(rng.uniform(8.0, 35.0)) if draw % 4 else float(rng.uniform(4.0, 10.0)),
        "down": float(rng.choice([10.0, 20.0, 30.0])),
        "gases": [
            (gp.Gas(oxygen=float(rng.uniform(0.35, 0.55))), float(rng.uniform(15.0, 23.0))),
            (gp.Gas(oxygen=1.0), 6.0),
        ][: int(rng.integers(0, 3))],
        "loop": draw % 5 == 1,
        "surface": float(rng.choice([101.325, 101.325, 79.5])),
        "repeat": draw % 3 == 1,
        "interval": float(rng.choice([45.0, 180.0])),
        "rules": {
            "ascent_rate": float(rng.choice([9.0, 10.0])),
            "stop_spacing": 3.0,
            "last_stop": float(rng.choice([3.0, 4.5])),
        },
        "options": {
            "crushing_offset": bool(rng.integers(0, 2)),
            "regeneration_clock": str(rng.choice(["greatest_crushing", "leaving_surface"])),
            "decompression_time": str(rng.choice(["first_supersaturated_depth", "leaving_bottom"])),
            "surface_time": str(rng.choice(["excess", "half_time"])),
            "mixing": str(rng.choice(["tension", "smaller"])),
            "tested": str(rng.choice(["on_arrival", "before_leaving"])),
            "boyle_expansion": [False, True, "every_pass"][int(rng.integers(0, 3))],
        }
        if draw % 2
        else {},
    }


def _slow(c: dict[str, Any], half: Any) -> Slow:
    o = {
        "crushing_offset": True,
        "regeneration_clock": "greatest_crushing",
        "decompression_time": "first_supersaturated_depth",
        "surface_time": "excess",
        "mixing": "tension",
        "tested": "on_arrival",
        "boyle_expansion": False,
    } | c["options"]
    return Slow(
        half=np.array(half),
        surface=c["surface"],
        offset=o["crushing_offset"],
        clock_from_surface=o["regeneration_clock"] == "leaving_surface",
        zone_start=o["decompression_time"] == "first_supersaturated_depth",
        excess=o["surface_time"] == "excess",
        smaller=o["mixing"] == "smaller",
        arrival=o["tested"] == "on_arrival",
        boyle={False: "", True: "last", "every_pass": "every"}[o["boyle_expansion"]],
        rate=c["rules"]["ascent_rate"],
        last=c["rules"]["last_stop"],
    )


@pytest.mark.parametrize("draw", range(DIVES))
def test_stop_by_stop(draw: int) -> None:
    c = _case(draw)
    model = bubbles.varying_permeability(half_times=FEW, **c["options"])
    mix = Mix(c["bottom"].nitrogen, c["bottom"].helium, 130.0 if c["loop"] else float("nan"))
    slow = _slow(c, FEW)
    slow.start()
    deep = c["surface"] + 10.0 * c["depth"]
    with gp.validity("ignore"):
        dive = Exposure.start(c["bottom"], surface_pressure=c["surface"])
        if c["loop"]:
            dive = dive.loop("1.3 bar", c["bottom"])
        if c["repeat"]:
            dive = dive.travel(depth=30.0, rate=20.0).stay(12.0).travel(depth=0.0, rate=9.0)
            dive = dive.then(c["interval"])
            dive = dive.loop("1.3 bar", c["bottom"]) if c["loop"] else dive.switch(c["bottom"])
            for minutes, p0, p1, what in (
                (1.5, c["surface"], c["surface"] + 300.0, mix),
                (12.0, c["surface"] + 300.0, c["surface"] + 300.0, mix),
                (30.0 / 9.0, c["surface"] + 300.0, c["surface"], mix),
                (c["interval"], c["surface"], c["surface"], Mix(0.79, 0.0)),
            ):
                slow.march(minutes, p0, p1, what)
        dive = dive.travel(depth=c["depth"], rate=c["down"]).stay(c["minutes"])
        slow.march(c["depth"] / c["down"], c["surface"], deep, mix)
        slow.march(c["minutes"], deep, deep, mix)
        found = bubbles.nuclei(dive, model)
        np.testing.assert_allclose(found.final.values, slow.state, rtol=1e-9, atol=1e-9)
        radius = np.array(slow.radii) - slow.deficit
        # The march misses a maximum between two seconds.
        np.testing.assert_allclose(found.final_radius.values, radius, rtol=3e-6, atol=0.0)
        ours = ascent.plan(dive, c["gases"], model, ascent.Rules(**c["rules"]))
    stops, passes = slow.plan(c["depth"], mix, [(Mix(g.nitrogen, g.helium), d) for g, d in c["gases"]])
    table = ours.stops
    found_stops = [
        (round(d, 6), m)
        for d, m in zip(table.depth.values.tolist(), table.duration.values.tolist(), strict=True)
    ]
    assert found_stops == stops
    assert int(table.passes) == passes
    assert int(table.settled) == 1
    np.testing.assert_allclose(table.allowed_gradient.values, slow.gradients, rtol=3e-6, atol=0.0)
    assert ours.total_time == pytest.approx(slow.clock, rel=1e-9)


@pytest.mark.parametrize(("depth", "minutes"), [(45.5, 22.0), (52.7, 20.0)])
def test_of_passes_that_run_in_a_circle_the_longest_is_given(depth: float, minutes: float) -> None:
    model = bubbles.varying_permeability()
    gases = [(gp.Gas.parse("nitrox 48"), 20.0), (gp.Gas(oxygen=1.0), 6.0)]
    dive = Exposure.start("trimix 17/48").travel(depth=depth, rate=20.0).stay(minutes)
    with pytest.warns(gp.ValidityWarning, match="1 of 1 ascents never settle"):
        ours = ascent.plan(dive, gases, model).stops
    slow = Slow(half=np.array(model.tissues.half_time))
    slow.start()
    mix, deep = Mix(0.35, 0.48), 101.325 + 10.0 * depth
    slow.march(depth / 20.0, 101.325, deep, mix)
    slow.march(minutes, deep, deep, mix)
    stops, passes = slow.plan(depth, mix, [(Mix(g.nitrogen, g.helium), d) for g, d in gases])
    assert list(zip(ours.depth.values.tolist(), ours.duration.values.tolist(), strict=True)) == stops
    assert int(ours.passes) == passes
    assert int(ours.settled) == 0
