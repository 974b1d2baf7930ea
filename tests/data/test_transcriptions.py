"""Shipped data against a second transcription of the same sources, cell by cell."""

from __future__ import annotations

import csv
import itertools
from pathlib import Path

import pytest

from gasphys.constants import CONSTANTS
from gasphys.gas import FORMULAS, Gas, dry_air_standards
from gasphys.limits import load
from gasphys.person import Person, measurable
from gasphys.policy import PROVENANCE
from gasphys.quantities import quantity
from gasphys.schedules import attendant_oxygen, surface_intervals
from gasphys.schedules.data import read_rows
from gasphys.schedules.tables import segments, tables
from gasphys.sources import sources

HERE = Path(__file__).parent / "transcribed"


def rows(name: str) -> list[dict[str, str]]:
    lines = (HERE / name).read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def test_every_segment_of_every_table() -> None:
    wanted: dict[str, list[dict[str, str]]] = {}
    for row in rows("treatment_tables.csv"):
        wanted.setdefault(row["table"], []).append(row)
    shipped = segments()
    others = ("usn_1a", "usn_2a", "usn_3", "usn_4", "usn_6a_before_rev_4", "usn_9_extension_45")
    assert set(wanted) == {name for name in shipped if name.startswith("usn_")} - set(others)
    for name, expected in wanted.items():
        assert len(shipped[name]) == len(expected)
        for got, row in zip(shipped[name], expected, strict=True):
            assert (got.start, got.end, got.unit) == (row["from_fsw"], row["to_fsw"], "fsw")
            assert got.minutes == float(row["minutes"])
            assert got.gas == row["gas"]
            assert (got.part != "descent") == (row["counted"] == "1")


def test_the_clinical_session() -> None:
    """Common practice: 2.4 atm abs, 3 x 30 min of oxygen, 2 x 5 min of air, 120 min in all."""
    pieces = segments()["clinical_2_4_atm"]
    shape = [(p.start, p.end, p.minutes, p.gas) for p in pieces]
    assert shape == [
        ("surface", "2.4", 10.0, "air"),
        ("2.4", "2.4", 30.0, "oxygen"),
        ("2.4", "2.4", 5.0, "air"),
        ("2.4", "2.4", 30.0, "oxygen"),
        ("2.4", "2.4", 5.0, "air"),
        ("2.4", "2.4", 30.0, "oxygen"),
        ("2.4", "surface", 10.0, "oxygen"),
    ]


@pytest.mark.parametrize("name", list(tables()))
def test_tables_are_whole(name: str) -> None:
    table = tables()[name]
    pieces = table["segments"]
    if table.get("steps"):
        assert not pieces
        return
    assert table.get("descent_inside") or pieces[0].start in ("0", "surface")
    assert pieces[-1].end in ("0", "surface")
    for before, after in itertools.pairwise(pieces):
        assert before.end == after.start
        assert after.minutes > 0
    for key in ("title", "edition", "clock", "source"):
        assert table[key]


#: Most extensions at the deeper and the shallower stop, and variants the tables themselves allow.
MOST = {
    "usn_5": (0, 2),
    "usn_6": (2, 2),
    "usn_6a": (2, 2),
    "usn_9": (5, 0),  # O2 may total 4 h: 90 + 5 x 30 min
}


def test_extensions() -> None:
    for name, table in tables().items():
        assert (table["most_deep"], table["most_shallow"]) == MOST.get(name, (0, 0))


def test_stops_of_the_air_tables_and_of_table_4() -> None:
    wanted: dict[str, list[tuple[str, str, float]]] = {}
    found = rows("stops_of_long_tables.csv")
    for row, after in itertools.zip_longest(found, found[1:]):
        stop = row["stop_fsw"]
        end = after["stop_fsw"] if after and after["table"] == row["table"] else "0"
        wanted.setdefault(row["table"], []).append((stop, stop, float(row["minutes"])))
        wanted[row["table"]].append((stop, end, float(row["travel_minutes"])))
    assert set(wanted) == {"usn_1a", "usn_2a", "usn_3", "usn_4"}
    for name, expected in wanted.items():
        assert [(r.start, r.end, r.minutes) for r in segments()[name]] == expected
        for row in segments()[name]:
            cycles = name == "usn_4" and float(row.start) <= 60.0
            assert row.gas == ("oxygen in cycles" if cycles else "air")


