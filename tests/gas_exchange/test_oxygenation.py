"""Oxygen and CO2 along an exposure: limits, extremes, a second opinion on the coupled solution."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, Person, blood, explain, gas_exchange
from gasphys.errors import (
    GasphysError,
    NotReachableError,
    RangeError,
    UnitError,
    UnknownNameError,
    ValidityWarning,
)
from gasphys.schedules import treatment

FOLDER = Path(__file__).parents[2] / "notebooks" / "data"
MMHG = 0.1333223874
NUMBERS = ("arterial_po2", "arterial_o2_content", "mixed_venous_po2", "mixed_venous_pco2")


def at(pressure: object, gas: str = "oxygen") -> Exposure:
    return Exposure.start(gas, pressure=pressure).stay(1)


def person(name: str) -> Person:
    with gp.validity("ignore"):
        return Person.from_toml(FOLDER / name)


# -- Limits ------------------------------------------------------------------------------------------


def test_without_shunt_arterial_is_end_capillary() -> None:
    ds = gas_exchange.oxygenation(treatment("usn_6"), Person(shunt_fraction=0.0), "shunt")
    assert ds.arterial_po2.values == pytest.approx(ds.end_capillary_po2.values, rel=1e-9)
    assert ds.arterial_o2_content.values == pytest.approx(ds.end_capillary_o2_content.values, rel=1e-12)


def test_on_oxygen_alveolar_po2_does_not_depend_on_r() -> None:
    found = [
        gas_exchange.oxygenation(at("2.4 atm"), Person(respiratory_exchange_ratio=r)).alveolar_po2.values
        for r in (0.7, 0.85, 1.1)
    ]
    assert found[0] == pytest.approx(found[1], rel=1e-14)
    assert found[0] == pytest.approx(found[2], rel=1e-14)


def test_oxygen_and_co2_balance() -> None:
    """What blood gives in O2 it takes in CO2, times R; venous contents are those of the state found."""
    ds = gas_exchange.oxygenation(treatment("usn_6"), Person(arterial_pco2=5.8), "both")
    assert (ds.arterial_o2_content - ds.mixed_venous_o2_content).values == pytest.approx(5.0, rel=1e-12)
    assert (ds.mixed_venous_co2_content - ds.arterial_co2_content).values == pytest.approx(4.0, rel=1e-12)
    state = {"hemoglobin": 15.0, "ph": ds.mixed_venous_ph.values}
    again = blood.o2_content(ds.mixed_venous_po2.values, **state)
    assert again == pytest.approx(ds.mixed_venous_o2_content.values, rel=1e-9)
    co2 = blood.co2_content(
        ds.mixed_venous_pco2.values, o2_saturation=ds.mixed_venous_o2_saturation.values, **state
    )
    assert co2 == pytest.approx(ds.mixed_venous_co2_content.values, rel=1e-9)
    assert np.all(ds.mixed_venous_po2_low < ds.mixed_venous_po2)
    assert np.all(ds.mixed_venous_po2 < ds.mixed_venous_po2_high)
    assert np.all(ds.arterial_po2 <= ds.end_capillary_po2)
    assert ds.attrs["arteriovenous_band"] == [4.5, 6.0]


def test_delivery_extraction_and_share() -> None:
    """Fick by hand: 5.5 L/min; 5 mL/dL of what arrives; 0.0031 mL/dL/mmHg of it in solution."""
    ds = gas_exchange.oxygenation(at("2.4 atm")).isel(time=0)
    content = float(ds.arterial_o2_content)
    assert float(ds.o2_delivery_stpd) == pytest.approx(5.5 * content / 100.0)
    assert float(ds.o2_extraction) == pytest.approx(5.0 / content)
    assert float(ds.dissolved_o2_share) == pytest.approx(0.0031 * float(ds.arterial_po2) / MMHG / content)


def test_venous_co2_rises_by_the_haldane_penalty_when_blood_stays_saturated() -> None:
    """On O2 at 3 atm venous PCO2 stands 2.5-2.9 mmHg higher above the same arterial one than on air."""
    rise = [
        float(gas_exchange.oxygenation(at(p, gas)).venous_arterial_pco2_difference[0]) / MMHG
        for p, gas in (("1 atm", "air"), ("3 atm", "oxygen"))
    ]
    # The saturation of venous blood at 3 atm is 0.9 to 1: all or nearly all of the penalty.
    assert 1.5 < rise[1] - rise[0] < 2.9
    assert rise[0] == pytest.approx(4.97, abs=0.15)  # the first row of the published table


def test_the_models_part_as_published() -> None:
    """A ratio of 0.60 on O2 at 1 atm is q 0.144 and becomes 0.81, 0.85, 0.88 at 2, 2.5, 3 atm."""
    shunt = blood.shunt_at_arterial_po2(0.6 * 673.0 * MMHG, 673.0 * MMHG)
    assert shunt == pytest.approx(0.144, abs=5e-4)
    for alveolar, ratio in ((1433.0, 0.81), (1813.0, 0.85), (2193.0, 0.88)):
        found = blood.arterial_po2_from_shunt(alveolar * MMHG, shunt) / (alveolar * MMHG)
        assert found == pytest.approx(ratio, abs=5e-3)
    # The same 0.60 found on air and on 60 % oxygen.
    for fio2, expected in ((0.2093, 0.23), (0.60, 0.09), (1.0, 0.14)):
        alveolar_po2 = gp.lungs.alveolar_po2(101.325, fio2, 40.0 * MMHG)
        found = blood.shunt_at_arterial_po2(0.6 * alveolar_po2, alveolar_po2)
        assert found == pytest.approx(expected, abs=6e-3)


# -- A bedside sample --------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["p01.toml", "p03.toml", "p04.toml"])
def test_both_models_give_the_sample_back(name: str) -> None:
    import tomllib

    one = person(name)
    sample = tomllib.loads((FOLDER / name).read_text(encoding="utf-8"))["sample"]
    bedside = at(sample["barometric_pressure"], gp.Gas(oxygen=sample["fio2"]))  # type: ignore[arg-type]
    ds = gas_exchange.oxygenation(bedside, one, "both")
    assert ds.arterial_po2.values == pytest.approx(sample["arterial_po2"], rel=1e-9)


def test_hemoglobin_that_was_not_given_is_assumed() -> None:
    sample = {"arterial_po2": 25.3, "fio2": 0.4, "arterial_pco2": 5.2}
    assumed = gas_exchange.calibrate(**sample)
    assert not assumed.is_measured("hemoglobin")
    given = gas_exchange.calibrate(**sample, hemoglobin=15.0)
    assert given.is_measured("hemoglobin")
    assert given.shunt_fraction == assumed.shunt_fraction
    assert "hemoglobin = 15" in gas_exchange.oxygenation(at(200.0), assumed).attrs["assumed"]
    assert "hemoglobin = 15" in gas_exchange.oxygenation(at(200.0), given).attrs["measured"]


def test_a_ratio_below_three_quarters_is_told() -> None:
    with pytest.warns(ValidityWarning, match=r"below 0\.75"):
        one = Person.from_toml(FOLDER / "p04.toml")
    assert one.arterial_alveolar_ratio == pytest.approx(0.52, abs=5e-3)
    ds = gas_exchange.oxygenation(treatment("usn_6"), one, "both")
    assert "the models part" in ds.attrs["flags"]
    ratio, shunt = (float(ds.arterial_po2.sel(model=m).max()) for m in ("ratio", "shunt"))
    assert shunt > 1.5 * ratio
    assert "below 0.75" in gas_exchange.oxygenation(treatment("usn_6"), one).attrs["flags"]


def test_the_difference_follows_from_flow_and_uptake() -> None:
    one = Person(cardiac_output=4.0, o2_uptake_stpd=0.24)
    assert one.value("arteriovenous_difference") == pytest.approx(6.0)
    assert one.is_measured("arteriovenous_difference")
    assert not Person(cardiac_output=4.0).is_measured("arteriovenous_difference")
    assert Person(cardiac_output=4.0).value("arteriovenous_difference") == 5.0


# -- Extremes ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("known", "pressure", "gas", "flag"),
    [
        ({"hemoglobin": 3.0}, "3 atm", "oxygen", 0),
        ({"hemoglobin": 3.0}, "1 atm", "air", 3),
        ({"hemoglobin": 0.0}, "3 atm", "oxygen", 3),
        ({"hemoglobin": 0.0, "arterial_alveolar_ratio": 1.0}, "3.5 atm", "oxygen", 0),
        ({"cohb_fraction": 0.40}, "1 atm", "air", 0),
        ({"cohb_fraction": 0.40}, "2.8 atm", "oxygen", 0),
        ({"shunt_fraction": 0.5}, "3 atm", "oxygen", 0),
        ({"shunt_fraction": 0.5}, "1 atm", "air", 0),
        ({"shunt_fraction": 0.9}, "1 atm", "air", 2),
        ({"arterial_pco2": 12.0}, "2.4 atm", "oxygen", 0),
        ({"arterial_pco2": 12.0}, "1 atm", "air", 0),
        ({"arterial_pco2": 12.0, "arterial_ph": 7.02}, "1 atm", "oxygen", 4),
        ({}, "56.5 kPa", "air", 0),
        ({}, "20 kPa", "air", 1),
        ({}, "40 kPa", "oxygen", 0),
    ],
)
def test_extremes_give_results_or_a_flag(known: dict, pressure: str, gas: str, flag: int) -> None:
    ds = gas_exchange.oxygenation(at(pressure, gas), Person(**known), "both")
    for model in ("ratio", "shunt"):
        row = ds.isel(time=0).sel(model=model)
        code = int(row.gas_exchange_flag)
        missing = [v for v in NUMBERS if np.isnan(float(row[v]))]
        assert bool(missing) <= bool(code), (model, missing)
    assert int(ds.gas_exchange_flag.max()) == flag
    assert bool(flag) == ("instants with" in ds.attrs.get("flags", ""))


def test_flags_speak_for_every_nan_over_many_persons() -> None:
    rng = np.random.default_rng(7)
    for _ in range(60):
        one = Person(
            hemoglobin=rng.uniform(0.0, 20.0),
            arterial_pco2=rng.uniform(2.0, 12.5),
            arterial_ph=rng.uniform(6.9, 7.75),
            shunt_fraction=rng.uniform(0.0, 0.9),
            arterial_alveolar_ratio=rng.uniform(0.2, 1.0),
            cohb_fraction=rng.uniform(0.0, 0.6),
            arteriovenous_difference=rng.uniform(1.0, 10.0),
        )
        session = at(rng.uniform(30.0, 400.0), "nitrox 40")
        if not 7.0 <= one.arterial_ph <= 7.7:  # CO2 content is refused there
            with pytest.raises(RangeError, match=r"7 to 7\.7"):
                gas_exchange.oxygenation(session, one, "both")
            continue
        ds = gas_exchange.oxygenation(session, one, "both")
        for name in NUMBERS:
            assert not bool((ds[name].isnull() & (ds.gas_exchange_flag == 0)).any()), (name, one)


def test_inputs_out_of_the_possible_are_errors() -> None:
    with pytest.raises(RangeError, match="hemoglobin"):
        Person(hemoglobin=-1.0)
    with pytest.raises(UnknownNameError, match="nearest: 'shunt'"):
        gas_exchange.oxygenation(at(200.0), model="shunts")


# -- Coupled -----------------------------------------------------------------------------------------


def _published_state(x: np.ndarray, hemoglobin: float, o2: float, co2: float, excess: float) -> list[float]:
    """Residuals in O2 and CO2 content and base excess, typed from the papers, in mmHg.

    Unknown: PO2, PCO2, pH. Severinghaus 1979; Douglas, Jones & Reed 1988 with Kelman 1967 for plasma;
    Lang & Zander 2002.
    """
    po2, pco2, ph = x
    shifted = po2 * np.exp(((po2 / 26.6) ** 0.184 - 2.2) * (7.4 - ph))
    s = 1.0 / (23400.0 / (shifted**3 + 150.0 * shifted) + 1.0)
    content = 1.34 * hemoglobin * s + 0.0031 * po2
    pk = 6.086 + 0.042 * (7.4 - ph) + 1.0 * (0.00472 + 0.00139 * (7.4 - ph))
    plasma = 2.226 * 0.0307 * pco2 * (1.0 + 10.0 ** (ph - pk))
    blood_co2 = plasma * (1.0 - 0.0289 * hemoglobin / ((3.352 - 0.456 * s) * (8.142 - ph)))
    be = (1.0 - 0.0143 * hemoglobin) * (
        0.0304 * pco2 * 10.0 ** (ph - 6.1) - 24.26 + (9.5 + 1.63 * hemoglobin) * (ph - 7.4)
    ) - 0.2 * hemoglobin * (1.0 - s)
    return [content - o2, (blood_co2 - co2) / 10.0, be - excess]


def test_coupled_solution_agrees_with_a_general_root_finder() -> None:
    """Three unknowns at once by scipy.optimize against our one bracketed root; 40 random persons.

    Largest relative difference in PO2, PCO2 or pH when written: 1.2e-10.
    """
    from scipy.optimize import root

    rng = np.random.default_rng(11)
    worst = 0.0
    for _ in range(40):
        one = Person(
            hemoglobin=rng.uniform(6.0, 18.0),
            arterial_pco2=rng.uniform(3.5, 8.0),
            arterial_ph=rng.uniform(7.25, 7.5),
            arteriovenous_difference=rng.uniform(3.0, 6.0),
            respiratory_exchange_ratio=rng.uniform(0.7, 1.0),
        )
        row = gas_exchange.oxygenation(at(rng.uniform(90.0, 300.0), "nitrox 60"), one).isel(time=0)
        ours = np.array(
            [
                float(row.mixed_venous_po2) / MMHG,
                float(row.mixed_venous_pco2) / MMHG,
                float(row.mixed_venous_ph),
            ]
        )
        given = (
            float(row.functional_hemoglobin),
            float(row.mixed_venous_o2_content),
            float(row.mixed_venous_co2_content),
            float(row.base_excess),
        )
        # Started away from our solution, so that agreement is not the start value.
        found = root(_published_state, [40.0, 46.0, 7.37], args=given, tol=1e-13, options={"maxfev": 2000})
        if np.abs(found.fun).max() > 1e-9:
            found = root(_published_state, ours * [1.1, 1.05, 1.002], args=given, tol=1e-13)
        assert np.abs(found.fun).max() < 1e-9
        worst = max(worst, float(np.abs(found.x / ours - 1.0).max()))
    assert worst < 1e-8


# -- Carbon monoxide, CO2 in the gas -----------------------------------------------------------------


def test_carbon_monoxide_shifts_the_curve_of_what_is_left() -> None:
    """Haldane's two laws solved for PCO by scipy, typed here, against the chain; 30 random persons."""
    from scipy.optimize import brentq

    rng = np.random.default_rng(12)
    for _ in range(30):
        cohb, hemoglobin, ph = rng.uniform(0.02, 0.6), rng.uniform(8.0, 17.0), rng.uniform(7.3, 7.5)
        one = Person(hemoglobin=hemoglobin, cohb_fraction=cohb, arterial_ph=ph, arteriovenous_difference=2.5)
        row = gas_exchange.oxygenation(at(rng.uniform(100.0, 280.0), "nitrox 60"), one).isel(time=0)
        for site, site_ph in (("arterial", ph), ("mixed_venous", float(row.mixed_venous_ph))):
            po2 = float(row[f"{site}_po2"]) / MMHG

            def together(pressure: float, ph: float = site_ph) -> float:
                x = pressure * np.exp(((pressure / 26.6) ** 0.184 - 2.2) * (7.4 - ph))
                return 1.0 / (23400.0 / (x**3 + 150.0 * x) + 1.0)

            def missing(pco: float, po2: float = po2, together=together, cohb: float = cohb) -> float:
                joint = po2 + 218.0 * pco
                return together(joint) * 218.0 * pco / joint - cohb

            pco = brentq(missing, 0.0, 1e5, xtol=1e-14, rtol=1e-14)
            o2hb = together(po2 + 218.0 * pco) - cohb
            assert float(row[f"{site}_o2_saturation"]) == pytest.approx(o2hb / (1.0 - cohb), rel=1e-8)
            content = 1.34 * hemoglobin * o2hb + 0.0031 * po2
            assert float(row[f"{site}_o2_content"]) == pytest.approx(content, rel=1e-6)


