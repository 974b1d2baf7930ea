"""Oxygen in blood: saturation by published curves, what is bound, what is dissolved, and back."""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import HUEFNER, MMHG, O2_SOLUBILITY
from gasphys.equation import EquationFunction, Value, choice, formula, inverse
from gasphys.maths import exp, find_root, log, log10, where

__all__ = [
    "arteriovenous_o2_difference",
    "bound_o2",
    "dissolved_o2",
    "dissolved_o2_share",
    "o2_content",
    "o2_delivery",
    "o2_extraction",
    "o2_saturation",
    "p50",
    "po2_at_content",
    "po2_at_saturation",
    "po2_for_dissolved_o2",
    "severinghaus_ph_coefficient",
    "severinghaus_temperature_coefficient",
]

Array = NDArray[np.float64]

#: PO2 at and below which the polynomial of Kelman 1966 is not to be used, 10 mmHg. The ulps keep the
#: text "10 mmHg" on the flagged side.
_KELMAN_FLOOR = 10.0 * float(MMHG) * (1.0 + 1e-12)

_curve = functools.partial(formula, result="o2_saturation", register=False)
_content = functools.partial(formula, result="o2_content", register=False)

# ---------------------------------------------------------------------------------------------
# Severinghaus 1979


@formula(result="ln_po2_per_ph", valid={"po2": (0.0, 400.0)}, source="severinghaus_1979", provenance="read")
def severinghaus_ph_coefficient(po2: Value) -> Value:
    """Shift of ln PO2 for a unit of pH at one saturation, Severinghaus 1979.

    Notes
    -----
    (P/26.6)^0.184 - 2.2, P in mmHg: -1.2 at P50, that is -0.52 in log10 (the Bohr coefficient).

    Examples
    --------
    >>> round(severinghaus_ph_coefficient("26.6 mmHg"), 2)
    -1.2
    """
    return (po2 / (26.6 * MMHG)) ** 0.184 - 2.2


@formula(
    result="ln_po2_per_kelvin", valid={"po2": (0.0, 400.0)}, source="severinghaus_1979", provenance="read"
)
def severinghaus_temperature_coefficient(po2: Value) -> Value:
    """Shift of ln PO2 of a closed blood sample for a degree, Severinghaus 1979.

    Notes
    -----
    0.058/(0.243 (P/100)^3.88 + 1) + 0.013, P in mmHg: for correcting a *sample* measured at another
    temperature, where content stays, not saturation. The curve itself shifts by 0.024 in log10 P for
    a degree. Reprinted abstracts raise 0.243 to the power too; that is wrong.

    Examples
    --------
    >>> round(severinghaus_temperature_coefficient("200 mmHg"), 4)
    0.0257
    """
    return 0.058 / (0.243 * (po2 / (100.0 * MMHG)) ** 3.88 + 1.0) + 0.013


@formula(
    result="virtual_po2",
    valid={"po2": (0.0, 400.0), "ph": (6.8, 7.8), "temperature": (20.0, 43.0)},
    source="severinghaus_1979",
    provenance="read",
    register=False,
)
def severinghaus_virtual_po2(po2: Value, ph: Value = 7.4, temperature: Value = 37.0) -> Value:
    """PO2 that gives the same saturation at pH 7.40 and 37 degC, Severinghaus 1979."""
    return (
        po2 * exp(log(10) * 0.024 * (37.0 - temperature)) * exp(severinghaus_ph_coefficient(po2) * (7.4 - ph))
    )


