"""Alveolar gas, saturation, content and oxygen dose against independent high-precision arithmetic."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest

import gasphys as gp
from gasphys import blood, doses, lungs

mp.mp.dps = 40
MMHG = mp.mpf("0.133322387415")


def _saturation(kilopascal: float, ph: float = 7.4, celsius: float = 37.0) -> mp.mpf:
    p = mp.mpf(kilopascal) / MMHG
    shift = (p / mp.mpf("26.6")) ** mp.mpf("0.184") - mp.mpf("2.2") if p else mp.mpf("-2.2")
    p *= 10 ** (mp.mpf("0.024") * (37 - mp.mpf(celsius))) * mp.exp(shift * (mp.mpf("7.4") - mp.mpf(ph)))
    return 1 / (23400 / (p**3 + 150 * p) + 1) if p else mp.mpf(0)


@pytest.mark.parametrize("po2", [0.0, 1e-6, 0.1, 3.5, 5.333, 13.3, 70.0, 399.0])
@pytest.mark.parametrize(("ph", "celsius"), [(7.4, 37.0), (7.2, 37.0), (7.6, 40.0), (6.9, 21.0)])
def test_saturation(po2: float, ph: float, celsius: float) -> None:
    ours = blood.o2_saturation(po2, "severinghaus_1979", ph, celsius)
    assert ours == pytest.approx(float(_saturation(po2, ph, celsius)), rel=1e-13, abs=1e-300)


@pytest.mark.parametrize("po2", [0.0, 5.0, 13.3, 100.0, 300.0])
def test_content(po2: float) -> None:
    exact = mp.mpf("1.34") * 15 * _saturation(po2) + mp.mpf("0.0031") * mp.mpf(po2) / MMHG
    assert blood.o2_content(po2, hemoglobin=15.0) == pytest.approx(float(exact), rel=1e-13)


@pytest.mark.parametrize(
    ("fio2", "ratio", "fico2"),
    [
        (0.2093, 0.8, 0.0),
        (0.2093, 0.8, 0.02),
        (0.5, 1.0, 0.02),
        (0.5, 1.0, 0.0),
        (1.0, 0.7, 0.0),
        (0.18, 1.2, 0.03),
    ],
)
def test_alveolar_gas_by_the_balance_itself(fio2: float, ratio: float, fico2: float) -> None:
    """Inert gas in equals inert gas out and R is CO2 out over O2 in: two linear balances, solved."""
    dry, pco2 = mp.mpf("4") * mp.mpf("101.325") - 47 * MMHG, mp.mpf("5.5")
    f_o2, f_co2, r = mp.mpf(fio2), mp.mpf(fico2), mp.mpf(ratio)
    f_inert = 1 - f_o2 - f_co2
    a_co2 = pco2 / dry

    def imbalance(a_o2: mp.mpf) -> mp.mpf:
        expired = f_inert / (1 - a_o2 - a_co2)  # per liter inspired
        return (expired * a_co2 - f_co2) - r * (f_o2 - expired * a_o2)

    if f_inert == 0:
        exact = dry - pco2
    else:
        exact = dry * mp.findroot(imbalance, f_o2 - a_co2)
    ours = lungs.alveolar_po2(405.3, fio2, 5.5, ratio, fico2)
    assert ours == pytest.approx(float(exact), rel=1e-12)


@pytest.mark.parametrize("exponent", [5.0 / 6.0, 0.83])
@pytest.mark.parametrize(
    ("start", "end"), [(101.325, 285.5), (285.5, 20.0), (50.6625, 50.6625), (30.0, 60.0)]
)
def test_uptd_over_a_ramp(start: float, end: float, exponent: float) -> None:
    half = mp.mpf("50.6625")

    def rate(share: mp.mpf) -> mp.mpf:
        x = (mp.mpf(start) + share * (mp.mpf(end) - mp.mpf(start)) - half) / half
        return x ** mp.mpf(exponent) if x > 0 else mp.mpf(0)

    points = [0, 1]
    if (start - 50.6625) * (end - 50.6625) < 0.0:
        points = [0, (half - start) / (mp.mpf(end) - start), 1]
    exact = 30 * mp.quad(rate, points)
    assert doses.uptd_ramp(start, end, 30.0, exponent) == pytest.approx(float(exact), rel=1e-11, abs=1e-12)


@pytest.mark.parametrize("total", ["single", "day"])
@pytest.mark.parametrize(("start", "end"), [(1.6, 0.4), (0.5, 1.55), (1.23, 1.27), (1.0, 1.0), (0.3, 0.5)])
def test_noaa_over_a_ramp(start: float, end: float, total: str) -> None:
    nodes = [0.6, 0.7, 0.8, 0.9, 1.0, 1.1, 1.2, 1.3, 1.4, 1.5, 1.6]
    minutes = {
        "single": [720, 570, 450, 360, 300, 240, 210, 180, 150, 120, 45],
        "day": [720, 570, 450, 360, 300, 270, 240, 210, 180, 180, 150],
    }[total]
    atm = 101.325

    def rate(rule: str, p: float) -> float:
        if p < 0.6:
            return 0.0
        if rule == "linear":
            return 1.0 / float(np.interp(p, nodes, minutes))
        return 1.0 / minutes[int(np.searchsorted(nodes, p))]

    for rule in ("step", "linear"):
        # Midpoints of many pieces; at a jump the error is part of one piece.
        shares = (np.arange(20_000) + 0.5) / 20_000
        slow = 10.0 * np.mean([rate(rule, p) for p in start + shares * (end - start)])
        ours = doses.noaa_cns_ramp(start * atm, end * atm, 10.0, rule=rule, total=total)
        assert ours == pytest.approx(slow, rel=1e-4, abs=1e-9)


def test_alveolar_to_content_chain() -> None:
    """From pressure to content in one go, against the same chain in high precision."""
    dry = mp.mpf("2.4") * mp.mpf("101.325") - 47 * MMHG - 40 * MMHG
    content = mp.mpf("1.34") * 15 * _saturation(float(dry)) + mp.mpf("0.0031") * dry / MMHG
    po2 = gp.lungs.alveolar_po2("2.4 atm", 1.0, "40 mmHg")
    assert gp.blood.o2_content(po2, hemoglobin=15.0) == pytest.approx(float(content), rel=1e-12)
