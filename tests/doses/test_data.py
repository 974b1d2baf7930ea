"""The data files: whole, with known sources, and equal to a second transcription of the reference sheet."""

from __future__ import annotations

import itertools
import re

import pytest

import gasphys as gp
from gasphys.doses import published, tables
from gasphys.doses.contaminants import purity
from gasphys.errors import UnknownNameError
from gasphys.limits import load
from gasphys.policy import PROVENANCE
from gasphys.sources import sources

#: Rows of each file, as counted in the reference tables ("do not code" left out).
ROWS = {
    "absorbent": 9,
    "anesthetic_pressure": 13,
    "co2_levels": 15,
    "gas_purity": 12,
    "high_pressure_nervous_syndrome": 15,
    "narcosis_impairment": 12,
    "narcotic_potency": 10,
    "noaa_exceptional_limits": 8,
    "noaa_oxygen_limits": 11,
    "oxygen_dive_trials": 3,
    "po2_conventions": 20,
    "repeated_exposure_otu": 15,
    "seizure_incidence": 7,
    "usn_1973_oxygen_limits": 7,
    "usn_closed_circuit_oxygen": 8,
    "vital_capacity_cptd": 7,
}


def test_every_file_is_known_and_whole() -> None:
    assert set(tables()) == set(ROWS)
    for name, count in ROWS.items():
        rows = published(name)
        assert len(rows) == count, name
        for row in rows:
            words = [v for k, v in row.items() if k.endswith("provenance")]
            assert words, name
            assert set(words) <= set(PROVENANCE), name
            if name != "noaa_oxygen_limits":
                assert row["source"] in sources(), (name, row["source"])
    with pytest.raises(UnknownNameError, match="nearest: 'gas_purity'"):
        published("gas_puritie")


def columns(name: str, *headers: str) -> list[tuple[object, ...]]:
    return [tuple(row[h] for h in headers) for row in published(name)]


def test_oxygen_tables() -> None:
    """NOAA Diving Manual (Table 15-1 in the 6th edition), US Navy Rev 4 Change A table 18-5, typed again."""
    assert columns("noaa_oxygen_limits", "po2_atm", "single_min", "day_min") == [
        (0.6, 720, 720), (0.7, 570, 570), (0.8, 450, 450), (0.9, 360, 360), (1.0, 300, 300), (1.1, 240, 270),
        (1.2, 210, 240), (1.3, 180, 210), (1.4, 150, 180), (1.5, 120, 180), (1.6, 45, 150),
    ]  # fmt: skip
    assert columns("usn_closed_circuit_oxygen", "rule", "depth_fsw", "minutes") == [
        ("proposed", 20, 240), ("single_depth", 25, 240), ("single_depth", 30, 80), ("single_depth", 35, 25),
        ("single_depth", 40, 15), ("single_depth", 50, 10),
        ("one_excursion", 40, 15), ("one_excursion", 50, 5),
    ]  # fmt: skip
    assert columns("noaa_exceptional_limits", "po2_atm", "quoted_min", "remembered_min") == [
        (1.3, 240, 240), (1.4, 160, 180), (1.5, 150, 150), (1.6, 120, 120),
        (1.7, 75, 75), (1.8, 60, 60), (1.9, 45, 45), (2.0, 30, 30),
    ]  # fmt: skip
    assert columns("usn_1973_oxygen_limits", "po2_atm", "minutes") == [
        (1.0, 240), (1.1, 120), (1.2, 80), (1.3, 60), (1.4, 50), (1.5, 40), (1.6, 30),
    ]  # fmt: skip


