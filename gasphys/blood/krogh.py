"""Krogh's tissue cylinder with Erlang's equation: order of magnitude, not a tissue PO2."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np

from gasphys.equation import Value, formula, inverse
from gasphys.maths import find_root, log

__all__ = ["KROGH_WORDS", "krogh_critical_po2", "krogh_po2", "krogh_radius"]

#: What every result says.
KROGH_WORDS = "order of magnitude, not a tissue PO2"

_krogh = functools.partial(
    formula,
    source="krogh_erlang_1919",
    provenance="secondary",
    labels={"caution": KROGH_WORDS},
)


@_krogh(result="krogh_po2")
def krogh_po2(
    radial_distance: Value,
    capillary_blood_po2: Value,
    tissue_radius: Value,
    capillary_radius: Value,
    tissue_o2_use: Value,
    krogh_diffusion: Value,
) -> Value:
    """PO2 inside an idealized cylinder of tissue around one capillary.

    Notes
    -----
    Krogh-Erlang: P(r) = Pc - M0/(4K) (R^2 ln(r^2/rc^2) - (r^2 - rc^2)), with O2 use independent of PO2
    (which fails below about 1 mmHg), no gradient along the capillary and no exchange between
    capillaries. Order of magnitude, not a tissue PO2. A negative result says that O2 does not reach
    this far.

    Examples
    --------
    >>> round(krogh_po2(20.0, "40 mmHg", 30.0, 3.0, 3.3, "5e-10 mL/cm/s/mmHg"), 2)
    4.22
    """
    # um to cm, and use per deciliter and minute to use per milliliter and second
    slope = 1e-8 * tissue_o2_use / 6000.0 / (4.0 * krogh_diffusion)
    square, inner = radial_distance * radial_distance, capillary_radius * capillary_radius
    return capillary_blood_po2 - slope * (
        tissue_radius * tissue_radius * log(square / inner) - (square - inner)
    )


@_krogh(result="critical_capillary_po2")
def krogh_critical_po2(
    tissue_radius: Value, capillary_radius: Value, tissue_o2_use: Value, krogh_diffusion: Value
) -> Value:
    """Capillary PO2 that just brings O2 to the rim of an idealized tissue cylinder.

    Notes
    -----
    Krogh-Erlang with zero PO2 at r = R. Order of magnitude, not a tissue PO2. Parameters in use [from
    memory]: capillary radius 2.5-3 um, tissue radius 10 (heart) to 40 um (resting muscle), O2 use of grey
    matter 3.3-5, of the heart 8, of resting muscle 0.2-0.3 mL/dL/min, K 4-6 x 10^-10 mL/cm/s/mmHg.

    Examples
    --------
    >>> round(krogh_critical_po2(30.0, 3.0, 3.3, "5e-10 mL/cm/s/mmHg") / 0.1333224, 2)
    8.95
    """
    return -krogh_po2(tissue_radius, 0.0, tissue_radius, capillary_radius, tissue_o2_use, krogh_diffusion)


def _radius(po2: Any, capillary_radius: Any, use: Any, diffusion: Any) -> Any:
    """Root beyond the capillary's own wall, where the critical PO2 is zero."""
    top = krogh_critical_po2.arguments[0].quantity.possible[1]
    shape = np.broadcast_shapes(*(np.shape(v) for v in (po2, capillary_radius, use, diffusion)))
    return find_root(
        lambda radius: krogh_critical_po2.raw(radius, capillary_radius, use, diffusion) - po2,
        np.broadcast_to(capillary_radius, shape),
        np.full(shape, top),
    )


krogh_radius = inverse(
    krogh_critical_po2,
    "tissue_radius",
    name="krogh_radius",
    module=__name__,
    given="capillary_po2",
    kernel=_radius,
    doc="""Radius of an idealized tissue cylinder that a capillary PO2 just supplies.

Notes
-----
The inverse of :func:`krogh_critical_po2`, with the caller's parameters. Order of magnitude, not a
tissue PO2: equal capillaries without exchange between them, O2 use independent of PO2. A figure of
247 um at the arterial end on O2 at 3 atm has been printed; it belongs to an arterial PO2 of 2200, an
alveolar value.

Examples
--------
>>> round(krogh_radius("2000 mmHg", 3.0, 3.3, "5e-10 mL/cm/s/mmHg"), 1)
297.9
""",
)
