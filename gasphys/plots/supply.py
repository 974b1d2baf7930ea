"""Gas supply: the mole account of a fill, and what is left at the surface when a gas is lost."""

from __future__ import annotations

import textwrap
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import ExposureError
from gasphys.gas import FORMULAS, Gas
from gasphys.plots.style import ACCENT, HATCH, INK, PALE, WORDS, caution_line, new_figure, tidy
from gasphys.supply.texts import gas_from_fractions, mixture_words
from gasphys.units import convert

__all__ = ["FillAccount", "fill_figure", "loss_table_figure"]

#: Place of each column of words, in shares of the width right of the bars.
_COLUMNS = (0.16, 0.42, 0.68, 0.97)


class FillAccount:
    """The mole account of a fill on a figure: one line a step; drawn again, its artists move.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Empty.
    steps : tuple of str
        The gases added, in order.
    pressure_unit : str
        Unit of pressures.

    Examples
    --------
    >>> from gasphys.supply import partial_pressure_fill
    >>> picture = FillAccount(new_figure(), ("oxygen", "air"))
    >>> picture.update(partial_pressure_fill("nitrox 48", "200 bar", order=("oxygen", "air")))
    """

    def __init__(self, figure: Any, steps: tuple[str, ...], pressure_unit: str = "bar") -> None:
        self.steps, self.pressure_unit = steps, pressure_unit
        self.count = len(steps) + 3
        # Places of their own: a layout that follows the words would move with every number.
        figure.set_layout_engine("none")
        self.axes = figure.add_axes((0.13, 0.26, 0.43, 0.6))
        self.words = figure.add_axes((0.575, 0.26, 0.42, 0.6))
        count = self.count
        self.bars = {}
        for k in range(count):
            for formula in FORMULAS:
                hatch, fill = HATCH[formula]
                (bar,) = self.axes.barh(
                    [self._level(k)],
                    [0.0],
                    height=0.56,
                    facecolor=fill,
                    hatch=hatch,
                    edgecolor=ACCENT,
                    linewidth=0.6,
                )
                self.bars[k, formula] = bar
        self.dotted = [
            self.axes.plot([0.0, 0.0], [0.0, 0.0], color=INK, linewidth=0.7, linestyle=":")[0]
            for _ in range(count)
        ]
        self.axes.set_yticks([self._level(k) for k in range(count)])
        self.axes.tick_params(axis="y", length=0, labelsize=8)
        self.axes.axhline(1.5, color=INK, linewidth=0.7)
        self.axes.set_ylim(-0.55, count - 0.2)
        self.axes.set_xlabel("amount, mol", fontsize=9)
        tidy(self.axes)
        self.words.set_axis_off()
        self.words.set_xlim(0.0, 1.0)
        self.words.set_ylim(-0.55, count - 0.2)
        heads = ("mol", "stop hot", "stop settled", "by the ideal law")
        for x, head in zip(_COLUMNS, heads, strict=True):
            self.words.text(x, count - 0.42, head, fontsize=7.5, color=INK, ha="right", va="center")
        self.cells = {
            (k, c): self.words.text(x, self._level(k), "", fontsize=8, color=INK, ha="right", va="center")
            for k in range(count)
            for c, x in enumerate(_COLUMNS)
        }
        self.mixes = [
            self.words.text(0.0, self._level(k), "", fontsize=8, color=INK, ha="left", va="center")
            for k in (count - 2, count - 1)
        ]
        self.title = self.axes.set_title("", fontsize=10, loc="left", color=INK)
        self.legend = self.axes.text(
            0.0, -0.24, "", fontsize=7, color=INK, transform=self.axes.transAxes, ha="left", va="top"
        )

    def _level(self, row: int) -> float:
        """Height of a row; the two mixtures stand apart from the steps."""
        return self.count - 1.0 - row

    def update(self, ds: xr.Dataset) -> None:
        """Show a fill.

        Parameters
        ----------
        ds : Dataset
            From :func:`gasphys.supply.partial_pressure_fill`, one fill of as many steps.

        Raises
        ------
        ExposureError
            If it holds several fills, or another number of steps.
        """
        names = tuple(str(s) for s in ds.step.values)
        if ds.amount.dims != ("step",) or len(names) != len(self.steps):
            raise ExposureError(f"the picture shows one fill of {len(self.steps)} steps; pick one first")
        rows = ("there already", *(f"add {n}" for n in names), "wanted", "ideal recipe gives")
        self.axes.set_yticklabels(rows, color=INK)
        target = gas_from_fractions(ds.gas_fraction)
        total, reached = float(ds.total_amount), float(ds.remainder_amount)
        hot = "pressure_after_hot" in ds
        self._bar(0, 0.0, reached, ds.remainder_fraction.values)
        some = reached > 0.0
        self._line(
            0,
            f"{reached:.1f}" if some else "nothing",
            "",
            self._shown(ds.remainder_pressure) if some else "",
            "",
        )
        for k, name in enumerate(names):
            row = ds.isel(step=k)
            amount = float(row.amount)
            self._bar(k + 1, reached, amount, np.array([Gas.parse(name).fraction(f) for f in FORMULAS]))
            reached += amount
            self._line(
                k + 1,
                f"+ {amount:.1f}",
                self._shown(row.pressure_after_hot) if hot else "",
                self._shown(row.pressure_after),
                self._shown(row.ideal_pressure_after),
            )
        for k, fractions in ((0, ds.gas_fraction), (1, ds.ideal_recipe_fraction)):
            shares = np.nan_to_num(fractions.values)
            self._bar(len(names) + 1 + k, 0.0, total if shares.any() else 0.0, shares)
            self.mixes[k].set_text(mixture_words(fractions, ds.gas_fraction))
        self.axes.set_xlim(0.0, 1.03 * max(total, reached))
        start = (
            f" on {self._shown(ds.remainder_pressure)} {self.pressure_unit} of " if some else ", from empty"
        )
        left = gas_from_fractions(ds.remainder_fraction) if some else ""
        warm = f", hot: {float(ds.filling_temperature):g} degC" if hot else ""
        self.title.set_text(
            f"{target} to {self._shown(ds.target_pressure)} {self.pressure_unit} absolute{start}{left}, "
            f"{float(ds.water_capacity):g} L\nsettled: {float(ds.temperature):g} degC{warm}; pressures in "
            f"{self.pressure_unit} absolute"
        )
        present = [
            f for k, f in enumerate(FORMULAS) if (ds.gas_fraction + ds.remainder_fraction).values[k] > 0.0
        ]
        marks = {"": "plain", "....": "dots", "////": "strokes", "xxxx": "crosses", "++++": "plus signs"}
        self.legend.set_text(
            ", ".join(f"{WORDS[f]}: {marks.get(HATCH[f][0], 'other hatch')}" for f in present)
        )

    def _bar(self, row: int, left: float, amount: float, shares: Any) -> None:
        for formula, share in zip(FORMULAS, shares, strict=True):
            bar = self.bars[row, formula]
            bar.set_x(left)
            bar.set_width(amount * float(share))
            left += amount * float(share)
        low = self._level(row)
        following = 0 < row + 1 < self.count - 2
        self.dotted[row].set_data([left, left], [low - 0.28, low - 0.72] if following else [low, low])

    def _line(self, row: int, *cells: str) -> None:
        for c, text in enumerate(cells):
            self.cells[row, c].set_text(text)

    def _shown(self, pressure: Any) -> str:
        return f"{float(convert(float(pressure), 'kPa', self.pressure_unit)):.1f}"


