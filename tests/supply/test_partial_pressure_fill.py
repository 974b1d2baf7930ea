"""Filling by partial pressures: published recipes, mixed forward, conserved, and what cannot be mixed.

``reference/blending_cases_20C.csv``: recipes by the virial series in moles and by the ideal gas law
(computed); for nitrox the reference equations of state give 26.93 and 30.56 bar.
"""

from __future__ import annotations

import csv
import warnings
from pathlib import Path
from typing import Any

import CoolProp
import numpy as np
import pytest
import xarray as xr
from hypothesis import assume, given
from hypothesis import strategies as st
from scipy.optimize import brentq

import gasphys as gp
from gasphys import real_gas
from gasphys.errors import NotReachableError, RangeError
from gasphys.gas import FORMULAS
from gasphys.supply import partial_pressure_fill

SHORT = {"He": "helium", "O2": "oxygen", "air": "air"}


def cases() -> list[dict[str, str]]:
    with (Path(__file__).parent / "reference" / "blending_cases_20C.csv").open(
        encoding="utf-8", newline=""
    ) as file:
        return list(csv.DictReader(file))


def numbers(text: str) -> list[float]:
    return [float(part) for part in text.split()]


def mixture(species: np.ndarray) -> gp.Gas:
    x = dict(zip(FORMULAS.values(), species / species.sum(), strict=True))
    del x["nitrogen"]
    return gp.Gas(**{name: min(max(float(v), 0.0), 1.0) for name, v in x.items()})


def forward(
    fill: xr.Dataset, volume: float, temperature: float, remainder: Any = None, pressure: float = 0.0
) -> Any:
    """Mix as one does at the panel: open each gas until the gauge shows the pressure; return the moles."""
    species = np.zeros(len(FORMULAS))
    if remainder is not None:
        gas = gp.Gas.parse(remainder)
        species += real_gas.cylinder_content(pressure, gas, volume, temperature) * np.array(
            list(gas.fractions.values())
        )
    for name, stop in zip(fill.step.values, fill.pressure_after.values, strict=True):
        x = np.array(list(gp.Gas.parse(str(name)).fractions.values()))

        def over(moles: float, x: np.ndarray = x, species: np.ndarray = species, stop: float = stop) -> float:
            total = species + moles * x
            if total.sum() == 0.0:
                return -stop
            return float(real_gas.cylinder_pressure(total.sum(), mixture(total), volume, temperature)) - stop

        most = 3.0 * stop * volume / (8.314 * (temperature + 273.15)) + 1.0
        species = species + x * (brentq(over, 0.0, most, xtol=1e-13) if over(0.0) < -1e-6 else 0.0)
    return species


@pytest.mark.parametrize("row", cases(), ids=lambda r: f"{r['target']}-{r['final_bar_abs']}-{r['order']}")
def test_published_recipes(row: dict[str, str]) -> None:
    order = tuple(SHORT[word] for word in row["order"].split())
    fill = partial_pressure_fill(row["target"], f"{row['final_bar_abs']} bar", order=order)
    assert fill.step.values.tolist() == list(order)
    for name, column in (
        ("ideal_pressure_after", "ideal_gas_pressure_after_each_step_bar"),
        ("pressure_after", "real_gas_pressure_after_each_step_bar"),
    ):
        np.testing.assert_allclose(fill[name].values / 100.0, numbers(row[column]), atol=0.0051, rtol=0.0)
    given_by_ideal = fill.ideal_recipe_fraction
    assert float(given_by_ideal.sel(gas="O2")) == pytest.approx(
        float(row["O2_fraction_if_ideal_recipe_used"]), abs=5.1e-5
    )
    assert float(given_by_ideal.sel(gas="He")) == pytest.approx(
        float(row["He_fraction_if_ideal_recipe_used"]), abs=5.1e-5
    )


def test_nitrox_against_the_reference_equations_of_state() -> None:
    """Oxygen to 26.93 bar for 200 bar, to 30.56 bar for 232 bar; solved here with CoolProp."""

    def molar(fluids: str, fractions: list[float], pressure: float) -> float:
        state = CoolProp.AbstractState("HEOS", fluids)
        if len(fractions) > 1:
            state.set_mole_fractions(fractions)
        state.specify_phase(CoolProp.iphase_supercritical_gas)
        state.update(CoolProp.PT_INPUTS, 1e3 * pressure, 293.15)
        return float(state.rhomolar())

    for pressure, printed in ((20000.0, 26.93), (23200.0, 30.56)):
        total = molar("Nitrogen&Oxygen", [0.68, 0.32], pressure)
        oxygen = total * (0.32 - 0.21 * 0.68 / 0.79)
        alone = brentq(lambda p, n=oxygen: molar("Oxygen", [1.0], p) - n, 1000.0, 5000.0)
        assert alone / 100.0 == pytest.approx(printed, abs=0.006)
        fill = partial_pressure_fill("nitrox 32", pressure, order=("oxygen", "air"))
        # 0.15 % of density is the bound of the series to 200 bar, 0.30 % to 300.
        assert float(fill.pressure_after[0]) == pytest.approx(alone, rel=3e-3)


