"""What a person breathes at an instant: ambient pressure in a piece, and the dry gas pressures."""

from __future__ import annotations

from gasphys.equation import Value, formula
from gasphys.maths import maximum, minimum

__all__ = [
    "fraction_breathed",
    "linear_in_piece",
    "loop_inert_pressure",
    "loop_po2",
    "open_circuit_inert_pressure",
    "open_circuit_po2",
]


@formula(
    result="ambient_pressure",
    source="ideal_gas",
    provenance="read",
)
def linear_in_piece(start_pressure: Value, end_pressure: Value, share_of_piece: Value) -> Value:
    """Ambient pressure at a share of a piece of an exposure.

    Notes
    -----
    A piece is linear in time by definition.

    Examples
    --------
    >>> linear_in_piece(100.0, 300.0, 0.25)
    150.0
    """
    return start_pressure * (1.0 - share_of_piece) + end_pressure * share_of_piece


@formula(
    result="breathing_gas_po2",
    quantities={"o2_fraction": "oxygen"},
    source="dalton_1802",
    provenance="read",
)
def open_circuit_po2(o2_fraction: Value, ambient_pressure: Value) -> Value:
    """Dry PO2 of gas breathed on open circuit.

    Notes
    -----
    Dalton: fraction of dry gas times ambient pressure; what doses and PO2 limits use.

    Examples
    --------
    >>> open_circuit_po2(0.5, 200.0)
    100.0
    """
    return o2_fraction * ambient_pressure


@formula(result="breathing_gas_po2", source="common_practice", provenance="secondary")
def loop_po2(setpoint: Value, ambient_pressure: Value) -> Value:
    """Dry PO2 in a closed loop held at a set-point.

    Notes
    -----
    No loop holds more oxygen than there is pressure: the smaller of set-point and ambient pressure.

    Examples
    --------
    >>> loop_po2(130.0, 101.325)
    101.325
    """
    return minimum(setpoint, ambient_pressure)


@formula(
    result="breathing_gas_inert_pressure",
    quantities={"inert_fraction": "fraction"},
    source="dalton_1802",
    provenance="read",
)
def open_circuit_inert_pressure(inert_fraction: Value, ambient_pressure: Value) -> Value:
    """Dry pressure of one inert gas breathed on open circuit.

    Notes
    -----
    Dalton: fraction of dry gas times ambient pressure.

    Examples
    --------
    >>> open_circuit_inert_pressure(0.5, 200.0)
    100.0
    """
    return inert_fraction * ambient_pressure


@formula(
    result="breathing_gas_inert_pressure",
    quantities={
        "loop_po2": "breathing_gas_po2",
        "inert_fraction": "fraction",
        "o2_fraction": "oxygen",
    },
    source="common_practice",
    provenance="secondary",
)
def loop_inert_pressure(
    ambient_pressure: Value, loop_po2: Value, inert_fraction: Value, o2_fraction: Value
) -> Value:
    """Dry pressure of one inert gas in a loop; fractions are of the diluent.

    Notes
    -----
    What oxygen leaves is shared among the inert gases as in the diluent. A diluent of pure oxygen
    leaves none.

    Examples
    --------
    >>> round(loop_inert_pressure(200.0, 130.0, 0.48, 0.17), 3)
    40.482
    """
    return (ambient_pressure - loop_po2) * inert_fraction / maximum(1.0 - o2_fraction, 1e-12)


@formula(result="fio2", source="dalton_1802", provenance="read")
def fraction_breathed(breathing_gas_po2: Value, ambient_pressure: Value) -> Value:
    """O2 fraction of the dry gas breathed, on open circuit and from a loop.

    Notes
    -----
    Dalton: dry PO2 over ambient pressure.

    Examples
    --------
    >>> fraction_breathed(130.0, 260.0)
    0.5
    """
    return breathing_gas_po2 / ambient_pressure
