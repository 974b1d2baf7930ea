"""The bedside sample in, the range of arterial PO2 at pressure out: both readings, in words and picture."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
import pytest

import gasphys as gp
from gasphys.plots.style import new_figure
from gasphys.widgets import PatientAtPressure


def _view(app: PatientAtPressure) -> Any:
    app.view  # noqa: B018 (built when it is asked for)
    return app._shown


def _both(app: PatientAtPressure) -> list[float]:
    """Arterial PO2 by ratio and by shunt, from the model itself."""
    p = app.params
    with gp.validity("ignore"):
        person = gp.gas_exchange.calibrate(
            arterial_po2=p["sample_po2"],
            fio2=p["fio2"],
            arterial_pco2=p["arterial_pco2"],
            hemoglobin=p["hemoglobin"],
            barometric_pressure=p["barometric_pressure"],
        )
        session = gp.Exposure.start(p["gas"], pressure=p["ambient_pressure"]).stay(1)
        return [
            float(gp.gas_exchange.oxygenation(session, person, model).arterial_po2[0])
            for model in ("ratio", "shunt")
        ]


@pytest.mark.parametrize(
    "sample",
    [
        {},
        {"hemoglobin": 3.4, "fio2": 0.6, "sample_po2": 41.5, "arterial_pco2": 4.4},
        {"fio2": 0.6, "sample_po2": 25.9, "arterial_pco2": 6.4, "ambient_pressure": "2.8 atm"},
    ],
    ids=["P-01", "P-03", "P-04"],
)
def test_the_answer_is_the_range_of_both_models(sample: dict[str, Any]) -> None:
    app = PatientAtPressure(**sample)
    ratio, shunt = _both(app)
    answer = app.answer(app.compute())
    told = re.search(r"from (\S+) kPa .* to (\S+) kPa .*; alveolar", answer)
    assert told
    # Four digits are shown.
    np.testing.assert_allclose([float(v) for v in told.groups()], sorted((ratio, shunt)), atol=0.05, rtol=0.0)
    held = app.described().arterial_alveolar_ratio
    alveolar = gp.lungs.alveolar_po2(
        app.params["barometric_pressure"], app.params["fio2"], app.params["arterial_pco2"]
    )
    assert held == pytest.approx(app.params["sample_po2"] / alveolar, rel=1e-12)


def test_the_picture_has_a_band_from_ratio_to_shunt() -> None:
    app = PatientAtPressure()
    figure = new_figure(*app.size)
    ds = app.compute()
    app.draw(figure, ds)
    picture = app._pictures[figure]
    for name in ("arterial_po2", "arterial_dissolved_o2"):
        corners = picture.bands[name].get_xy()[:, 1]
        for end in (ds[name], ds[f"{name}_by_shunt"]):
            assert np.isin(end.values, corners).all()
    assert picture.values["arterial_po2"].get_text() == "184 to 224"
    # Without a second reading there is no band.
    plain = gp.widgets.OxygenAtPressure()
    plain.draw(figure, plain.compute())
    assert len(plain._pictures[figure].bands["arterial_po2"].get_xy()) <= 1


def test_a_sample_on_air_and_a_low_ratio_are_told() -> None:
    app = PatientAtPressure(fio2=0.21, sample_po2=11.0)
    notes = app.notes(app.compute())
    assert "use a sample on oxygen" in notes[0]
    app = PatientAtPressure(fio2=0.6, sample_po2=25.9, arterial_pco2=6.4)
    notes = app.notes(app.compute())
    assert "ratio 0.52 is below 0.75" in notes[0]
    assert "a shunt is the better model there" in notes[0]


def test_a_sample_that_cannot_be_says_so() -> None:
    view = _view(PatientAtPressure())
    view.entries["sample_po2"].value = "50"
    assert "a ratio of 1.57 is not possible; check FiO2" in view.message.value
    assert view.answer.value == "No answer for these values."
    view.entries["fio2"].value = "60 %"
    assert view.message.value == ""
    assert view.answer.value.startswith("Arterial PO2 is expected from")


def test_units_of_the_sample_are_the_units_of_the_answer() -> None:
    app = PatientAtPressure()
    view = _view(app)
    before = dict(app.params)
    view.unit_choices["sample_po2"].value = "mmHg"
    low, high = sorted(gp.convert(v, "kPa", "mmHg") for v in _both(app))
    assert app.params == before
    assert f"from {low:.0f} mmHg" in view.answer.value
    assert f"to {high:.0f} mmHg" in view.answer.value
