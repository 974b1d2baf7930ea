"""Attendants: who is inside when, what each breathes, holds and owes."""

from __future__ import annotations

import numpy as np
import pytest

from gasphys import chamber, tissues
from gasphys.errors import ExposureError, RangeError
from gasphys.schedules import treatment

FSW = 101.325 / 33.0


def test_one_attendant_is_the_table_of_attendants() -> None:
    (alone,) = chamber.attendance("usn_6").values()
    table = treatment("usn_6", attendant=True)
    for name, values in table.columns.items():
        np.testing.assert_allclose(alone.columns[name], values, rtol=1e-14)
    assert alone.part == table.part
    ds = chamber.attendants("usn_6", models=["buhlmann_1995_c"])
    direct = tissues.tensions(table, "buhlmann_1995_c")
    assert float(ds.limit_fraction[0, 0]) == pytest.approx(float(direct.limit_fraction.max()), rel=1e-13)
    assert float(ds.oxygen_minutes[0]) == 30.0 + 30.0
    assert float(ds.oxygen_owed[0]) == 30.0


def test_changing_over_leaves_nobody_alone() -> None:
    found = chamber.attendance("usn_6", ("A-1", "A-2"), changes=[100, 200], extensions_shallow=1)
    patient = treatment("usn_6", extensions_shallow=1)
    at = np.linspace(0.0, patient.duration, 727)
    pressure = patient.to_dataset(at=at).ambient_pressure.sel(time=at, method="nearest").values
    inside = np.zeros((2, at.size), dtype=bool)
    for k, one in enumerate(found.values()):
        assert one.duration >= patient.duration - 1e-9
        ds = one.to_dataset(at=at)
        own = ds.ambient_pressure.sel(time=at, method="nearest").values
        inside[k] = np.abs(own - pressure) < 1e-6
    assert np.all(inside.any(axis=0))
    both = inside.all(axis=0) & (pressure > 101.325 + 1e-6)
    assert both.sum() <= 4  # only at the change itself
    first, second = found.values()
    # A-1 is inside to 100 min and again from 200 min: two turns, oxygen in the last only.
    assert first.part.count("lock in") == 1
    assert second.part.count("lock in") == second.part.count("lock out") == 1
    assert 1.0 in set(first.fractions["O2"])
    assert set(second.fractions["O2"]) == {0.21}
    assert "no rule is stated" in second.attrs["attendant_rule"]


def test_rates_in_the_entry_lock() -> None:
    found = chamber.attendance("usn_6", ("A-1", "A-2"), changes=[60], lock_in_rate=30 * FSW)
    second = found["A-2"]
    k = second.part.index("lock in")
    assert second.columns["segment_duration"][k] == pytest.approx(2.0, rel=1e-12)
    assert second.pieces().times[k + 1] == pytest.approx(60.0, rel=1e-12)
    first = found["A-1"]
    k = first.part.index("lock out")
    assert first.columns["segment_duration"][k] == pytest.approx(2.0, rel=1e-12)
    with pytest.raises(RangeError, match="75 fsw/min"):
        chamber.attendance("usn_6", lock_in_rate=76 * FSW)
    with pytest.raises(ExposureError, match="must rise"):
        chamber.attendance("usn_6", ("A-1", "A-2"), changes=[300])
    with pytest.raises(ExposureError, match="cannot be back"):
        chamber.attendance("usn_6", ("A-1", "A-2"), changes=[60, 61])


#: US Navy Diving Manual Revision 4 Change A p 21-26 to 21-29 [read].
@pytest.mark.parametrize(
    ("name", "hours"),
    [("usn_6", [12, 12, 24, 24, 1]), ("usn_4", [48, 48, 48, 72, 1]), ("usn_9", [np.nan] * 5)],
)
def test_intervals(name: str, hours: list[float]) -> None:
    ds = chamber.attendants(name, models=["buhlmann_1995_c"])
    np.testing.assert_array_equal(ds.hours.values, hours)
    assert ds.next.values.tolist()[3] == "flying"


def test_any_model_and_altitude() -> None:
    ds = chamber.attendants("usn_6a", models=tissues.models(), fly_altitude="2400 m", altitude="5000 ft")
    assert float(ds.oxygen_owed[0]) == 120.0
    told = (ds.reason != "").values | ~np.isnan(ds.limit_fraction.values)
    assert told.all()
    assert np.isfinite(ds.limit_fraction.sel(model="buhlmann_1995_c")).all()
    refused = ds.reason.sel(model="boycott_1908").item()
    assert "refuses" in refused
    assert ds.attrs["provenance"] == "memory_medium"


def test_oxygen_leaves_less_behind() -> None:
    """One exposed before breathes more oxygen: less inert gas in every compartment at the end."""
    found = [
        tissues.tensions(treatment("usn_6", attendant=True, exposed_before=b), "buhlmann_1995_c")
        for b in (False, True)
    ]
    ends = [f.tissue_pressure.sel(inert_gas="N2").isel(time=-1).values for f in found]
    assert np.all(ends[1] <= ends[0] + 1e-12)


def test_a_shift_in_turn() -> None:
    ds = chamber.shift(
        [(0, "usn_6"), (60, "usn_9"), (400, "usn_5"), (2000, "usn_6")],
        ["A-1", "A-2"],
        ["buhlmann_1995_c", "boycott_1908"],
    )
    assert ds.attendant.values.tolist() == ["A-1", "A-2", "A-1", "A-2"]
    # A-1: 20 min more on Table 5 within 12 h of Table 6; A-2's Table 6 comes 31 h after Table 9.
    assert ds.exposed_before.values.tolist() == [0, 0, 1, 0]
    assert ds.oxygen_owed.values.tolist() == [30.0, 15.0, 20.0, 30.0]
    assert ds.interval_status.values.tolist() == ["not judged", "not judged", "beyond", "not judged"]
    np.testing.assert_allclose(ds.surface_interval.values[2:], [400 - 288, 2000 - 60 - 104.5], rtol=1e-12)
    alone = tissues.tensions(treatment("usn_5", attendant=True, exposed_before=True), "buhlmann_1995_c")
    carried = float(ds.limit_fraction.sel(model="buhlmann_1995_c")[2])
    assert carried > float(alone.limit_fraction.max())
    assert ds.limit_fraction.sel(model="boycott_1908").isnull().all()
    with pytest.raises(ExposureError, match="still inside"):
        chamber.shift([(0, "usn_6"), (60, "usn_6")], ["A-1"])
    with pytest.raises(ExposureError, match="in order"):
        chamber.shift([(100, "usn_6"), (60, "usn_6")], ["A-1"])


def test_a_shift_of_sessions_without_a_rule() -> None:
    own = chamber.shift([(0, "clinical_2_4_atm"), (180, "clinical_2_4_atm")], ["A-1"], attendant_minutes=15)
    air = chamber.shift([(0, "clinical_2_4_atm"), (180, "clinical_2_4_atm")], ["A-1"])
    assert "the unit's own" in own.rule.values[0]
    assert "chamber air" in air.rule.values[0]
    assert bool((own.limit_fraction < air.limit_fraction).all())
    assert bool((air.limit_fraction[1] > air.limit_fraction[0]).all())