def test_carbon_monoxide_lowers_venous_po2_by_more_than_its_share_of_hemoglobin() -> None:
    """Smoke, 31 %, against an anemia that leaves as much hemoglobin for O2; on air."""
    smoke = gas_exchange.oxygenation(at("1 atm", "air"), Person(hemoglobin=14.1, cohb_fraction=0.31))
    anemia = gas_exchange.oxygenation(at("1 atm", "air"), Person(hemoglobin=14.1 * 0.69))
    # Arterial blood is full in both; in smoke it is a little fuller.
    assert 0.0 < float(smoke.arterial_o2_content[0] - anemia.arterial_o2_content[0]) < 0.3
    assert float(smoke.mixed_venous_po2[0]) < 0.85 * float(anemia.mixed_venous_po2[0])
    assert "carboxyhemoglobin stays 0.31" in smoke.attrs["flags"]
    # What carries CO carries no CO2 as reduced hemoglobin does: 1 where all is filled.
    share = float(smoke.mixed_venous_liganded_fraction[0])
    assert share == pytest.approx(0.31 + 0.69 * float(smoke.mixed_venous_o2_saturation[0]), rel=1e-12)


def test_without_carbon_monoxide_nothing_changes() -> None:
    plain = gas_exchange.oxygenation(treatment("usn_6"), Person(), "both")
    trace = gas_exchange.oxygenation(treatment("usn_6"), Person(cohb_fraction=1e-9), "both")
    for name in NUMBERS:
        assert trace[name].values == pytest.approx(plain[name].values, rel=1e-6), name