@_curve(
    valid={"po2": (0.0, 400.0), "ph": (6.8, 7.8), "temperature": (20.0, 43.0)},
    source="severinghaus_1979",
    provenance="read",
)
def severinghaus_1979(po2: Value, ph: Value = 7.4, temperature: Value = 37.0) -> Value:
    """O2 saturation of hemoglobin, Severinghaus 1979.

    Notes
    -----
    S = 1/(23400/(P^3 + 150 P) + 1), P in mmHg, at 37 degC and pH 7.40. For other states P is first
    brought to the standard one: 0.024 in log10 P for a degree and (P/26.6)^0.184 - 2.2 in ln P for
    a unit of pH. The measured curve stays at 99.72 % at 500 mmHg where the equation gives 99.98 %:
    above 0.98 saturation no longer tells PO2.

    Examples
    --------
    >>> round(severinghaus_1979(5.333), 4)
    0.7495
    """
    x = severinghaus_virtual_po2(po2, ph, temperature) / MMHG
    cubic = x * x * x + 150.0 * x
    return cubic / (cubic + 23400.0)


# ---------------------------------------------------------------------------------------------
# Kelman 1966


@formula(result="virtual_po2", source="kelman_1966", provenance="secondary", register=False)
def kelman_virtual_po2(po2: Value, ph: Value = 7.4, temperature: Value = 37.0, pco2: Value = 5.333) -> Value:
    """PO2 that gives the same saturation at pH 7.40, 37 degC and PCO2 40 mmHg, Kelman 1966."""
    return po2 * exp(
        log(10) * (0.024 * (37.0 - temperature) + 0.40 * (ph - 7.4) + 0.06 * log10(40.0 * MMHG / pco2))
    )


_KELMAN_VALID = {
    "po2": (
        _KELMAN_FLOOR,
        400.0,
        "at and below 10 mmHg the polynomial of Kelman fails and a quadratic from memory stands in",
    )
}


@_curve(valid=_KELMAN_VALID, source="kelman_1966", provenance="secondary")
def kelman_1966(po2: Value, ph: Value = 7.4, temperature: Value = 37.0, pco2: Value = 5.333) -> Value:
    """O2 saturation of hemoglobin, Kelman 1966.

    Notes
    -----
    A ratio of polynomials of fourth degree in the PO2 brought to pH 7.40, 37 degC and PCO2 40 mmHg;
    there 0.40 in log10 P for a unit of pH, less than the 0.48 used today, and no term for DPG. The
    polynomial turns negative below 5 mmHg, so that below 10 mmHg S = 0.003683 P + 0.000584 P^2 stands
    in [from memory]; it meets the polynomial with a small jump, 0.095 against 0.087. Saturation comes
    to 1 near 9000 mmHg and passes it by less than 1e-6.

    Examples
    --------
    >>> round(kelman_1966(5.333), 4)
    0.7412
    """
    x = kelman_virtual_po2(po2, ph, temperature, pco2) / MMHG
    x2 = x * x
    x3 = x2 * x
    x4 = x2 * x2
    upper = -8532.2289 * x + 2121.4010 * x2 - 67.073989 * x3 + x4
    lower = 935960.87 - 31346.258 * x + 2396.1674 * x2 - 67.104406 * x3 + x4
    return where(x < 10.0, 0.003683 * x + 0.000584 * x2, upper / lower)


# ---------------------------------------------------------------------------------------------
# Dash, Korman & Bassingthwaighte 2016

_DASH_VALID = {
    "po2": (0.0, 400.0),
    "ph": (6.8, 7.8),
    "temperature": (20.0, 44.0),
    "pco2": (2.66, 13.34),
}


@formula(
    result="p50",
    valid={k: v for k, v in _DASH_VALID.items() if k != "po2"},
    source="dash_bassingthwaighte_2016",
    provenance="secondary",
    register=False,
)
def dash_p50(
    ph: Value = 7.4, temperature: Value = 37.0, pco2: Value = 5.333, dpg_excess: Value = 0.0
) -> Value:
    """P50 of Dash, Korman & Bassingthwaighte 2016.

    Notes
    -----
    26.8 mmHg times four factors, one each for red cell pH, PCO2, DPG and temperature. Red cell pH is
    0.795 pH + 1.357; leaving that step out is the usual error.

    Examples
    --------
    >>> round(dash_p50() / 0.1333224, 2)
    26.8
    """
    d = 0.795 * ph + 1.357 - 7.24
    c = pco2 / MMHG - 40.0
    g = dpg_excess / 1000.0
    t = temperature - 37.0
    by_ph = 26.8 - 25.535 * d + 10.646 * d**2 - 1.764 * d**3
    by_co2 = 26.8 + 0.1273 * c + 1.083e-4 * c**2
    by_dpg = 26.8 + 795.63 * g - 19660.89 * g**2
    by_temperature = 26.8 + 1.435 * t + 4.163e-2 * t**2 + 6.86e-4 * t**3
    return MMHG * by_ph * by_co2 * by_dpg * by_temperature / 26.8**3


