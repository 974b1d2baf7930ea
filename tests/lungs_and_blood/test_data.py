"""Data files of lungs and blood: complete, consistent, and the misprints of their sources."""

from __future__ import annotations

import csv
from importlib import resources

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import blood, constants, lungs, vapor
from gasphys.policy import PROVENANCE
from gasphys.sources import sources

MMHG = gp.convert(1.0, "mmHg", "kPa")


def _rows(package: str, name: str) -> list[dict[str, str]]:
    text = resources.files(package).joinpath(name).read_text(encoding="utf-8")
    return list(csv.DictReader(text.splitlines(), strict=True))


@pytest.mark.parametrize(
    ("package", "name", "count"),
    [
        ("gasphys.blood", "water_solubility.csv", 16),
        ("gasphys.blood", "tissue_solubility.csv", 15),
        ("gasphys.lungs", "exercise_o2_uptake.csv", 16),
    ],
)
def test_every_row_is_whole_and_says_where_it_is_from(package, name, count):
    rows = _rows(package, name)
    assert len(rows) == count
    for row in rows:
        assert None not in row
        assert None not in row.values()
        assert row["provenance"] in PROVENANCE
        assert row["source"] in sources()


def test_solubility_coefficients_are_as_transcribed():
    # Sums over the file: a slipped digit anywhere shows.
    rows = _rows("gasphys.blood", "water_solubility.csv")
    total = {k: sum(float(r[k] or 0.0) for r in rows) for k in ("a1", "a2", "a3", "b1", "b2", "b3")}
    assert total == pytest.approx(
        {
            "a1": -839.5437,
            "a2": 1118.82052,
            "a3": 320.68165,
            "b1": -0.334825,
            "b2": 0.159656,
            "b3": -0.0209266,
        },
        abs=1e-9,
    )


def test_exercise_table():
    ds = lungs.exercise_o2_uptake()
    assert float(ds.o2_uptake_stpd.sum()) == pytest.approx(23.0)
    measured = ds.o2_uptake_stpd.notnull()
    assert int(measured.sum()) == 15
    swim = ds.sel(task=["swim 0.5 kn", "swim 0.85 kn", "swim 1.0 kn", "swim 1.2 kn", "uphill run"])
    ratio = swim.ventilation_low / swim.o2_uptake_stpd
    assert np.all((ratio > 21.0) & (ratio < 25.0))  # "about 22-25"
    # Dwyer & Lanphier 1954: about tripled from 0.5 to 1.2 kn.
    assert float(ds.o2_uptake_stpd.sel(task="swim 1.2 kn") / ds.o2_uptake_stpd.sel(task="swim 0.5 kn")) == (
        pytest.approx(3.1, abs=0.05)
    )
    assert ds.o2_uptake_stpd.attrs["units"] == "L/min"
    assert float(ds.o2_uptake_stpd_high.sel(task="booted diver: leg work grades")) == 1.73


#: The table of tasks, typed again: O2 uptake L/min STPD (two where a range is printed), SD, ventilation.
EXERCISE = {
    "booted diver on the bottom: sitting": (0.25, None, None),
    "booted diver: standing": (0.27, None, None),
    "booted diver: minimal movement": (0.57, None, None),
    "booted diver: maximal movement": (1.53, None, None),
    "booted diver: heavy arm work": (1.15, None, None),
    "booted diver: leg work grades": ((1.06, 1.73), None, None),
    "fin swimming 1.3-1.7 ft/s (0.77-1.01 kn)": (2.68, None, None),
    "fin swimming 1.7-2.3 ft/s (1.01-1.36 kn)": (3.66, None, None),
    "combat swimmers at own pace": (1.5, 0.2, None),
    "resting in water": (0.64, 0.09, None),
    "rest": (0.25, None, (6, 8)),
    "swim 0.5 kn": (0.8, None, (18, 18)),
    "swim 0.85 kn": (1.4, None, (30, 30)),
    "swim 1.0 kn": (1.8, None, (40, 40)),
    "swim 1.2 kn": (2.5, None, (60, 60)),
    "uphill run": (4.0, None, (95, 95)),
}


