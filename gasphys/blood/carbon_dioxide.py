"""Carbon dioxide in blood: pH and bicarbonate, content, base excess, the Haldane effect."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np

from gasphys.constants import CO2_PLASMA_SOLUBILITY, MMHG, PK_CO2
from gasphys.equation import EquationFunction, Value, choice, formula, inverse
from gasphys.maths import exp, log, log10
from gasphys.quantities import quantity

__all__ = [
    "base_excess",
    "bicarbonate",
    "co2_content",
    "haldane_penalty",
    "pco2_at_base_excess",
    "pco2_at_co2_content",
    "ph_at_base_excess",
    "ph_at_co2_content",
    "ph_from",
    "plasma_co2",
    "venous_pco2",
]

#: Douglas' bracket has a pole at pH 8.142 and was fitted to living men: outside it is refused.
_PH: dict[str, Any] = {"refuse": {"ph": (7.0, 7.7)}}


@formula(result="ph", source="henderson_hasselbalch_texts", provenance="secondary")
def ph_from(pco2: Value, bicarbonate: Value) -> Value:
    """PH of plasma from PCO2 and bicarbonate.

    Notes
    -----
    Henderson-Hasselbalch: pH = 6.1 + log10([HCO3-]/(0.03 PCO2)), mmol/L and mmHg, at 37 degC.

    Examples
    --------
    >>> round(ph_from("40 mmHg", 24.0), 2)
    7.4
    """
    return PK_CO2 + log10(bicarbonate / (CO2_PLASMA_SOLUBILITY * pco2 / MMHG))


bicarbonate = inverse(
    ph_from,
    "bicarbonate",
    name="bicarbonate",
    module=__name__,
    doc="""Bicarbonate of plasma from pH and PCO2.

Notes
-----
The inverse of :func:`ph_from`, found from it.