def test_pulmonary_tables() -> None:
    """Hamilton 1988 and the cumulative pulmonary toxic dose, typed again."""
    rows = columns("repeated_exposure_otu", "exposure_days", "daily_average", "mission_total")
    assert rows[:14] == list(
        zip(
            range(1, 15),
            [850, 700, 620, 525, 460, 420, 380, 350, 330, 310, 300, 300, 300, 300],
            [850, 1400, 1860, 2100, 2300, 2520, 2660, 2800, 2970, 3100, 3300, 3600, 3900, 4200],
            strict=True,
        )
    )
    assert rows[14] == (30, 300, None)
    assert columns("vital_capacity_cptd", "cptd", "median_loss_percent") == [
        (615, 2), (825, 4), (1035, 6), (1230, 8), (1425, 10), (1815, 15), (2190, 20),
    ]  # fmt: skip


def test_seizures() -> None:
    found = columns("seizure_incidence", "study", "treatments", "seizures", "per_10000")
    assert found == [
        ("Heyboer 2014", 23328, 11, 4.72), ("Heyboer 2014", 16430, 0, 0), ("Heyboer 2014", None, None, 15),
        ("Heyboer 2014", None, None, 51), ("Costa 2019", 188335, 43, 2.28), ("Yildiz 2004", 80679, 2, 0.25),
        ("Hadanny 2016", 62614, 7, 1.12),
    ]  # fmt: skip
    for _, treatments, seizures, rate in found:
        if treatments:
            assert 1e4 * seizures / treatments == pytest.approx(rate, abs=0.006)


def test_narcosis() -> None:
    """Bands of PN2 follow from the depths: 0.79 of one atmosphere for 10 msw. Potencies as printed."""
    bands = [r for r in published("narcosis_impairment") if r["source"] == "clark_2015"]
    assert [r["depth_low_msw"] for r in bands] == [0, 10, 30, 50, 70, 90]
    for before, after in itertools.pairwise(bands):
        assert before["depth_high_msw"] == after["depth_low_msw"]
        assert before["pn2_high"] == after["pn2_low"]
    for row in bands:
        assert row["pn2_low"] == pytest.approx(0.79 * (row["depth_low_msw"] / 10 + 1), abs=0.005)
    potency = {r["gas"]: r for r in published("narcotic_potency")}
    nitrogen = potency["N2"]["oil_bunsen"]
    for gas, row in potency.items():
        assert row["oil_bunsen"] / nitrogen == pytest.approx(row["oil_ratio"], abs=0.0006), gas
    assert {g: r["reported_potency"] for g, r in potency.items()} == {
        "He": None, "Ne": 0.3, "H2": 0.6, "N2": 1.0, "O2": 1.7, "Ar": 2.3, "Kr": 7.1, "CO2": 20.0,
        "N2O": None, "Xe": 25.6,
    }  # fmt: skip
    # What the code uses is what the table says it uses.
    pure = {"O2": gp.Gas(1.0), "N2": gp.Gas(0.0), "He": gp.Gas(0.0, helium=1.0), "Ar": gp.Gas(0.0, argon=1.0)}
    pure |= {
        "H2": gp.Gas(0.0, hydrogen=1.0),
        "Ne": gp.Gas(0.0, neon=1.0),
        "CO2": gp.Gas(0.0, carbon_dioxide=1.0),
    }
    for gas, mixture in pure.items():
        assert gp.doses.narcotic_fraction(mixture, weights="reported") == potency[gas]["used_potency"]
    pressures = {(r["gas"], r["endpoint"]): r["value_atm"] for r in published("anesthetic_pressure")}
    assert pressures["Xe", "human minimum alveolar concentration"] == 0.71
    assert pressures["Ar", "mouse loss of righting"] == 15.2
    assert pressures["N2", "rat minimum alveolar concentration (estimate)"] == 110


def test_carbon_dioxide_and_absorbents() -> None:
    levels = {(r["level"], r["low_percent"]): r for r in published("co2_levels")}
    assert ("chamber or transfer capsule limit", 0.5) in levels
    assert ("tolerable up to 4 h", 2) in levels
    scrubber = next(r for r in published("co2_levels") if r["level"] == "scrubber end point")
    assert scrubber["low_percent"] == pytest.approx(100 / 101.325, abs=0.0005)
    for row in published("absorbent"):
        if row["mass_kg"] and row["capacity_l_kg"]:
            ours = gp.doses.absorbent_capacity(row["minutes"], row["co2_flow_l_min"], row["mass_kg"])
            assert ours == pytest.approx(row["capacity_l_kg"], abs=0.05)
    minutes = {r["case"]: r["minutes"] for r in published("absorbent")}
    cold = (
        minutes["a naval closed-circuit canister at 40 degF"]
        / minutes["a naval closed-circuit canister at 70 degF"]
    )
    assert cold == 0.75  # SCR-2