@_curve(valid=_DASH_VALID, source="dash_bassingthwaighte_2016", provenance="secondary")
def dash_bassingthwaighte_2016(
    po2: Value,
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    dpg_excess: Value = 0.0,
) -> Value:
    """O2 saturation of hemoglobin, Dash, Korman & Bassingthwaighte 2016.

    Notes
    -----
    Hill's equation with an exponent that rises with PO2, n = 2.82 - 1.20 x 10^(-P/29.25), and a P50
    that depends on pH, PCO2, DPG and temperature. Fitted to a PO2 of about 150 mmHg [from memory];
    above it the curve goes smoothly to 1.

    Examples
    --------
    >>> round(dash_bassingthwaighte_2016(5.333), 4)
    0.7519
    """
    exponent = 2.82 - 1.20 * exp(-log(10) * po2 / (29.25 * MMHG))
    ratio = (po2 / dash_p50(ph, temperature, pco2, dpg_excess)) ** exponent
    return ratio / (1.0 + ratio)


# ---------------------------------------------------------------------------------------------
# Siggaard-Andersen 1984, and Hill


@formula(
    result="siggaard_andersen_acidity", source="siggaard_andersen_1984", provenance="read", register=False
)
def siggaard_andersen_acidity(ph: Value = 7.4, base_excess: Value = 0.0, dpg_excess: Value = 0.0) -> Value:
    """Shift of Siggaard-Andersen's curve by pH, base excess and DPG, its a."""
    return 1.04 * (7.4 - ph) + 0.005 * base_excess + 0.07 * dpg_excess


@formula(
    result="siggaard_andersen_center", source="siggaard_andersen_1984", provenance="read", register=False
)
def siggaard_andersen_center(temperature: Value = 37.0, siggaard_andersen_acidity: Value = 0.0) -> Value:
    """PO2 at the point of symmetry of Siggaard-Andersen's curve, exp(x0)."""
    return exp(1.946 + siggaard_andersen_acidity + 0.055 * (temperature - 37.0))


@_curve(
    valid={"po2": (0.0, 400.0), "ph": (6.8, 7.8), "temperature": (20.0, 43.0)},
    source="siggaard_andersen_1984",
    provenance="read",
)
def siggaard_andersen_1984(
    po2: Value,
    ph: Value = 7.4,
    temperature: Value = 37.0,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
) -> Value:
    """O2 saturation of hemoglobin, Siggaard-Andersen 1984.

    Notes
    -----
    y - 1.875 = x - x0 + h tanh(0.5343 (x - x0)) with y = ln(S/(1 - S)), x = ln P (P in kPa),
    x0 = 1.946 + a + 0.055 (t - 37), h = 3.5 + a and a = 1.04 (7.4 - pH) + 0.005 BE + 0.07 (DPG - 5).
    Written here with P/exp(x0) and its power, which is the same and holds at P = 0 too. There is no
    PCO2 term of its own.

    Examples
    --------
    >>> round(siggaard_andersen_1984(5.333), 4)
    0.7498
    """
    a = siggaard_andersen_acidity(ph, base_excess, dpg_excess)
    u = po2 / siggaard_andersen_center(temperature, a)
    power = u ** (2.0 * 0.5343)
    odds = u * exp(1.875 + (3.5 + a) * (power - 1.0) / (power + 1.0))
    return odds / (1.0 + odds)


