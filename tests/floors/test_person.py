"""A person from a file or a bedside sample; oxygen along an exposure."""

from __future__ import annotations

import numpy as np
import pytest

from gasphys import Exposure, Person, doses, explain, gas_exchange, review
from gasphys.errors import GasphysError, InputFileError, RangeError, UnknownNameError, ValidityWarning
from gasphys.schedules import treatment

SAMPLE = """code = "P-01"
role = "patient"
hemoglobin = 12.9
[sample]
arterial_po2 = 25.3
fio2 = 0.40
arterial_pco2 = 5.2
barometric_pressure = 101.0
"""


def test_calibrate_by_hand() -> None:
    # PAO2 = 0.4 (101 - 6.266) - 5.2 (0.4 + 0.6/0.8) = 31.914 kPa; 25.3/31.914 = 0.793.
    person = gas_exchange.calibrate(
        arterial_po2=25.3, fio2=0.40, arterial_pco2=5.2, hemoglobin=12.9, barometric_pressure=101.0
    )
    assert person.arterial_alveolar_ratio == pytest.approx(0.793, abs=5e-4)
    assert person.is_measured("hemoglobin")
    assert not person.is_measured("cardiac_output")
    assert person.value("cardiac_output") == 5.5


def test_from_toml(tmp_path) -> None:
    path = tmp_path / "p.toml"
    path.write_text(SAMPLE)
    person = Person.from_toml(path)
    assert person.code == "P-01"
    assert person.role == "patient"
    assert person.arterial_alveolar_ratio == pytest.approx(0.793, abs=5e-4)
    path.write_text(SAMPLE.replace("25.3", '"190 mmHg"'))
    assert Person.from_toml(path).arterial_alveolar_ratio == pytest.approx(0.7937, abs=5e-4)


@pytest.mark.parametrize(
    ("old", "new", "line", "words"),
    [
        ("hemoglobin = 12.9", "hemoglobin = 12,9", 3, ""),
        ("hemoglobin = 12.9", "hemoglobin = 129", 3, "outside the possible range 0 to 30 g/dL"),
        ("hemoglobin = 12.9", "haemoglobin = 12.9", 3, "nearest: 'hemoglobin'"),
        ("hemoglobin = 12.9", 'hemoglobin = "12.9 kPa"', 3, "measures something else"),
        ("hemoglobin = 12.9", "hemoglobin = true", 3, "must be a number"),
        ("fio2 = 0.40", "fio2 = 40", 6, "did you mean '40 %'"),
        ("fio2 = 0.40", "fi02 = 0.4", 6, "nearest: 'fio2'"),
        ("fio2 = 0.40\n", "", 4, "[sample] has no fio2"),
        ('role = "patient"', 'role = "nurse"', 2, "unknown role"),
        ("arterial_po2 = 25.3", "arterial_po2 = 65.3", 5, "is not possible"),
        ("[sample]", "[sample", 4, ""),
    ],
)
def test_bad_person_files(tmp_path, old: str, new: str, line: int, words: str) -> None:
    path = tmp_path / "p.toml"
    path.write_text(SAMPLE.replace(old, new))
    with pytest.raises(InputFileError) as caught:
        Person.from_toml(path)
    assert words in str(caught.value)
    assert caught.value.line == line
    assert str(path) in str(caught.value)


def test_missing_and_unreadable_files(tmp_path) -> None:
    with pytest.raises(InputFileError, match="No such file"):
        Person.from_toml(tmp_path / "none.toml")
    (tmp_path / "latin.toml").write_bytes(b'code = "\xe9"')
    with pytest.raises(InputFileError, match="UTF-8"):
        Person.from_toml(tmp_path / "latin.toml")


def test_warnings_of_the_ratio() -> None:
    with pytest.warns(ValidityWarning, match="below 0.75"):
        gas_exchange.calibrate(arterial_po2=25.9, fio2=0.60, arterial_pco2=6.4)
    with pytest.warns(ValidityWarning, match="taken on FiO2 0.21"):
        gas_exchange.calibrate(arterial_po2=11.5, fio2=0.21, arterial_pco2=5.3)


def test_person_refusals() -> None:
    with pytest.raises(RangeError, match="shunt_fraction"):
        Person(shunt_fraction=1.5)
    with pytest.raises(UnknownNameError):
        Person(assumed=("age",))
    with pytest.raises(UnknownNameError):
        Person().value("age")
    assert not Person(hemoglobin=12.0, assumed=("hemoglobin",)).is_measured("hemoglobin")