def test_carbon_dioxide_of_the_gas_is_breathed() -> None:
    """A15: 760 mmHg, 20.93 % O2, 2 % CO2, PACO2 45, R 0.8: 112.60 mmHg."""
    mix = gp.Gas(oxygen=0.2093, carbon_dioxide=0.02)
    one = Person(arterial_pco2="45 mmHg")
    ds = gas_exchange.oxygenation(at("760 mmHg", mix), one)  # type: ignore[arg-type]
    assert float(ds.alveolar_po2[0]) / MMHG == pytest.approx(112.60, abs=0.005)
    assert float(ds.inspired_pco2[0]) / MMHG == pytest.approx(0.02 * 713.0, rel=1e-4)
    # The same from a mask, by hand; and a fraction harmless at the surface is not so at depth.
    air = gp.Gas(oxygen=0.2093)
    masked = gas_exchange.oxygenation(at("760 mmHg", air), one, fico2="2 %")  # type: ignore[arg-type]
    assert masked.alveolar_po2.values == pytest.approx(ds.alveolar_po2.values, rel=1e-12)
    assert "flags" not in masked.attrs
    deep = gas_exchange.oxygenation(at("4 atm", "air"), one, fico2="2 %")
    assert "no steady state" in deep.attrs["flags"]
    session = Exposure.start("oxygen").stay(5).switch("air").stay(5)
    by_piece = gas_exchange.oxygenation(session, fico2=[0.0, 0.03])
    assert by_piece.fico2.values.tolist() == [0.0, 0.03, 0.03]


