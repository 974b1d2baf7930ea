"""Treatment tables as exposures: totals, doses, variants, what is off, what attendants breathe."""

from __future__ import annotations

import numpy as np
import pytest

import gasphys as gp
from gasphys import Exposure, doses, schedules
from gasphys.errors import ProvenanceError, RangeError, UnknownNameError, ValidityWarning
from gasphys.schedules import treatment
from gasphys.schedules.tables import segments

#: Totals without a descent outside the clock, minutes: sums of the segments as the reference gives them;
#: 2346 (39:06) and 2436 (40:36), 380 (6:20), 659 (10:59), 1139 (18:59), 319 are remembered printed totals.
TOTALS = [
    ("usn_5", {}, 135.0),
    ("usn_5", {"extensions_shallow": 1}, 155.0),
    ("usn_5", {"extensions_shallow": 2}, 175.0),
    ("usn_6", {}, 285.0),
    ("usn_6", {"extensions_deep": 2}, 335.0),
    ("usn_6", {"extensions_deep": 2, "extensions_shallow": 2}, 485.0),
    ("usn_6a", {}, 350.0),
    ("usn_6a_before_rev_4", {}, 319.0),
    ("usn_4", {}, 2346.0),
    ("usn_4", {"bottom_minutes": 120}, 2436.0),
    ("usn_9", {}, 102.25),
    ("usn_1a", {}, 380.0),
    ("usn_2a", {}, 659.0),
    ("usn_3", {}, 1139.0),
]


@pytest.mark.parametrize(("name", "more", "minutes"), TOTALS)
def test_totals(name: str, more: dict[str, int], minutes: float) -> None:
    exposure = treatment(name, **more)
    assert exposure.attrs["table_minutes"] == pytest.approx(minutes, rel=1e-14)
    counted = [p != "descent" for p in exposure.part]
    assert exposure.columns["segment_duration"][counted].sum() == pytest.approx(minutes, rel=1e-12)
    assert exposure.pressure == float(exposure.surface_pressure)


#: C32: Table 7 from 60 fsw to the end of the 4-fsw stop 2160 min (36:00), Table 8 from 225 fsw 3389 min
#: (56:29), both remembered printed totals; from 165 fsw 53:52.
STEPS = [
    ("usn_7", {}, 720.0 + 4.0, 2160.0),
    ("usn_8", {}, 2.0, 3389.0),
    ("usn_8", {"start_depth": 165}, 2.0, 53 * 60 + 52),
    ("usn_8", {"variant": "last_stops_together"}, 4.0, 3389.0),
]


@pytest.mark.parametrize(("name", "more", "around", "minutes"), STEPS)
def test_tables_of_steps(name: str, more: dict[str, object], around: float, minutes: float) -> None:
    with pytest.warns(ValidityWarning, match="not verified"):
        exposure = treatment(name, unverified=True, **more)
    assert exposure.attrs["table_minutes"] - around == pytest.approx(minutes, rel=1e-12)
    assert "not verified" in exposure.attrs["flag"]
    assert exposure.attrs["provenance"] == "memory_medium"


def test_steps_are_two_feet_and_three_from_an_odd_depth() -> None:
    with gp.validity("ignore"):
        odd = treatment("usn_8", unverified=True, start_depth=165)
        seven = treatment("usn_7", unverified=True)
    depth = (odd.columns["start_pressure"] - 101.325) / (101.325 / 33.0)
    stops = depth[np.array(odd.part) == "air"].round(6)
    assert stops[:3].tolist() == [162.0, 160.0, 158.0]
    assert np.all(np.diff(stops) == -2.0)
    assert stops[-1] == 2.0
    depth = (seven.columns["start_pressure"] - 101.325) / (101.325 / 33.0)
    stops = depth[np.array(seven.part) == "air"].round(6)
    assert stops[[0, 1, -1]].tolist() == [60.0, 58.0, 4.0]
    assert len(stops) == 1 + 9 + 10 + 8 + 1


def test_what_is_off_stays_off() -> None:
    for name in ("usn_7", "usn_8"):
        assert name not in schedules.names()
        with pytest.raises(ProvenanceError, match=r"compare with the manual in force.*unverified=True"):
            treatment(name)
    with gp.provenance("secondary"), pytest.raises(ProvenanceError):
        treatment("usn_6")
    with pytest.raises(UnknownNameError):
        treatment("heliox_30_msw")


@pytest.mark.parametrize(
    ("name", "more", "words"),
    [
        ("usn_6", {"extensions_deep": 3}, "allows 0 to 2"),
        ("usn_6", {"bottom_minutes": 40}, "leaves no time open"),
        ("usn_6", {"start_depth": 50}, "begins at one depth"),
        ("usn_6", {"treatment_gas": "nitrox 40"}, "no stop for a treatment gas"),
        ("usn_4", {"bottom_minutes": 121}, "30 to 120"),
        ("usn_8", {"unverified": True, "bottom_minutes": 31}, "at most 30 min"),
        ("usn_8", {"unverified": True, "start_depth": 226}, "4 to 225"),
        ("usn_7", {"unverified": True, "bottom_minutes": 700}, "720"),
        ("usn_6", {"attendant": True, "altitude": "12000 ft"}, "12000 ft"),
        ("clinical_2_4_atm", {"attendant": True}, "the unit's own applies"),
    ],
)
def test_what_a_table_does_not_allow(name: str, more: dict[str, object], words: str) -> None:
    with gp.validity("ignore"), pytest.raises(RangeError, match=words):
        treatment(name, **more)
    with pytest.raises(UnknownNameError, match="late_oxygen"):
        treatment("usn_4", variant="oxygen_late")


