"""Ascents with breaks on another gas: the planner with a clock of the minutes at high PO2."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gasphys.ascent.planner import Array, Mask, _Planner
from gasphys.ascent.rules import Breaks
from gasphys.tissues.kinetics import advance

__all__ = ["BreakingPlanner"]

#: Minutes looked at together, and the longest stop looked for [min].
_ROW, _LONGEST = 32, 3200


class BreakingPlanner(_Planner):
    """Planner that takes breaks; the gas of the break is the last of its sources.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> bottom = Exposure.start("air").travel(depth=50, rate=20).stay(30)
    >>> rules = ascent.Rules(breaks=ascent.Breaks(10, 5, "air", "1.2 bar"))
    >>> found = ascent.plan(bottom, [("oxygen", 6.0)], rules=rules)
    >>> found.stops.duration.values.tolist()[-2:]
    [7.0, 14.0]
    """

    def _climb(self) -> None:
        #: Uninterrupted minutes at high PO2, a lane each.
        self.since = np.zeros(len(self.depth))
        #: Legs that have been counted.
        self.seen = 0
        self.resting = False
        super()._climb()

    @property
    def _rule(self) -> Breaks:
        assert self.rules.breaks is not None  # what this planner is for
        return self.rules.breaks

    def _high(self, rows: NDArray[np.int64], lanes: NDArray[np.int64], pressure: Array) -> Mask:
        """Return whether what is breathed at pressures, one for every lane, counts towards a break."""
        breath = self._breath(rows, lanes)
        p = pressure[lanes]
        po2 = np.where(np.isnan(breath.setpoint), breath.oxygen * p, np.fmin(breath.setpoint, p))
        return np.asarray(po2 >= self._rule.from_po2 * (1.0 - 1e-9))

    def _phases(self, lanes: NDArray[np.int64], longest: Array) -> list[tuple[Array, NDArray[np.int64]]]:
        """Return the stay in turns: minutes and row of the gas, a lane each, until `longest` is filled."""
        rows = self.gas[lanes]
        high = self._high(rows, lanes, self.pressure)
        rest = np.full(len(lanes), len(self.sources))
        left = np.where(high, np.maximum(self._rule.every - self.since[lanes], 0.0), np.inf)
        filled, out, pause = np.zeros(len(lanes)), [], False
        while True:
            part = np.minimum(left, longest - filled)
            out.append((part, np.where(high & pause, rest, rows)))
            filled = filled + part
            if (filled >= longest).all():
                return out
            pause = not pause
            left = np.where(high, self._rule.minutes if pause else self._rule.every, np.inf)

    def _held(self, lanes: NDArray[np.int64], state: Array, minutes: Array) -> Array:
        if self.resting:
            return super()._held(lanes, state, minutes)
        wide = minutes.ndim - 1
        out, here, begin = None, state, np.zeros(len(lanes))
        longest = minutes.max(axis=-1) if wide else minutes
        p = self.pressure[lanes]
        for part, rows in self._phases(lanes, longest):
            breath = self._breath(rows, lanes)
            if wide:
                inside = np.clip(minutes - begin[:, None], 0.0, part[:, None])
                extended = type(breath)(
                    breath.oxygen[:, None], breath.inert[:, None], breath.setpoint[:, None]
                )
                later = advance(self.model, here[:, None], inside, p[:, None], p[:, None], extended)
                begun = (minutes > begin[:, None])[..., None, None]
            else:
                inside = np.clip(minutes - begin, 0.0, part)
                later = advance(self.model, here, inside, p, p, breath)
                begun = (minutes > begin)[..., None, None]
            out = later if out is None else np.where(begun, later, out)
            here = advance(self.model, here, part, p, p, breath)
            begin = begin + part
        assert out is not None  # there is one phase at least
        return out

    def _stay(self, moving: Mask, minutes: Array) -> None:
        lanes = np.flatnonzero(moving & (minutes > 0.0))
        if not lanes.size:
            return
        own, high = self.gas.copy(), self._high(self.gas[lanes], lanes, self.pressure)
        for part, rows in self._phases(lanes, minutes[lanes]):
            spent = np.zeros(len(minutes))
            spent[lanes] = part
            self.gas[lanes] = rows
            super()._stay(moving, spent)
            counts = high & (rows != len(self.sources))
            self.since[lanes] = np.where(
                part > 0.0, np.where(counts, self.since[lanes] + part, 0.0), self.since[lanes]
            )
        self.gas = own
        self.seen = len(self.legs)

    def _count(self) -> None:
        """Count the ways not counted yet: the PO2 at their upper end decides."""
        for spent, _, last, rows in self.legs[self.seen :]:
            lanes = np.flatnonzero(spent > 0.0)
            high = self._high(rows[lanes], lanes, last)
            self.since[lanes] = np.where(high, self.since[lanes] + spent[lanes], 0.0)
        self.seen = len(self.legs)

    def _switch(self, moving: Mask) -> None:
        self._count()
        super()._switch(moving)

    def _travel(self, moving: Mask, target: float) -> None:
        super()._travel(moving, target)
        self._count()

    def _search(self, lanes: NDArray[np.int64], target: float, there: Array, gradient: Array) -> Array:
        """Return the shortest wait [min], breaks and all; NaN where there is none within the longest."""
        first = np.full(len(lanes), 1.0 if self.rules.whole_minutes else 0.0)
        if not self._rule.counted:
            self.resting = True
            plain = super()._search(lanes, target, there, gradient)
            self.resting = False
            ahead = np.maximum(plain - np.maximum(self._rule.every - self.since[lanes], 0.0), 0.0)
            # A break that falls due with the last minute is not begun.
            high = self._high(self.gas[lanes], lanes, self.pressure)
            pauses = np.where(high, np.ceil(ahead / self._rule.every - 1e-9), 0.0)
            first = plain + pauses * self._rule.minutes
            if self.rules.whole_minutes:
                first = np.ceil(first - 1e-9)
        found = np.full(len(lanes), np.nan)
        todo, done, state = np.flatnonzero(~np.isnan(first)), 0, self.state[lanes]
        while todo.size and done < _LONGEST:
            minutes = first[todo][:, None] + done + np.arange(float(_ROW))
            later = self._held(lanes[todo], state[todo], minutes)
            good = self._step_excess(lanes[todo], later, target, there, gradient)[0] <= 0.0
            hit = good.any(axis=1)
            found[todo[hit]] = minutes[np.arange(len(todo)), np.argmax(good, axis=1)][hit]
            todo, done = todo[~hit], done + _ROW
        if self.rules.whole_minutes:
            return found
        later = self._exact(np.where(found > first, found, np.nan), lanes, state, target, there, gradient)
        return np.where(found > first, np.fmax(later, first), found)

    def _explain(self, lanes: NDArray[np.int64], target: float, there: Array, gradient: Array) -> None:
        one = lanes[0]
        self._fail(
            self._mask(lanes),
            f"{self.model.name}: with a {self._rule} the step from {self.depth[one]:g} to {target:g} "
            f"{self.exposure.depth_unit} is not allowed within {_LONGEST} min",
        )