def test_an_absorbent_takes_the_carbon_dioxide_of_a_loop() -> None:
    mix = gp.Gas(oxygen=0.2, carbon_dioxide=0.01)
    open_circuit = Exposure.start(mix, pressure="2 atm")
    loop = open_circuit.loop(setpoint=130.0, diluent=mix)
    assert float(gas_exchange.oxygenation(open_circuit.stay(5)).fico2[0]) == 0.01
    assert float(gas_exchange.oxygenation(loop.stay(5)).fico2[0]) == 0.0
    assert float(gas_exchange.oxygenation(loop.stay(5), fico2=0.01).fico2[0]) == 0.01


@pytest.mark.parametrize("wrong", [-0.01, float("nan"), 2.0, [0.0, 0.9]])
def test_impossible_carbon_dioxide_is_refused(wrong: object) -> None:
    session = Exposure.start("oxygen").stay(5).switch("air").stay(5)
    with pytest.raises(RangeError, match="fico2"):
        gas_exchange.oxygenation(session, fico2=wrong)


# -- Several persons at once -------------------------------------------------------------------------

SEVERAL = {
    "hemoglobin": [9.0, 12.9, 15.0],
    "cohb_fraction": [0.0, 0.2, 0.0],
    "shunt_fraction": [0.05, 0.2, 0.3],
}


