"""Arterial and mixed venous oxygen against ambient pressure, both models as a band."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy
from gasphys.quantities import quantity
from gasphys.units import convert

__all__ = ["arterial_band_figure"]

#: Dashes of the two models: told apart without color.
_DASHES: dict[str, Any] = {"ratio": "-", "shunt": (0, (5, 2))}


def arterial_band_figure(ds: xr.Dataset, *, pressure_unit: str = "atm", po2_unit: str = "kPa") -> Any:
    """Draw the cascade of O2 from inspired gas to mixed venous blood against pressure, models as bands.

    Parameters
    ----------
    ds : Dataset
        Of :func:`gasphys.gas_exchange.oxygenation` with ``model="both"`` along one dimension of
        pressures.
    pressure_unit, po2_unit : str
        Units of the axes.

    Returns
    -------
    matplotlib.figure.Figure
        Above: inspired and alveolar PO2, and arterial PO2 between the constant ratio and the constant
        shunt. Middle: mixed venous PO2 over the arteriovenous band. Below: dissolved O2 between the
        models, and the arteriovenous difference that it would have to cover.

    Raises
    ------
    GasphysError
        If the dataset does not hold both models along one dimension.

    Notes
    -----
    Between the models lies what is not known, not a probability. Full line: ratio; dashed: shunt.

    Examples
    --------
    >>> import gasphys as gp
    >>> pressure = xr.DataArray(np.linspace(101.325, 303.975, 40), dims="pressure", attrs={"units": "kPa"})
    >>> session = gp.Exposure.start("oxygen", pressure=pressure).stay(1)
    >>> ds = gp.gas_exchange.oxygenation(session, model="both").isel(time=0)
    >>> len(arterial_band_figure(ds).axes)
    3
    """
    if "model" not in ds.dims or ds["ambient_pressure"].ndim != 1:
        raise GasphysError(
            'the picture needs oxygenation(..., model="both") along one dimension of pressures'
        )
    figure = new_figure(7.4, 6.2)
    upper, middle, lower = figure.subplots(3, 1, sharex=True, gridspec_kw={"height_ratios": [1.8, 1.0, 1.0]})
    x = convert(ds["ambient_pressure"].values, "kPa", pressure_unit)

    def shown(name: str, model: str) -> Any:
        values = ds[name].sel(model=model).values if "model" in ds[name].dims else ds[name].values
        return convert(values, "kPa", po2_unit) if _is_pressure(name) else values

    for axes in (upper, middle, lower):
        tidy(axes)
    alveolar = shown("alveolar_po2", "ratio")
    upper.plot(x, alveolar, color=INK, linewidth=1.2)
    inspired = shown("inspired_po2", "ratio")
    upper.plot(x, inspired, color=INK, linewidth=1.0, linestyle=(0, (1, 2)))
    words: list[tuple[Any, float, str]] = [
        (upper, inspired[-1], "inspired, moist"),
        (upper, alveolar[-1], "alveolar"),
    ]
    for axes, name in ((upper, "arterial_po2"), (lower, "arterial_dissolved_o2")):
        both = {model: shown(name, model) for model in _DASHES}
        axes.fill_between(x, both["ratio"], both["shunt"], color=PALE, linewidth=0.0)
        for model, y in both.items():
            axes.plot(x, y, color=ACCENT, linewidth=2.0, linestyle=_DASHES[model])
            words.append((axes, y[-1], f"constant {model}"))
    for model, dash in _DASHES.items():
        low, high = shown("mixed_venous_po2_low", model), shown("mixed_venous_po2_high", model)
        middle.fill_between(
            x, low, high, facecolor="none" if model == "shunt" else PALE, edgecolor=ACCENT, linewidth=0.0,
            hatch="////" if model == "shunt" else "",
        )  # fmt: skip
        y = shown("mixed_venous_po2", model)
        middle.plot(x, y, color=ACCENT, linewidth=1.5, linestyle=dash)
        words.append((middle, y[-1], f"constant {model}"))
    band = np.asarray(ds.attrs["arteriovenous_band"])
    lower.axhspan(band[0], band[1], facecolor="none", edgecolor=INK, linewidth=0.0, hatch="....", alpha=0.5)
    lower.text(x[0], band.mean(), " arteriovenous difference", fontsize=8, va="center", color=INK,
               bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.0})  # fmt: skip
    upper.set_ylabel(f"PO2, {po2_unit}\n(arterial: the band)", fontsize=9)
    middle.set_ylabel(f"mixed venous\nPO2, {po2_unit}", fontsize=9)
    lower.set_ylabel("dissolved O2\nmL/dL", fontsize=9)
    figure.align_ylabels()
    lower.set_xlabel(f"{quantity('ambient_pressure').long_name}, {pressure_unit}", fontsize=9)
    for axes in (upper, middle, lower):
        axes.set_ylim(bottom=0.0)
        _beside(axes, [(y, word) for a, y, word in words if a is axes])
    lower.set_xlim(float(x[0]), float(x[-1]))
    caution_line(figure)
    return figure


def _is_pressure(name: str) -> bool:
    """Whether a variable is shown in the unit of PO2."""
    return quantity(name.removesuffix("_low").removesuffix("_high")).is_pressure


def _beside(axes: Any, words: list[tuple[float, str]]) -> None:
    """Write the words at the ends of their lines, moved up where they would cover each other."""
    size = axes.get_position().height * axes.figure.get_size_inches()[1] * 72.0
    gap, lowest = 9.5 / size * axes.get_ylim()[1], -np.inf
    for y, word in sorted(words):
        lowest = max(y, lowest + gap)
        axes.text(
            1.01, lowest, word, transform=axes.get_yaxis_transform(), fontsize=8, va="center", color=INK
        )
