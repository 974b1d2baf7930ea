"""Carbon monoxide in blood: the Coburn-Forster-Kane equation, linear and nonlinear."""

from __future__ import annotations

import functools

from gasphys.constants import ATMOSPHERE, BODY_TEMPERATURE, CO_CAPACITY, MMHG, ZERO_CELSIUS
from gasphys.equation import Value, formula
from gasphys.maths import exp, log

__all__ = [
    "COHB_HALF_LIFE_BAND",
    "co_capillary_po2",
    "co_resistance",
    "cohb_half_life",
    "cohb_linear",
    "cohb_rate",
    "cohb_steady_state",
]

#: Factors on a half-life of the equation that make the band observed in people: on O2 the equation is
#: about 30 % fast (leaking masks, diffusing capacity falling with PO2, CO outside blood).
COHB_HALF_LIFE_BAND = (0.7, 1.5)

# Default parameters of a resting adult, all from memory: what rests on them is memory_medium.
_VENTILATION = 6.0  # L/min BTPS
_DIFFUSING_CAPACITY = 30.0 / float(MMHG)  # 30 mL/min/mmHg
_BLOOD_VOLUME = 5.5  # L
_AFFINITY = 218.0  # 210 to 250 in use
_PRODUCTION = 7e-6  # L/min, 0.007 mL/min

_cfk = functools.partial(formula, source="coburn_forster_kane_1965", provenance="memory_medium")


@formula(result="capillary_po2", source="coburn_forster_kane_1965", provenance="secondary", check_result=True)
def co_capillary_po2(inspired_po2: Value) -> Value:
    """Mean lung capillary PO2 of the Coburn-Forster-Kane equation.

    Notes
    -----
    Inspired PO2 (moist) less 49 mmHg: 100 mmHg on air at sea level. A printed 110 takes the dry
    inspired PO2.

    Examples
    --------
    >>> round(co_capillary_po2("149 mmHg") / 0.1333224)
    100
    """
    return inspired_po2 - 49.0 * MMHG


@_cfk(result="co_resistance")
def co_resistance(
    alveolar_ventilation_btps: Value = _VENTILATION, co_diffusing_capacity: Value = _DIFFUSING_CAPACITY
) -> Value:
    """Resistance between inspired gas and blood for CO, the B of Coburn, Forster & Kane.

    Notes
    -----
    B = 1/DL + 863/VA with VA in mL/min BTPS and mmHg (115.05 in kPa), at *every* chamber pressure. In
    the form PL/VA the ventilation is STPD; PL at 3 atm over a BTPS ventilation makes the term 2.6 times
    too large.

    Examples
    --------
    >>> round(co_resistance(5.0), 5)
    0.02745
    """
    per_ventilation = ATMOSPHERE * BODY_TEMPERATURE / ZERO_CELSIUS / 1000.0
    return 1.0 / co_diffusing_capacity + per_ventilation / alveolar_ventilation_btps


@_cfk(result="cohb_half_life")
def cohb_half_life(
    capillary_po2: Value,
    alveolar_ventilation_btps: Value = _VENTILATION,
    co_diffusing_capacity: Value = _DIFFUSING_CAPACITY,
    blood_volume: Value = _BLOOD_VOLUME,
    haldane_affinity: Value = _AFFINITY,
    bound_o2: Value = 20.0,
) -> Value:
    """Half-life of carboxyhemoglobin by the linear Coburn-Forster-Kane equation.

    Notes
    -----
    ln 2 Vb M [O2Hb] B/PcO2 with oxyhemoglobin held constant. With an unchanged diffusing capacity it is
    about 30 % fast on O2: take :data:`COHB_HALF_LIFE_BAND` times it as a band. Seen: 320 min on air,
    80 on O2 at 1 atm and 23 at 3 atm in volunteers; 74 (SD 25) in 93 poisoned people on O2 at 1 atm.
    Defaults are those of a resting adult, from memory.

    Examples
    --------
    >>> round(cohb_half_life("664 mmHg", 5.0), 1)
    51.5
    """
    resistance = co_resistance(alveolar_ventilation_btps, co_diffusing_capacity)
    volume = 1000.0 * blood_volume
    return log(2) * volume * haldane_affinity * bound_o2 / 100.0 * resistance / capillary_po2