#: CO ppm, CO2 ppm, oil mg/m3, from the reference table.
PURITY = {
    "EN 12021 air": (5, 500, 0.5),
    "EN 12021 air, superseded": (15, 500, 0.5),
    "EN 12021 oxygen-compatible air": (5, 500, 0.1),
    "CGA G-7.1 grade E": (10, 1000, 5),
    "CGA G-7.1 grade D": (10, 1000, 5),
    "CSA Z180.1": (5, 500, 1),
    "NFPA 1500": (10, 1000, 5),
    "Norway, labor regulation 5-5": (10, 500, 1),
    "29 CFR 1910.430": (20, 1000, 5),
    "US Navy air (compressor)": (10, 1000, 5),
    "US Navy O2 MIL-O-27210 type I": (None, 10, None),
    "US Navy He MIL-PRF-27407": (None, None, None),
}


def test_purity_table() -> None:
    assert {
        r["standard"]: (r["co_ppm"], r["co2_ppm"], r["oil_mg_m3"]) for r in published("gas_purity")
    } == PURITY
    assert all(r["edition"] for r in published("gas_purity"))


def test_purity_under_pressure() -> None:
    measured = {"carbon_monoxide": 3.0, "carbon_dioxide": 400.0, "oil": 0.3}
    surface, deep = purity(measured), purity(measured, ambient_pressure=405.3)
    assert (surface.status.sel(standard="EN 12021 air").values == "within").all()
    assert deep.status.sel(standard="EN 12021 air").values.tolist() == ["beyond"] * 3
    row = deep.sel(standard="CGA G-7.1 grade E", contaminant="carbon_monoxide")
    assert float(row.surface_equivalent) == pytest.approx(12.0)
    assert float(row.margin) == pytest.approx(-2.0)
    assert str(row.edition.values) == "not known"
    assert str(deep.edition.sel(standard="EN 12021 air").values) == "2014"
    assert deep.sizes == {"standard": 10, "contaminant": 3}
    oxygen = purity({"carbon_monoxide": 1.0}, standards=["US Navy O2 MIL-O-27210 type I"])
    assert oxygen.status.values.tolist() == [["not judged"]]
    with pytest.raises(UnknownNameError, match="contaminant"):
        purity({"argon": 1.0})
    with pytest.raises(UnknownNameError, match="purity standard"):
        purity({"oil": 1.0}, standards=["EN 1"])


#: Limits added with the doses, typed again: value, unit, roles.
LIMITS = {
    "pulmonary_index_2_days": (120, "1", ("diver",)),
    "pulmonary_index_5_days": (70, "1", ("diver",)),
    "pulmonary_index_every_day": (40, "1", ("diver",)),
    "usn_closed_circuit_o2": (1, "1", ("diver",)),
    "po2_training_1995_cold": (1.5, "bar", ("diver",)),
    "po2_training_1995_exertion": (1.4, "bar", ("diver",)),
    "co2_usn_saturation": (0.5, "%", ("diver", "attendant")),
    "co2_usn_4_hours": (2, "%", ("diver", "attendant")),
    "co2_osha": (5000, "ppm", ("diver", "attendant")),
    "co2_nasa": (0.7, "%", ("diver", "patient", "attendant")),
    "co2_rest": (4, "%", ("diver", "patient", "attendant")),
    "co2_nrc_1_hour": (25000, "ppm", ("diver", "attendant")),
    "co2_nrc_24_hours": (25000, "ppm", ("diver", "attendant")),
    "co2_nrc_90_days": (8000, "ppm", ("diver", "attendant")),
    "o2_fraction_osha": (40, "%", ("diver",)),
    "nitrogen_slips": (1.58, "atm", ("diver", "patient", "attendant")),
    "nitrogen_slow": (3.16, "atm", ("diver", "patient", "attendant")),
    "nitrogen_confusion": (4.74, "atm", ("diver", "patient", "attendant")),
    "nitrogen_stupor": (6.32, "atm", ("diver", "patient", "attendant")),
    "nitrogen_hallucination": (7.90, "atm", ("diver", "patient", "attendant")),
    "helium_nervous_syndrome_fast": (150, "msw", ("diver",)),
    "helium_nervous_syndrome_motor": (200, "msw", ("diver",)),
    "helium_nervous_syndrome_eeg": (300, "msw", ("diver",)),
}


