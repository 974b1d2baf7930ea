"""Every dose explained: the chain ends in the stored number, whatever the measure does with its pieces."""

from __future__ import annotations

import datetime

import numpy as np
import pytest

from gasphys import Exposure, doses, explain
from gasphys.doses import MEASURES, Course, Session, course_doses
from gasphys.doses.oxygen_times import noaa_cns_after_interval
from gasphys.schedules import treatment

DIVE = Exposure.start("oxygen", depth_unit="fsw").travel(depth=18, rate=30).stay(40).travel(depth=0, rate=30)
WEEK = Exposure.start("oxygen", pressure=130.0).stay(60).then(1400, "air", pressure=101.325)
WEEK = WEEK.then(70, "oxygen", pressure=150.0).then(2000, "air", pressure=101.325).then(30, "oxygen", 140.0)


@pytest.mark.parametrize("measure", list(MEASURES))
@pytest.mark.parametrize("exposure", [DIVE, WEEK, treatment("usn_6")], ids=["dive", "days", "usn_6"])
def test_the_chain_ends_in_the_dose(measure: str, exposure: Exposure) -> None:
    ds = doses.oxygen(exposure, measure)
    for name in ("dose", "total"):
        told = explain(ds, name, measure=measure)
        assert told.value == pytest.approx(told.stored, rel=1e-12, nan_ok=True)
        if np.isnan(told.stored):
            assert next(iter(told.given))
        elif told.stored > 0.0:
            assert told.steps
    links = MEASURES[measure].links
    told = explain(ds, "dose", measure=measure)
    if links and not np.isnan(told.stored):
        assert [s.equation for s in told.steps[-len(links) :]] == [link.equation for link in links]
        assert float(told.steps[-1].result) == pytest.approx(told.stored, rel=1e-12)


@pytest.mark.parametrize("recovery", list(noaa_cns_after_interval.registry))
def test_what_an_interval_takes_off_is_a_step(recovery: str) -> None:
    dive = Exposure.join([DIVE.then(60).then(40), DIVE.then(50)])
    ds = doses.oxygen(dive, "noaa_cns", recovery=recovery)
    told = explain(ds, "dose", measure="noaa_cns")
    assert told.value == pytest.approx(told.stored, rel=1e-12)
    taken = [s for s in told.steps if "surface_interval" in s.inputs]
    assert [s.inputs["surface_interval"] for s in taken] == [100.0, 50.0]
    none = explain(doses.oxygen(dive, "uptd", recovery=recovery), "dose", measure="uptd")
    assert not [s for s in none.steps if "surface_interval" in s.inputs]


def test_what_was_carried_on_is_told() -> None:
    first = doses.oxygen(DIVE, ["esot", "vital_capacity_loss"])
    second = doses.oxygen(DIVE, ["vital_capacity_loss"], initial=first)
    told = explain(second, "dose", measure="vital_capacity_loss")
    carried = told.given["carried on from the exposure before"]
    assert carried == float(first.total.sel(measure="vital_capacity_loss"))
    assert told.value == pytest.approx(told.stored, rel=1e-12)
    assert told.given["sum over the pieces"] == pytest.approx(2.0 * carried, rel=1e-12)


def test_a_risk_of_any_sign_is_explained_beside_the_seizure_rates() -> None:
    ds = doses.oxygen(treatment("clinical_2_4_atm"), ["cns_risk_dry_rest"], count="oxygen", role="patient")
    told = explain(ds, "dose", measure="cns_risk_dry_rest")
    rates = [v for k, v in told.given.items() if "seizure rate of clinics" in k]
    assert rates == [2.5e-5, 1.5e-3]  # Yildiz 2004 and Heyboer 2014, at 2.4 to 2.5 atm
    assert "endpoint: any nervous system sign, not a seizure probability" in str(told)


def test_the_worst_day_names_its_window() -> None:
    ds = doses.oxygen(WEEK, "noaa_cns_day")
    told = explain(ds, "dose", measure="noaa_cns_day")
    assert told.given["to minute"] - told.given["from minute"] == pytest.approx(1440.0)
    cut = WEEK._split([told.given["from minute"], told.given["to minute"]])
    inside = cut.pieces().times[:-1] >= told.given["from minute"] - 1e-9
    inside &= cut.pieces().times[1:] <= told.given["to minute"] + 1e-9
    each = doses.model.piece_doses("noaa_cns_day", cut.pieces())
    assert told.value == pytest.approx(each[inside].sum(), rel=1e-12)


def test_the_greatest_depth_sets_the_closed_circuit_time() -> None:
    dive = Exposure.start("oxygen", depth_unit="fsw").travel(depth=33, minutes=1).travel(depth=20, minutes=1)
    told = explain(
        doses.oxygen(dive.stay(8), "usn_closed_circuit_o2"), "dose", measure="usn_closed_circuit_o2"
    )
    assert told.stored == pytest.approx(10.0 / 25.0)
    assert told.steps[0].inputs["depth"] == pytest.approx(33.0)


@pytest.mark.parametrize("measure", list(MEASURES))
def test_a_course_is_followed_session_by_session(measure: str) -> None:
    noon = datetime.datetime(2042, 3, 3, 12)
    usn_9, clinical = treatment("usn_9"), treatment("clinical_2_4_atm")
    sessions = [
        Session(noon + datetime.timedelta(hours=h), x) for h, x in ((0, usn_9), (20, clinical), (26, usn_9))
    ]
    ds = course_doses(Course(tuple(sessions)), "all", count="oxygen")
    for session in range(3):
        told = explain(ds, "course_dose", measure=measure, session=session)
        assert told.value == pytest.approx(told.stored, rel=1e-12, nan_ok=True)
    if measure == "vital_capacity_loss":
        recovered = [s for s in told.steps if s.equation.name == "doses.vital_capacity_after_recovery"]
        assert len(recovered) == 2
        # What is left, and what the session itself brings, add as roots.
        left = float(recovered[-1].result)
        own = float(ds.session_dose.sel(measure=measure, session=2))
        assert told.stored == pytest.approx((left**0.5 + own**0.5) ** 2, rel=1e-9)
    if np.isnan(told.stored):
        assert next(iter(told.given)) == "the course rule is: each session by itself"


def test_a_recovery_outside_its_data_is_told() -> None:
    noon = datetime.datetime(2042, 3, 3, 12)
    day = datetime.timedelta(days=1)
    low = Exposure.start("oxygen").stay(60)
    high = Exposure.start("oxygen", pressure="2.8 atm").stay(60)
    for one, words, defined in ((low, "too low: not defined", False), (high, "is extrapolated", True)):
        ds = course_doses(Course((Session(noon, one), Session(noon + day, one))), ["vital_capacity_loss"])
        assert words in str(ds.course_reason.values[0])
        assert bool(np.isfinite(ds.course_dose.values[0, -1])) is defined
    ds = course_doses(Course((Session(noon, low), Session(noon + day, low))), ["vital_capacity_loss"])
    told = explain(ds, "course_dose", measure="vital_capacity_loss", session=1)
    assert "too low" in next(iter(told.given))
