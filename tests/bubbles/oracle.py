"""A slow varying-permeability planner in steps of one second: everything written out again.

Shares only numbers with the package: half-times and constants as the reference gives them. Pressures in kPa,
radii in um, depths in msw, time in minutes.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.optimize import brentq

Array = NDArray[np.float64]

SECOND = 1.0 / 60.0
GAMMA, GAMMA_C = 17.9, 257.0  # dyn/cm: 1 dyn/cm over 1 um is 1 kPa
SKIN = 2.0 * (GAMMA_C - GAMMA)
HEALS = 20160.0
VAPOR = 47.0 * 0.133322387415


@dataclass
class Mix:
    """What is breathed: fractions of N2 and He, and a set-point or none."""

    n2: float
    he: float
    setpoint: float = math.nan

    def inert(self, p: float) -> tuple[float, float]:
        """Return alveolar pressures."""
        if math.isnan(self.setpoint):
            left = max(p - VAPOR, 0.0)
            return left * self.n2, left * self.he
        left = max(p - VAPOR - min(self.setpoint, p), 0.0)
        whole = self.n2 + self.he
        return left * self.n2 / whole, left * self.he / whole


@dataclass
class Slow:
    """One diver: tissues, nuclei, and a plan."""

    half: Array  # (compartment, 2)
    surface: float = 101.325
    radii: tuple[float, float] = (0.8, 0.7)
    lam: float = 7500.0 * 101.325 / 33.0
    onset: float = 8.2 * 101.325
    other: float = 102.0 * 0.133322387415
    offset: bool = True
    clock_from_surface: bool = False
    zone_start: bool = True
    excess: bool = True
    smaller: bool = False
    arrival: bool = True
    boyle: str = ""  # "", "last" or "every"
    rate: float = 9.0
    spacing: float = 3.0
    last: float = 3.0
    state: Array = field(default_factory=lambda: np.zeros(0))
    clock: float = 0.0

    def start(self) -> None:
        """Saturate with air, nuclei uncrushed."""
        n = len(self.half)
        self.state = np.zeros((n, 2))
        self.state[:, 0] = 0.79 * (self.surface - VAPOR)
        self.rest = self.surface - self.tension() if self.offset else np.zeros(n)
        self.deficit = np.zeros((n, 2))
        self.shut: list[tuple[float, float] | None] = [None] * n
        self.under = 0.0
        self.watch = True

    def tension(self) -> Array:
        """Return the tension of all gases."""
        return np.asarray(self.state.sum(axis=1) + self.other)

    # -- Marching ------------------------------------------------------------------------------

    def _after(self, t: float, p0: float, p1: float, mix: Mix) -> Array:
        """Return the tissues after a piece: the ramp solution, or its limit for short pieces."""
        k = math.log(2.0) / self.half
        a0, a1 = (np.array(mix.inert(p)) for p in (p0, p1))
        if t == 0.0:
            return self.state.copy()
        r = (a1 - a0) / t
        return np.asarray(a0 + r * (t - 1.0 / k) - (a0 - self.state - r / k) * np.exp(-k * t))

    def march(self, minutes: float, p0: float, p1: float, mix: Mix) -> None:
        """Go a second at a time; cut where a loop begins to hold inert gas."""
        if minutes == 0.0:
            return
        kink = mix.setpoint + VAPOR
        if (p0 - kink) * (p1 - kink) < 0.0:
            part = minutes * (kink - p0) / (p1 - p0)
            self._march(part, p0, kink, mix)
            self._march(minutes - part, kink, p1, mix)
        else:
            self._march(minutes, p0, p1, mix)

    def _march(self, minutes: float, p0: float, p1: float, mix: Mix) -> None:
        if p0 <= self.surface * (1 + 1e-9):
            self.under = 0.0
        n = max(1, math.ceil(minutes / SECOND - 1e-9))
        for j in range(n):
            t0, t1 = j * SECOND, min((j + 1) * SECOND, minutes)
            q0, q1 = (p0 + (p1 - p0) * t / minutes for t in (t0, t1))
            before = self.state
            self.state = self._after(t1 - t0, q0, q1, mix)
            if self.watch:
                self._nuclei(before, t1 - t0, q0, q1, mix)
        self.clock += minutes

    def _nuclei(self, before: Array, t: float, q0: float, q1: float, mix: Mix) -> None:
        self.under = self.under + t if max(q0, q1) > self.surface * (1 + 1e-9) else 0.0
        self.deficit = self.deficit * math.exp(-t / HEALS)
        g = q1 - self.tension() - self.rest
        aged = math.exp(-self.under / HEALS) if self.clock_from_surface else 1.0
        for c in range(len(self.half)):
            if g[c] >= self.onset and self.shut[c] is None:
                now = self.state
                self.state = before
                low, high = 0.0, 1.0
                for _ in range(60):
                    mid = 0.5 * (low + high)
                    held = self._after(t * mid, q0, q0 + (q1 - q0) * mid, mix)[c].sum() + self.other
                    if q0 + (q1 - q0) * mid - held - self.rest[c] >= self.onset:
                        high = mid
                    else:
                        low = mid
                held = self._after(t * high, q0, q0 + (q1 - q0) * high, mix)[c].sum() + self.other
                self.shut[c] = (q0 + (q1 - q0) * high, float(held))
                self.state = now
            shut = self.shut[c]
            if shut is not None and g[c] < self.onset:
                self.shut[c] = shut = None
            for j, r0 in enumerate(self.radii):
                if shut is None:
                    r = 1.0 / (1.0 / r0 + max(min(g[c], self.onset), 0.0) / SKIN)
                else:
                    r = self._cubic(r0, q1, *shut)
                self.deficit[c, j] = max(self.deficit[c, j], (r0 - r) * aged)

    def _cubic(self, r0: float, p: float, p_star: float, tau: float) -> float:
        r_star = 1.0 / (1.0 / r0 + self.onset / SKIN)
        a = p - p_star + tau + SKIN / r_star
        return float(
            brentq(lambda r: a * r**3 - SKIN * r**2 - tau * r_star**3, 0.1 * SKIN / a, r_star * 1.0001)
        )

    # -- Planning ------------------------------------------------------------------------------

    def allowed(self, p: float, g: Array) -> bool:
        """Whether the supersaturation is within the gradients at an ambient pressure."""
        for c, (n2, he) in enumerate(self.state):
            if self.smaller:
                own = min([g[c, 0]] * bool(n2 > 0.0) + [g[c, 1]] * bool(he > 0.0))
            else:
                own = (n2 * g[c, 0] + he * g[c, 1]) / (n2 + he)
            if n2 + he + self.other > p + own + 1e-7:
                return False
        return True

    def plan(
        self, depth: float, bottom: Mix, gases: list[tuple[Mix, float]]
    ) -> tuple[list[tuple[float, float]], int]:
        """Return the stops of the last pass as (depth, minutes), and how many passes there were."""
        radii = np.array(self.radii)
        r = radii - self.deficit
        crush = SKIN * (1.0 / r - 1.0 / radii)
        least = 2.0 * GAMMA * (GAMMA_C - GAMMA) / (GAMMA_C * r)
        kept, clock = self.state.copy(), self.clock
        self.watch = False
        begin = self._zone(depth, bottom, gases)
        g = least.copy()
        past: list[tuple[Any, Array, float]] = []
        while True:
            self.state, self.clock = kept.copy(), clock
            stops = self._climb(depth, bottom, gases, g, self.boyle == "every")
            total = self.clock - clock
            if past and past[-1][0] == stops:
                break
            again = [k for k, one in enumerate(past) if one[0] == stops]
            if again:
                circle = past[again[0] :]
                _, g, _ = max(circle, key=lambda one: one[2])
                self.state, self.clock = kept.copy(), clock
                stops = self._climb(depth, bottom, gases, g, self.boyle == "every")
                break
            past.append((stops, g.copy(), total))
            t_d = total - begin if self.zone_start else total
            g = self._new(least, crush, max(t_d, 0.0))
        passes = len(past) + 1  # the one that repeats an earlier one too
        if self.boyle == "last":
            self.state, self.clock = kept.copy(), clock
            stops = self._climb(depth, bottom, gases, g, True)
        self.gradients = g
        return stops, passes

    def _new(self, least: Array, crush: Array, t_d: float) -> Array:
        out = np.empty_like(least)
        share = GAMMA / GAMMA_C
        for c, (n2, he) in enumerate(self.state):
            t = t_d + (self._surface(c, n2, he) if self.excess else self.half[c, 0] / math.log(2.0))
            for j in range(2):
                b = least[c, j] + self.lam * share / t
                cc = share**2 * self.lam * crush[c, j] / t
                out[c, j] = (b + math.sqrt(b * b - 4.0 * cc)) / 2.0
        return out

    def _surface(self, c: int, n2: float, he: float) -> float:
        """Integrate the excess by quadrature, up to where it ends."""
        k_n2, k_he = math.log(2.0) / self.half[c]
        over = n2 - 0.79 * (self.surface - VAPOR)

        def excess(t: float) -> float:
            return float(he * math.exp(-k_he * t) + over * math.exp(-k_n2 * t))

        if excess(0.0) <= 0.0:
            return 1e-6
        end = 80.0 / k_n2
        if over < 0.0 and excess(end) < 0.0:
            end = brentq(excess, 0.0, end, xtol=1e-12)
        marks = [x for x in (1.0 / k_he, 5.0 / k_he, 1.0 / k_n2, 5.0 / k_n2, 20.0 / k_n2) if x < end]
        return float(quad(excess, 0.0, end, points=marks, limit=400, epsabs=1e-11)[0] / excess(0.0))

    def _zone(self, depth: float, bottom: Mix, gases: list[tuple[Mix, float]]) -> float:
        """Return when a continuous ascent first leaves a compartment supersaturated."""
        kept, clock = self.state.copy(), self.clock
        gone = 0.0
        for top, low, mix in self._legs(depth, 0.0, bottom, gases):
            minutes = (top - low) / self.rate
            p0, p1 = (self.surface + 10.0 * d for d in (top, low))

            def over(
                t: float, minutes: float = minutes, p0: float = p0, p1: float = p1, mix: Mix = mix
            ) -> float:
                p = p0 + (p1 - p0) * t / minutes
                return float((self._after(t, p0, p, mix).sum(axis=1) + self.other - p).max())

            n = math.ceil(minutes / SECOND - 1e-9)
            for j in range(n + 1):
                t = min(j * SECOND, minutes)
                if over(t) > 0.0:
                    found = t if j == 0 else brentq(over, (j - 1) * SECOND, t, xtol=1e-13)
                    self.state, self.clock = kept, clock
                    return gone + found
            self.state = self._after(minutes, p0, p1, mix)
            gone += minutes
        self.state, self.clock = kept, clock
        return gone

    def _climb(
        self, depth: float, bottom: Mix, gases: list[tuple[Mix, float]], g: Array, expand: bool
    ) -> list[tuple[float, float]]:
        stops: list[tuple[float, float]] = []
        first: float | None = None
        if self._may_go(depth, 0.0, g, bottom, gases):
            self._travel(depth, 0.0, bottom, gases)
            return stops
        while depth > 0.0:
            target, n = 0.0, 0
            while self.last + n * self.spacing < depth - 1e-9:
                target = self.last + n * self.spacing
                n += 1
            if first is None and not self._may_go(depth, target, g, bottom, gases):
                first = depth
            if first is not None:
                own = self._grown(g, first, target) if expand else g
                minutes = 0
                while not self._may_go(depth, target, own, bottom, gases):
                    here = self.surface + 10.0 * depth
                    self.march(1.0, here, here, self.mix(depth, bottom, gases))
                    minutes += 1
                if minutes:
                    stops.append((round(depth, 6), float(minutes)))
            self._travel(depth, target, bottom, gases)
            depth = target
        return stops

    def _grown(self, g: Array, first: float, target: float) -> Array:
        p1, p2 = self.surface + 10.0 * first, self.surface + 10.0 * target
        out = np.empty_like(g)
        for at in np.ndindex(g.shape):
            a = g[at] ** 3 / (p1 + g[at])
            out[at] = brentq(lambda x, a=a: x**3 - a * x - a * p2, 1e-9, g[at], xtol=1e-13)
        return out

    def _may_go(
        self, depth: float, target: float, g: Array, bottom: Mix, gases: list[tuple[Mix, float]]
    ) -> bool:
        there = self.surface + 10.0 * target
        if not self.arrival:
            return self.allowed(there, g)
        kept, clock = self.state, self.clock
        self._travel(depth, target, bottom, gases)
        good = self.allowed(there, g)
        self.state, self.clock = kept, clock
        return good

    @staticmethod
    def mix(depth: float, bottom: Mix, gases: list[tuple[Mix, float]]) -> Mix:
        """Return the listed gas with the shallowest permitted depth, or the bottom's."""
        usable = [(deepest, k) for k, (_, deepest) in enumerate(gases) if deepest >= depth - 1e-9]
        return gases[min(usable)[1]][0] if usable else bottom

    def _legs(
        self, depth: float, target: float, bottom: Mix, gases: list[tuple[Mix, float]]
    ) -> list[tuple[float, float, Mix]]:
        edges = sorted({d for _, d in gases if target < d < depth} | {target}, reverse=True)
        out = []
        for edge in edges:
            out.append((depth, edge, self.mix(0.5 * (depth + edge), bottom, gases)))
            depth = edge
        return out

    def _travel(self, depth: float, target: float, bottom: Mix, gases: list[tuple[Mix, float]]) -> None:
        for top, low, mix in self._legs(depth, target, bottom, gases):
            self.march((top - low) / self.rate, self.surface + 10.0 * top, self.surface + 10.0 * low, mix)


Maker = Callable[[int], dict[str, Any]]
