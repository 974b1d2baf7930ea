"""Oxygen in blood that carries carbon monoxide, by the two laws of Haldane."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.blood.oxygen import (
    bound_o2,
    dissolved_o2,
    po2_at_content_severinghaus,
    severinghaus_1979,
)
from gasphys.equation import Value, formula, inverse
from gasphys.maths import find_root, maximum

__all__ = [
    "functional_hemoglobin",
    "liganded_fraction",
    "o2_content_beside_cohb",
    "o2_saturation_beside_cohb",
    "po2_at_content_beside_cohb",
]

Array = NDArray[np.float64]

_LAWS: dict[str, Any] = {
    "valid": {"po2": (0.0, 400.0), "ph": (6.8, 7.8)},
    "source": ("haldane_1912", "roughton_darling_1944", "severinghaus_1979"),
    "provenance": "memory_high",
}


@formula(result="functional_hemoglobin", source="o2_capacity_texts", provenance="secondary")
def functional_hemoglobin(hemoglobin: Value, cohb_fraction: Value = 0.0) -> Value:
    """Hemoglobin left for O2 where some carries carbon monoxide.

    Notes
    -----
    Hb (1 - COHb). What is left holds its O2 more tightly: :func:`o2_saturation_beside_cohb`.

    Examples
    --------
    >>> round(functional_hemoglobin(14.1, 0.31), 2)
    9.73
    """
    return hemoglobin * (1.0 - cohb_fraction)


@formula(result="liganded_fraction", source="haldane_1912", provenance="memory_high")
def liganded_fraction(o2_saturation: Value, cohb_fraction: Value = 0.0) -> Value:
    """Share of all hemoglobin that carries O2 or CO.

    Notes
    -----
    COHb + (1 - COHb) S. What carries nothing binds CO2 and protons: this is the saturation that CO2
    content and base excess ask for.

    Examples
    --------
    >>> liganded_fraction(0.75, 0.2)
    0.8
    """
    return cohb_fraction + (1.0 - cohb_fraction) * o2_saturation


# ---------------------------------------------------------------------------------------------
# Both laws meet in one unknown: the joint PO2, PO2 + M PCO, at which the curve of O2 alone stands as
# high as O2 and CO together fill hemoglobin. PO2, saturation and content follow from it in closed form.


@formula(result="po2", **_LAWS, register=False)
def po2_at_joint_po2(joint_po2: Value, cohb_fraction: Value = 0.0, ph: Value = 7.4) -> Value:
    """PO2 of blood of a COHb from the joint PO2: x (1 - COHb/S(x))."""
    # Below the joint PO2 that gives COHb alone there is no blood; the floor keeps 0/0 away.
    return joint_po2 * (1.0 - cohb_fraction / maximum(severinghaus_1979(joint_po2, ph, 37.0), 1e-30))


def _bracket(po2: Any, cohb: Any, ph: Any) -> tuple[Any, Any]:
    """Return a joint PO2 at which PO2 is `po2` or less, and one at which it is that or more."""
    # No saturation is above 1: PO2 is at most 1 - COHb of the joint PO2. At next to nothing it is negative.
    low = np.maximum(po2 / (1.0 - cohb), 1e-9) * (1.0 - 1e-12)
    # Where the curve is half way from COHb to 1, PO2 is at least (1 - COHb)/(1 + COHb) of the joint PO2.
    half_way = np.full(np.shape(po2), 8.0)
    while np.any(short := severinghaus_1979.raw(half_way, ph, 37.0) < 0.5 * (1.0 + cohb)):
        half_way = np.where(short, 2.0 * half_way, half_way)
    return low, np.maximum(half_way, po2 * (1.0 + cohb) / (1.0 - cohb)) * (1.0 + 1e-12)


def _joint(po2: Any, cohb: Any = 0.0, ph: Any = 7.4) -> Array:
    po2, cohb, ph = np.broadcast_arrays(*(np.asarray(v, dtype=float) for v in (po2, cohb, ph)))
    if not np.any(cohb):
        return np.asarray(po2 + 0.0)
    found = find_root(lambda x: po2_at_joint_po2.raw(x, cohb, ph) - po2, *_bracket(po2, cohb, ph))
    return np.where(cohb > 0.0, found, po2)


joint_po2 = inverse(
    po2_at_joint_po2,
    "joint_po2",
    name="joint_po2",
    module=__name__,
    kernel=_joint,
    doc="PO2 at which the curve of O2 alone stands as high as O2 and CO together fill hemoglobin.",
    register=False,
)


@formula(result="o2_saturation", **_LAWS)
def o2_saturation_beside_cohb(po2: Value, cohb_fraction: Value = 0.0, ph: Value = 7.4) -> Value:
    """O2 saturation of the hemoglobin that carbon monoxide has left.

    Notes
    -----
    Haldane's first law: O2 and CO together fill hemoglobin as O2 alone would at the joint PO2,
    x = PO2 + M PCO. His second, [COHb]/[O2Hb] = M PCO/PO2, makes PO2 = x (1 - COHb/S(x)); M cancels. So S is
    (S(x) - COHb)/(1 - COHb), S(x) by Severinghaus 1979 at 37 degC: to the left of the curve without CO, and
    less bent. Blood in equilibrium with one PO2; the shift by DPG is not in it.

    Examples
    --------
    At a COHb of one half, half of the rest is full at 13 mmHg, not 27:

    >>> round(o2_saturation_beside_cohb("13.3 mmHg", 0.5), 2)
    0.5
    """
    together = severinghaus_1979(joint_po2(po2, cohb_fraction, ph), ph, 37.0)
    return (together - cohb_fraction) / (1.0 - cohb_fraction)


@formula(result="o2_content", **{**_LAWS, "source": ("o2_capacity_texts", *_LAWS["source"])})
def o2_content_beside_cohb(
    po2: Value, hemoglobin: Value = 15.0, cohb_fraction: Value = 0.0, ph: Value = 7.4
) -> Value:
    """O2 content of blood that carries carbon monoxide.

    Notes
    -----
    1.34 mL/g times the hemoglobin left times :func:`o2_saturation_beside_cohb`, plus 0.0031 mL/dL/mmHg times
    PO2. Hemoglobin is all of it, with what carries CO.

    Examples
    --------
    >>> round(o2_content_beside_cohb("95 mmHg", 15.0, 0.3), 2)
    14.18
    """
    saturation = o2_saturation_beside_cohb(po2, cohb_fraction, ph)
    return bound_o2(saturation, functional_hemoglobin(hemoglobin, cohb_fraction)) + dissolved_o2(po2)


def _at_content(content: Any, hemoglobin: Any = 15.0, cohb: Any = 0.0, ph: Any = 7.4) -> Array:
    if not np.any(cohb):
        return np.asarray(po2_at_content_severinghaus.raw(content, hemoglobin, ph, 37.0))
    content, hemoglobin, cohb, ph = np.broadcast_arrays(
        *(np.asarray(v, dtype=float) for v in (content, hemoglobin, cohb, ph))
    )
    with np.errstate(all="ignore"):
        # All content in solution: no PO2 can be higher. None in solution: none can be lower.
        low, _ = _bracket(0.0 * content, cohb, ph)
        _, high = _bracket(content / dissolved_o2.raw(1.0), cohb, ph)

        def missing(joint: Any) -> Any:
            saturation = severinghaus_1979.raw(joint, ph, 37.0) - cohb
            po2 = po2_at_joint_po2.raw(joint, cohb, ph)
            return bound_o2.raw(saturation, hemoglobin) + dissolved_o2.raw(po2) - content

        found = po2_at_joint_po2.raw(find_root(missing, low, high), cohb, ph)
        return np.where(content > 0.0, np.maximum(found, 0.0), np.where(content == 0.0, 0.0, np.nan))


po2_at_content_beside_cohb = inverse(
    o2_content_beside_cohb,
    "po2",
    name="po2_at_content_beside_cohb",
    module=__name__,
    given="content",
    kernel=_at_content,
    doc="""PO2 at which blood that carries carbon monoxide holds an O2 content.

Notes
-----
The exact inverse of :func:`o2_content_beside_cohb`: carbon monoxide lowers venous PO2 twice, because blood
holds less and because it holds it more tightly.

Examples
--------
>>> round(po2_at_content_beside_cohb(9.5, 15.0, 0.3) / 0.1333224, 1)
25.3
""",
)