@_curve(
    quantities={"hill_exponent": "exponent"},
    valid={"po2": (2.1, 6.0, "the equation of Hill holds from 20 to 80 % saturation only")},
    source="hill_1910",
    provenance="secondary",
)
def hill(po2: Value, p50: Value = 3.573, hill_exponent: Value = 2.7) -> Value:
    """O2 saturation of hemoglobin by the equation of Hill.

    Notes
    -----
    S = (P/P50)^n/(1 + (P/P50)^n) with P50 26.8 mmHg and n 2.7, from 20 to 80 % saturation only.

    Examples
    --------
    >>> round(hill(5.333), 3)
    0.747
    """
    ratio = (po2 / p50) ** hill_exponent
    return ratio / (1.0 + ratio)


#: Every dissociation curve by name.
CURVES: dict[str, EquationFunction] = {
    "severinghaus_1979": severinghaus_1979,
    "kelman_1966": kelman_1966,
    "dash_bassingthwaighte_2016": dash_bassingthwaighte_2016,
    "siggaard_andersen_1984": siggaard_andersen_1984,
    "hill": hill,
}


@choice(option="model", registry=CURVES)
def o2_saturation(
    po2: Value,
    model: str = "severinghaus_1979",
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    *,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
    p50: Value = 3.573,
    hill_exponent: Value = 2.7,
) -> Value:
    """O2 saturation of hemoglobin at a PO2.

    Notes
    -----
    Share of the hemoglobin able to bind O2 that carries it. At pH 7.40 and 37 degC the published curves
    agree within 1.4 points from 24 to 700 mmHg (1.9 at 20); at pH 7.2 they part by 5 points. Each uses
    of the state what it was made with: only Kelman and Dash take PCO2, only Dash and Siggaard-Andersen
    take DPG, Hill takes its P50 as given.

    Examples
    --------
    >>> round(o2_saturation(13.3), 3)
    0.977
    """


# ---------------------------------------------------------------------------------------------
# Content


@formula(result="bound_o2", source="o2_capacity_texts", provenance="secondary")
def bound_o2(o2_saturation: Value, hemoglobin: Value = 15.0) -> Value:
    """O2 carried by hemoglobin.

    Notes
    -----
    1.34 mL/g times hemoglobin times saturation. 1.36 and 1.39 mL/g are in use; 1.39 with a saturation
    that already leaves out inactive hemoglobin counts it twice.

    Examples
    --------
    >>> round(bound_o2(0.9737, 15.0), 2)
    19.57
    """
    return HUEFNER * hemoglobin * o2_saturation


@formula(result="dissolved_o2", source="o2_capacity_texts", provenance="secondary")
def dissolved_o2(po2: Value) -> Value:
    """O2 in physical solution in blood at 37 degC.

    Notes
    -----
    0.0031 mL/dL for each mmHg of PO2; 0.0030 is in use too.

    Examples
    --------
    Alveolar PO2 of oxygen at 3 atm, 2193 mmHg:

    >>> round(dissolved_o2("2193 mmHg"), 2)
    6.8
    """
    return O2_SOLUBILITY * po2 / MMHG


@_content(
    valid={"po2": (0.0, 400.0), "ph": (6.8, 7.8), "temperature": (20.0, 43.0)},
    source=("o2_capacity_texts", "severinghaus_1979"),
    provenance="secondary",
)
def severinghaus_content(
    po2: Value, hemoglobin: Value = 15.0, ph: Value = 7.4, temperature: Value = 37.0
) -> Value:
    """O2 content of blood with the saturation of Severinghaus 1979."""
    return bound_o2(severinghaus_1979(po2, ph, temperature), hemoglobin) + dissolved_o2(po2)