def test_persons_broadcast_over_the_exposure() -> None:
    labels = ["P-11", "P-12", "P-13"]
    one = Person(
        arteriovenous_difference=4.0,
        **{
            k: xr.DataArray(v, dims="person", coords={"person": labels}, attrs={"units": unit})
            for (k, v), unit in zip(SEVERAL.items(), ("g/dL", "1", "1"), strict=True)
        },
    )
    ds = gas_exchange.oxygenation(treatment("usn_5"), one, "both")
    assert ds.arterial_po2.dims == ("model", "person", "time")
    assert ds.attrs["measured"].startswith("shunt_fraction = 0.05 to 0.3, hemoglobin = 9 to 15")
    for i, label in enumerate(labels):
        single = Person(arteriovenous_difference=4.0, **{k: v[i] for k, v in SEVERAL.items()})
        alone = gas_exchange.oxygenation(treatment("usn_5"), single, "both")
        for name in (*NUMBERS, "mixed_venous_po2_low", "gas_exchange_flag"):
            found = ds[name].sel(person=label).values
            assert found == pytest.approx(alone[name].values, rel=1e-9), (name, label)
    found = explain(ds, "mixed_venous_po2_low", time=3.0, model="shunt", person="P-12")
    assert found.value == pytest.approx(found.stored, rel=1e-12)


