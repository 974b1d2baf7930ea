"""Doses at size: a course of 40 sessions and 1e5 scenarios, each in one call, as ratios in one run.

Run ``python tests/benchmarks/doses.py``; never part of pass or fail.
"""

from __future__ import annotations

import datetime
import time
from collections.abc import Callable

import numpy as np
import xarray as xr

from gasphys import Exposure
from gasphys.doses import Course, Session, course_doses, oxygen, sessions_left
from gasphys.schedules import treatment


def best(call: Callable[[], object], repeats: int = 5) -> float:
    """Return the shortest of several runs [s]."""
    found = []
    for _ in range(repeats):
        start = time.perf_counter()
        call()
        found.append(time.perf_counter() - start)
    return min(found)


def scenarios(n: int) -> Exposure:
    rng = np.random.default_rng(1)
    depth = xr.DataArray(rng.uniform(10.0, 40.0, n), dims="draw", attrs={"units": "msw"})
    minutes = xr.DataArray(rng.uniform(5.0, 60.0, n), dims="draw", attrs={"units": "min"})
    dive = Exposure.start("nitrox 32").travel(depth=depth, rate=20).stay(minutes)
    return dive.travel(depth=6, rate=9).switch("oxygen").stay(10).travel(depth=0, rate=9)


def main() -> None:
    session = treatment("clinical_2_4_atm")
    start = datetime.datetime(2042, 3, 3, 8)
    course = Course(tuple(Session(start + datetime.timedelta(days=d), session) for d in range(40)))
    whole = course.exposure()
    one = best(lambda: oxygen(session, "all"))
    print(f"one session, every measure                {1e3 * one:9.1f} ms")
    for name, call in (
        ("40 sessions joined, every measure", lambda: oxygen(whole, "all")),
        ("40 sessions, session by session", lambda: course_doses(course, "all")),
        ("40 sessions, ladders", lambda: sessions_left(course)),
    ):
        took = best(call)
        print(f"{name:<41} {1e3 * took:9.1f} ms, {took / one:5.1f} of one session")
    thousand, many = scenarios(1_000), scenarios(100_000)
    small = best(lambda: oxygen(thousand, "all"), 3)
    print(f"1e3 scenarios of {len(thousand.part)} pieces, every measure   {1e3 * small:9.1f} ms")
    large = best(lambda: oxygen(many, "all"), 2)
    ratio = f"{large / small:5.1f} for 100 times as many"
    print(f"1e5 scenarios, every measure              {1e3 * large:9.1f} ms, {ratio}")
    two = best(lambda: oxygen(many, ["uptd", "noaa_cns"]), 2)
    print(f"1e5 scenarios, two measures               {1e3 * two:9.1f} ms")


if __name__ == "__main__":
    main()