@_content(valid=_KELMAN_VALID, source=("o2_capacity_texts", "kelman_1966"), provenance="secondary")
def kelman_content(
    po2: Value,
    hemoglobin: Value = 15.0,
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
) -> Value:
    """O2 content of blood with the saturation of Kelman 1966."""
    return bound_o2(kelman_1966(po2, ph, temperature, pco2), hemoglobin) + dissolved_o2(po2)


@_content(
    valid=_DASH_VALID, source=("o2_capacity_texts", "dash_bassingthwaighte_2016"), provenance="secondary"
)
def dash_content(
    po2: Value,
    hemoglobin: Value = 15.0,
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    dpg_excess: Value = 0.0,
) -> Value:
    """O2 content of blood with the saturation of Dash, Korman & Bassingthwaighte 2016."""
    saturation = dash_bassingthwaighte_2016(po2, ph, temperature, pco2, dpg_excess)
    return bound_o2(saturation, hemoglobin) + dissolved_o2(po2)


@_content(
    valid={"po2": (0.0, 400.0), "ph": (6.8, 7.8), "temperature": (20.0, 43.0)},
    source=("o2_capacity_texts", "siggaard_andersen_1984"),
    provenance="secondary",
)
def siggaard_andersen_content(
    po2: Value,
    hemoglobin: Value = 15.0,
    ph: Value = 7.4,
    temperature: Value = 37.0,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
) -> Value:
    """O2 content of blood with the saturation of Siggaard-Andersen 1984."""
    saturation = siggaard_andersen_1984(po2, ph, temperature, base_excess, dpg_excess)
    return bound_o2(saturation, hemoglobin) + dissolved_o2(po2)


@_content(
    quantities={"hill_exponent": "exponent"},
    valid={"po2": (2.1, 6.0, "the equation of Hill holds from 20 to 80 % saturation only")},
    source=("o2_capacity_texts", "hill_1910"),
    provenance="secondary",
)
def hill_content(
    po2: Value, hemoglobin: Value = 15.0, p50: Value = 3.573, hill_exponent: Value = 2.7
) -> Value:
    """O2 content of blood with the saturation of Hill."""
    return bound_o2(hill(po2, p50, hill_exponent), hemoglobin) + dissolved_o2(po2)


_CONTENTS: dict[str, EquationFunction] = {
    "severinghaus_1979": severinghaus_content,
    "kelman_1966": kelman_content,
    "dash_bassingthwaighte_2016": dash_content,
    "siggaard_andersen_1984": siggaard_andersen_content,
    "hill": hill_content,
}


@choice(option="model", registry=_CONTENTS)
def o2_content(
    po2: Value,
    hemoglobin: Value = 15.0,
    model: str = "severinghaus_1979",
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    *,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
    p50: Value = 3.573,
    hill_exponent: Value = 2.7,
) -> Value:
    """O2 content of blood: bound to hemoglobin and dissolved.

    Notes
    -----
    1.34 mL/g times hemoglobin times saturation, plus 0.0031 mL/dL/mmHg times PO2. The dissolved part
    does not depend on the state of hemoglobin; solubility is that of 37 degC.

    Examples
    --------
    >>> round(o2_content("95 mmHg", hemoglobin=15.0), 2)
    19.87
    """


# ---------------------------------------------------------------------------------------------
# The way back: PO2 at a saturation, PO2 at a content

#: Values a kernel works on at a time: few enough for the temporaries to stay in the cache.
_BLOCK = 8192

#: Nodes of the table of first guesses, and the PO2 up to which it reaches [kPa].
_NODES, _TOP = 8193, 400.0


def _kelman_start(state: tuple[Any, ...]) -> Any:
    """PO2 above which the polynomial of Kelman is used: a virtual PO2 of 10 mmHg."""
    factor = kelman_virtual_po2.raw(1.0, *state)
    start = 10.0 * float(MMHG) / factor
    while np.any(low := kelman_virtual_po2.raw(start, *state) / float(MMHG) < 10.0):
        start = np.where(low, np.nextafter(start, np.inf), start)
    return start