def test_persons_meet_the_exposures_of_the_same_name() -> None:
    """Each person at a pressure of his own: one dimension, not two."""
    pressure = xr.DataArray([150.0, 200.0, 280.0], dims="person", attrs={"units": "kPa"})
    session = Exposure.start("oxygen").travel(pressure=pressure, minutes=5).stay(10)
    ds = gas_exchange.oxygenation(session, Person(hemoglobin=[9.0, 12.0, 15.0]))
    assert ds.arterial_o2_content.sizes == {"person": 3, "time": 3}
    # Of the ratio model arterial PO2 does not ask for hemoglobin: one value for all of them.
    both = gas_exchange.oxygenation(at("2 atm"), Person(hemoglobin=[9.0, 12.0, 15.0]))
    assert both.arterial_po2.dims == ("time",)
    assert both.gas_exchange_flag.dims == ("person", "time")
    alone = Exposure.start("oxygen").travel(pressure=200.0, minutes=5).stay(10)
    expected = gas_exchange.oxygenation(alone, Person(hemoglobin=12.0)).arterial_o2_content.values
    assert ds.arterial_o2_content.isel(person=1).values == pytest.approx(expected, rel=1e-12)


def test_units_of_several_persons_are_read_and_refused() -> None:
    pco2 = xr.DataArray([38.0, 45.0], dims="person", attrs={"units": "mmHg"})
    found = Person(arterial_pco2=pco2).value("arterial_pco2")
    assert found.values == pytest.approx([38.0 * MMHG, 45.0 * MMHG], rel=1e-9)
    assert found.attrs["units"] == "kPa"
    with pytest.raises(RangeError, match="hemoglobin"):
        Person(hemoglobin=[15.0, -1.0])
    with pytest.raises(RangeError, match="hemoglobin"):
        Person(hemoglobin=[15.0, float("nan")])
    with pytest.raises(TypeError, match="named dimensions"):
        Person(hemoglobin=[[15.0]])
    several = Person(hemoglobin=[9.0, 12.0])
    for ask in (
        lambda: gas_exchange.breath_hold(at("1 atm", "air"), several),
        lambda: gas_exchange.carboxyhemoglobin(at("1 atm"), several),
        lambda: gas_exchange.pressure_for(several, arterial_po2=100.0),
    ):
        with pytest.raises(GasphysError, match="several persons"):
            ask()


def test_chunked_persons_stay_lazy() -> None:
    dask = pytest.importorskip("dask")
    values = xr.DataArray(np.linspace(8.0, 17.0, 12), dims="draw", attrs={"units": "g/dL"})
    expected = gas_exchange.oxygenation(treatment("usn_5"), Person(hemoglobin=values), "both")

    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("computed")

    with dask.config.set(scheduler=refuse):
        ds = gas_exchange.oxygenation(treatment("usn_5"), Person(hemoglobin=values.chunk(draw=5)), "both")
    assert ds.mixed_venous_po2.chunks is not None
    assert "gas_exchange_flag tells" in ds.attrs["flags"]
    for name in (*NUMBERS, "gas_exchange_flag"):
        assert ds[name].compute().values == pytest.approx(expected[name].values, rel=1e-12, nan_ok=True)


# -- Scenarios and explanation -----------------------------------------------------------------------


def test_scenarios_keep_their_dimension() -> None:
    pressure = xr.DataArray([150.0, 200.0, 280.0], dims="depth", attrs={"units": "kPa"})
    session = Exposure.start("oxygen").travel(pressure=pressure, minutes=5).stay(10)
    ds = gas_exchange.oxygenation(session, model="both")
    assert ds.arterial_po2.sizes == {"model": 2, "depth": 3, "time": 3}
    for i, p in enumerate(pressure.values):
        single = Exposure.start("oxygen").travel(pressure=float(p), minutes=5).stay(10)
        one = gas_exchange.oxygenation(single, model="both")
        for name in (*NUMBERS, "mixed_venous_po2_low", "gas_exchange_flag"):
            assert ds[name].isel(depth=i).values == pytest.approx(one[name].values, rel=1e-12), name


