"""Inverse O2 content of a million values against a brentq loop on the bare float body.

Run it by hand: ``python tests/benchmarks/content_inverse.py``. It prints the ratio of the times and
the largest difference of the results, and decides nothing. Times are of the processor: what else the
machine does leaves the ratio alone.
"""

from __future__ import annotations

import time
import timeit

import numpy as np
from scipy.optimize import brentq

import gasphys as gp
from gasphys import blood

COUNT, LOOPED = 1_000_000, 5_000


def missing(po2, wanted, bare, rest):
    """Content less the wanted content, by the bare float body."""
    return bare(po2, *rest) - wanted


def main() -> None:
    """Print one line a curve."""
    mmhg = gp.convert(1.0, "mmHg", "kPa")
    rng = np.random.default_rng(7)
    for model in blood.o2_content.registry:
        forward = blood.o2_content.pick(model=model)
        rest = [a.default for a in forward.arguments[1:]]
        bare = forward._spec.scalar
        low = 10.001 if model == "kelman_1966" else 0.1
        po2 = mmhg * np.where(
            rng.random(COUNT) < 0.5,
            np.exp(rng.uniform(np.log(low), np.log(3000.0), COUNT)),
            rng.uniform(low, 3000.0, COUNT),
        )
        content = forward.raw(po2, *rest)
        with gp.validity("ignore"):
            ours = min(
                timeit.repeat(
                    lambda c=content, m=model: blood.po2_at_content(c, model=m),
                    timer=time.process_time,
                    number=1,
                    repeat=3,
                )
            )
            found = blood.po2_at_content(content[:LOOPED], model=model)
        looped = np.empty(LOOPED)
        start = time.process_time()
        for n, wanted in enumerate(content[:LOOPED].tolist()):
            looped[n] = brentq(missing, low * mmhg, 500.0, args=(wanted, bare, rest), xtol=1e-12)
        loop = (time.process_time() - start) / LOOPED * COUNT
        difference = np.max(np.abs(looped / found - 1.0))
        print(
            f"{model:28s} {1e3 * ours:6.1f} ms for 1e6, brentq loop {loop:5.1f} s, ratio {loop / ours:5.0f}, "
            f"largest relative difference {difference:.0e}"
        )


if __name__ == "__main__":
    main()