def _in_blocks(function: Callable[..., Array], *values: Any) -> Array:
    """Evaluate a vectorized function block by block; plain numbers are passed on as they are."""
    shape = np.broadcast_shapes(*(np.shape(v) for v in values))
    flat = [np.broadcast_to(v, shape).reshape(-1) if np.ndim(v) else v for v in values]
    out = np.empty(int(np.prod(shape)))
    for first in range(0, out.size, _BLOCK):
        part = slice(first, first + _BLOCK)
        out[part] = function(*(v[part] if np.ndim(v) else v for v in flat))
    return out.reshape(shape)


def _root(
    forward: EquationFunction, wanted: Any, rest: tuple[Any, ...], high: Any, start: Any = None
) -> Array:
    """PO2 from 0 to `high` that gives the wanted result, from the curve above `start` if it can."""
    shape = np.broadcast_shapes(np.shape(wanted), *(np.shape(v) for v in rest))
    low, high = np.zeros(shape), np.broadcast_to(high, shape)
    if start is not None:
        above = forward.raw(start, *rest) <= wanted
        low = np.where(above, start, low)
        high = np.where(above, high, np.nextafter(start, 0.0))
    return find_root(lambda po2: forward.raw(po2, *rest) - wanted, low, high)


def _saturation_kernel(forward: EquationFunction) -> Callable[..., Array]:
    kelman = forward is kelman_1966
    top = forward.arguments[0].quantity.possible[1]

    def solve(saturation: Any, *state: Any) -> Array:
        return _root(forward, saturation, state, top, _kelman_start(state) if kelman else None)

    return lambda saturation, *state: _in_blocks(solve, saturation, *state)


def _content_kernel(forward: EquationFunction) -> Callable[..., Array]:
    """Inverse of one content formula: a table of first guesses, chord steps, a bracket for the rest.

    The table holds the exact inverse and its slope for one hemoglobin and state, evenly spaced in the
    cube root of content (where every curve is nearly straight at its foot), so that a value finds
    its cell without a search; two steps along the slope at the wanted content then reach the last
    bits. What they do not reach (the jump of Kelman's curve, PO2 beyond the table) is bracketed, and
    so is everything where hemoglobin or state differ from value to value.
    """
    kelman = forward is kelman_content

    def bracketed(content: Any, *rest: Any) -> Array:
        # All content in solution: no PO2 can be higher. The last digits belong to rounding.
        high = content / dissolved_o2.raw(1.0) * (1.0 + 1e-12)
        return _root(forward, content, rest, high, _kelman_start(rest[1:]) if kelman else None)

    # Large arrays come part by part, and the same blood comes again.
    @functools.lru_cache(maxsize=8)
    def table(*rest: float) -> tuple[Any, ...]:
        nodes = np.linspace(0.0, np.cbrt(float(forward.raw(_TOP, *rest))), _NODES)
        po2 = _in_blocks(bracketed, nodes**3, *rest)
        step = 1e-5 * np.maximum(po2, po2[1])
        below, above = np.maximum(po2 - step, 0.0), po2 + step
        slope = (above - below) / (forward.raw(above, *rest) - forward.raw(below, *rest))
        rises = np.diff(po2, append=po2[-1]), np.diff(slope, append=slope[-1])
        return nodes[1], po2, slope, *rises

    def tabled(content: Array, *rest: float) -> Array:
        width, po2, slope, po2_rise, slope_rise = table(*rest)

        def solve(content: Array) -> Any:
            place = np.cbrt(content) / width
            cell = place.astype(np.intp)
            place -= cell
            x = po2.take(cell, mode="clip") + place * po2_rise.take(cell, mode="clip")
            chord = slope.take(cell, mode="clip") + place * slope_rise.take(cell, mode="clip")
            x -= (forward.raw(x, *rest) - content) * chord
            move = (forward.raw(x, *rest) - content) * chord
            x -= move
            far = ~(np.abs(move) <= 1e-9 * x)
            if far.any():
                x[far] = bracketed(content[far], *rest)
            return x

        return _in_blocks(solve, content)

    def kernel(content: Any, *rest: Any) -> Array:
        with np.errstate(all="ignore"):
            if np.size(content) > _NODES and not any(np.ndim(v) for v in rest):
                return tabled(content, *(float(v) for v in rest))
            return _in_blocks(bracketed, content, *rest)

    return kernel