Examples
--------
>>> round(bicarbonate(7.4, "40 mmHg"), 1)
23.9
""",
)


# ---------------------------------------------------------------------------------------------
# Content


@formula(result="plasma_co2_solubility", source="kelman_1967", provenance="secondary", register=False)
def plasma_co2_solubility(temperature: Value = 37.0) -> Value:
    """Solubility of CO2 in plasma, Kelman 1967."""
    t = 37.0 - temperature
    return (0.0307 + 0.00057 * t + 0.00002 * t * t) / MMHG


@formula(result="plasma_co2_pk", source="kelman_1967", provenance="secondary", register=False)
def plasma_co2_pk(ph: Value, temperature: Value = 37.0) -> Value:
    """Apparent pK of carbonic acid in plasma, Kelman 1967; note 38 minus the temperature."""
    return 6.086 + 0.042 * (7.4 - ph) + (38.0 - temperature) * (0.00472 + 0.00139 * (7.4 - ph))


@formula(
    result="plasma_co2",
    **_PH,
    valid={"temperature": (20.0, 43.0)},
    source="kelman_1967",
    provenance="secondary",
)
def plasma_co2(pco2: Value, ph: Value, temperature: Value = 37.0) -> Value:
    """Total CO2 of plasma, dissolved and as bicarbonate, Kelman 1967.

    Notes
    -----
    s PCO2 (1 + 10^(pH - pK')), with s 0.0307 mmol/L/mmHg and pK' 6.0907 at 37 degC and pH 7.40.

    Examples
    --------
    >>> round(plasma_co2("40 mmHg", 7.4), 2)
    26.26
    """
    free = plasma_co2_solubility(temperature) * pco2
    return free * (1.0 + exp(log(10) * (ph - plasma_co2_pk(ph, temperature))))


@formula(
    result="co2_content",
    **_PH,
    valid={"temperature": (20.0, 43.0)},
    source=("douglas_1988", "kelman_1967"),
    provenance="secondary",
    register=False,
)
def douglas_1988(
    pco2: Value,
    ph: Value,
    hemoglobin: Value = 15.0,
    o2_saturation: Value = 0.97,
    temperature: Value = 37.0,
) -> Value:
    """CO2 content of whole blood, Douglas, Jones & Reed 1988.

    Notes
    -----
    Plasma content (2.226 mL/dL for each mmol/L) times
    1 - 0.0289 Hb/((3.352 - 0.456 S)(8.142 - pH)), hemoglobin in g/dL (mmol/L is a known misreading).
    Error 0.02 (SD 1.19) mL/dL in 9 men from rest to exercise. The pole at pH 8.142 is why pH outside
    7.0 to 7.7 is refused.

    Examples
    --------
    >>> round(douglas_1988("40 mmHg", 7.4, 15.0, 0.975), 2)
    46.71
    """
    cells = 0.0289 * hemoglobin / ((3.352 - 0.456 * o2_saturation) * (8.142 - ph))
    return 2.226 * plasma_co2(pco2, ph, temperature) * (1.0 - cells)


@formula(
    result="co2_content",
    **_PH,
    valid={"temperature": (20.0, 43.0)},
    source="kelman_1967",
    provenance="memory_high",
    register=False,
)
def kelman_1967(
    pco2: Value,
    ph: Value,
    hemoglobin: Value = 15.0,
    o2_saturation: Value = 0.97,
    temperature: Value = 37.0,
) -> Value:
    """CO2 content of whole blood, Kelman 1967.

    Notes
    -----
    Plasma content and a cell to plasma ratio D that depends on pH and saturation, for a hematocrit of
    0.03 dL/g times hemoglobin (0.45 at 15 g/dL). 2.22 mL/dL for each mmol/L.

    Examples
    --------
    >>> round(kelman_1967("40 mmHg", 7.4, 15.0, 0.975), 2)
    47.59
    """
    u = 7.4 - ph
    oxygenated = 0.590 + 0.2913 * u - 0.0844 * u * u
    reduced = 0.664 + 0.2275 * u - 0.0938 * u * u
    ratio = oxygenated + (reduced - oxygenated) * (1.0 - o2_saturation)
    hematocrit = 0.03 * hemoglobin
    return 2.22 * plasma_co2(pco2, ph, temperature) * (hematocrit * ratio + 1.0 - hematocrit)


_CO2_CONTENTS: dict[str, EquationFunction] = {
    "douglas_1988": douglas_1988,
    "kelman_1967": kelman_1967,
}


@choice(option="model", registry=_CO2_CONTENTS)
def co2_content(
    pco2: Value,
    ph: Value,
    hemoglobin: Value = 15.0,
    o2_saturation: Value = 0.97,
    model: str = "douglas_1988",
    temperature: Value = 37.0,
) -> Value:
    """CO2 content of whole blood in every form.

    Notes
    -----
    Refused outside pH 7.0 to 7.7. Saturated blood holds less CO2 at the same PCO2 and pH (the part of
    the Haldane effect that is not in pH); the two methods differ by about 1 mL/dL in level and by 0.1
    in the venous-arterial difference.

    Examples
    --------
    >>> round(co2_content("46 mmHg", 7.37, 15.0, 0.75), 1)
    51.1
    """


# ---------------------------------------------------------------------------------------------
# Base excess, and blood of fixed base excess


@formula(
    result="base_excess",
    valid={"pco2": (1.59, 12.81)},
    source="lang_zander_2002",
    provenance="read",
)
def base_excess(pco2: Value, ph: Value, hemoglobin: Value = 15.0, o2_saturation: Value = 0.97) -> Value:
    """Base excess of blood, Lang & Zander 2002.

    Notes
    -----
    BE = (1 - 0.0143 Hb) (0.0304 PCO2 10^(pH - 6.1) - 24.26 + (9.5 + 1.63 Hb)(pH - 7.4))
    - 0.2 Hb (1 - S), accurate to 0.86 mmol/L for PCO2 12-96 mmHg and BE -30 to 30 mmol/L.
    Transcriptions with 0.014 exist; the paper has 0.0143.

    Examples
    --------
    >>> round(base_excess("40 mmHg", 7.3, 15.0, 1.0), 1)
    -6.6
    """
    buffers = (9.5 + 1.63 * hemoglobin) * (ph - 7.4)
    carbonate = 0.0304 * pco2 / MMHG * exp(log(10) * (ph - 6.1)) - 24.26
    return (1.0 - 0.0143 * hemoglobin) * (carbonate + buffers) - 0.2 * hemoglobin * (1.0 - o2_saturation)


ph_at_base_excess = inverse(
    base_excess,
    "ph",
    name="ph_at_base_excess",
    module=__name__,
    valid={"base_excess": (-30.0, 30.0)},
    doc="""PH of blood of a base excess at a PCO2.

Notes
-----
The inverse of :func:`base_excess`, found from it.

Examples
--------
>>> round(ph_at_base_excess(0.0, "40 mmHg", 15.0, 1.0), 3)
7.4
""",
)


def _linear(wanted: Any, ph: Any, hemoglobin: Any, o2_saturation: Any) -> Any:
    """PCO2 of a base excess: the equation is linear in it, so that two evaluations tell."""
    at_zero = base_excess.raw(0.0, ph, hemoglobin, o2_saturation)
    for_each = base_excess.raw(1.0, ph, hemoglobin, o2_saturation) - at_zero
    return (wanted - at_zero) / for_each


def _linear_within(wanted: Any, *state: Any) -> Any:
    low, high = quantity("pco2").possible
    found = _linear(wanted, *state)
    return np.where((found >= low) & (found <= high), found, np.nan)


_buffered = functools.partial(
    inverse,
    base_excess,
    "pco2",
    module=__name__,
    valid={"base_excess": (-30.0, 30.0)},
    result="buffered_pco2",
    doc="""PCO2 of blood of a base excess at a pH.

Notes
-----
The inverse of :func:`base_excess`, exact because that is linear in PCO2.

Examples
--------
>>> round(pco2_at_base_excess(0.0, 7.4, 15.0, 1.0) / 0.1333224, 1)
40.0
""",
)
pco2_at_base_excess = _buffered(name="pco2_at_base_excess", kernel=_linear_within)

#: The same without bounds: a search may look where there is no PCO2 and turn back.
unbounded_pco2_at_base_excess = _buffered(
    name="unbounded_pco2_at_base_excess", kernel=_linear, register=False
)


@formula(
    result="co2_content",
    **_PH,
    source=("douglas_1988", "kelman_1967", "lang_zander_2002"),
    provenance="secondary",
    register=False,
)
def content_of_buffered_blood(
    ph: Value, base_excess: Value = 0.0, hemoglobin: Value = 15.0, o2_saturation: Value = 0.97
) -> Value:
    """CO2 content of blood of a base excess at a pH, which fixes its PCO2."""
    pco2 = unbounded_pco2_at_base_excess(base_excess, ph, hemoglobin, o2_saturation)
    return douglas_1988(pco2, ph, hemoglobin, o2_saturation, 37.0)


ph_at_co2_content = inverse(
    content_of_buffered_blood,
    "ph",
    name="ph_at_co2_content",
    module=__name__,
    doc="""PH of blood of a base excess that holds a CO2 content.

Notes
-----
Content by Douglas 1988, base excess by Lang & Zander 2002. Not reached: outside pH 7.0 to 7.7.

Examples
--------
>>> round(ph_at_co2_content(51.0, 0.0, 15.0, 0.74), 3)
7.376
""",
)


@formula(
    result="pco2",
    source=("douglas_1988", "kelman_1967", "lang_zander_2002"),
    provenance="secondary",
    check_result=True,
)
def pco2_at_co2_content(
    co2_content: Value, base_excess: Value = 0.0, hemoglobin: Value = 15.0, o2_saturation: Value = 0.97
) -> Value:
    """PCO2 of blood of a base excess that holds a CO2 content.

    Notes
    -----
    Content by Douglas 1988, base excess by Lang & Zander 2002.

    Examples
    --------
    >>> round(pco2_at_co2_content(51.0, 0.0, 15.0, 0.74) / 0.1333224, 1)
    45.4
    """
    ph = ph_at_co2_content(co2_content, base_excess, hemoglobin, o2_saturation)
    return pco2_at_base_excess(base_excess, ph, hemoglobin, o2_saturation)


@formula(
    result="venous_pco2",
    source=("douglas_1988", "kelman_1967", "lang_zander_2002"),
    provenance="secondary",
    check_result=True,
)
def venous_pco2(
    arterial_pco2: Value,
    venous_arterial_co2_difference: Value = 4.2,
    venous_o2_saturation: Value = 0.74,
    arterial_o2_saturation: Value = 0.975,
    hemoglobin: Value = 15.0,
    base_excess: Value = 0.0,
) -> Value:
    """PCO2 of mixed venous blood that has taken up a CO2 load.

    Notes
    -----
    Arterial content at PaCO2 and base excess, plus the load, and back to PCO2 at the venous
    saturation; base excess is that of oxygenated blood and the same on both sides. PaCO2 is an input:
    under pressure it moves with the patient's ventilation.

    Examples
    --------
    >>> round(venous_pco2("40 mmHg") / 0.1333224, 1)
    45.4
    """
    ph = ph_at_base_excess(base_excess, arterial_pco2, hemoglobin, arterial_o2_saturation)
    arterial = douglas_1988(arterial_pco2, ph, hemoglobin, arterial_o2_saturation, 37.0)
    load = venous_arterial_co2_difference
    return pco2_at_co2_content(arterial + load, base_excess, hemoglobin, venous_o2_saturation)


@formula(
    result="haldane_penalty",
    source=("douglas_1988", "kelman_1967", "lang_zander_2002"),
    provenance="secondary",
    check_result=True,
)
def haldane_penalty(
    arterial_pco2: Value,
    venous_arterial_co2_difference: Value = 4.2,
    venous_o2_saturation: Value = 0.74,
    arterial_o2_saturation: Value = 0.975,
    hemoglobin: Value = 15.0,
    base_excess: Value = 0.0,
) -> Value:
    """Rise of venous PCO2 when venous hemoglobin stays saturated, at one arterial PCO2.

    Notes
    -----
    Saturated blood needs a higher PCO2 for the same CO2 load: 2.5 to 2.9 mmHg over plausible loads,
    against the saturations given. A *difference* only: PaCO2 is an input and moves on its own.
    Textbooks say a few mmHg, up to 5 or 6 [from memory].

    Examples
    --------
    >>> round(haldane_penalty("40 mmHg") / 0.1333224, 2)
    2.85
    """
    load = venous_arterial_co2_difference
    saturated = venous_pco2(arterial_pco2, load, 1.0, 1.0, hemoglobin, base_excess)
    return saturated - venous_pco2(
        arterial_pco2, load, venous_o2_saturation, arterial_o2_saturation, hemoglobin, base_excess
    )
