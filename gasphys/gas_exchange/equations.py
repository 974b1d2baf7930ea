"""Arterial PO2 predicted from alveolar PO2."""

from __future__ import annotations

from gasphys.equation import Value, formula

__all__ = ["arterial_po2_from_ratio"]


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
