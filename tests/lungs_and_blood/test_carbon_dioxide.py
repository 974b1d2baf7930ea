"""CO2 in blood: the printed changes, the Haldane effect, and nested brentq as second opinion."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

import gasphys as gp
from gasphys import blood

MMHG = gp.convert(1.0, "mmHg", "kPa")


def _base_excess(pco2, ph, hb, s):
    carbonate = 0.0304 * pco2 * 10.0 ** (ph - 6.1) - 24.26
    return (1.0 - 0.0143 * hb) * (carbonate + (9.5 + 1.63 * hb) * (ph - 7.4)) - 0.2 * hb * (1.0 - s)


def _content(pco2, ph, hb, s):
    pk = 6.086 + 0.042 * (7.4 - ph) + 0.00472 + 0.00139 * (7.4 - ph)
    plasma = 2.226 * 0.0307 * pco2 * (1.0 + 10.0 ** (ph - pk))
    return plasma * (1.0 - 0.0289 * hb / ((3.352 - 0.456 * s) * (8.142 - ph)))


def _ph(pco2, be, hb, s):
    return brentq(lambda ph: _base_excess(pco2, ph, hb, s) - be, 6.0, 8.5, xtol=1e-14)


def _pco2(content, be, hb, s):
    def missing(pco2):
        return _content(pco2, _ph(pco2, be, hb, s), hb, s) - content

    return brentq(missing, 5.0, 120.0, xtol=1e-12)


def test_venous_pco2_against_nested_brentq_on_random_blood():
    rng = np.random.default_rng(5)
    worst = 0.0
    for _ in range(60):
        pco2, load = rng.uniform(30.0, 60.0), rng.uniform(0.5, 6.0)
        hb, be, venous = rng.uniform(3.0, 18.0), rng.uniform(-5.0, 5.0), rng.uniform(0.3, 1.0)
        arterial = _content(pco2, _ph(pco2, be, hb, 0.975), hb, 0.975)
        expected = _pco2(arterial + load, be, hb, venous)
        ours = blood.venous_pco2(pco2 * MMHG, load, venous, 0.975, hb, be) / MMHG
        worst = max(worst, abs(ours - expected))
        assert blood.ph_at_base_excess(be, pco2 * MMHG, hb, venous) == pytest.approx(
            _ph(pco2, be, hb, venous), abs=1e-12
        )
    assert worst < 1e-8


def test_differences_of_the_sheet():
    # D2 less D1: 4.35 (Douglas), 4.21 (Kelman) mL/dL.
    for model, expected in (("douglas_1988", 4.35), ("kelman_1967", 4.21)):
        d1 = blood.co2_content("40 mmHg", 7.40, 15.0, 0.975, model)
        d2 = blood.co2_content("46 mmHg", 7.37, 15.0, 0.75, model)
        assert d2 - d1 == pytest.approx(expected, abs=0.005)


def test_christiansen_douglas_haldane():
    # D5: blood of BE 0 at PCO2 40 mmHg gains 5.74 mL/dL as it gives its O2 up; about 5-6 in 1914.
    content = [
        blood.co2_content("40 mmHg", blood.ph_at_base_excess(0.0, "40 mmHg", 15.0, s), 15.0, s)
        for s in (1.0, 0.0)
    ]
    assert content[1] - content[0] == pytest.approx(5.74, abs=0.005)


def test_penalty_is_2_5_to_2_9_mmhg_over_plausible_loads():
    for pco2, load in ((40.0, 4.0), (40.0, 4.5), (36.0, 4.2), (34.0, 5.0)):
        assert 2.5 < blood.haldane_penalty(pco2 * MMHG, load) / MMHG < 2.9


def test_pk_and_solubility_of_kelman():
    from gasphys.blood.carbon_dioxide import plasma_co2_pk, plasma_co2_solubility

    assert plasma_co2_pk(7.4, 37.0) == pytest.approx(6.0907, abs=5e-5)
    # Table of units: 0.0307 mmol/L/mmHg is 0.23027 mmol/L/kPa.
    assert plasma_co2_solubility(37.0) == pytest.approx(0.23027, abs=5e-6)


def test_hemoglobin_in_mmol_per_liter_is_the_known_misreading():
    # 15 g/dL are 9.3 mmol/L; taken for g/dL the cells would hardly lower the content.
    right, wrong = (blood.co2_content("40 mmHg", 7.4, hb, 0.975) for hb in (15.0, 9.3))
    assert right == pytest.approx(46.707, abs=5e-4)
    assert wrong > 51.0


def test_acid_blood_is_refused_where_content_has_no_meaning():
    with pytest.raises(gp.errors.NotReachableError, match="ph"):
        blood.pco2_at_co2_content(150.0)
    with gp.validity("ignore"):
        assert np.isnan(blood.haldane_penalty(np.array([5.3, 20.0]), base_excess=-20.0)[1])
    with pytest.warns(gp.ValidityWarning, match="nan"):
        blood.pco2_at_co2_content(np.array([50.0, 150.0]))


@pytest.mark.parametrize("temperature", [25.0, 33.0, 37.0, 41.0])
def test_plasma_co2_away_from_37_degrees_is_the_printed_form(temperature):
    # Kelman 1967, typed a second time on purpose; note 38 minus the temperature.
    for pco2, ph in ((40.0, 7.4), (55.0, 7.15), (22.0, 7.62)):
        s = 0.0307 + 0.00057 * (37.0 - temperature) + 0.00002 * (37.0 - temperature) ** 2
        pk = 6.086 + 0.042 * (7.4 - ph) + (38.0 - temperature) * (0.00472 + 0.00139 * (7.4 - ph))
        expected = s * pco2 * (1.0 + 10.0 ** (ph - pk))
        assert blood.plasma_co2(pco2 * MMHG, ph, temperature) == pytest.approx(expected, rel=1e-12)
        d_ox = 0.590 + 0.2913 * (7.4 - ph) - 0.0844 * (7.4 - ph) ** 2
        d_red = 0.664 + 0.2275 * (7.4 - ph) - 0.0938 * (7.4 - ph) ** 2
        d = d_ox + (d_red - d_ox) * (1.0 - 0.6)
        cells = 2.22 * expected * (0.45 * d + 1.0 - 0.45)
        found = blood.co2_content(pco2 * MMHG, ph, 15.0, 0.6, "kelman_1967", temperature)
        assert found == pytest.approx(cells, rel=1e-12)


@pytest.mark.parametrize(("pco2", "ph", "hb", "s"), [(28.0, 7.21, 7.0, 0.4), (66.0, 7.55, 18.0, 0.9)])
def test_base_excess_and_content_are_the_printed_forms(pco2, ph, hb, s):
    expected = _base_excess(pco2, ph, hb, s)
    assert blood.base_excess(pco2 * MMHG, ph, hb, s) == pytest.approx(expected, rel=1e-12)
    expected = _content(pco2, ph, hb, s)
    assert blood.co2_content(pco2 * MMHG, ph, hb, s) == pytest.approx(expected, rel=1e-12)


def test_henderson_hasselbalch_is_the_printed_form():
    for pco2, bicarbonate in ((40.0, 24.0), (60.0, 27.0), (25.0, 18.0)):
        expected = 6.1 + np.log10(bicarbonate / (0.03 * pco2))
        assert blood.ph_from(pco2 * MMHG, bicarbonate) == pytest.approx(expected, rel=1e-12)
