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
