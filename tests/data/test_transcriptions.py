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
from gasphys.quantities import quantity
from gasphys.schedules.tables import segments, tables

HERE = Path(__file__).parent / "transcribed"


def rows(name: str) -> list[dict[str, str]]:
    lines = (HERE / name).read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def test_every_segment_of_every_table() -> None:
    wanted: dict[str, list[dict[str, str]]] = {}
    for row in rows("treatment_tables.csv"):
        wanted.setdefault(row["table"], []).append(row)
    shipped = segments()
    assert set(wanted) == {name for name in shipped if name.startswith("usn_")}
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
    assert pieces[0].start in ("0", "surface")
    assert pieces[-1].end in ("0", "surface")
    for before, after in itertools.pairwise(pieces):
        assert before.end == after.start
        assert after.minutes > 0
    for key in ("title", "edition", "clock", "source"):
        assert table[key]


#: Attendants, US Navy Diving Manual Rev 4 Change A, p 21-26 [read]: minutes at the stop with at most one
#: extension and with more, and the stop's depth.
ATTENDANTS = {
    "usn_5": ([0, 0], 30),
    "usn_6": ([30, 60], 30),
    "usn_6a": ([60, 90], 30),
    "usn_9": ([15, 15], 45),
}


def test_attendants_and_extensions() -> None:
    for name, (minutes, depth) in ATTENDANTS.items():
        assert tables()[name]["attendant_stop_minutes"] == minutes
        assert tables()[name]["attendant_depth"] == depth
    most = {name: (t["most_deep"], t["most_shallow"]) for name, t in tables().items()}
    assert most == {
        "usn_5": (0, 2),
        "usn_6": (2, 2),
        "usn_6a": (2, 2),
        "usn_9": (0, 0),
        "clinical_2_4_atm": (0, 0),
    }


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
