"""Gas exchange at size: a treatment second by second, as ratios to its kernel, in one run.

Run ``python tests/benchmarks/oxygenation.py``; never part of pass or fail.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from gasphys import Person, blood, lungs
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.gas_exchange import arterial_po2_from_ratio, breath_hold, carboxyhemoglobin, oxygenation
from gasphys.schedules import treatment


def best(call: Callable[[], object], repeats: int = 3) -> float:
    """Return the shortest of several runs [s of the processor]."""
    found = []
    for _ in range(repeats):
        start = time.process_time()
        call()
        found.append(time.process_time() - start)
    return min(found)


def main() -> None:
    session = treatment("usn_6")
    times = np.arange(0.0, session.duration, 1.0 / 60.0)
    ds = oxygenation(session, Person(), at=times)
    pressure, fio2 = ds.ambient_pressure.values, ds.fio2.values
    content, co2 = ds.mixed_venous_o2_content.values, ds.mixed_venous_co2_content.values

    def arterial() -> object:
        alveolar = lungs.alveolar_po2.raw(pressure, fio2, 5.33, 0.8, 0.0, float(BODY_VAPOR_PRESSURE))
        po2 = arterial_po2_from_ratio.raw(alveolar, 0.82)
        return blood.o2_content.pick(model="severinghaus_1979").raw(po2, 15.0, 7.4, 37.0)

    def venous() -> object:
        return blood.mixed_venous_ph.raw(co2, ds.base_excess.values, 15.0, content, 0.0)

    kernel = best(arterial) + 3.0 * best(venous)  # nominal and both ends of the band
    print(f"{len(ds.time)} instants, kernel                {1e3 * kernel:9.1f} ms")
    for name, call in (
        ("exposure alone", lambda: session.to_dataset(at=times)),
        ("oxygenation, ratio", lambda: oxygenation(session, Person(), at=times)),
        ("oxygenation, both", lambda: oxygenation(session, Person(), "both", at=times)),
        ("carboxyhemoglobin", lambda: carboxyhemoglobin(session, Person(cohb_fraction=0.3))),
    ):
        took = best(call)
        print(f"{name:<36} {1e3 * took:9.1f} ms, {took / kernel:5.2f} of the kernel")
    from gasphys import Exposure

    dive = Exposure.start("air").travel(depth=24, minutes=0.5).stay(0.4).travel(depth=0, minutes=0.5)
    print(f"one breath-hold                      {1e3 * best(lambda: breath_hold(dive)):9.1f} ms")


if __name__ == "__main__":
    main()