def test_oxygen_at_treatment_pressure() -> None:
    """100 % O2, PACO2 40 mmHg: alveolar 1737 mmHg at 2.4 atm; a/A 0.82; 0.0031 mL/dL/mmHg."""
    ds = gas_exchange.oxygenation(treatment("clinical_2_4_atm"))
    mmhg = 0.133322387415
    assert float(ds.alveolar_po2.max()) / mmhg == pytest.approx(1737.0, abs=0.5)
    assert float(ds.arterial_po2.max()) / mmhg == pytest.approx(0.82 * 1737.0, abs=0.5)
    assert float(ds.arterial_dissolved_o2.max()) == pytest.approx(0.0031 * 0.82 * 1737.0, abs=0.005)
    assert "hemoglobin = 15" in ds.attrs["assumed"]


def test_a_gas_that_cannot_sustain_life_is_flagged() -> None:
    ds = gas_exchange.oxygenation(Exposure.start("trimix 5/60").stay(1))
    assert float(ds.alveolar_po2[0]) < 0.0
    assert "cannot sustain life" in ds.attrs["flags"]
    assert np.isnan(ds.arterial_o2_saturation).all()


@pytest.mark.parametrize(
    "exposure",
    [
        treatment("usn_6"),
        Exposure.start("air").loop(130.0, "trimix 17/48").travel(depth=40, minutes=3).stay(5),
    ],
)
def test_every_variable_can_be_explained(exposure: Exposure) -> None:
    ds = gas_exchange.oxygenation(exposure, at=[1.5])
    explained = 0
    for name in ds.data_vars:
        if "time" not in ds[name].dims:
            continue
        for time in ds.time.values:
            labels = {"inert_gas": "N2"} if "inert_gas" in ds[name].dims else {}
            found = explain(ds, name, time=float(time), **labels)
            assert found.value == found.stored
            explained += "equation" in ds[name].attrs
    assert explained >= 50


def test_explain_refuses_what_is_open() -> None:
    ds = gas_exchange.oxygenation(treatment("usn_5"))
    with pytest.raises(GasphysError, match="give time="):
        explain(ds, "alveolar_po2")
    with pytest.raises(GasphysError, match="not a time of the Dataset"):
        explain(ds, "alveolar_po2", time=1.234)
    with pytest.raises(UnknownNameError):
        explain(ds, "alveolar", time=0.0)
    with pytest.raises(GasphysError, match="inert_gas"):
        explain(ds, "breathing_gas_inert_pressure", time=0.0)
    text = str(explain(ds, "arterial_dissolved_o2", time=3.0))
    assert "lungs.alveolar_po2" in text
    assert "provenance" in text


RESULTS = [
    treatment("usn_6"),
    Exposure.start("trimix 17/48")
    .travel(depth=56, rate=20)
    .stay(19)
    .travel(depth=20, rate=9)
    .switch("nitrox 48")
    .stay(9),
    Exposure.start("air")
    .loop(130.0, "trimix 17/48")
    .travel(depth=40, minutes=3)
    .stay(50)
    .travel(depth=0, minutes=9),
]


@pytest.mark.parametrize("exposure", RESULTS)
def test_every_number_of_a_review_can_be_explained(exposure: Exposure) -> None:
    found = review(exposure, role="diver")
    chains = 0
    for limit in found.limit.values:
        for name in ("worst", "limit_value", "margin", "time_of_worst", "first_crossing", "time_beyond"):
            told = explain(found, name, limit=str(limit))
            assert told.value == pytest.approx(told.stored, rel=1e-9, abs=1e-9, nan_ok=True)
            chains += bool(told.steps)
        crossing = explain(found, "first_crossing", limit=str(limit))
        row = found.sel(limit=limit)
        if not np.isnan(crossing.stored) and crossing.stored > 0.0:
            quantity = next(v for k, v in crossing.given.items() if " at " in k)
            beyond = quantity >= float(row.limit_value) * (1 - 1e-6)
            assert (
                beyond
                if str(row.comparison.values) == "<="
                else quantity <= float(row.limit_value) * (1 + 1e-6)
            )
    assert chains > 20


@pytest.mark.parametrize("exposure", RESULTS)
def test_every_dose_can_be_explained(exposure: Exposure) -> None:
    found = doses.oxygen(exposure, "all")
    chains = 0
    for measure in found.measure.values:
        for name in ("dose", "total"):
            told = explain(found, name, measure=str(measure))
            assert told.value == pytest.approx(told.stored, rel=1e-9, nan_ok=True)
            chains += bool(told.steps)
    assert chains > 5
    with pytest.raises(GasphysError, match="give measure="):
        explain(found, "dose")