def fill_figure(ds: xr.Dataset, pressure_unit: str = "bar") -> Any:
    """Draw a fill as a mole account: one line a step, where to stop, and what the ideal recipe would give.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.supply.partial_pressure_fill`, one fill.
    pressure_unit : str
        Unit of pressures.

    Returns
    -------
    matplotlib.figure.Figure
        The figure.

    Raises
    ------
    ExposureError
        If it holds several fills, or is another Dataset.

    Notes
    -----
    Each bar begins where the one above ends: what is in the cylinder already, then what each step adds, by
    gas. Under the line the mixture wanted, and the one that comes out when every step is stopped at the
    pressure of the ideal gas law.

    Examples
    --------
    >>> from gasphys.supply import partial_pressure_fill
    >>> len(fill_figure(partial_pressure_fill("trimix 17/48", "220 bar")).axes)
    2
    """
    if "ideal_recipe_fraction" not in ds:
        raise ExposureError("a mole account needs the Dataset of supply.partial_pressure_fill")
    steps = tuple(str(s) for s in ds.step.values)
    figure = new_figure(8.6, 2.3 + 0.42 * (len(steps) + 3))
    FillAccount(figure, steps, pressure_unit).update(ds)
    caution_line(figure)
    return figure


def loss_table_figure(ds: xr.Dataset) -> Any:
    """Draw a loss table: a row a gas lost, a column a moment, liters left at the surface in each cell.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.supply.loss_table`.

    Returns
    -------
    matplotlib.figure.Figure
        The figure.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Notes
    -----
    The bar in a cell is what is left of the gas that is shortest, to one scale; hatched, what is missing. A
    cell without an answer says so, and why stands below.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.supply import Cylinder, Demand, loss_table
    >>> bottom = Exposure.start("air").travel(depth=40, minutes=2).stay(20)
    >>> tanks = [Cylinder("air", 12.0, "200 bar", count=2), Cylinder("oxygen", 7.0, "150 bar")]
    >>> ds = loss_table(bottom, [("air", 40), ("oxygen", 6)], tanks, demand=Demand(surface_rate=18.0))
    >>> len(loss_table_figure(ds).axes)
    1
    """
    if "least_left" not in ds:
        raise ExposureError("a loss table needs the Dataset of supply.loss_table")
    lost, moments = [str(g) for g in ds.lost.values], ds.moment.values
    unit = str(ds.attrs["depth_unit"])
    known = np.abs(ds.least_left.values)
    scale = float(np.nanmax(known)) if np.isfinite(known).any() else 1.0
    reasons = list(dict.fromkeys(str(r) for r in ds.reason.values.ravel() if str(r)))
    figure = new_figure(2.2 + 1.9 * len(moments), 1.9 + 0.72 * len(lost) + 0.2 * len(reasons))
    axes = figure.subplots()
    for row, gas in enumerate(lost):
        y = len(lost) - 1 - row
        axes.axhline(y + 1.0, color=INK, linewidth=0.9 if row in (0, 1) else 0.4)
        axes.text(-0.04, y + 0.5, gas, fontsize=9, color=INK, ha="right", va="center")
        for column in range(len(moments)):
            _cell(axes, ds.sel(lost=gas).isel(moment=column), column, y, scale)
    axes.axhline(0.0, color=INK, linewidth=0.9)
    for column, (when, depth) in enumerate(zip(moments, ds.moment_depth.values, strict=True)):
        axes.text(
            column + 0.06,
            len(lost) + 0.08,
            f"{float(when):.1f} min\nat {float(depth):.3g} {unit}",
            fontsize=8,
            color=INK,
            ha="left",
            va="bottom",
        )
    axes.text(-0.04, len(lost) + 0.08, "gas lost", fontsize=8, color=INK, ha="right", va="bottom")
    for k, reason in enumerate(reasons):
        axes.text(
            0.06, -0.3 - 0.28 * k, f"no answer: {reason}", fontsize=7, color=INK, ha="left", va="center"
        )
    axes.set_xlim(-0.9, len(moments))
    axes.set_ylim(-0.15 - 0.28 * len(reasons), len(lost) + 0.7)
    axes.set_axis_off()
    figure.suptitle(
        "Left at the surface: liters of free gas of the gas that is shortest",
        fontsize=10,
        color=INK,
        x=0.01,
        ha="left",
    )
    caution_line(figure)
    return figure


def _cell(axes: Any, cell: xr.Dataset, x: float, y: float, scale: float) -> None:
    left, gas = float(cell.least_left), str(cell.least_gas.values)
    if str(cell.reason.values) or np.isnan(left):
        axes.text(
            x + 0.06, y + 0.5, "no answer", fontsize=9, color=INK, ha="left", va="center", style="italic"
        )
        return
    missing = left < 0.0
    axes.barh(
        [y + 0.2],
        [0.86 * abs(left) / scale if scale > 0.0 else 0.0],
        height=0.16,
        left=x + 0.06,
        facecolor="white" if missing else PALE,
        edgecolor=ACCENT,
        hatch="////" if missing else "",
        linewidth=0.8,
    )
    number = f"missing {-left:.0f} L" if missing else f"{left:.0f} L"
    weight = "bold" if missing else "normal"
    axes.text(x + 0.06, y + 0.72, number, fontsize=10, color=INK, ha="left", va="center", weight=weight)
    after = f"{gas}, up at {float(cell.surface_time):.0f} min"
    axes.text(
        x + 0.06, y + 0.44, "\n".join(textwrap.wrap(after, 34)), fontsize=7, color=INK, ha="left", va="center"
    )