def test_every_task_is_as_printed():
    rows = {row["task"]: row for row in _rows("gasphys.lungs", "exercise_o2_uptake.csv")}
    assert list(rows) == list(EXERCISE)
    for task, (uptake, spread, ventilation) in EXERCISE.items():
        row = rows[task]
        low, high = uptake if isinstance(uptake, tuple) else (None, None)
        columns = {
            "o2_uptake_stpd": None if low else uptake,
            "o2_uptake_stpd_low": low,
            "o2_uptake_stpd_high": high,
            "o2_uptake_stpd_sd": spread,
            "ventilation_low": ventilation[0] if ventilation else None,
            "ventilation_high": ventilation[1] if ventilation else None,
        }
        for column, value in columns.items():
            assert (float(row[column]) if row[column] else None) == value, (task, column)


#: Bunsen coefficients of blood, fat and oil at 37 degC, typed again.
TISSUES = [
    ("N2", "human blood", 0.0125, 0.0129),
    ("N2", "olive oil", 0.067, 0.067),
    ("N2", "fat", 0.061, 0.062),
    ("He", "blood", 0.0087, 0.0087),
    ("He", "oil", 0.015, 0.015),
    ("Ne", "blood", 0.0096, 0.010),
    ("Ne", "oil", 0.019, 0.020),
    ("Ar", "dog blood", 0.0226, 0.0226),
    ("Ar", "oil", 0.14, 0.14),
    ("H2", "dog blood", 0.0146, 0.0146),
    ("H2", "oil", 0.036, 0.036),
    ("O2", "blood", 0.0236, 0.0236),
    ("O2", "oil", 0.112, 0.112),
    ("CO2", "plasma", 0.519, 0.519),
    ("CO2", "oil", 1.34, 1.34),
]


def test_every_tissue_is_as_printed():
    rows = _rows("gasphys.blood", "tissue_solubility.csv")
    assert [(r["gas"], r["medium"], float(r["low"]), float(r["high"])) for r in rows] == TISSUES


def test_datasets_survive_a_file(tmp_path):
    for ds in (lungs.exercise_o2_uptake(), blood.tissue_bunsen_coefficients()):
        path = tmp_path / "table.nc"
        ds.to_netcdf(path, engine="scipy")
        with xr.open_dataset(path, engine="scipy") as back:
            xr.testing.assert_identical(back.load(), ds)


def _middle(gas: str, medium: str) -> float:
    ds = blood.tissue_bunsen_coefficients()
    place = (ds.gas == gas) & (ds.medium == medium)
    return float((0.5 * (ds.bunsen_low + ds.bunsen_high))[place].item())


def test_oil_to_water_ratios():
    # Behnke & Yarbrough 1939: Ar 5.32, N2 5.24 (printed "524"), He 1.7; a table prints Ne 20.7 for 2.07.
    for gas, medium, printed, wrong, tolerance in (
        ("Ar", "oil", 5.32, None, 0.01),
        ("N2", "olive oil", 5.24, 524.0, 0.04),
        ("He", "oil", 1.7, None, 0.03),
        ("Ne", "oil", 2.07, 20.7, 0.03),
    ):
        ratio = _middle(gas, medium) / blood.bunsen_coefficient(gas, 37.0)
        assert ratio == pytest.approx(printed, rel=tolerance)
        assert wrong is None or ratio < 0.5 * wrong


def test_dog_blood_as_printed_in_molar_units():
    for gas, micromolar in (("Ar", 9.94), ("H2", 6.44)):
        bunsen = blood.bunsen_from_henry(micromolar * 1e-6, 0.0)  # umol/L/kPa is 1e-6 mol/m3/Pa
        assert bunsen == pytest.approx(_middle(gas, "dog blood"), abs=5e-5)


def test_solubility_of_blood_is_near_that_of_water_and_co2_stands_apart():
    assert _middle("O2", "blood") == pytest.approx(0.0031 * 760.0 / 100.0, abs=5e-5)
    assert _middle("CO2", "plasma") == pytest.approx(0.0307 * 760.0 * 22.26 / 1000.0, abs=5e-4)
    for gas in ("N2", "He", "Ne", "H2"):
        medium = {"N2": "human blood", "H2": "dog blood"}.get(gas, "blood")
        assert _middle(gas, medium) == pytest.approx(blood.bunsen_coefficient(gas, 37.0), rel=0.15)
    # Common practice: CO2 is far more soluble than O2 (textbooks say twenty times and more).
    ratio = blood.bunsen_coefficient("CO2", 37.0) / blood.bunsen_coefficient("O2", 37.0)
    assert 20.0 < ratio < 26.0


