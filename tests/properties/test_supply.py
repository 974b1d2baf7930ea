"""Equations of the gas supply: inverses, conservation, limits, scale."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import real_gas, supply

from .coverage import covers, members

pressures = st.floats(100.0, 30000.0)
temperatures = st.floats(-10.0, 50.0)
rates = st.floats(1.0, 100.0)
capacities = st.floats(0.5, 100.0)
gases = st.builds(
    lambda o2, helium: gp.Gas(oxygen=(1.0 - helium) * o2, helium=helium),
    st.floats(0.0, 1.0),
    st.floats(0.0, 1.0),
)
models = st.sampled_from(["virial", "ideal"])


@covers("supply.free_gas_flow")
@given(rate=rates, ambient=st.floats(60.0, 1900.0), factor=st.floats(0.1, 4.0))
def test_free_flow_is_proportional_to_pressure_and_rate(rate: float, ambient: float, factor: float) -> None:
    flow = supply.free_gas_flow(rate, ambient)
    assert supply.free_gas_flow(factor * rate, ambient) == pytest.approx(factor * flow, rel=1e-12)
    assert supply.free_gas_flow(rate, factor * ambient) == pytest.approx(factor * flow, rel=1e-12)
    assert supply.free_gas_flow(rate, 101.325) == pytest.approx(rate, rel=1e-12)
    # Boyle: the same gas taken back to the ambient pressure has the volume breathed.
    assert gp.laws.boyle_volume(flow, 101.325, ambient) == pytest.approx(rate, rel=1e-12)


@covers("supply.loop_diluent")
@given(
    volume=st.floats(0.1, 20.0),
    start=st.floats(50.0, 2000.0),
    end=st.floats(50.0, 2000.0),
    share=st.floats(0.0, 1.0),
)
def test_diluent_does_not_depend_on_how_a_descent_is_cut(
    volume: float, start: float, end: float, share: float
) -> None:
    whole = supply.loop_diluent(volume, start, end)
    middle = start + (end - start) * share
    parts = supply.loop_diluent(volume, start, middle) + supply.loop_diluent(volume, middle, end)
    assert parts == pytest.approx(whole, rel=1e-9, abs=1e-9)
    assert whole >= 0.0
    if end <= start:
        assert whole == 0.0


@covers(*members("supply.open_circuit_use"))
@given(rate=rates, ambient=st.floats(60.0, 3000.0), gas=gases, temperature=temperatures, model=models)
def test_use_is_rate_times_molar_density(
    rate: float, ambient: float, gas: gp.Gas, temperature: float, model: str
) -> None:
    use = supply.open_circuit_use(rate, ambient, gas, temperature, model=model)
    density = real_gas.density(ambient, gas, temperature, model=model)
    assert use == pytest.approx(rate * density / gas.molar_mass, rel=1e-6)
    # Vapor takes its place in the lungs and not from the cylinder.
    humid = supply.open_circuit_use(rate, ambient, gas, temperature, 6.0, model=model)
    assert humid == pytest.approx(
        supply.open_circuit_use(rate, ambient - 6.0, gas, temperature, model=model), rel=1e-12
    )
    assert 0.0 <= humid < use


@covers(*members("supply.cylinder_duration"))
@given(
    full=st.floats(5000.0, 30000.0),
    share=st.floats(0.0, 0.9),
    cut=st.floats(0.0, 1.0),
    rate=rates,
    ambient=st.floats(60.0, 2000.0),
    gas=gases,
    capacity=capacities,
    model=models,
)
def test_a_cylinder_lasts_as_long_as_its_parts(
    full: float,
    share: float,
    cut: float,
    rate: float,
    ambient: float,
    gas: gp.Gas,
    capacity: float,
    model: str,
) -> None:
    kept = share * full
    middle = kept + cut * (full - kept)

    def lasts(start: float, end: float) -> float:
        return float(
            supply.cylinder_duration(start, end, rate, ambient, gas, capacity, 15.0, 25.0, model=model)
        )

    assert lasts(full, middle) + lasts(middle, kept) == pytest.approx(lasts(full, kept), rel=1e-9, abs=1e-9)
    # What flowed out in that time is what is missing in the cylinder.
    gone = real_gas.cylinder_content(full, gas, capacity, 15.0, model=model) - real_gas.cylinder_content(
        kept, gas, capacity, 15.0, model=model
    )
    use = supply.open_circuit_use(rate, ambient, gas, 25.0, model=model)
    assert use * lasts(full, kept) == pytest.approx(gone, rel=1e-6)


@covers(*members("supply.equalized_pressure"))
@given(
    first=pressures,
    second=pressures,
    gas=gases,
    one=capacities,
    two=capacities,
    temperature=temperatures,
    model=models,
)
def test_joined_cylinders_keep_their_moles(
    first: float, second: float, gas: gp.Gas, one: float, two: float, temperature: float, model: str
) -> None:
    met = supply.equalized_pressure(first, second, gas, one, two, temperature, model=model)

    def content(pressure: float, capacity: float) -> float:
        return float(real_gas.cylinder_content(pressure, gas, capacity, temperature, model=model))

    with gp.validity("ignore"):
        assert content(met, one + two) == pytest.approx(content(first, one) + content(second, two), rel=1e-9)
        assert min(first, second) * (1.0 - 1e-9) <= met <= max(first, second) * (1.0 + 1e-9)
        turned = supply.equalized_pressure(second, first, gas, two, one, temperature, model=model)
        assert turned == pytest.approx(met, rel=1e-9)


def test_a_rate_of_nothing_has_no_duration() -> None:
    with pytest.raises(gp.errors.RangeError, match=r"surface_rate = 0 L/min.*0\.001 to 400"):
        supply.cylinder_duration("200 bar", "50 bar", 0.0, 400.0, "air")
