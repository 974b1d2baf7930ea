"""Every measure along an exposure: numbers of the reference tables, quadrature, limits, statuses."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

import gasphys as gp
from gasphys import Exposure
from gasphys.doses import MEASURES, dose_text, oxygen
from gasphys.doses.model import piece_doses
from gasphys.errors import ExposureError, UnknownNameError
from gasphys.limits import load
from gasphys.quantities import CAUTION
from gasphys.schedules import treatment
from tests.floors.exposures import exposures

ATM = 101.325
ADDITIVE = [name for name, one in MEASURES.items() if one.whole is None]


def value(exposure: Exposure, measure: str, **more: object) -> float:
    return float(oxygen(exposure, [measure], **more).dose[0])


def air_dive(depth: float, minutes: float) -> Exposure:
    return Exposure.start("air").travel(depth=depth, rate=20).stay(minutes).travel(depth=0, rate=9)


# -- The treatment tables ----------------------------------------------------------------------------

#: Reference table of treatment doses, oxygen periods only [computed there]: UPTD, ESOT min, K, loss of
#: vital capacity in percent by the power equation and by the linear form.
TREATMENTS = {
    "usn_5": (331.9, 806.5, 180.68, 1.48, 2.26),
    "usn_6": (640.8, 1458.1, 590.59, 4.84, 4.32),
    "usn_9": (274.0, 650.5, 117.53, 0.96, 1.87),
}
FIVE = ("uptd", "esot", "arieli_pulmonary_index", "vital_capacity_loss", "harabin_vital_capacity_loss")
HALF_A_DIGIT = (0.05, 0.05, 0.005, 0.00005, 0.00005)


@pytest.mark.parametrize("name", TREATMENTS)
def test_treatment_tables(name: str) -> None:
    found = oxygen(treatment(name), FIVE, count="oxygen").dose.values
    expected = np.array(TREATMENTS[name]) * [1.0, 1.0, 1.0, 0.01, 0.01]
    for got, wanted, allowed in zip(found, expected, HALF_A_DIGIT, strict=True):
        assert got == pytest.approx(wanted, abs=allowed * 1.001)


@pytest.mark.parametrize(
    ("ascent", "expected"),
    [(4.0, (686.8, 1512.6, 635.51, 5.21, 4.59)), (35.0, (713.5, 1540.2, 658.96, 5.40, 4.73))],
)
def test_table_6a_in_both_editions(ascent: float, expected: tuple[float, ...]) -> None:
    """30 min of air at 165 fsw, 4 min (older) or 35 min (Revisions 5-7) to 60 fsw on air, Table 6."""
    six = treatment("usn_6")
    start = Exposure.start(
        "air", pressure=six.surface_pressure + 165 * ATM / 33, depth_unit="fsw", part="air"
    )
    deep = start.stay(30.0).travel(depth=60.0, minutes=ascent)
    periods = oxygen(six, FIVE, count="oxygen").total.values
    for k, name in enumerate(FIVE):
        total = piece_doses(name, deep.pieces()).sum() + periods[k]
        got = float(MEASURES[name].dose(np.asarray(total)))
        wanted = expected[k] * (1.0 if k < 3 else 0.01)
        assert got == pytest.approx(wanted, abs=HALF_A_DIGIT[k] * 1.001)


def test_table_5_with_oxygen_on_the_descent() -> None:
    """Reference row "TT5 + 3 min descent on O2": PO2 from 1 to 2.8182 atm in 3 min."""
    five = oxygen(treatment("usn_5"), FIVE, count="oxygen").total.values
    down = Exposure.start("oxygen", depth_unit="fsw").travel(depth=60, minutes=3.0)
    for k, wanted in enumerate((338.9, 821.1, 187.28, 0.0154, 0.0231)):
        total = five[k] + piece_doses(FIVE[k], down.pieces()).sum()
        assert float(MEASURES[FIVE[k]].dose(np.asarray(total))) == pytest.approx(
            wanted, abs=HALF_A_DIGIT[k] * 1.001
        )


def test_what_the_air_breaks_add() -> None:
    """Reference: full integration of air at 60 fsw adds 1.2 UPTD to Table 5 and 3.7 to Table 6."""
    for name, added in (("usn_5", 1.2), ("usn_6", 3.7)):
        table, periods = (value(treatment(name), "uptd", count=c) for c in ("table", "oxygen"))
        assert table - periods == pytest.approx(added, abs=0.05)


def test_a_circulating_wrong_number_is_not_ours() -> None:
    """A dose of 268 for Table 6 circulates; it is wrong."""
    assert value(treatment("usn_6"), "uptd", count="oxygen") > 2 * 268


def test_rounded_exponent() -> None:
    """Reference: Table 5 with the exponent 0.83 is 330.5, Table 9 272.8."""
    for name, wanted in (("usn_5", 330.5), ("usn_9", 272.8)):
        exposure = treatment(name)
        pieces, pure = exposure.pieces(), exposure.fractions["O2"] == 1.0
        ramps = gp.doses.uptd_ramp(pieces.start_po2, pieces.end_po2, pieces.duration, 0.83)
        assert ramps[pure].sum() == pytest.approx(wanted, abs=0.05)


# -- Random exposures against quadrature -------------------------------------------------------------

RATES = {
    "uptd": (lambda p: (max(p / ATM - 0.5, 0.0) / 0.5) ** (5 / 6), lambda x: x),
    "esot": (lambda p: (p / ATM) ** 2.285, lambda x: x),
    "arieli_pulmonary_index": (lambda p: (p / ATM) ** 2.285, lambda x: (x / 60.0) ** 2),
    "vital_capacity_loss": (lambda p: (p / ATM) ** 2.285, lambda x: 0.000082 * (x / 60.0) ** 2),
    "pulmonary_toxicity_incidence": (
        lambda p: (p / ATM) ** 2.285,
        lambda x: min((1.85 + 0.171 * (x / 60.0) ** 2) / 100.0, 1.0),
    ),
    "harabin_vital_capacity_loss": (lambda p: 0.00011 * max(p / ATM - 0.5, 0.0), lambda x: x),
    "cns_risk_active": (lambda p: (p / ATM) ** 3.38, lambda x: norm.cdf((math.log(x) - 9.63) / 2.02)),
    "cns_risk_active_0_9_l_min": (
        lambda p: (p / ATM) ** 3.38,
        lambda x: norm.cdf((math.log(x) - 11.19) / 1.35),
    ),
    "cns_risk_immersed_rest": (lambda p: (p / ATM) ** 5.465, lambda x: norm.cdf((math.log(x) - 8.99) / 0.81)),
    "cns_risk_dry_rest": (lambda p: (p / ATM) ** 6.495, lambda x: norm.cdf((math.log(x) - 11.34) / 0.65)),
}


@settings(max_examples=25, deadline=None)
@given(exposures())
def test_every_integral_against_quadrature(exposure: Exposure) -> None:
    pieces = exposure.pieces()
    found = oxygen(exposure, list(RATES))
    for name, (rate, dose) in RATES.items():
        total = 0.0
        for a, b, t in zip(pieces.start_po2, pieces.end_po2, pieces.duration, strict=True):
            knee = 0.5 * ATM
            place = [(knee - a) / (b - a)] if min(a, b) < knee < max(a, b) else None
            total += (
                t
                * quad(
                    lambda s, a=a, b=b, rate=rate: rate(a + (b - a) * s),
                    0,
                    1,
                    points=place,
                    epsabs=0,
                    epsrel=1e-12,
                    limit=400,
                )[0]
            )
        got = float(found.dose.sel(measure=name))
        if np.isnan(got):
            assert str(found.reason.sel(measure=name).values)
            got_total = piece_doses(name, pieces).sum()
        else:
            # A distribution function bends the error of the sum.
            assert got == pytest.approx(dose(total), rel=1e-10 if "cns" not in name else 1e-9, abs=1e-14)
            got_total = float(found.total.sel(measure=name))
        assert got_total == pytest.approx(total, rel=1e-10, abs=1e-12)


@settings(max_examples=25, deadline=None)
@given(exposures(), st.lists(st.floats(0.01, 0.99), min_size=1, max_size=6))
def test_splitting_changes_no_measure(exposure: Exposure, shares: list[float]) -> None:
    cut = exposure._split(sorted(s * exposure.duration for s in shares))
    one, other = (oxygen(e, "all").dose.values for e in (exposure, cut))
    np.testing.assert_allclose(one, other, rtol=1e-10, atol=1e-13)


@settings(max_examples=25, deadline=None)
@given(exposures(loops=False), st.randoms(use_true_random=False))
def test_order_changes_no_measure_that_only_adds(exposure: Exposure, random: object) -> None:
    from dataclasses import replace

    order = list(range(len(exposure.part)))
    random.shuffle(order)  # type: ignore[attr-defined]
    mixed = replace(
        exposure,
        columns={k: v[order] for k, v in exposure.columns.items()},
        fractions={k: v[order] for k, v in exposure.fractions.items()},
    )
    one, other = (oxygen(e, ADDITIVE).dose.values for e in (exposure, mixed))
    np.testing.assert_allclose(one, other, rtol=1e-11, atol=1e-14)


@settings(max_examples=20, deadline=None)
@given(exposures(), exposures())
def test_joined_is_chained(first: Exposure, second: Exposure) -> None:
    measures = [m for m in ADDITIVE if m != "shykoff_incidence"]
    whole = oxygen(Exposure.join([first, second]), measures)
    chained = oxygen(second, measures, initial=oxygen(first, measures))
    # What was outside a fit in one part alone is NaN in the chain; the sums that exist are the same.
    known = ~np.isnan(chained.dose.values)
    np.testing.assert_allclose(chained.total.values[known], whole.total.values[known], rtol=1e-11)


# -- Statuses and limits -----------------------------------------------------------------------------


def test_one_dataset_holds_every_measure() -> None:
    ds = oxygen(treatment("clinical_2_4_atm"), "all", role="patient")
    assert ds.measure.values.tolist() == list(MEASURES)
    for name in ("dose", "limit_value", "margin", "status", "reason", "endpoint", "population", "provenance"):
        assert name in ds
    assert ds.attrs["comment"] == CAUTION
    assert set(np.unique(ds.status.values)) <= {"beyond", "within", "not applicable", "not judged"}
    undefined = np.isnan(ds.dose.values)
    assert (ds.status.values[undefined] == "not applicable").all()
    assert all(str(r) for r in ds.reason.values[undefined])
    assert set(json.loads(ds.attrs["equations"])) == set(MEASURES)


def test_diver_limits_are_context_for_patients() -> None:
    diver, patient = (oxygen(treatment("clinical_2_4_atm"), "all", role=r) for r in ("diver", "patient"))
    for name, words in (("esot", "diver"), ("arieli_pulmonary_index", "diver"), ("uptd", "diver, attendant")):
        assert str(diver.status.sel(measure=name).values) in ("beyond", "within")
        row = patient.sel(measure=name)
        assert str(row.status.values) == "not applicable"
        assert "not applicable, shown as context" in str(row.reason.values)
        assert str(row.for_whom.values) == words
        # The number, the limit and the distance stay to be seen.
        assert float(row.dose) == float(diver.dose.sel(measure=name))
        assert float(row.margin) == pytest.approx(float(row.limit_value) - float(row.dose))
    # 90 min of oxygen at 2.4 atm are beyond the diver limit of a day: 665 against 657 ESOT.
    assert value(Exposure.start("oxygen", pressure=2.4 * ATM).stay(90), "esot") == pytest.approx(
        665.3, abs=0.05
    )
    assert float(diver.limit_value.sel(measure="esot")) == pytest.approx(657.3, abs=0.05)
    assert str(oxygen(treatment("usn_6"), ["uptd"], role="attendant").status[0].values) == "within"


def test_limits_are_those_of_the_limit_file() -> None:
    shipped = {x.id: x for x in load()}
    for name, one in MEASURES.items():
        if one.limit:
            row = oxygen(air_dive(30, 20), [name])
            assert str(row.authority[0].values) == shipped[one.limit].authority
            assert float(row.limit_value[0]) == pytest.approx(one.limit_as(shipped[one.limit].value))


def test_outside_its_domain_a_measure_is_not_applicable_and_the_others_go_on() -> None:
    ds = oxygen(treatment("usn_6"), "all")
    for name in ("noaa_cns", "noaa_cns_day", "noaa_cns_linear", "noaa_cns_day_linear"):
        assert np.isnan(ds.dose.sel(measure=name))
        assert "1.60 atm" in str(ds.reason.sel(measure=name).values)
    assert "ends at 50 fsw" in str(ds.reason.sel(measure="usn_closed_circuit_o2").values)
    assert "130 kPa" in str(ds.reason.sel(measure="shykoff_incidence").values)
    assert float(ds.dose.sel(measure="uptd")) > 600
    # Below what the power equation knows there is no plain number.
    shallow = oxygen(air_dive(10, 30), "all")
    for name in ("esot", "vital_capacity_loss", "cns_risk_active"):
        assert np.isnan(shallow.dose.sel(measure=name))
        assert "never within" in str(shallow.reason.sel(measure=name).values)
    partly = oxygen(Exposure.start("oxygen").stay(60).switch("air").stay(600), ["esot"])
    assert "% of it comes from a PO2 outside" in str(partly.reason[0].values)
    assert float(partly.dose[0]) == pytest.approx(60.0 + 600.0 * 0.21**2.285)


def test_impossible_results_are_not_given() -> None:
    weeks = Exposure.join([treatment("usn_6").then(600)] * 15)
    ds = oxygen(weeks, ["vital_capacity_loss", "arieli_pulmonary_index", "pulmonary_toxicity_incidence"])
    assert np.isnan(ds.dose[0])
    assert "not possible" in str(ds.reason[0].values)
    for row in ds.reason.values:
        assert "no recovery counted" in str(row)
    assert "capped" in str(ds.reason[2].values)
    assert float(ds.dose[2]) == 1.0


def test_the_risk_of_any_sign_never_stands_alone() -> None:
    """Clinic seizure rates at 2.4-2.5 atm 0.15 % down to 0.0025 %: 25 to 1500 times lower than dry rest."""
    held = Exposure.start("oxygen", pressure=2.4 * ATM).stay(90)
    ds = oxygen(held, "all", role="patient")
    for name in [m for m in MEASURES if m.startswith("cns_risk")]:
        row = ds.sel(measure=name)
        assert "not a seizure probability" in str(row.endpoint.values)
        assert float(row.seizure_rate_low) == pytest.approx(2.5e-5)
        assert float(row.seizure_rate_high) == pytest.approx(1.5e-3)
        assert "0.0025 % to 0.15 %" in str(row.context.values)
    risk = float(ds.dose.sel(measure="cns_risk_dry_rest"))
    assert 25 <= risk / 1.5e-3 < 26
    assert 1500 <= risk / 2.5e-5 < 1520
    assert "25 to 1500 times" in str(ds.context.sel(measure="cns_risk_dry_rest").values)
    text = dose_text(ds)
    assert text.count("of clinics' treatments") == 4
    assert CAUTION in text
    other = oxygen(held, ["uptd"])
    assert "seizure_rate_low" not in other
    low, high = gp.doses.clinic_seizure_rates(np.array([2.0, 2.8, 1.3]) * ATM)
    assert low.tolist() == pytest.approx([0.0, 0.0051, 0.000112])
    assert high.tolist() == pytest.approx([0.0, 0.0051, 0.000472])


def test_air_breaks_are_visible() -> None:
    ds = oxygen(treatment("usn_6"), ["cns_risk_dry_rest"])
    assert int(ds.air_breaks) == 5
    assert float(ds.longest_oxygen_period) == 90.0
    assert "5 air breaks" in str(ds.context[0].values)
    whole = oxygen(treatment("usn_9"), ["uptd"])
    assert int(whole.air_breaks) == 2
    two_sessions = Exposure.join([treatment("usn_9").then(600), treatment("usn_9")])
    assert int(oxygen(two_sessions, ["uptd"]).air_breaks) == 4


def test_shykoff_needs_about_130_kpa() -> None:
    loop = Exposure.start("air").loop("1.3 bar", "trimix 18/45").travel(depth=30, minutes=2).stay(238)
    ds = oxygen(loop, ["shykoff_incidence"])
    in_band = float(ds.total[0])
    assert 238.0 < in_band < 240.0
    expected = 1.0 / (1.0 + math.exp(3.586 - 0.49 * in_band / 60.0))
    assert float(ds.dose[0]) == pytest.approx(expected, rel=1e-12)
    # PO2 rises on the way down as far as the set-point; only from 125 kPa on is it counted.
    rise = (130.0 - 125.0) / (30 * 10.0) * 2.0
    rest = (30 * 10.0 - (130.0 - ATM)) / (30 * 10.0) * 2.0
    assert in_band == pytest.approx(238.0 + rise + rest, rel=1e-12)
    for other in (Exposure.start("oxygen").stay(60), Exposure.start("nitrox 32").stay(60)):
        assert np.isnan(oxygen(other, ["shykoff_incidence"]).dose[0])


def test_provenance_refuses_within_and_the_others_go_on() -> None:
    exposure = treatment("usn_9")
    with gp.provenance("read"):
        ds = oxygen(exposure, "all")
    status = dict(zip(ds.measure.values, ds.status.values, strict=True))
    assert status["uptd"] == "not applicable"
    assert "memory_high" in str(ds.reason.sel(measure="uptd").values)
    assert float(ds.dose.sel(measure="arieli_pulmonary_index")) > 100


def test_wrong_words() -> None:
    dive = air_dive(30, 20)
    for wrong in ({"measures": ["upt"]}, {"role": "pilot"}, {"recovery": "half"}, {"count": "some"}):
        with pytest.raises(UnknownNameError):
            oxygen(dive, **{"measures": ["uptd"], **wrong})
    with pytest.raises(ExposureError, match="no piece"):
        oxygen(Exposure.start("air"))
    with pytest.raises(ExposureError, match="holds no measure"):
        oxygen(dive, ["esot"], initial=oxygen(dive, ["uptd"]))
    with pytest.raises(ExposureError, match="no one text"):
        dose_text(oxygen(_scenarios(3), ["uptd"]))


def test_what_is_no_sum_needs_the_exposure_itself() -> None:
    dive = air_dive(30, 20)
    ds = oxygen(dive, ["noaa_cns_day", "uptd"], initial=oxygen(dive, ["noaa_cns_day", "uptd"]))
    assert np.isnan(ds.dose[0])
    assert "join" in str(ds.reason[0].values)
    assert float(ds.dose[1]) == pytest.approx(2.0 * value(dive, "uptd"))


# -- NOAA over intervals and days --------------------------------------------------------------------


def test_recovery_is_opt_in_by_name() -> None:
    dive = Exposure.start("oxygen").travel(depth=5, minutes=1).stay(30).travel(depth=0, minutes=1)
    two = Exposure.join([dive.then(90), dive])
    one = value(dive, "noaa_cns")
    assert value(two, "noaa_cns") == pytest.approx(2.0 * one)
    assert value(two, "noaa_cns", recovery="half_time_90_min") == pytest.approx(1.5 * one)
    assert value(two, "noaa_cns", recovery="whole_90_min_periods") == pytest.approx(1.5 * one)
    assert value(two, "noaa_cns", recovery="reset_12_h") == pytest.approx(2.0 * one)
    # Cutting the interval changes nothing, for whole periods neither.
    cut = Exposure.join([dive.then(50).then(40), dive])
    for rule in gp.doses.noaa_cns_after_interval.registry:
        assert value(cut, "noaa_cns", recovery=rule) == pytest.approx(value(two, "noaa_cns", recovery=rule))
    # Only the fraction of one exposure knows it.
    for measure in ("uptd", "noaa_cns_day", "cns_risk_active"):
        assert value(two, measure, recovery="reset_12_h") == value(two, measure)


def test_check_value_of_two_exposures() -> None:
    """Reference: 45 min at 1.6 atm, then 60 min at 1.3 atm, no decay: 1.33333."""
    two = Exposure.start("oxygen", pressure=1.6 * ATM).stay(45).then(60, "oxygen", pressure=1.3 * ATM)
    assert value(two, "noaa_cns") == pytest.approx(1.33333, abs=1e-5)


def test_the_worst_24_hours_of_several_days() -> None:
    dive = Exposure.start("oxygen", pressure=1.5 * ATM).stay(60)
    one = value(dive, "noaa_cns_day")
    assert one == pytest.approx(60.0 / 180.0)

    def days(gap: float) -> float:
        parts = [dive.then(gap, pressure=1.0 * ATM)] * 4
        return value(Exposure.join(parts), "noaa_cns_day")

    assert days(1440.0) == pytest.approx(one)
    # 60 min every 560: three whole dives fit into 1440 min.
    assert days(500.0) == pytest.approx(3.0 * one)
    # Every 705 min: a window of 1440 that begins with a dive holds two and the first 30 min of a third.
    assert days(645.0) == pytest.approx(2.5 * one)
    short = Exposure.join([dive.then(100), dive])
    assert value(short, "noaa_cns_day") == pytest.approx(2.0 * one)


def test_day_windows_against_a_slow_search() -> None:
    rng = np.random.default_rng(7)
    exposure = Exposure.start("nitrox 36")
    for _ in range(12):
        exposure = exposure.travel(depth=float(rng.uniform(5, 30)), minutes=2).stay(
            float(rng.uniform(20, 90))
        )
        exposure = exposure.travel(depth=0, minutes=3).then(float(rng.uniform(60, 700)), "nitrox 36")
    fine = exposure._split(np.arange(1.0, exposure.duration, 1.0))
    pieces = fine.pieces()
    reached = np.concatenate([[0.0], np.cumsum(piece_doses("noaa_cns_day", pieces))])
    ends = pieces.times
    begins = np.interp(np.maximum(ends - 1440.0, 0.0), pieces.times, reached)
    slow = float(np.max(np.interp(ends, pieces.times, reached) - begins))
    ours = value(exposure, "noaa_cns_day")
    assert ours == pytest.approx(slow, rel=2e-3)
    assert ours >= slow - 1e-3


# -- US Navy closed-circuit oxygen -------------------------------------------------------------------


def oxygen_dive(depth: float, minutes: float) -> Exposure:
    return (
        Exposure.start("oxygen", depth_unit="fsw")
        .travel(depth=depth, minutes=1.0)
        .stay(minutes - 2.0)
        .travel(depth=0, minutes=1.0)
    )


def test_closed_circuit_time_at_the_greatest_depth() -> None:
    """US Navy Diving Manual Rev 4 Change A, table 18-5: 25 fsw 240, 30 80, 35 25, 40 15, 50 10 min [read]."""
    for depth, limit in ((20, 240), (25, 240), (27, 80), (30, 80), (33, 25), (40, 15), (50, 10)):
        assert value(oxygen_dive(depth, 10.0), "usn_closed_circuit_o2") == pytest.approx(10.0 / limit)
    assert np.isnan(value(oxygen_dive(51, 10.0), "usn_closed_circuit_o2"))
    # One deep minute counts for all of the dive.
    multi = oxygen_dive(20, 60.0).travel(depth=33, minutes=1).travel(depth=0, minutes=1)
    assert value(multi, "usn_closed_circuit_o2") == pytest.approx(62.0 / 25.0)


def test_closed_circuit_successive_dives() -> None:
    """Off oxygen for less than 2 h the earlier time is taken off, from 2 h on nothing is [memory_high]."""
    first, second = oxygen_dive(40, 12.0), oxygen_dive(25, 220.0)
    for gap, used in ((119.0, 12.0 / 240.0), (120.0, 0.0)):
        both = Exposure.join([first.then(gap), second])
        assert value(both, "usn_closed_circuit_o2") == pytest.approx(220.0 / 240.0 + used)
    assert (
        value(Exposure.join([first.then(60), oxygen_dive(25, 24.0)]), "usn_closed_circuit_o2") == 12.0 / 15.0
    )
    chain = Exposure.join([second.then(60), second.then(60), second])
    assert value(chain, "usn_closed_circuit_o2") == pytest.approx(660.0 / 240.0)


def test_closed_circuit_is_for_pure_oxygen() -> None:
    assert "no pure oxygen" in str(oxygen(air_dive(30, 20), ["usn_closed_circuit_o2"]).reason[0].values)
    mixed = air_dive(30, 20).switch("oxygen").stay(10)
    assert "mixed gas" in str(oxygen(mixed, ["usn_closed_circuit_o2"]).reason[0].values)


# -- Scenarios, saving -------------------------------------------------------------------------------


def _scenarios(n: int) -> Exposure:
    depth = xr.DataArray(np.linspace(4.0, 45.0, n), dims="draw", attrs={"units": "msw"})
    minutes = xr.DataArray(np.linspace(5.0, 90.0, n), dims="draw", attrs={"units": "min"})
    return Exposure.start("nitrox 32").travel(depth=depth, rate=20).stay(minutes).travel(depth=0, rate=9)


def test_scenarios_equal_single_exposures() -> None:
    many = oxygen(_scenarios(5), "all")
    for k in range(5):
        depth, minutes = np.linspace(4.0, 45.0, 5)[k], np.linspace(5.0, 90.0, 5)[k]
        dive = Exposure.start("nitrox 32").travel(depth=depth, rate=20).stay(minutes).travel(depth=0, rate=9)
        single = oxygen(dive, "all")
        for name in ("dose", "margin", "seizure_rate_low", "seizure_rate_high"):
            np.testing.assert_allclose(many[name].isel(draw=k), single[name], rtol=1e-12, err_msg=name)
        assert many.status.isel(draw=k).values.tolist() == single.status.values.tolist()


def test_a_hundred_thousand_scenarios_in_one_call() -> None:
    ds = oxygen(_scenarios(100_000), ["uptd", "esot", "noaa_cns", "cns_risk_active"])
    assert ds.dose.sizes == {"measure": 4, "draw": 100_000}
    assert np.isfinite(ds.dose.sel(measure="uptd")).all()
    undefined = np.isnan(ds.dose.values)
    assert (ds.status.values[undefined] == "not applicable").all()


@pytest.mark.parametrize("engine", ["scipy", "h5netcdf"])
def test_saved_and_read_back(tmp_path: object, engine: str) -> None:
    ds = oxygen(treatment("usn_6"), "all", role="patient")
    path = f"{tmp_path}/doses.nc"
    ds.to_netcdf(path, engine=engine)
    with xr.open_dataset(path, engine=engine) as back:
        xr.testing.assert_identical(back.load(), ds)


# -- Reviewed limits ---------------------------------------------------------------------------------


def test_review_of_the_index_crosses_where_the_root_says() -> None:
    held = Exposure.start("oxygen", pressure=2.0 * ATM).stay(180)
    found = gp.review(held).sel(limit="pulmonary_index_5_days")
    assert float(found.worst) == pytest.approx(9.0 * 2.0**4.57, rel=1e-12)
    assert float(found.first_crossing) == pytest.approx(60.0 * math.sqrt(70.0) / 2.0**2.285, rel=1e-9)
    assert str(found.status.values) == "beyond"
    assert (
        str(gp.review(air_dive(10, 30)).status.sel(limit="pulmonary_index_5_days").values) == "not applicable"
    )
    patient = gp.review(held, role="patient").sel(limit="pulmonary_index_5_days")
    assert str(patient.status.values) == "not applicable"
    assert float(patient.worst) == float(found.worst)
    long = Exposure.join([held.then(1440), held])
    assert str(gp.review(long).status.sel(limit="pulmonary_index_5_days").values) == "not judged"


def test_review_of_closed_circuit_oxygen_crosses_in_time_and_by_depth() -> None:
    found = gp.review(oxygen_dive(40, 20.0)).sel(limit="usn_closed_circuit_o2")
    assert float(found.first_crossing) == pytest.approx(15.0, rel=1e-9)
    assert float(found.worst) == pytest.approx(20.0 / 15.0)
    # 30 min at 20 fsw, then down to 40 fsw in 4 min: beyond where 30 fsw is passed (25 min permitted at 35).
    deeper = (
        Exposure.start("oxygen", depth_unit="fsw")
        .travel(depth=20, minutes=1)
        .stay(29)
        .travel(depth=40, minutes=4)
    )
    found = gp.review(deeper).sel(limit="usn_closed_circuit_o2")
    assert float(found.first_crossing) == pytest.approx(32.0, rel=1e-6)


def test_review_of_carbon_dioxide_and_helium() -> None:
    stale = gp.Gas(oxygen=0.21, carbon_dioxide=0.002)
    found = gp.review(Exposure.start(stale).travel(depth=30, minutes=3).stay(10))
    row = found.sel(limit="co2_usn_saturation")
    assert float(row.worst) == pytest.approx(0.002 * 401.325 / ATM)
    assert str(row.status.values) == "beyond"
    assert str(found.status.sel(limit="co2_usn_4_hours").values) == "within"
    plain = gp.review(air_dive(30, 20))
    assert "not given" in str(plain.reason.sel(limit="co2_usn_saturation").values)
    assert str(plain.status.sel(limit="helium_nervous_syndrome_fast").values) == "not applicable"
    deep = gp.review(Exposure.start("heliox 8/92").travel(depth=210, minutes=60))
    status = {
        k: str(deep.status.sel(limit=f"helium_nervous_syndrome_{k}").values) for k in ("fast", "motor", "eeg")
    }
    assert status == {"fast": "beyond", "motor": "beyond", "eeg": "within"}
