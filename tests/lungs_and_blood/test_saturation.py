"""Dissociation curves: against the printed forms in high precision, against each other, flags."""

from __future__ import annotations

import warnings

import mpmath as mp
import numpy as np
import pytest

import gasphys as gp
from gasphys import blood
from gasphys.errors import NotReachableError, ValidityWarning

MMHG = gp.convert(1.0, "mmHg", "kPa")
MODELS = tuple(blood.o2_saturation.registry)
FOUR = MODELS[:4]


# The papers' own forms, in mmHg (Siggaard-Andersen in kPa), typed here a second time on purpose.
def _severinghaus(p, ph, t, pco2):
    v = p * mp.mpf(10) ** (mp.mpf("0.024") * (37 - t))
    v *= mp.exp(((p / mp.mpf("26.6")) ** mp.mpf("0.184") - mp.mpf("2.2")) * (mp.mpf("7.4") - ph))
    return 1 / (23400 / (v**3 + 150 * v) + 1)


def _kelman(p, ph, t, pco2):
    upper = [mp.mpf(s) for s in ("-8532.2289", "2121.4010", "-67.073989")]
    lower = [mp.mpf(s) for s in ("935960.87", "-31346.258", "2396.1674", "-67.104406")]
    exponent = mp.mpf("0.024") * (37 - t) + mp.mpf("0.4") * (ph - mp.mpf("7.4"))
    exponent += mp.mpf("0.06") * mp.log10(40 / pco2)
    x = p * mp.mpf(10) ** exponent
    top = sum(c * x**n for n, c in enumerate(upper, start=1)) + x**4
    return top / (sum(c * x**n for n, c in enumerate(lower)) + x**4)


def _dash(p, ph, t, pco2):
    std = mp.mpf("26.8")
    d = mp.mpf("0.795") * ph + mp.mpf("1.357") - mp.mpf("7.24")
    by_ph = std - mp.mpf("25.535") * d + mp.mpf("10.646") * d**2 - mp.mpf("1.764") * d**3
    by_co2 = std + mp.mpf("0.1273") * (pco2 - 40) + mp.mpf("1.083e-4") * (pco2 - 40) ** 2
    k = t - 37
    by_t = std + mp.mpf("1.435") * k + mp.mpf("4.163e-2") * k**2 + mp.mpf("6.86e-4") * k**3
    p50 = std * (by_ph / std) * (by_co2 / std) * (by_t / std)
    n = mp.mpf("2.82") - mp.mpf("1.20") * mp.mpf(10) ** (-p / mp.mpf("29.25"))
    return (p / p50) ** n / (1 + (p / p50) ** n)


def _siggaard_andersen(p, ph, t, pco2):
    a = mp.mpf("1.04") * (mp.mpf("7.4") - ph)
    x0 = mp.mpf("1.946") + a + mp.mpf("0.055") * (t - 37)
    x = mp.log(p * mp.mpf("0.133322387415"))
    y = mp.mpf("1.875") + x - x0 + (mp.mpf("3.5") + a) * mp.tanh(mp.mpf("0.5343") * (x - x0))
    return 1 / (1 + mp.exp(-y))


PRINTED = dict(zip(FOUR, (_severinghaus, _kelman, _dash, _siggaard_andersen), strict=True))


@pytest.mark.parametrize("model", FOUR)
def test_curve_is_the_printed_one(model):
    rng = np.random.default_rng(20420303)
    for _ in range(200):
        p = float(np.exp(rng.uniform(np.log(25.0), np.log(3000.0))))
        state = (rng.uniform(6.9, 7.7), rng.uniform(25.0, 42.0), rng.uniform(20.0, 100.0))
        with mp.workdps(40):
            expected = float(PRINTED[model](mp.mpf(p), *map(mp.mpf, state)))
        ours = blood.o2_saturation(p * MMHG, model, state[0], state[1], state[2] * MMHG)
        assert ours == pytest.approx(expected, rel=1e-12)


def test_curves_agree_within_1_4_points():
    po2 = np.concatenate([np.linspace(24.0, 700.0, 5000)]) * MMHG
    all_of_them = np.array([100.0 * blood.o2_saturation(po2, m) for m in FOUR])
    spread = all_of_them.max(axis=0) - all_of_them.min(axis=0)
    assert spread.max() < 1.4
    at_20 = [100.0 * blood.o2_saturation(20.0 * MMHG, m) for m in FOUR]
    assert max(at_20) - min(at_20) < 1.9
    # They part when the blood is acid: 5 points at pH 7.2 (common knowledge of the sheet's table).
    acid = [100.0 * blood.o2_saturation(40.0 * MMHG, m, ph=7.2) for m in FOUR]
    assert 5.0 < max(acid) - min(acid) < 5.5


