"""How much work does this gas leave room for: picture and answer show what the equations give."""

from __future__ import annotations

import numpy as np
import pytest

import gasphys as gp
from gasphys.errors import GasphysError, RangeError
from gasphys.limits import load
from gasphys.plots.room_for_work import RoomForWork as Picture
from gasphys.plots.style import new_figure
from gasphys.widgets import RoomForWork


def drawn(app):
    picture = Picture(new_figure(*app.size))
    ds = app.compute()
    picture.update(ds, ds.attrs["chosen_pressure"])
    return picture, ds


def test_lines_and_band_are_the_dataset():
    picture, ds = drawn(RoomForWork())
    pressures = gp.convert(ds.ambient_pressure.values, "kPa", "atm")
    for line, name in (
        (picture.gas, "sustainable_o2_uptake"),
        (picture.work, "resistive_work"),
        (picture.air, "sustainable_o2_uptake_in_air"),
    ):
        x, y = line.get_data()
        np.testing.assert_allclose(x, pressures, rtol=1e-12)
        np.testing.assert_allclose(y, ds[name].values, rtol=1e-12)
    corners = picture.bands[0].get_xy()
    assert corners[:, 1].max() == pytest.approx(float(ds.sustainable_o2_uptake_high.max()), rel=1e-12)
    assert corners[:, 1].min() == pytest.approx(float(ds.sustainable_o2_uptake_low.min()), rel=1e-12)


def test_air_is_what_air_itself_would_give():
    ds = RoomForWork().compute()
    air = RoomForWork(gas="air").compute()
    np.testing.assert_allclose(
        ds.sustainable_o2_uptake_in_air.values, air.sustainable_o2_uptake.values, rtol=1e-12
    )
    assert "sustainable_o2_uptake_in_air" not in air


@pytest.mark.parametrize("gas", ["air", "trimix 17/48"])
def test_density_marks_stand_where_the_limits_are_met(gas):
    picture, _ = drawn(RoomForWork(gas=gas, ambient_pressure="8 atm"))
    marks = {v: line.get_xdata()[0] for v, (line, text) in picture.densities.items() if text.get_visible()}
    assert set(marks) <= {x.value for x in load() if x.quantity == "gas_density"}
    assert 5.2 in marks
    for value, place in marks.items():
        assert gp.real_gas.reference_density(place * 101.325, gas) == pytest.approx(value, rel=1e-9)
    # Helium that reaches the mark beyond the picture has none.
    hidden, _ = drawn(RoomForWork(gas="oxygen", ambient_pressure="1 atm"))
    assert all(text.get_visible() for _, text in hidden.densities.values())


def test_answer_and_dataset_agree_with_the_equations():
    app = RoomForWork(
        surface_maximum_ventilation_btps=120.0, gas="air", ambient_pressure="6 atm", o2_uptake_stpd=2.0
    )
    ds = app.compute()
    density = gp.real_gas.humid_density("6 atm", "air", 37.0, "47 mmHg")
    most = gp.breathing.maximum_ventilation(120.0, gp.breathing.density_ratio(density))
    left = gp.breathing.sustainable_o2_uptake(most)
    answer = app.answer(ds)
    assert f"an O2 uptake of {left:.2f} L/min" in answer
    assert f"ventilation is {100.0 * 50.0 / most:.1f} % of the maximum" in answer
    assert "less than the O2 uptake asked for, 2." in answer
    easy = RoomForWork(
        surface_maximum_ventilation_btps=120.0, gas="air", ambient_pressure="6 atm", o2_uptake_stpd=1.0
    )
    assert "less than" not in easy.answer(easy.compute())


def test_notes_tell_limits_and_what_is_left_out():
    notes = " ".join(
        RoomForWork(gas="air", ambient_pressure="4.5 atm").notes(
            RoomForWork(gas="air", ambient_pressure="4.5 atm").compute()
        )
    )
    assert "beyond 5.2 g/L" in notes
    assert "within 6.2 g/L" in notes
    assert "CO2 is retained" in notes
    assert "memory" in notes


@pytest.mark.parametrize("name", list(RoomForWork.explained))
def test_every_number_offered_is_explained(name):
    app = RoomForWork(ambient_pressure="7 atm")
    ds = app.compute()
    text = app.explain(ds, name)
    stored = float(ds[name].sel(ambient_pressure=ds.attrs["chosen_pressure"]))
    assert text.startswith(f"{name} = {stored:.7g} (stored {stored:.7g})")


def test_lines_reproduce_dataset_and_figure():
    app = RoomForWork(gas="trimix 17/48", ambient_pressure="5 atm")
    space: dict[str, object] = {}
    exec(app.lines(), space)
    again = space["ds"]
    for name in ("sustainable_o2_uptake", "resistive_work_high", "sustainable_o2_uptake_in_air"):
        np.testing.assert_allclose(again[name].values, app.compute()[name].values, rtol=1e-12)  # type: ignore[index]
    assert len(space["figure"].axes) == 2  # type: ignore[attr-defined]


def test_what_is_not_possible_is_refused():
    with pytest.raises(RangeError, match="surface_maximum_ventilation_btps"):
        RoomForWork(surface_maximum_ventilation_btps=5000.0)
    app = RoomForWork()
    with pytest.raises(GasphysError, match="not among the pressures"):
        gp.plots.room_for_work_figure(app.compute(), 123.0)
    assert RoomForWork(ambient_pressure=20000.0).pressures()[-1] == 20000.0
    assert RoomForWork(ambient_pressure="0.6 atm").pressures()[0] < 61.0