@_cfk(result="cohb_fraction")
def cohb_linear(
    duration: Value,
    initial_cohb_fraction: Value,
    inspired_pco: Value,
    capillary_po2: Value,
    alveolar_ventilation_btps: Value = _VENTILATION,
    co_diffusing_capacity: Value = _DIFFUSING_CAPACITY,
    blood_volume: Value = _BLOOD_VOLUME,
    haldane_affinity: Value = _AFFINITY,
    co_production_stpd: Value = _PRODUCTION,
    hemoglobin: Value = 15.0,
    bound_o2: Value = 20.0,
) -> Value:
    """Carboxyhemoglobin after a time by the linear Coburn-Forster-Kane equation.

    Notes
    -----
    ([COHb] - C)/([COHb]0 - C) = exp(-t A/(Vb B)), with A = PcO2/(M [O2Hb]) and the final content
    C = (B VCO + PICO)/A, oxyhemoglobin held constant: for low COHb, or a COHb that hardly changes. The
    share is of the capacity 1.38 mL/g times hemoglobin.

    Examples
    --------
    >>> round(cohb_linear(80.0, 0.30, 0.0, "664 mmHg"), 3)
    0.086
    """
    resistance = co_resistance(alveolar_ventilation_btps, co_diffusing_capacity)
    driving = 100.0 * capillary_po2 / (haldane_affinity * bound_o2)
    content = (resistance * 1000.0 * co_production_stpd + inspired_pco) / driving
    final = content / (CO_CAPACITY * hemoglobin / 100.0)
    left = exp(-duration * driving / (1000.0 * blood_volume * resistance))
    return final + (initial_cohb_fraction - final) * left


@_cfk(result="cohb_rate")
def cohb_rate(
    cohb_fraction: Value,
    inspired_pco: Value,
    capillary_po2: Value,
    alveolar_ventilation_btps: Value = _VENTILATION,
    co_diffusing_capacity: Value = _DIFFUSING_CAPACITY,
    blood_volume: Value = _BLOOD_VOLUME,
    haldane_affinity: Value = _AFFINITY,
    co_production_stpd: Value = _PRODUCTION,
    hemoglobin: Value = 15.0,
) -> Value:
    """Rate of change of carboxyhemoglobin by the nonlinear Coburn-Forster-Kane equation.

    Notes
    -----
    d[COHb]/dt = VCO/Vb + (PICO - [COHb] PcO2/(M [O2Hb]))/(Vb B) with [O2Hb] the capacity less [COHb]:
    hemoglobin holds CO or O2. Integrate it along an exposure. For well-mixed blood over hours: in the
    first minutes of a high exposure single persons were off by up to 3.8 % COHb (15 men, Benignus
    1994).

    Examples
    --------
    >>> round(cohb_rate(0.30, 0.0, "664 mmHg"), 5)
    -0.00647
    """
    resistance = co_resistance(alveolar_ventilation_btps, co_diffusing_capacity)
    capacity = CO_CAPACITY * hemoglobin / 100.0 * (1000.0 * blood_volume)
    back = cohb_fraction * capillary_po2 / (haldane_affinity * (1.0 - cohb_fraction))
    return (1000.0 * co_production_stpd + (inspired_pco - back) / resistance) / capacity


@_cfk(result="cohb_fraction")
def cohb_steady_state(
    inspired_pco: Value,
    capillary_po2: Value,
    alveolar_ventilation_btps: Value = _VENTILATION,
    co_diffusing_capacity: Value = _DIFFUSING_CAPACITY,
    haldane_affinity: Value = _AFFINITY,
    co_production_stpd: Value = _PRODUCTION,
) -> Value:
    """Carboxyhemoglobin that a constant exposure leads to, nonlinear.

    Notes
    -----
    Haldane's relation [COHb]/[O2Hb] = M PCO/PO2 with PCO = PICO + B VCO: it does not depend on
    hemoglobin or blood volume.

    Examples
    --------
    50 ppm at sea level:

    >>> round(cohb_steady_state("0.03565 mmHg", "100 mmHg", 5.0), 4)
    0.0748
    """
    resistance = co_resistance(alveolar_ventilation_btps, co_diffusing_capacity)
    pressure = inspired_pco + resistance * 1000.0 * co_production_stpd
    ratio = haldane_affinity * pressure / capillary_po2
    return ratio / (1.0 + ratio)