def test_limits() -> None:
    shipped = {x.id: x for x in load()}
    for name, (value, unit, roles) in LIMITS.items():
        limit = shipped[name]
        assert (limit.published_value, limit.unit, limit.roles) == (value, unit, roles)
        assert limit.comparison == "<="


def test_conventions_that_are_limits_stand_in_both_files() -> None:
    """Every convention on the highest or lowest PO2 of one exposure is a limit of the review too."""
    shipped = {(x.published_value, x.unit) for x in load() if x.quantity == "breathing_gas_po2"}
    for row in published("po2_conventions"):
        if row["convention"].startswith(("highest", "lowest", "of concern", "surface-supplied", "1910")):
            value = row["high"] if row["high"] is not None else row["low"]
            assert (value, row["unit"]) in shipped, row


# -- The other tables, every row typed again from the reference tables: numbers and how they are known --

#: Inspired CO2, surface equivalent: "0.5 % SEV", "25000 ppm", "1 kPa" of 101.325, as percent.
CO2_LEVELS = [
    (0.5, None, "secondary"), (2.0, None, "secondary"), (4.0, None, "secondary"), (0.7, None, "read"),
    (0.987, None, "read"), (0.5, None, "memory_high"), (2.5, None, "memory_medium"),
    (2.5, None, "memory_medium"), (0.8, None, "memory_medium"), (0.5, None, "memory_high"),
    (2, 3, "memory_medium"), (4, 6, "memory_medium"), (6, 10, "memory_medium"),
    (10, None, "memory_high"), (15, None, "memory_medium"),
]  # fmt: skip

ANESTHETIC = [
    ("Xe", 0.71, "read"), ("Xe", 0.63, "secondary"), ("Xe", 0.326, "read"), ("N2O", 1.05, "secondary"),
    ("N2O", 1.03, "secondary"), ("N2O", 0.633, "read"), ("N2O", 0.71, "secondary"), ("Ar", 15.2, "read"),
    ("Kr", 4.5, "read"), ("Xe", 1.61, "memory_medium"), ("Kr", 7.31, "memory_medium"),
    ("Ar", 27.0, "memory_medium"), ("N2", 110, "memory_low"),
]  # fmt: skip

#: Nitrogen pressures of the bands of impairment: low, high, unit.
IMPAIRMENT = [
    (0.79, 1.58, "atm"), (1.58, 3.16, "atm"), (3.16, 4.74, "atm"), (4.74, 6.32, "atm"), (6.32, 7.90, "atm"),
    (7.90, None, "atm"), (2, 4, "bar"), (4, 4, "bar"), (4, 6, "bar"), (6, 8, "bar"), (8, 8, "bar"),
    (10, None, "bar"),
]  # fmt: skip

ABSORBENT = [
    (2.64, 2.0, 202, 153.0), (2.38, 2.0, 138, 116.0), (2.64, 2.0, 188, 142.4), (2.64, 2.0, 241, 182.6),
    (2.64, 2.0, 239, 181.1), (0.6, 0.3, 240, 120), (None, 1.4, 400, None), (None, 1.4, 300, None),
    (None, None, None, 242),
]  # fmt: skip

