"""Blood that passes the lungs and the tissues: venous admixture, mixed venous blood."""

from __future__ import annotations

from gasphys.blood.carbon_dioxide import content_of_buffered_blood
from gasphys.blood.haldane import (
    liganded_fraction,
    o2_content_beside_cohb,
    o2_saturation_beside_cohb,
    po2_at_content_beside_cohb,
)
from gasphys.equation import Value, formula, inverse

__all__ = [
    "arterial_o2_content_from_shunt",
    "arterial_po2_from_shunt",
    "co2_load",
    "mixed_venous_co2_content",
    "mixed_venous_o2_content",
    "mixed_venous_ph",
    "shunt_at_arterial_po2",
    "venous_arterial_pco2_difference",
]


@formula(
    result="arterial_o2_content",
    source=("riley_cournand_1949", "fick_1870"),
    provenance="secondary",
    check_result=True,
)
def arterial_o2_content_from_shunt(
    end_capillary_o2_content: Value, shunt_fraction: Value, arteriovenous_difference: Value = 5.0
) -> Value:
    """O2 content of arterial blood, a mixture of end-capillary and shunted venous blood.

    Notes
    -----
    Ca = Cc' - q/(1 - q) (Ca - Cv). A shunt that takes more than there is gives a negative content, which
    is reported.

    Examples
    --------
    >>> round(arterial_o2_content_from_shunt(21.0, 0.2), 2)
    19.75
    """
    return end_capillary_o2_content - shunt_fraction / (1.0 - shunt_fraction) * arteriovenous_difference


_O2 = ("riley_cournand_1949", "severinghaus_1979", "o2_capacity_texts", "haldane_1912")


@formula(
    result="arterial_po2",
    valid={"alveolar_po2": (0.0, 400.0)},
    source=_O2,
    provenance="secondary",
)
def arterial_po2_from_shunt(
    alveolar_po2: Value,
    shunt_fraction: Value,
    hemoglobin: Value = 15.0,
    arteriovenous_difference: Value = 5.0,
    ph: Value = 7.4,
    cohb_fraction: Value = 0.0,
) -> Value:
    """Arterial PO2 where a constant share of cardiac output passes no ventilated alveolus.

    Notes
    -----
    Content at alveolar PO2, less q/(1 - q) times the arteriovenous difference, and back to PO2 (Riley &
    Cournand), curve of Severinghaus 1979. With a fixed shunt the alveolar-arterial *difference* is constant
    once hemoglobin is full, so that the ratio climbs towards 1 under pressure: the better model in diseased
    lungs, not in healthy ones. A shunt inferred from a sample on air does not carry over to oxygen.

    Examples
    --------
    Oxygen at 3 atm, a tenth shunted:

    >>> round(arterial_po2_from_shunt("2193 mmHg", 0.10) / 0.1333224)
    2014
    """
    ideal = o2_content_beside_cohb(alveolar_po2, hemoglobin, cohb_fraction, ph)
    content = arterial_o2_content_from_shunt(ideal, shunt_fraction, arteriovenous_difference)
    return po2_at_content_beside_cohb(content, hemoglobin, cohb_fraction, ph)


@formula(
    result="shunt_fraction",
    valid={"alveolar_po2": (0.0, 400.0), "arterial_po2": (0.0, 400.0)},
    source=_O2,
    provenance="secondary",
    check_result=True,
)
def shunt_at_arterial_po2(
    arterial_po2: Value,
    alveolar_po2: Value,
    hemoglobin: Value = 15.0,
    arteriovenous_difference: Value = 5.0,
    ph: Value = 7.4,
    cohb_fraction: Value = 0.0,
) -> Value:
    """Shunt that a sample implies: venous admixture as a share of cardiac output.

    Notes
    -----
    q = (Cc' - Ca)/(Cc' - Ca + D), the shunt equation with the arteriovenous difference D; the inverse of
    :func:`arterial_po2_from_shunt`. Taken on air it is mostly uneven ventilation: the same ratio of 0.60
    implies 0.23 on air, 0.09 on 60 % O2 and 0.14 on O2. Say on which gas.

    Examples
    --------
    A ratio of 0.80 on oxygen at 1 atm:

    >>> round(shunt_at_arterial_po2("538.4 mmHg", "673 mmHg"), 3)
    0.077
    """
    ideal = o2_content_beside_cohb(alveolar_po2, hemoglobin, cohb_fraction, ph)
    missing = ideal - o2_content_beside_cohb(arterial_po2, hemoglobin, cohb_fraction, ph)
    return missing / (missing + arteriovenous_difference)