def test_common_practice_of_nitrogen_and_oxygen():
    # About 1 L of N2 at 1 atm, four times that at 4 atm, on air; half of it in fat.
    one, four = (
        blood.body_nitrogen(lungs.alveolar_pn2(p, lungs.alveolar_po2(p, 0.2093, 5.333), 5.333))
        for p in (101.325, 405.3)
    )
    assert one == pytest.approx(1.0, abs=0.15)
    assert four / one == pytest.approx(4.2, abs=0.2)
    assert blood.body_nitrogen(75.9, fat_fraction=0.15) == pytest.approx(2.0 * 0.5 * 0.94, abs=0.01)
    # Most O2 is on hemoglobin at 1 atm, a quarter of what is carried is dissolved on O2 at 3 atm.
    assert blood.dissolved_o2_share("95 mmHg", blood.o2_content("95 mmHg")) < 0.02
    assert blood.dissolved_o2_share("1900 mmHg", blood.o2_content("1900 mmHg")) == pytest.approx(
        0.23, abs=0.01
    )


def test_half_time_of_the_printed_compartment():
    # k = 0.03079 1/min, half-time 22.5 min.
    store = 33.0 * 0.0125 * 0.749
    half = blood.tissue_nitrogen_washout(np.log(2.0) / 0.03079, "0.749 atm", 33.0, 1.0)
    assert half == pytest.approx(0.5 * store, rel=2e-4)
    assert np.log(2.0) / 0.03079 == pytest.approx(22.5, abs=0.05)


def test_enhancement_of_water_vapor():
    # 47.12 mmHg in air at 1, 2, 3, 4, 6 atm by Buck's factor, and what Poynting alone adds.
    printed = {1: (47.32, 0.00), 2: (47.49, 0.03), 3: (47.65, 0.07), 4: (47.82, 0.10), 6: (48.15, 0.17)}
    pure = lungs.water_vapor_pressure(37.0) / MMHG
    for atm, (humid, added) in printed.items():
        with gp.validity("ignore"):
            assert pure * vapor.enhancement_factor(atm * 101.325) == pytest.approx(humid, abs=0.005)
        assert pure * (vapor.poynting_factor(atm * 101.325) - 1.0) == pytest.approx(added, abs=0.005)


@pytest.mark.parametrize("temperature", [0.0, 10.0, 20.0, 30.0, 37.0, 40.0])
def test_water_against_iapws_95(temperature):
    iapws = pytest.importorskip("iapws")
    liquid = iapws.IAPWS95(T=temperature + 273.15, P=0.101325)
    # The metrological table holds for water of another isotopic make-up to 5 ppm.
    assert blood.water_density(temperature) == pytest.approx(liquid.rho, rel=1e-5)
    saturated = iapws.IAPWS95(T=max(temperature, 0.02) + 273.15, x=0.0)
    ours = lungs.water_vapor_pressure(max(temperature, 0.02))
    assert ours == pytest.approx(1000.0 * saturated.P, rel=1e-4)
    if temperature == 37.0:
        mole = constants.MOLAR_MASS_H2O / liquid.rho
        assert mole == pytest.approx(constants.WATER_MOLAR_VOLUME, rel=1e-5)


def test_library_units_at_a_glance():
    # The mmHg and the kPa form of the same constants, as the sheet prints them side by side.
    assert gp.convert(47.0, "mmHg", "kPa") == pytest.approx(6.266, abs=5e-4)
    assert blood.dissolved_o2(1.0) == pytest.approx(0.023252, abs=5e-7)
    assert lungs.alveolar_pco2(1.0, 1.0) == pytest.approx(115.05, abs=0.005)
    assert blood.p50("dash_bassingthwaighte_2016", pco2="40 mmHg") == pytest.approx(3.573, abs=5e-4)
    # Severinghaus in kPa: S = 1/(55.453/(P^3 + 2.66623 P) + 1).
    for po2 in (1.0, 3.5, 13.3, 200.0):
        expected = 1.0 / (55.453 / (po2**3 + 2.66623 * po2) + 1.0)
        assert blood.o2_saturation(po2) == pytest.approx(expected, abs=1e-5)