def test_table_6a_of_old() -> None:
    """165 fsw 30 min including the descent, 165 to 60 in 4 min, then Table 6 from 60 fsw."""
    old, six = segments()["usn_6a_before_rev_4"], segments()["usn_6"]
    assert [(r.start, r.end, r.minutes, r.gas) for r in old[:2]] == [
        ("165", "165", 30.0, "air"),
        ("165", "60", 4.0, "air"),
    ]
    assert [(r.start, r.end, r.minutes, r.gas) for r in old[2:]] == [
        (r.start, r.end, r.minutes, r.gas) for r in six[1:]
    ]


#: Tables of steps: minutes of a stop by depth, [memory-medium]: the rates of Table 7 are 3, 2, 1 fsw/h.
STEPS = {
    "usn_7": {42: 40, 58: 40, 40: 60, 22: 60, 20: 120, 6: 120, 4: 240},
    "usn_8": {222: 5, 166: 5, 164: 12, 142: 12, 140: 15, 122: 15, 120: 20, 102: 20, 100: 25, 82: 25, 80: 30}
    | {62: 30, 60: 40, 42: 40, 40: 60, 22: 60, 20: 120, 4: 120, 2: 120},
}
LONGEST = {225: 30, 165: 180, 140: 300, 120: 480, 100: 660, 80: 900, 60: float("inf")}


def test_tables_of_steps() -> None:
    for name, minutes in STEPS.items():
        bands = [r for r in read_rows("stops.csv") if r["table"] == name]
        for depth, expected in minutes.items():
            (band,) = [r for r in bands if float(r["shallowest"]) <= depth <= float(r["deepest"])]
            assert float(band["minutes"]) == expected
            assert float(band["step"]) == 2.0
    stays = {float(r["depth"]): float(r["minutes"]) for r in read_rows("longest_stays.csv")}
    assert stays == LONGEST


@pytest.mark.parametrize("row", rows("attendants.csv"), ids=lambda r: "-".join(r.values()))
def test_attendants(row: dict[str, str]) -> None:
    owed = attendant_oxygen(
        row["table"],
        extensions=int(row["extensions"]),
        exposed_before=row["exposed_before"] == "yes",
        altitude=f"{row['altitude_ft']} ft",
    )
    assert owed.minutes == float(row["minutes"])
    assert (owed.ascent, owed.provenance) == (row["ascent"], row["provenance"])
    assert owed.edition.startswith("Revision 4 Change A")
    assert owed.depth == {"usn_9": 45.0, "usn_7": 60.0}.get(row["table"], 30.0)


def test_every_cell_of_the_attendants_says_who_says_so() -> None:
    for name in ("attendants.csv", "intervals.csv"):
        for row in read_rows(name):
            assert row["provenance"] in PROVENANCE
            assert row["edition"]
            assert row["source"] in sources()


#: Hours after tending, US Navy Diving Manual Revision 4 Change A, p 21-26 to 21-29 [read].
SHORT, LONG = ("1a", "2a", "3", "5", "6", "6a"), ("4", "7", "8")
HOURS = {
    "treatment": (12, 48),
    "no-stop dive": (12, 48),
    "dive with stops": (24, 48),
    "flying": (24, 72),
    "near the chamber": (1, 1),
}


def test_intervals() -> None:
    for place, group in enumerate((SHORT, LONG)):
        for table in group:
            found = {r["next"]: int(r["hours"]) for r in surface_intervals(f"usn_{table}")}
            assert found == {what: hours[place] for what, hours in HOURS.items()}


def test_every_limit() -> None:
    shipped = {limit.id: limit for limit in load()}
    wanted = {row["id"]: row for row in rows("limits.csv")}
    known = set(wanted)
    assert known == set(shipped)
    for name, row in wanted.items():
        limit = shipped[name]
        assert limit.published_value == float(row["value"])
        assert limit.comparison == row["comparison"]
        assert limit.unit == row["unit"]
        canonical = quantity(limit.quantity)
        expected = (
            canonical.from_unit(float(row["value"]), row["unit"])
            if row["unit"] != canonical.unit
            else float(row["value"])
        )
        assert limit.value == pytest.approx(expected, rel=1e-15)