@pytest.mark.parametrize(
    ("target", "remainder", "left", "order"),
    [
        ("nitrox 32", None, 0.0, ("oxygen", "air")),
        ("trimix 18/45", None, 0.0, ("helium", "oxygen", "air")),
        ("heliox 21/79", None, 0.0, ("oxygen", "helium")),
        ("trimix 17/48", "trimix 17/48", 4600.0, ("helium", "oxygen", "air")),
        ("trimix 17/48", "nitrox 48", 3000.0, ("helium", "oxygen", "air")),
        ("nitrox 48", "air", 5000.0, ("oxygen", "nitrox 40")),
    ],
)
def test_mixed_forward(target: str, remainder: Any, left: float, order: tuple[str, ...]) -> None:
    """Acceptance: the mix that comes out is the wanted one to 0.05 %, each species conserved."""
    volume, temperature = 12.0, 18.0
    fill = partial_pressure_fill(
        target, 22000.0, volume, temperature, remainder=remainder, remainder_pressure=left, order=order
    )
    species = forward(fill, volume, temperature, remainder, left)
    wanted = np.array(list(gp.Gas.parse(target).fractions.values()))
    np.testing.assert_allclose(species / species.sum(), wanted, rtol=5e-4, atol=1e-9)
    np.testing.assert_allclose(
        species.sum(), real_gas.cylinder_content(22000.0, target, volume, temperature), rtol=1e-8
    )


shares = st.floats(0.0, 1.0)


@given(
    o2=st.floats(0.22, 1.0),
    helium=shares,
    pressure=st.floats(5000.0, 30000.0),
    temperature=st.floats(-10.0, 50.0),
    share=st.floats(0.0, 0.5),
)
def test_every_gas_is_conserved(
    o2: float, helium: float, pressure: float, temperature: float, share: float
) -> None:
    """The target on top of some of itself, with the gases in two orders: same amounts, each species kept."""
    target = gp.Gas(oxygen=(1.0 - helium) * o2, helium=helium)
    found = [
        partial_pressure_fill(
            target,
            pressure,
            7.0,
            temperature,
            remainder=target,
            remainder_pressure=share * pressure,
            order=order,
        )
        for order in (("helium", "oxygen", "air"), ("air", "helium", "oxygen"))
    ]
    total = real_gas.cylinder_content(pressure, target, 7.0, temperature)
    for fill in found:
        assert np.all(fill.amount.values >= 0.0)
        assert np.all(np.diff(fill.pressure_after.values) >= -1e-6)
        assert float(fill.pressure_after[-1]) == pytest.approx(pressure, rel=1e-9)
        species = float(fill.remainder_amount) * np.array(list(target.fractions.values()))
        for name, amount in zip(fill.step.values, fill.amount.values, strict=True):
            species = species + amount * np.array(list(gp.Gas.parse(str(name)).fractions.values()))
        np.testing.assert_allclose(
            species, total * np.array(list(target.fractions.values())), rtol=1e-9, atol=1e-9
        )
    np.testing.assert_allclose(
        found[0].amount.sel(step=["air", "helium", "oxygen"]).values,
        found[1].amount.values,
        rtol=1e-9,
        atol=1e-9,
    )