_NO_LONGER = (0.0, 0.98, "saturation no longer tells PO2")

_PO2_AT_SATURATION: dict[str, EquationFunction] = {
    name: inverse(
        curve,
        "po2",
        name="po2_at_saturation",
        module=__name__,
        given="saturation",
        valid={"saturation": _NO_LONGER},
        kernel=_saturation_kernel(curve),
        doc="PO2 at which a curve gives a saturation, found from the curve.",
        register=False,
    )
    for name, curve in CURVES.items()
}


@choice(option="model", registry=_PO2_AT_SATURATION)
def po2_at_saturation(
    saturation: Value,
    model: str = "severinghaus_1979",
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    *,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
    p50: Value = 3.573,
    hill_exponent: Value = 2.7,
) -> Value:
    """PO2 at which hemoglobin has a saturation.

    Notes
    -----
    The exact inverse of :func:`o2_saturation`, not the approximate one printed with some curves. Above
    0.98 saturation no longer tells PO2: there 0.3 points separate the equations from the measured
    curve, and they separate 100 from 500 mmHg. Then ask for the PO2 of a content.

    Examples
    --------
    >>> round(po2_at_saturation(0.75) / 0.1333224, 2)
    40.04
    """


_half = functools.partial(formula, result="p50", register=False)
_severinghaus_po2 = _PO2_AT_SATURATION["severinghaus_1979"]
_kelman_po2 = _PO2_AT_SATURATION["kelman_1966"]
_siggaard_andersen_po2 = _PO2_AT_SATURATION["siggaard_andersen_1984"]


@_half(source="severinghaus_1979", provenance="read")
def severinghaus_p50(ph: Value = 7.4, temperature: Value = 37.0) -> Value:
    """P50 of Severinghaus 1979, found from the curve."""
    return _severinghaus_po2(0.5, ph, temperature)


@_half(source="kelman_1966", provenance="secondary")
def kelman_p50(ph: Value = 7.4, temperature: Value = 37.0, pco2: Value = 5.333) -> Value:
    """P50 of Kelman 1966, found from the curve."""
    return _kelman_po2(0.5, ph, temperature, pco2)


@_half(source="siggaard_andersen_1984", provenance="read")
def siggaard_andersen_p50(
    ph: Value = 7.4, temperature: Value = 37.0, base_excess: Value = 0.0, dpg_excess: Value = 0.0
) -> Value:
    """P50 of Siggaard-Andersen 1984, found from the curve."""
    return _siggaard_andersen_po2(0.5, ph, temperature, base_excess, dpg_excess)


@choice(
    option="model",
    registry={
        "severinghaus_1979": severinghaus_p50,
        "kelman_1966": kelman_p50,
        "dash_bassingthwaighte_2016": dash_p50,
        "siggaard_andersen_1984": siggaard_andersen_p50,
    },
)
def p50(
    model: str = "severinghaus_1979",
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    *,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
) -> Value:
    """PO2 at which half of the hemoglobin carries O2.

    Notes
    -----
    By the curve named, in the state of the blood. Hill's equation takes its P50 as given.

    Examples
    --------
    >>> round(p50() / 0.1333224, 2)
    26.86
    """


_PO2_AT_CONTENT: dict[str, EquationFunction] = {
    name: inverse(
        content,
        "po2",
        name="po2_at_content",
        module=__name__,
        given="content",
        kernel=_content_kernel(content),
        doc="PO2 at which blood holds an O2 content, found from the content.",
        register=False,
    )
    for name, content in _CONTENTS.items()
}

