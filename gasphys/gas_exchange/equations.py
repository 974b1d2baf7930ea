"""Arterial PO2 predicted from alveolar PO2; gas in closed lungs."""

from __future__ import annotations

from gasphys.constants import ATMOSPHERE, BODY_TEMPERATURE, BODY_VAPOR_PRESSURE, ZERO_CELSIUS
from gasphys.equation import Value, formula, inverse

__all__ = [
    "alveolar_gas_pressure",
    "arterial_po2_from_ratio",
    "gas_transfer",
    "lung_gas",
    "lung_volume_of_gas",
    "squeeze_pressure",
]


@formula(
    result="arterial_po2",
    quantities={"ratio": "arterial_alveolar_ratio"},
    valid={
        "ratio": (0.75, 1.0, "below it the ratio found at 1 atm did not carry over (Weaver & Howe 1994)"),
        "alveolar_po2": (0.0, 333.306, "seen up to an arterial PO2 of 2000 mmHg, an alveolar one of 2500"),
    },
    source=("gilbert_keighley_1974", "paganini_review"),
    provenance="memory_high",
)
def arterial_po2_from_ratio(alveolar_po2: Value, ratio: Value) -> Value:
    """Arterial PO2 as a constant share of alveolar PO2.

    Notes
    -----
    The a/A ratio found at 1 atm predicts arterial PO2 under pressure in healthy lungs, up to an
    arterial PO2 of 2000 mmHg. With a ratio below 0.75 it did not carry over in 24 patients (Weaver
    & Howe 1994): there a shunt is the better model.

    Examples
    --------
    >>> round(arterial_po2_from_ratio(231.6, 0.8), 2)
    185.28
    """
    return ratio * alveolar_po2


# ---------------------------------------------------------------------------------------------
# Closed lungs


@formula(result="lung_gas_stpd", source="alveolar_ventilation_texts", provenance="secondary")
def lung_gas(lung_volume_btps: Value, ambient_pressure: Value) -> Value:
    """Dry gas in lungs of a volume, as an amount.

    Notes
    -----
    n = V (P - PH2O)/P0 T0/Tb: STPD against BTPS.

    Examples
    --------
    >>> round(lung_gas(6.0, 101.325), 3)
    4.957
    """
    dry = ambient_pressure - BODY_VAPOR_PRESSURE
    return lung_volume_btps * dry / ATMOSPHERE * ZERO_CELSIUS / BODY_TEMPERATURE


lung_volume_of_gas = inverse(
    lung_gas,
    "lung_volume_btps",
    name="lung_volume_of_gas",
    module=__name__,
    kernel=lambda amount, pressure: amount / lung_gas.raw(1.0, pressure),
    doc="""Volume of the lungs that hold an amount of dry gas.

Notes
-----
The inverse of :func:`lung_gas`, which is linear in volume.

Examples
--------
>>> round(lung_volume_of_gas(4.957, 202.65), 3)
2.904
""",
)


@formula(
    result="alveolar_gas_pressure",
    refuse={"lung_gas_stpd": (1e-6, 1000.0)},
    source="dalton_1802",
    provenance="read",
)
def alveolar_gas_pressure(gas_amount_stpd: Value, lung_gas_stpd: Value, ambient_pressure: Value) -> Value:
    """Alveolar pressure of one gas in closed lungs.

    Notes
    -----
    Dalton: its share of the dry gas times ambient pressure less vapor.

    Examples
    --------
    >>> round(alveolar_gas_pressure(0.6952, 4.957, "1520 mmHg") / 0.1333224, 1)
    206.6
    """
    return (ambient_pressure - BODY_VAPOR_PRESSURE) * gas_amount_stpd / lung_gas_stpd


@formula(result="gas_transfer_stpd", source="fick_1870", provenance="secondary")
def gas_transfer(cardiac_output: Value, end_capillary_content: Value, mixed_venous_content: Value) -> Value:
    """Gas that blood takes from the lungs; negative where it gives gas to them.

    Notes
    -----
    Fick: flow times the difference of contents. O2 reverses in ascent when alveolar PO2 falls below
    venous, CO2 in descent when compression raises alveolar above venous PCO2.

    Examples
    --------
    >>> gas_transfer(5.0, 20.0, 15.0)
    0.25
    """
    return cardiac_output * (end_capillary_content - mixed_venous_content) / 100.0


@formula(result="squeeze_pressure", source="boyle_1662", provenance="read")
def squeeze_pressure(
    lung_volume_btps: Value, residual_volume_btps: Value, surface_pressure: Value = 101.325
) -> Value:
    """Ambient pressure at which closed lungs come to residual volume, by Boyle alone.

    Notes
    -----
    P0 TLC/RV: 30 m for 6 and 1.5 L. A soft limit: blood shifts into the chest (1047 mL at 90 ft in one
    series) and trained divers go beyond it.

    Examples
    --------
    >>> squeeze_pressure(6.0, 1.5)
    405.3
    """
    return surface_pressure * lung_volume_btps / residual_volume_btps