@given(o2=st.floats(0.22, 0.9), helium=st.floats(0.0, 0.9))
def test_thin_gas_follows_the_ideal_recipe(o2: float, helium: float) -> None:
    """p(O2) = p [x(O2) - 0.21 (1 - x(O2) - x(He))/0.79], helium first."""
    assume(helium + o2 <= 1.0)
    assume(o2 - 0.21 * (1.0 - o2 - helium) / 0.79 > 1e-3)
    fill = partial_pressure_fill(gp.Gas(oxygen=o2, helium=helium), 20.0)
    partial = 20.0 * (o2 - 0.21 * (1.0 - o2 - helium) / 0.79)
    expected = [20.0 * helium, 20.0 * helium + partial, 20.0]
    np.testing.assert_allclose(fill.ideal_pressure_after.values, expected, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(fill.pressure_after.values, expected, rtol=1e-3, atol=1e-9)
    np.testing.assert_allclose(
        fill.ideal_recipe_fraction.sel(gas=["O2", "He"]).values, [o2, helium], rtol=1e-3, atol=1e-6
    )


def test_hot_and_settled() -> None:
    fill = partial_pressure_fill("trimix 18/45", 20000.0, 12.0, 15.0, filling_temperature=40.0)
    assert np.all(fill.pressure_after_hot.values > fill.pressure_after.values)
    # The last step: the same density, warmer.
    density = real_gas.density(20000.0, "trimix 18/45", 15.0)
    assert float(fill.pressure_after_hot[-1]) == pytest.approx(
        real_gas.pressure_at_density(density, "trimix 18/45", 40.0), rel=1e-12
    )
    assert "pressure_after_hot" not in partial_pressure_fill("nitrox 32", 20000.0)


def test_a_remainder_that_must_be_drained() -> None:
    """The error gives the pressure to drain to, and from there it can be done."""
    with pytest.raises(NotReachableError, match=r"oxygen would have to be taken out.*4352 kPa \(43\.5 bar\)"):
        partial_pressure_fill("trimix 17/48", 22000.0, remainder="nitrox 48", remainder_pressure=4600.0)
    fill = partial_pressure_fill("trimix 17/48", 22000.0, remainder="nitrox 48", remainder_pressure=4351.0)
    assert float(fill.amount.sel(step="oxygen")) == pytest.approx(0.0, abs=0.01)
    assert np.all(fill.amount.values >= 0.0)


@pytest.mark.parametrize(
    ("kwargs", "error", "match"),
    [
        ({"order": ("helium", "oxygen")}, NotReachableError, "N2 would be off"),
        ({"order": ("air", "nitrox 32", "oxygen")}, NotReachableError, "none is a mixture"),
        ({"order": ()}, NotReachableError, "no gas"),
        ({"order": "air"}, TypeError, "sequence of gases"),
        ({"remainder_pressure": 100.0}, RangeError, "say which gas"),
        ({"remainder": "air", "remainder_pressure": 23000.0}, RangeError, "drain the cylinder first"),
        (
            {"remainder": "mix O2=0.2 Ar=0.1", "remainder_pressure": 1000.0},
            NotReachableError,
            "Ar would be off",
        ),
        ({"order": ("helium", "nitrox 40", "oxygen")}, NotReachableError, "less than nothing of oxygen"),
        ({"volume": 0.0}, RangeError, "water_capacity"),
        ({"volume": "12 kg"}, gp.GasphysError, "water_capacity"),
        ({"temperature": -30.0}, RangeError, r"-23\.15"),
        ({"filling_temperature": -40.0}, RangeError, r"-23\.15"),
        ({"order": ("helium", "oxigen", "air")}, gp.GasphysError, "oxigen"),
    ],
)
def test_what_cannot_be_done_says_why(kwargs: dict[str, Any], error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        partial_pressure_fill("trimix 17/48", 22000.0, **kwargs)


def test_many_fills_at_once() -> None:
    """Along any dimensions; each as alone; a remainder that must be drained is nan, not an error for all."""
    pressure = xr.DataArray([180.0, 220.0, 300.0], dims="bank", attrs={"units": "bar"})
    left = xr.DataArray([0.0, 40.0, 60.0], dims="left", coords={"left": [0, 40, 60]}, attrs={"units": "bar"})
    with pytest.warns(gp.ValidityWarning, match=r"4 of 9 fills.*drain"):
        fill = partial_pressure_fill(
            "trimix 17/48", pressure, 12.0, remainder="nitrox 48", remainder_pressure=left
        )
    assert set(fill.amount.dims) == {"step", "bank", "left"}
    assert fill.left.values.tolist() == [0, 40, 60]
    assert int(np.isnan(fill.amount.sel(step="oxygen")).sum()) == 4
    for i, p in enumerate((18000.0, 22000.0, 30000.0)):
        for j, r in enumerate((0.0, 4000.0, 6000.0)):
            one = fill.isel(bank=i, left=j)
            if np.isnan(one.amount).any():
                with pytest.raises(NotReachableError, match="drain"):
                    partial_pressure_fill(
                        "trimix 17/48", p, 12.0, remainder="nitrox 48", remainder_pressure=r
                    )
                continue
            alone = partial_pressure_fill(
                "trimix 17/48", p, 12.0, remainder="nitrox 48", remainder_pressure=r
            )
            for name in ("amount", "pressure_after", "ideal_pressure_after", "ideal_recipe_fraction"):
                np.testing.assert_allclose(
                    one[name].values, alone[name].values, rtol=1e-12, atol=1e-9, err_msg=name
                )


def test_dataset_says_what_it_rests_on(tmp_path: Path) -> None:
    fill = partial_pressure_fill(
        "trimix 17/48", 22000.0, 12.0, remainder="trimix 17/48", remainder_pressure=4600.0
    )
    assert fill.attrs["estimated_pairs"] == "He-O2: estimate, +-1.5 cm3/mol"
    assert "analyze" in fill.attrs["comment"]
    assert "estimated_pairs" not in partial_pressure_fill("nitrox 32", 20000.0).attrs
    assert {v: fill[v].attrs["units"] for v in ("amount", "pressure_after")} == {
        "amount": "mol",
        "pressure_after": "kPa",
    }
    assert float(fill.relative_uncertainty) == pytest.approx(
        real_gas.uncertainty(22000.0, "trimix 17/48"), rel=1e-12
    )
    for engine in ("scipy", "h5netcdf"):
        path = tmp_path / f"{engine}.nc"
        fill.to_netcdf(path, engine=engine)
        with xr.open_dataset(path, engine=engine) as back:
            xr.testing.assert_identical(back.load(), fill)


def test_no_warning_in_the_ordinary_case() -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        partial_pressure_fill("nitrox 32", "200 bar", "12 L", "20 degC")
