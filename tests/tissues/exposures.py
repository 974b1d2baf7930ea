"""Random exposures for the twins: travels, stays, switches, loops."""

from __future__ import annotations

from typing import Any

import numpy as np

import gasphys as gp
from gasphys import Exposure


def random_gas(rng: np.random.Generator, gases: str) -> gp.Gas:
    """Return a mix: "air", "nitrox", "trimix" or "argon" (three inert gases)."""
    oxygen = float(rng.uniform(0.05, 0.6))
    rest = 1.0 - oxygen
    if gases == "nitrox":
        return gp.Gas(oxygen=oxygen)
    helium = float(rng.uniform(0.0, rest))
    if gases == "trimix":
        return gp.Gas(oxygen=oxygen, helium=helium)
    return gp.Gas(oxygen=oxygen, helium=helium * 0.6, argon=float(rng.uniform(0.0, rest * 0.4)))


def random_exposure(
    rng: np.random.Generator, gases: str = "trimix", pieces: int = 7, deepest: float = 70.0
) -> Exposure:
    """Return an exposure of random pieces; loops among them unless it is on air."""
    first: Any = "air" if gases == "air" else random_gas(rng, gases)
    dive = Exposure.start(first, surface_pressure=float(rng.uniform(70.0, 102.0)))
    with gp.validity("ignore"):
        for _ in range(pieces):
            kind = rng.choice(["travel", "stay", "switch", "loop"] if gases != "air" else ["travel", "stay"])
            if kind == "travel":
                dive = dive.travel(
                    depth=float(rng.uniform(0.0, deepest)), minutes=float(rng.uniform(0.05, 8.0))
                )
            elif kind == "stay":
                dive = dive.stay(float(rng.exponential(25.0) + 0.01))
            elif kind == "switch":
                dive = dive.switch(random_gas(rng, gases)).stay(float(rng.uniform(0.1, 15.0)))
            else:
                dive = dive.loop(float(rng.uniform(60.0, 160.0)), random_gas(rng, gases))
                dive = dive.travel(
                    depth=float(rng.uniform(0.0, deepest)), minutes=float(rng.uniform(0.5, 8.0))
                )
    return dive