def test_limits_are_whole() -> None:
    seen = set()
    for limit in load():
        assert limit.id not in seen
        seen.add(limit.id)
        assert limit.roles
        assert limit.authority
        assert limit.edition
        assert limit.conditions


#: What is assumed of a person, as the reference table gives it: PaCO2 40 mmHg, R 0.8, Hb 15, a/A 0.80-0.85,
#: a-v 5 mL/dL, O2 0.25 and CO2 0.20 L/min at rest, cardiac output 5.5 L/min, shunt of the order of 0.05.
ASSUMED = {
    "arterial_pco2": 40 * 0.133322387415,
    "respiratory_exchange_ratio": 0.8,
    "hemoglobin": 15.0,
    "arterial_alveolar_ratio": 0.82,
    "shunt_fraction": 0.05,
    "arteriovenous_difference": 5.0,
    "cardiac_output": 5.5,
    "o2_uptake_stpd": 0.25,
    "co2_output_stpd": 0.2,
    "cohb_fraction": 0.0,
    "arterial_ph": 7.4,
}


def test_what_is_assumed_of_a_person() -> None:
    person = Person()
    assert set(ASSUMED) <= set(measurable())
    for name, value in ASSUMED.items():
        assert person.value(name) == pytest.approx(value, rel=1e-9)


#: Constants as the reference tables print them, those that no published row of an equation pins.
CONSTANTS_AS_PRINTED = {
    "MOLAR_MASS_NE": 20.1797,  # virial constants, neon
    "CO2_PLASMA_SOLUBILITY": 0.03,  # mmol/L/mmHg with pK 6.1
    "CNS_MODERATE_SPREAD": 1.35,  # Z = (ln K^0.5 - 11.19)/1.35, Arieli 2003, 0.9 L/min
    "EVA_HALF_TIME": 360.0,  # the 360-min altitude tissue
    "EXERCISE_WASHOUT_RISE": 0.03,  # prebreathe with exercise
    "EXERCISE_WASHOUT_SCALE": 51.937,
    "CO_CAPACITY": 1.38,  # 1.38 Hb/100 in the non-linear form
    "DEAD_SPACE_PER_MASS": 0.0022,  # 2.2 mL/kg
    "SURFACE_METERS": 10.0,  # equivalent narcotic depth: surface 10 msw or m
    "LN2": 0.6931471805599453,
}


@pytest.mark.parametrize("name", list(CONSTANTS_AS_PRINTED))
def test_constants_as_printed(name: str) -> None:
    assert float(CONSTANTS[name]) == CONSTANTS_AS_PRINTED[name]


def test_molar_volume_of_water() -> None:
    """18.015 g/mol over 993.3 g/L, the density of water at 37 degC: 18.14 mL/mol."""
    assert float(CONSTANTS["WATER_MOLAR_VOLUME"]) == pytest.approx(0.018137, rel=5e-4)


#: Dry air: CIPM-2007 at 400 ppm CO2; CRC Handbook 83rd ed. p 14-19; a later list with CO2 412 ppm.
DRY_AIR = {
    "cipm_2007": {"O2": 0.20939, "Ar": 0.009332, "CO2": 0.0004},
    "crc_83": {"O2": 0.209476, "Ar": 0.00934, "CO2": 0.000314, "Ne": 18.18e-6, "He": 5.24e-6},
    "co2_412_ppm": {"O2": 0.20946, "Ar": 0.00934, "CO2": 0.000412},
}


def test_dry_air_as_printed() -> None:
    assert set(DRY_AIR) == set(dry_air_standards())
    for standard, parts in DRY_AIR.items():
        air = Gas.dry_air(standard)
        for gas in FORMULAS:
            if gas != "N2":
                assert air.fraction(gas) == pytest.approx(parts.get(gas, 0.0), rel=1e-12)