#: The one that mixing of bloods is calculated with.
po2_at_content_severinghaus = _PO2_AT_CONTENT["severinghaus_1979"]


@choice(option="model", registry=_PO2_AT_CONTENT)
def po2_at_content(
    content: Value,
    hemoglobin: Value = 15.0,
    model: str = "severinghaus_1979",
    ph: Value = 7.4,
    temperature: Value = 37.0,
    pco2: Value = 5.333,
    *,
    base_excess: Value = 0.0,
    dpg_excess: Value = 0.0,
    p50: Value = 3.573,
    hill_exponent: Value = 2.7,
) -> Value:
    """PO2 at which blood holds an O2 content.

    Notes
    -----
    The exact inverse of :func:`o2_content`: with hemoglobin nearly full what remains tells PO2 through
    the dissolved part, and without hemoglobin that part is all there is. Near full saturation PO2 is
    extremely sensitive to content: return a range.

    Examples
    --------
    >>> round(po2_at_content(20.0, hemoglobin=15.0), 1)
    13.7
    """


po2_for_dissolved_o2 = inverse(
    dissolved_o2,
    "po2",
    name="po2_for_dissolved_o2",
    module=__name__,
    doc="""PO2 at which blood holds an amount of O2 in solution alone.

Notes
-----
With the arteriovenous difference as the amount, this is the arterial PO2 at which dissolved O2 alone
covers it and hemoglobin gives none up.

Examples
--------
>>> round(po2_for_dissolved_o2(5.0) / 0.1333224)
1613
""",
)


@formula(
    result="dissolved_o2_share",
    refuse={"o2_content": (1e-6, 100.0)},
    source="o2_capacity_texts",
    provenance="secondary",
    check_result=True,
)
def dissolved_o2_share(po2: Value, o2_content: Value) -> Value:
    """Share of the O2 content that is in solution.

    Notes
    -----
    1.5 % in arterial blood on air at the surface, about a fifth on O2 at 2.5 atm.

    Examples
    --------
    >>> round(dissolved_o2_share("1800 mmHg", 25.7), 3)
    0.217
    """
    return dissolved_o2(po2) / o2_content


# ---------------------------------------------------------------------------------------------
# Flow


@formula(result="o2_delivery_stpd", source="fick_1870", provenance="secondary")
def o2_delivery(cardiac_output: Value, arterial_o2_content: Value) -> Value:
    """O2 that the heart sends out with arterial blood.

    Notes
    -----
    Cardiac output times arterial content. Most human studies find cardiac output 10-15 % lower on
    oxygen under pressure.

    Examples
    --------
    >>> o2_delivery(5.0, 20.0)
    1.0
    """
    return cardiac_output * arterial_o2_content / 100.0


@formula(result="arteriovenous_difference", source="fick_1870", provenance="secondary")
def arteriovenous_o2_difference(o2_uptake_stpd: Value, cardiac_output: Value) -> Value:
    """Arterial minus mixed venous O2 content by Fick's principle.

    Notes
    -----
    O2 uptake over cardiac output: about 5 mL/dL at rest. Mixed venous, of the whole body.

    Examples
    --------
    >>> arteriovenous_o2_difference(0.25, 5.0)
    5.0
    """
    return 100.0 * o2_uptake_stpd / cardiac_output


@formula(
    result="o2_extraction",
    refuse={"arterial_o2_content": (1e-6, 100.0)},
    source="fick_1870",
    provenance="secondary",
    check_result=True,
)
def o2_extraction(arteriovenous_difference: Value, arterial_o2_content: Value) -> Value:
    """Share of the O2 delivered that the tissues take.

    Notes
    -----
    Arteriovenous difference over arterial content, about a quarter at rest. Of the whole body: single
    organs take from a tenth (kidney) to two thirds (heart).

    Examples
    --------
    >>> o2_extraction(5.0, 20.0)
    0.25
    """
    return arteriovenous_difference / arterial_o2_content
