"""What the command line prints and the picture draws of gas exchange."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, Person, gas_exchange
from gasphys.__main__ import main
from gasphys.errors import GasphysError, ValidityWarning
from gasphys.plots import arterial_band_figure

FOLDER = Path(__file__).parents[2] / "notebooks" / "data"


def test_treatment_of_a_diseased_lung_prints_the_range_of_both_models(capsys) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("always", ValidityWarning)  # the command prints it as a note
        assert main(["treatment", "usn_6", "--person", str(FOLDER / "p04.toml")]) == 0
    captured = capsys.readouterr()
    text = " ".join(captured.out.split())
    assert "below 0.75" in captured.err
    with gp.validity("ignore"):
        one = Person.from_toml(FOLDER / "p04.toml")
    ds = gas_exchange.oxygenation(gp.schedules.treatment("usn_6"), one, "both")
    ratio, shunt = (float(ds.arterial_po2.sel(model=m).max()) for m in ("ratio", "shunt"))
    assert f"arterial PO2 {ratio:.1f} to {shunt:.1f} kPa" in text
    assert f"{ratio:.1f} kPa by constant ratio, {shunt:.1f} kPa by constant shunt" in text
    assert "the models part" in text
    assert "assumed: respiratory_exchange_ratio 0.8, hemoglobin 15 g/dL" in text
    summary = captured.out.split("reviewed as")[0].splitlines()[5:]
    assert max(len(line) for line in summary) <= 100


@pytest.mark.parametrize("name", ["p02.toml", "p03.toml"])
def test_persons_of_the_scenario_are_printed(capsys, name: str) -> None:
    assert main(["treatment", "usn_6", "--person", str(FOLDER / name), "--units", "mmHg"]) == 0
    out = capsys.readouterr().out
    assert "mmHg by constant shunt" in out
    assert (FOLDER / name).read_text(encoding="utf-8").startswith("# Invented scenario.")


def _across(model: str) -> xr.Dataset:
    pressure = xr.DataArray(np.linspace(101.325, 303.975, 9), dims="pressure", attrs={"units": "kPa"})
    session = Exposure.start("oxygen", pressure=pressure).stay(1)
    return gas_exchange.oxygenation(session, Person(), model).isel(time=0)


def test_the_picture_draws_both_models_and_the_band_between() -> None:
    ds = _across("both")
    figure = arterial_band_figure(ds, pressure_unit="kPa")
    upper, middle, lower = figure.axes
    drawn = [line.get_ydata() for line in upper.lines]
    for values in (ds.alveolar_po2, *(ds.arterial_po2.sel(model=m) for m in ("ratio", "shunt"))):
        assert any(np.allclose(values, y) for y in drawn)
    band = upper.collections[0].get_paths()[0].vertices
    assert band[:, 1].max() == pytest.approx(float(ds.arterial_po2.max()))
    assert band[:, 1].min() == pytest.approx(float(ds.arterial_po2.min()))
    assert "alveolar" in [text.get_text() for text in upper.texts]
    assert "kPa" in upper.get_ylabel()
    assert len(middle.lines) == 2
    assert "arteriovenous difference" in lower.texts[0].get_text()
    assert "Never the sole basis" in " ".join(figure.get_supxlabel().split())


def test_the_picture_needs_both_models() -> None:
    with pytest.raises(GasphysError, match="both"):
        arterial_band_figure(_across("ratio"))


def test_treatment_tells_venous_blood_and_carbon_monoxide(capsys) -> None:
    assert main(["treatment", "usn_6", "--person", str(FOLDER / "p02.toml")]) == 0
    text = " ".join(capsys.readouterr().out.split())
    one = Person.from_toml(FOLDER / "p02.toml")
    session = gp.schedules.treatment("usn_6")
    ds = gas_exchange.carboxyhemoglobin(session, one, target=0.155)
    assert "carboxyhemoglobin 31.0 % at the start" in text
    assert f"{100.0 * float(ds.cohb_fraction[-1]):.1f} % at the end" in text
    assert f"half of it at {float(ds.time_at_target[0]):.1f} min" in text
    assert "single persons took longer" in text
    assert "for an arteriovenous difference of 4.5 to 6 mL/dL" in text
    best = gas_exchange.oxygenation(session, one, "both").isel(time=3)
    low, high = float(best.mixed_venous_po2_low.min()), float(best.mixed_venous_po2_high.max())
    assert f"mixed venous PO2 {low:.2f}"[:-1] in text
    assert f"to {high:.1f}" in text
    assert "of which the tissues take" in text


@pytest.mark.parametrize(
    ("table", "name", "who"),
    [
        ("usn_6", "p03.toml", "by both models"),  # 5.1 to 6.2 mL/dL at 60 fsw
        ("usn_6", "p04.toml", "by constant shunt"),  # 3.3 to 5.7
        ("clinical_2_4_atm", "p04.toml", "by neither model"),  # 2.8 to 4.8
    ],
)
def test_treatment_says_whether_dissolved_oxygen_alone_would_do(capsys, table, name, who) -> None:
    with gp.validity("ignore"):
        assert main(["treatment", table, "--person", str(FOLDER / name)]) == 0
    assert f"covers a difference of 5 mL/dL {who}" in " ".join(capsys.readouterr().out.split())


def test_review_judges_the_alveolus_of_the_person() -> None:
    """A mix of 10 % oxygen breathed at the surface: below 30 mmHg at once, later in a deeper descent."""
    dive = Exposure.start("trimix 10/50").travel(depth=40, minutes=3).stay(5)
    found = gp.review(dive).sel(limit="alveolar_po2_maximal_apnea")
    start = gas_exchange.oxygenation(dive).alveolar_po2[0]
    assert float(found.worst) == pytest.approx(float(start), rel=1e-12)
    assert str(found.status.values) == "beyond"
    assert float(found.first_crossing) == 0.0
    # Left where alveolar PO2 has come to 30 mmHg: a root, not a sample.
    again = gas_exchange.oxygenation(dive, at=[float(found.time_beyond)])
    back = float(again.alveolar_po2.sel(time=float(found.time_beyond), method="nearest"))
    assert back == pytest.approx(gp.convert(30.0, "mmHg", "kPa"), rel=1e-9)
    # Who breathes more has more of it; the review takes the person at his word, and explains it.
    review = gp.review(dive, Person(arterial_pco2="22 mmHg"))
    assert str(review.status.sel(limit="alveolar_po2_maximal_apnea").values) == "within"
    told = gp.explain(review, "worst", limit="alveolar_po2_maximal_apnea")
    assert told.value == pytest.approx(told.stored, rel=1e-12)
    assert "lungs.alveolar_po2" in str(told)


def test_review_of_a_loop_takes_its_set_point() -> None:
    dive = Exposure.start("air").loop(setpoint=130, diluent="air").travel(depth=40, minutes=3).stay(5)
    found = gp.review(dive).sel(limit="alveolar_po2_unconscious")
    ds = gas_exchange.oxygenation(dive)
    assert float(found.worst) == pytest.approx(float(ds.alveolar_po2.min()), rel=1e-9)


def test_review_counts_the_carbon_dioxide_of_the_gas() -> None:
    mix = gp.Gas(oxygen=0.21, carbon_dioxide=0.03)
    dive = Exposure.start(mix).travel(depth=10, minutes=2).stay(5)
    found = gp.review(dive).sel(limit="alveolar_po2_unconscious")
    assert float(found.worst) == pytest.approx(
        float(gas_exchange.oxygenation(dive).alveolar_po2.min()), rel=1e-12
    )
    told = gp.explain(gp.review(dive), "worst", limit="alveolar_po2_unconscious")
    assert told.value == pytest.approx(told.stored, rel=1e-12)