PO2_CONVENTIONS = [
    (None, 1.4, "atm", "read"), (None, 1.4, "bar", "secondary"), (None, 1.6, "bar", "secondary"),
    (None, 1.5, "bar", "secondary"), (None, 1.4, "bar", "secondary"), (None, 0.75, "atm", "secondary"),
    (0.75, 1.3, "atm", "memory_high"), (None, 1.3, "atm", "memory_high"), (None, 2.4, "atm", "memory_high"),
    (0.44, 0.48, "atm", "secondary"), (None, 0.6, "atm", "secondary"), (0.42, None, "atm", "secondary"),
    (None, 0.60, "atm", "read"), (None, 60, "kPa", "read"), (None, 70, "kPa", "read"),
    (None, 80, "kPa", "read"),
    (None, 1.4, "bar", "memory_high"), (None, 1.4, "atm", "memory_high"), (0.16, None, "atm", "secondary"),
    (0.18, None, "bar", "memory_high"),
]  # fmt: skip

#: The numbers in each row of observations on helium and hydrogen, as printed.
NERVOUS_SYNDROME = [
    ("150", "500"), ("600", "4", "800", "2", "27.7", "91"), ("500", "610", "300"), ("200",),
    ("1000", "10", "33"), ("460", "5", "12", "20", "5"), ("460", "650", "10", "7.7"),
    ("650", "6", "8", "10", "686", "20", "30"), ("300",), ("450", "54", "56", "200"), ("500", "49", "25"),
    ("0", "60", "0.5", "30"), ("60", "250", "0.5", "10"), ("250", "750", "0.5", "3"),
    ("750", "1000", "0.5", "2"),
]  # fmt: skip


def test_every_row_of_the_other_tables() -> None:
    assert columns("co2_levels", "low_percent", "high_percent", "provenance") == CO2_LEVELS
    assert columns("anesthetic_pressure", "gas", "value_atm", "provenance") == ANESTHETIC
    assert columns("narcosis_impairment", "pn2_low", "pn2_high", "pn2_unit") == IMPAIRMENT
    assert {r["provenance"] for r in published("narcosis_impairment")} == {"read"}
    assert columns("absorbent", "mass_kg", "co2_flow_l_min", "minutes", "capacity_l_kg") == ABSORBENT
    assert columns("po2_conventions", "low", "high", "unit", "provenance") == PO2_CONVENTIONS
    for row, numbers in zip(published("high_pressure_nervous_syndrome"), NERVOUS_SYNDROME, strict=True):
        text = re.sub(r"(?<=[HN])2|O2|PH2", "", f"{row['item']} {row['value']}")
        assert tuple(re.findall(r"\d+(?:\.\d+)?", text)) == numbers, row


def test_oxygen_dive_trials() -> None:
    """465 man-dives, 33 toxic episodes, 2 convulsions; 153 exposures; 2527 dives (reference sheet, 3)."""
    assert columns("oxygen_dive_trials", "dives", "signs", "convulsions") == [
        (465, 33, 2), (153, None, None), (2527, None, None),
    ]  # fmt: skip
    first = published("oxygen_dive_trials")[0]
    assert first["signs"] / first["dives"] == pytest.approx(0.071, abs=0.0005)
    assert first["convulsions"] / first["dives"] == pytest.approx(0.0043, abs=0.00005)


def test_ranking_of_potencies() -> None:
    """He 4.26, Ne 3.58, H2 1.83, N2 1, Ar 0.43, Kr 0.14, Xe 0.039: reciprocals."""
    ranking = {"He": 4.26, "Ne": 3.58, "H2": 1.83, "N2": 1.0, "Ar": 0.43, "Kr": 0.14, "Xe": 0.039}
    found = {r["gas"]: r["inverse_of_ranking"] for r in published("narcotic_potency")}
    for gas, value in found.items():
        if gas in ranking:
            assert value == pytest.approx(1.0 / ranking[gas], abs=0.0006)
        else:
            assert value is None