# ---------------------------------------------------------------------------------------------
# Through the tissues


@formula(result="mixed_venous_o2_content", source="fick_1870", provenance="secondary", check_result=True)
def mixed_venous_o2_content(arterial_o2_content: Value, arteriovenous_difference: Value = 5.0) -> Value:
    """O2 content of mixed venous blood.

    Notes
    -----
    Arterial content less the arteriovenous difference, of the whole body. Below zero the blood does not
    carry what the difference asks for, which is reported.

    Examples
    --------
    >>> mixed_venous_o2_content(20.0, 5.0)
    15.0
    """
    return arterial_o2_content - arteriovenous_difference


@formula(result="venous_arterial_co2_difference", source="fick_1870", provenance="secondary")
def co2_load(respiratory_exchange_ratio: Value, arteriovenous_difference: Value = 5.0) -> Value:
    """CO2 that blood takes up for the O2 it gives.

    Notes
    -----
    R times the arteriovenous O2 difference (Fick, for both gases and one flow).

    Examples
    --------
    >>> co2_load(0.8, 5.0)
    4.0
    """
    return respiratory_exchange_ratio * arteriovenous_difference


@formula(result="mixed_venous_co2_content", source="fick_1870", provenance="secondary")
def mixed_venous_co2_content(arterial_co2_content: Value, venous_arterial_co2_difference: Value) -> Value:
    """CO2 content of mixed venous blood.

    Notes
    -----
    Arterial content and what the tissues add.

    Examples
    --------
    >>> mixed_venous_co2_content(47.0, 4.0)
    51.0
    """
    return arterial_co2_content + venous_arterial_co2_difference


@formula(
    result="mixed_venous_co2_content",
    refuse={"mixed_venous_ph": (7.0, 7.7)},
    source=("douglas_1988", "kelman_1967", "lang_zander_2002", "severinghaus_1979"),
    provenance="secondary",
    register=False,
)
def co2_content_at_o2_content(
    mixed_venous_ph: Value,
    base_excess: Value,
    hemoglobin: Value,
    mixed_venous_o2_content: Value,
    cohb_fraction: Value = 0.0,
) -> Value:
    """CO2 content of blood of a base excess and an O2 content at a pH.

    The pH shifts the O2 curve (Bohr), the saturation that follows changes CO2 content (Haldane).
    """
    po2 = po2_at_content_beside_cohb(mixed_venous_o2_content, hemoglobin, cohb_fraction, mixed_venous_ph)
    saturation = o2_saturation_beside_cohb(po2, cohb_fraction, mixed_venous_ph)
    liganded = liganded_fraction(saturation, cohb_fraction)
    return content_of_buffered_blood(mixed_venous_ph, base_excess, hemoglobin, liganded)


mixed_venous_ph = inverse(
    co2_content_at_o2_content,
    "mixed_venous_ph",
    name="mixed_venous_ph",
    module=__name__,
    doc="""PH of mixed venous blood, O2 and CO2 content coupled.

Notes
-----
The one pH at which blood holds both contents: pH shifts the O2 curve (Bohr), the saturation that follows
changes CO2 content and buffering (Haldane). With it PO2 follows from O2 content and PCO2 from base excess.
Content by Douglas 1988, base excess by Lang & Zander 2002, curve of Severinghaus 1979, with carbon monoxide
by the laws of Haldane. Not reached: outside pH 7.0 to 7.7, or no O2 left.

Examples
--------
>>> round(mixed_venous_ph(50.69, 0.0, 15.0, 15.0), 3)
7.38
""",
)


@formula(
    result="venous_arterial_pco2_difference", source="douglas_1988", provenance="secondary", check_result=True
)
def venous_arterial_pco2_difference(venous_pco2: Value, arterial_pco2: Value) -> Value:
    """Rise of PCO2 from arterial to mixed venous blood.

    Notes
    -----
    The difference only: arterial PCO2 is an input and moves with the patient's ventilation.

    Examples
    --------
    >>> round(venous_arterial_pco2_difference("45 mmHg", "40 mmHg") / 0.1333224, 2)
    5.0
    """
    return venous_pco2 - arterial_pco2
