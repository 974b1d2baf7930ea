"""A slow planner in steps of one second: everything written out again, only numbers shared."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

STEP = 1.0 / 60.0


@dataclass
class Oracle:
    """One ascent by weighted M-values of two gases; depths in msw, pressures in kPa."""

    n2: list[tuple[float, float, float]]
    he: list[tuple[float, float, float]]
    vapor: float
    surface: float
    rate: float
    spacing: float
    last: float
    low: float
    high: float
    on_arrival: bool
    tensions: list[tuple[float, float]] = field(default_factory=list)
    clock: float = 0.0

    def start(self) -> None:
        """Saturate with air at the surface."""
        self.tensions = [(0.79 * (self.surface - self.vapor), 0.0) for _ in self.n2]

    def breathe(self, minutes: float, begin: float, end: float, mix: tuple[float, float]) -> None:
        """Follow a straight line of pressure in steps of a second, the last one shorter."""
        done = 0.0
        while done < minutes - 1e-12:
            t = min(STEP, minutes - done)
            p0 = begin + (end - begin) * done / minutes
            p1 = begin + (end - begin) * (done + t) / minutes
            self.tensions = [
                tuple(  # type: ignore[misc]
                    self._second(p, f * (p0 - self.vapor), f * (p1 - self.vapor), t, half)
                    for p, f, half in zip(pair, mix, (self.n2[c][0], self.he[c][0]), strict=True)
                )
                for c, pair in enumerate(self.tensions)
            ]
            done += t
        self.clock += minutes

    @staticmethod
    def _second(p: float, a0: float, a1: float, t: float, half: float) -> float:
        k = math.log(2.0) / half
        rate = (a1 - a0) / t
        return a0 + rate * (t - 1.0 / k) - (a0 - p - rate / k) * math.exp(-k * t)

    def allowed(self, pressure: float, gradient: float) -> bool:
        """Whether every compartment tolerates a pressure."""
        for c, (n2, he) in enumerate(self.tensions):
            total = n2 + he
            a = (self.n2[c][1] * n2 + self.he[c][1] * he) / total
            b = (self.n2[c][2] * n2 + self.he[c][2] * he) / total
            limit = a + pressure / b
            if total > pressure + gradient * (limit - pressure) + 1e-7:
                return False
        return True

    def climb(
        self, depth: float, bottom: tuple[float, float], gases: list[tuple[tuple[float, float], float]]
    ) -> list[tuple[float, float]]:
        """Return the stops as (depth, minutes), deepest first."""
        stops: list[tuple[float, float]] = []
        first: float | None = None
        if self._surface_at_once(depth, bottom, gases):
            self._travel(depth, 0.0, bottom, gases)
            return stops
        while depth > 0.0:
            target = 0.0
            n = 0
            while self.last + n * self.spacing < depth - 1e-9:
                target = self.last + n * self.spacing
                n += 1
            if first is None and not self._may_go(depth, target, self.low, bottom, gases):
                first = depth
            if first is not None:
                g = self.high + (self.low - self.high) * min(target / first, 1.0)
                minutes = 0
                while not self._may_go(depth, target, g, bottom, gases):
                    here = self.surface + 10.0 * depth
                    self.breathe(1.0, here, here, self.mix(depth, bottom, gases))
                    minutes += 1
                if minutes:
                    stops.append((depth, float(minutes)))
            self._travel(depth, target, bottom, gases)
            depth = target
        return stops

    def _may_go(
        self,
        depth: float,
        target: float,
        g: float,
        bottom: tuple[float, float],
        gases: list[tuple[tuple[float, float], float]],
    ) -> bool:
        there = self.surface + 10.0 * target
        if not self.allowed(there, g):
            return False
        if not self.on_arrival:
            return True
        kept, clock = self.tensions, self.clock
        self._travel(depth, target, bottom, gases)
        good = self.allowed(there, g)
        self.tensions, self.clock = kept, clock
        return good

    def _surface_at_once(
        self, depth: float, bottom: tuple[float, float], gases: list[tuple[tuple[float, float], float]]
    ) -> bool:
        return self._may_go(depth, 0.0, self.high, bottom, gases)

    @staticmethod
    def mix(
        depth: float, bottom: tuple[float, float], gases: list[tuple[tuple[float, float], float]]
    ) -> tuple[float, float]:
        """Return N2 and He of the listed gas with the shallowest permitted depth, or of the bottom gas."""
        usable = [(deepest, mix) for mix, deepest in gases if deepest >= depth - 1e-9]
        return min(usable)[1] if usable else bottom

    def _travel(
        self,
        depth: float,
        target: float,
        bottom: tuple[float, float],
        gases: list[tuple[tuple[float, float], float]],
    ) -> None:
        edges = sorted({d for _, d in gases if target < d < depth} | {target}, reverse=True)
        for edge in edges:
            mix = self.mix(0.5 * (depth + edge), bottom, gases)
            self.breathe(
                (depth - edge) / self.rate, self.surface + 10.0 * depth, self.surface + 10.0 * edge, mix
            )
            depth = edge