@pytest.mark.parametrize("model", ["ratio", "shunt"])
def test_every_number_of_both_models_can_be_explained(model: str) -> None:
    ds = gas_exchange.oxygenation(treatment("usn_6"), person("p04.toml"), "both")
    explained = 0
    for name in ds.data_vars:
        if "equation" not in ds[name].attrs or "inert_gas" in ds[name].dims or "time" not in ds[name].dims:
            continue
        labels = {"model": model} if "model" in ds[name].dims else {}
        for time in (0.0, 3.0, 23.0):
            found = explain(ds, str(name), time=time, **labels)
            assert found.value == pytest.approx(found.stored, rel=1e-12)
            explained += 1
    assert explained > 70
    text = str(explain(ds, "mixed_venous_po2", time=3.0, model=model))
    assert f"arterial_po2_from_{model}" in text
    assert "mixed_venous_ph" in text


def test_saves_and_comes_back(tmp_path: Path) -> None:
    ds = gas_exchange.oxygenation(treatment("usn_5"), person("p04.toml"), "both")
    ds.to_netcdf(tmp_path / "x.nc", engine="h5netcdf")
    with xr.open_dataset(tmp_path / "x.nc", engine="h5netcdf", decode_timedelta=False) as back:
        xr.testing.assert_allclose(back.load()[list(NUMBERS)], ds[list(NUMBERS)])


# -- The way back ------------------------------------------------------------------------------------


def test_pressure_at_which_dissolved_oxygen_covers_the_difference() -> None:
    """5 mL/dL needs 1613 mmHg arterial; with the ratio of P-03, 0.80, that is near 2.8 atm."""
    one = person("p03.toml")
    pressure = gas_exchange.pressure_for(one, dissolved_o2=5.0)
    alveolar = 1613.0 * MMHG / one.arterial_alveolar_ratio
    assert pressure == pytest.approx(alveolar + 4.4 + 47.0 * MMHG, abs=0.1)
    both = gas_exchange.pressure_for(one, dissolved_o2="5 mL/dL", model="both")
    assert float(both.sel(model="ratio")) == pressure
    assert float(both.sel(model="shunt")) < pressure
    # Read forward again.
    found = gas_exchange.oxygenation(at(pressure), one)
    assert float(found.arterial_dissolved_o2[0]) == pytest.approx(5.0, rel=1e-9)


def test_what_cannot_be_reached_is_told_with_what_can() -> None:
    one = person("p04.toml")
    with pytest.raises(NotReachableError, match=r"on FIO2 1 by the ratio model; reachable: 0 to 151\.5 kPa"):
        gas_exchange.pressure_for(one, arterial_po2=300.0)
    with pytest.raises(NotReachableError, match=r"fio2 from 0 to 1 .* at 101\.325 kPa by the shunt model"):
        gas_exchange.fio2_for(one, ambient_pressure="1 atm", arterial_po2=90.0, model="shunt")
    both = gas_exchange.pressure_for(one, arterial_po2=200.0, model="both")
    assert np.isnan(both.sel(model="ratio"))
    assert "by the ratio model; reachable" in both.attrs["flags"]
    with pytest.raises(NotReachableError, match=r"ratio model.*shunt model"):
        gas_exchange.pressure_for(one, arterial_po2=500.0, model="both")


def test_questions_that_cannot_be_asked() -> None:
    with pytest.raises(GasphysError, match="give one of"):
        gas_exchange.pressure_for(arterial_po2=100.0, dissolved_o2=5.0)
    with pytest.raises(GasphysError, match="give one of"):
        gas_exchange.fio2_for(ambient_pressure=200.0)
    with pytest.raises(RangeError, match="did you mean '100 %'"):
        gas_exchange.pressure_for(arterial_po2=100.0, fio2=100)
    with pytest.raises(UnitError):
        gas_exchange.pressure_for(arterial_po2="100 mL")
    with pytest.raises(RangeError, match="highest"):
        gas_exchange.pressure_for(arterial_po2=100.0, highest=5.0)
    with pytest.raises(UnknownNameError):
        gas_exchange.pressure_for(arterial_po2=100.0, model="shunts")