#: Pulmonary dose, all segments, 33 fsw/atm, air 0.21, the first stop as the reference's file has it (C16).
DOSES = {"usn_5": 333.1, "usn_6": 644.4, "usn_6a": 717.1, "usn_6a_before_rev_4": 690.4, "usn_9": 274.0}


@pytest.mark.parametrize("name", list(DOSES))
def test_doses_as_the_reference_counts_them(name: str) -> None:
    rows = [r for r in segments()[name] if r.part != "descent"]
    whole = Exposure.start(rows[0].gas, pressure=rows[0].pressure("start", 101.325))
    for row in rows:
        whole = whole.switch(row.gas)
        whole = (
            whole.travel(pressure=row.pressure("end", 101.325), minutes=row.minutes)
            if row.is_travel
            else whole.stay(row.minutes)
        )
    assert float(doses.oxygen(whole, ["uptd"]).dose[0]) == pytest.approx(DOSES[name], abs=0.05)
    if "before" not in name:
        # The table built has these segments and a descent before them.
        built = doses.oxygen(treatment(name), ["uptd"], count="table")
        assert float(built.dose[0]) == pytest.approx(DOSES[name], abs=0.05)


def test_variants_and_treatment_gas() -> None:
    shallow = treatment("usn_9", variant="30_fsw", extensions_deep=1)
    assert shallow.columns["start_pressure"].max() == pytest.approx(101.325 * 63.0 / 33.0, rel=1e-12)
    assert shallow.attrs["table_minutes"] == pytest.approx(135.0 + 1.5, rel=1e-12)
    slow = treatment("usn_9", variant="slow_ascent")
    assert slow.attrs["table_minutes"] == 100.0 + 45.0
    four_hours = treatment("usn_9", extensions_deep=5)
    oxygen = four_hours.fractions["O2"] == 1.0
    assert four_hours.columns["segment_duration"][oxygen].sum() == 240.0 + 2.25
    mixed = treatment("usn_6a", treatment_gas="nitrox 40")
    at = np.array(mixed.part) == "treatment gas"
    assert mixed.columns["segment_duration"][at].tolist() == [25.0]
    assert mixed.attrs["table_minutes"] == 350.0


def test_table_4_in_cycles() -> None:
    patient, late = treatment("usn_4"), treatment("usn_4", variant="late_oxygen")
    tender = treatment("usn_4", attendant=True)
    for exposure, minutes in ((patient, 0.0), (late, 0.0), (tender, 0.0)):
        oxygen = np.array([p in ("oxygen", "travel on oxygen") for p in exposure.part])
        lengths = exposure.columns["segment_duration"][oxygen]
        assert lengths.max() <= 25.0 + 1e-9
        assert minutes <= lengths.sum()
    # The attendant breathes oxygen when the patient does, from 2 h before leaving 30 fsw.
    when = treatment("usn_4", variant="late_oxygen")
    assert tender.part == when.part
    first = next(k for k, p in enumerate(tender.part) if p == "oxygen")
    leaves = 2346.0 - (1 + 120 + 10 + 120 + 10)
    assert tender.pieces().times[first] == pytest.approx(leaves - 120.0, rel=1e-12)
    begin = next(k for k, p in enumerate(patient.part) if p == "oxygen")
    assert patient.columns["start_pressure"][begin] == pytest.approx(101.325 * 93.0 / 33.0, rel=1e-12)


def test_an_attendant_who_owes_more() -> None:
    tired = treatment("usn_6", attendant=True, exposed_before=True)
    oxygen = np.array(tired.part) == "oxygen"
    assert tired.columns["segment_duration"][oxygen].sum() == 90.0
    assert (tired.attrs["attendant_oxygen_owed"], tired.attrs["attendant_oxygen_given"]) == (90.0, 90.0)
    with pytest.warns(ValidityWarning, match="owes 240 min"):
        high = treatment("usn_6a", attendant=True, exposed_before=True, altitude="9000 ft", extensions_deep=2)
    assert high.attrs["attendant_oxygen_given"] == 150.0
    assert high.attrs["attendant_provenance"] == "memory_medium"
    own = treatment("clinical_2_4_atm", attendant=True, attendant_minutes=15)
    assert own.part[-2:] == ("oxygen", "travel on oxygen")
    assert "the unit's own" in own.attrs["attendant_rule"]
    air = treatment("usn_2a", attendant=True)
    assert set(air.fractions["O2"]) == {0.21}
    assert "no rule is stated" in air.attrs["attendant_rule"]
    with gp.validity("ignore"):
        seven = treatment("usn_7", attendant=True, unverified=True)
    assert set(seven.fractions["O2"]) == {0.21}
    assert seven.attrs["attendant_rule"].startswith("no oxygen (Revision 4 Change A notes")


def test_what_is_not_stated_is_said() -> None:
    """Table 9 has no addition for an attendant exposed before: the rule stays, and says what it lacks."""
    nine = schedules.attendant_oxygen("usn_9", exposed_before=True)
    assert nine.minutes == 15.0
    assert "not stated" in nine.text
    assert "not stated" not in schedules.attendant_oxygen("usn_6", exposed_before=True).text
    built = treatment("usn_9", attendant=True, exposed_before=True)
    assert "not stated" in built.attrs["attendant_rule"]


@pytest.mark.parametrize("name", schedules.names())
def test_every_table_says_what_it_is(name: str) -> None:
    attrs = treatment(name).to_dataset().attrs
    for key in ("title", "edition", "provenance", "table_clock", "references", "comment"):
        assert attrs[key]
    assert attrs["note"] == "a transcription to compare with the manual in force"