@pytest.mark.parametrize("model", MODELS)
def test_regular_from_nothing_to_3000_mmhg(model):
    po2 = np.concatenate([[0.0, 5e-324, 1e-12], np.linspace(0.0, 3000.0, 3001)]) * MMHG
    with gp.validity("ignore"):
        saturation = blood.o2_saturation(po2, model)
        content = blood.o2_content(po2, 15.0, model)
        slope = blood.o2_saturation.derivative("po2", model=model)(po2[4:])
    assert np.all(np.isfinite(saturation))
    assert np.all((saturation >= 0.0) & (saturation <= 1.0))
    assert np.all(np.isfinite(content))
    if model != "kelman_1966":
        assert np.all(np.diff(content[3:]) > 0.0)
        assert np.all(np.isfinite(slope))


def test_kelman_is_flagged_at_and_below_10_mmhg():
    for po2 in (10.0 * MMHG, "10 mmHg", 9.9 * MMHG, 1.0, 0.0):
        with pytest.warns(ValidityWarning, match="at and below 10 mmHg"):
            blood.o2_saturation(po2, "kelman_1966")
        with pytest.warns(ValidityWarning, match="at and below 10 mmHg"):
            blood.o2_content(po2, 15.0, "kelman_1966")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        blood.o2_saturation("10.001 mmHg", "kelman_1966")
    with pytest.warns(ValidityWarning, match="3 of 5 values"):
        blood.o2_saturation(np.array([5.0, 8.0, 10.0, 10.1, 40.0]) * MMHG, "kelman_1966")
    # The way back from there is flagged too.
    with pytest.warns(ValidityWarning, match="po2 = 0.66"):
        blood.po2_at_saturation(0.0329, "kelman_1966")


def test_kelman_low_branch_is_a_fraction_with_a_small_jump():
    with gp.validity("ignore"):
        at = [blood.o2_saturation(p * MMHG, "kelman_1966", pco2="40 mmHg") for p in (9.999999, 10.000001)]
        small = blood.o2_saturation("5 mmHg", "kelman_1966", pco2="40 mmHg")
    assert at == pytest.approx([0.0952, 0.0866], abs=5e-5)
    # Quoted as percent elsewhere, which would make it a hundred times smaller.
    assert small == pytest.approx(0.003683 * 5.0 + 0.000584 * 25.0, rel=1e-12)


@pytest.mark.parametrize("model", FOUR)
def test_above_98_percent_saturation_no_longer_tells_po2(model):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        blood.po2_at_saturation(0.98, model)
    with gp.validity("raise"), pytest.raises(gp.errors.ValidityError, match="no longer tells PO2"):
        blood.po2_at_saturation(0.981, model)
    with pytest.warns(ValidityWarning, match="saturation no longer tells PO2"):
        blood.po2_at_saturation(np.array([0.5, 0.985]), model)


def test_full_saturation_is_not_reached():
    for model in ("severinghaus_1979", "dash_bassingthwaighte_2016", "siggaard_andersen_1984"):
        with pytest.warns(ValidityWarning), pytest.raises(NotReachableError, match="po2"):
            blood.po2_at_saturation(1.0, model)
    with gp.validity("ignore"):
        assert np.isnan(blood.po2_at_saturation(np.array([0.5, 1.0]))[1])


def test_measured_curve_and_equation_part_where_it_ruins_the_inverse():
    # Severinghaus' table stands at 99.72 % at 500 mmHg: 0.25 points, 0.05 mL/dL, 16 mmHg dissolved.
    short = blood.o2_saturation("500 mmHg") - 0.9972
    assert short == pytest.approx(0.0026, abs=1e-4)
    missing = blood.bound_o2(short, 15.0)
    assert missing == pytest.approx(0.05, abs=0.005)
    assert blood.po2_for_dissolved_o2(missing) / MMHG == pytest.approx(16.0, abs=1.0)


def test_steepest_hill_slope_of_siggaard_andersen():
    # 1 + h k = 2.87 at x0, printed in the abstract.
    p0 = np.exp(1.946)
    s = [blood.o2_saturation(p0 * f, "siggaard_andersen_1984") for f in (np.exp(-1e-4), np.exp(1e-4))]
    slope = (np.log(s[1] / (1.0 - s[1])) - np.log(s[0] / (1.0 - s[0]))) / 2e-4
    assert slope == pytest.approx(2.87, abs=0.005)


def test_dpg_and_base_excess_are_the_printed_terms():
    # Dash: 26.8 + 795.63 g - 19660.89 g^2 with g in mol/L above 4.65 mmol/L.
    for excess in (-2.0, 1.0, 4.0):
        g = excess / 1000.0
        expected = 26.8 + 795.63 * g - 19660.89 * g * g
        found = blood.p50("dash_bassingthwaighte_2016", pco2="40 mmHg", dpg_excess=excess) / MMHG
        assert found == pytest.approx(expected, rel=1e-12)
    # Siggaard-Andersen: a = 0.005 BE + 0.07 (DPG - 5) moves x0 by a and h with it.
    a = 0.005 * 8.0 + 0.07 * 3.0
    x, x0 = np.log(6.0), 1.946 + a
    y = 1.875 + x - x0 + (3.5 + a) * np.tanh(0.5343 * (x - x0))
    found = blood.o2_saturation(6.0, "siggaard_andersen_1984", base_excess=8.0, dpg_excess=3.0)
    assert found == pytest.approx(1.0 / (1.0 + np.exp(-y)), rel=1e-12)
