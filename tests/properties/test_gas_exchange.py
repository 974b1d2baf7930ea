"""Properties of shunt, mixed venous blood and closed lungs: limits, monotone, inverted exactly, coupled."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import blood, gas_exchange, lungs
from gasphys.errors import GasphysError
from gasphys.person import Person

from .coverage import covers

pressures = st.floats(1.0, 300.0)
hemoglobins = st.floats(3.0, 20.0)
shunts = st.floats(0.0, 0.5)
differences = st.floats(2.0, 8.0)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


@covers("blood.arterial_po2_from_shunt")
@given(po2=pressures, hemoglobin=st.floats(0.0, 20.0), ph=st.floats(7.1, 7.6))
def test_without_shunt_arterial_is_end_capillary(po2, hemoglobin, ph):
    found = blood.arterial_po2_from_shunt(po2, 0.0, hemoglobin, 5.0, ph)
    assert found == pytest.approx(po2, rel=1e-9)


@covers("blood.shunt_at_arterial_po2", "blood.arterial_o2_content_from_shunt")
@given(po2=pressures, shunt=shunts, hemoglobin=hemoglobins, difference=differences)
def test_the_shunt_of_a_sample_comes_back(po2, shunt, hemoglobin, difference):
    content = blood.o2_content(po2, hemoglobin)
    left = blood.arterial_o2_content_from_shunt(content, shunt, difference)
    assume(left > 0.1)
    arterial = blood.arterial_po2_from_shunt(po2, shunt, hemoglobin, difference)
    assert blood.o2_content(arterial, hemoglobin) == pytest.approx(left, rel=1e-12)
    assert blood.shunt_at_arterial_po2(arterial, po2, hemoglobin, difference) == pytest.approx(
        shunt, abs=1e-9
    )
    assert arterial <= po2 * (1.0 + 1e-12)


@given(shunt=st.floats(0.01, 0.2), difference=st.floats(3.0, 6.0))
def test_full_hemoglobin_makes_the_difference_of_pressures_constant(shunt, difference):
    """What is missing in content is then missing in solution: A-a difference the same at 2 and 3 atm."""
    gaps = [a - blood.arterial_po2_from_shunt(a, shunt, 15.0, difference) for a in (280.0, 295.0)]
    expected = blood.po2_for_dissolved_o2(shunt / (1.0 - shunt) * difference)
    assert gaps == pytest.approx([expected] * 2, rel=2e-2)
    assert gaps[0] == pytest.approx(gaps[1], rel=5e-3)


@covers("blood.functional_hemoglobin")
@given(hemoglobin=hemoglobins, cohb=st.floats(0.0, 0.9))
def test_carbon_monoxide_takes_its_share_of_hemoglobin(hemoglobin, cohb):
    left = blood.functional_hemoglobin(hemoglobin, cohb)
    assert left + hemoglobin * cohb == pytest.approx(hemoglobin)


@covers("blood.o2_saturation_beside_cohb", "blood.liganded_fraction")
@given(po2=st.floats(0.05, 300.0), cohb=st.floats(0.01, 0.9), ph=st.floats(7.1, 7.6))
def test_both_laws_of_haldane_hold(po2, cohb, ph):
    """Whatever M is: the PCO that the ratio asks for puts the sum where the curve of O2 alone stands."""
    left = blood.o2_saturation_beside_cohb(po2, cohb, ph)
    o2hb = left * (1.0 - cohb)
    affinity = 218.0
    pco = cohb / o2hb * po2 / affinity
    together = blood.o2_saturation(po2 + affinity * pco, ph=ph)
    assert together == pytest.approx(blood.liganded_fraction(left, cohb), rel=1e-9)
    assert together == pytest.approx(o2hb + cohb, rel=1e-9)
    # The curve of what is left stands to the left of the curve without CO.
    assert left >= blood.o2_saturation(po2, ph=ph) * (1.0 - 1e-12)


@covers("blood.o2_content_beside_cohb", "blood.po2_at_content_beside_cohb")
@given(po2=st.floats(0.01, 300.0), cohb=st.floats(0.0, 0.9), hemoglobin=st.floats(0.0, 20.0))
def test_content_beside_carbon_monoxide_comes_back(po2, cohb, hemoglobin):
    content = blood.o2_content_beside_cohb(po2, hemoglobin, cohb)
    assert blood.po2_at_content_beside_cohb(content, hemoglobin, cohb) == pytest.approx(po2, rel=1e-8)
    assert blood.o2_content_beside_cohb(po2 * 1.001, hemoglobin, cohb) > content
    # At a low PO2 a little carbon monoxide makes blood hold *more* O2; never more than what is left can.
    room = blood.bound_o2(1.0, blood.functional_hemoglobin(hemoglobin, cohb))
    assert content - blood.dissolved_o2(po2) <= room * (1.0 + 1e-12)
    assert blood.o2_content_beside_cohb(po2, hemoglobin, 0.0) == blood.o2_content(po2, hemoglobin)


@covers("blood.mixed_venous_o2_content", "blood.mixed_venous_co2_content", "blood.co2_load")
@given(arterial=st.floats(10.0, 30.0), taken=differences, exchange=st.floats(0.7, 1.1))
def test_the_exchange_ratio_is_that_of_the_two_gases(arterial, taken, exchange):
    o2 = arterial - blood.mixed_venous_o2_content(arterial, taken)
    co2 = blood.mixed_venous_co2_content(48.0, blood.co2_load(exchange, taken)) - 48.0
    assert co2 / o2 == pytest.approx(exchange, rel=1e-9)


states = st.fixed_dictionaries(
    {
        "pco2": st.floats(4.0, 9.0),
        "base_excess": st.floats(-5.0, 5.0),
        "hemoglobin": st.floats(5.0, 18.0),
        "saturation": st.floats(0.3, 0.95),
    }
)


def _contents(pco2, base_excess, hemoglobin, saturation):
    ph = blood.ph_at_base_excess(base_excess, pco2, hemoglobin, saturation)
    po2 = blood.po2_at_saturation(saturation, ph=ph)
    co2 = blood.co2_content(pco2, ph, hemoglobin, saturation)
    return ph, po2, co2, blood.o2_content(po2, hemoglobin, ph=ph)


@covers("blood.mixed_venous_ph", "blood.venous_arterial_pco2_difference")
@given(state=states)
def test_blood_of_a_known_state_is_found_from_its_contents(state):
    """Start from PCO2, base excess and saturation, read both contents, and find the state again."""
    try:
        ph, po2, co2, o2 = _contents(**state)
    except GasphysError:
        assume(False)
    assume(7.05 < ph < 7.65)
    hemoglobin, excess = state["hemoglobin"], state["base_excess"]
    found = blood.mixed_venous_ph(co2, excess, hemoglobin, o2)
    assert found == pytest.approx(ph, abs=1e-9)
    assert blood.po2_at_content(o2, hemoglobin, ph=found) == pytest.approx(po2, rel=1e-7)
    saturation = blood.o2_saturation(po2, ph=found)
    pco2 = blood.pco2_at_base_excess(excess, found, hemoglobin, saturation)
    assert blood.venous_arterial_pco2_difference(pco2, state["pco2"]) == pytest.approx(0.0, abs=1e-6)


@given(state=states, less=st.floats(0.5, 4.0))
def test_bohr_and_haldane_pull_the_right_way(state, less):
    """More CO2 at one O2 content: acid, and PO2 rises. Less O2 at one CO2 content: pH rises."""
    try:
        _, _, co2, o2 = _contents(**state)
        hemoglobin, excess = state["hemoglobin"], state["base_excess"]
        before = blood.mixed_venous_ph(co2, excess, hemoglobin, o2)
        acid = blood.mixed_venous_ph(co2 + less, excess, hemoglobin, o2)
        lower = blood.mixed_venous_ph(co2, excess, hemoglobin, o2 - min(less, 0.3 * o2))
    except GasphysError:
        assume(False)
    assert acid < before
    assert blood.po2_at_content(o2, hemoglobin, ph=acid) > blood.po2_at_content(o2, hemoglobin, ph=before)
    assert lower > before


@covers("gas_exchange.lung_gas", "gas_exchange.lung_volume_of_gas", "gas_exchange.squeeze_pressure")
@given(volume=st.floats(2.0, 9.0), residual=st.floats(0.5, 1.9), surface=st.floats(80.0, 110.0))
def test_boyle_holds_for_closed_lungs(volume, residual, surface):
    amount = gas_exchange.lung_gas(volume, surface)
    assert gas_exchange.lung_volume_of_gas(amount, surface) == pytest.approx(volume, rel=1e-12)
    deep = gas_exchange.squeeze_pressure(volume, residual, surface)
    # Vapor does not follow Boyle: at that pressure the lungs are a little smaller than residual volume.
    squeezed = gas_exchange.lung_volume_of_gas(amount, deep)
    assert squeezed == pytest.approx(
        residual * (surface - 6.266) / (surface - 6.266 * surface / deep), rel=1e-4
    )


@covers("gas_exchange.alveolar_gas_pressure")
@given(shares=st.lists(st.floats(0.01, 1.0), min_size=3, max_size=3), pressure=st.floats(80.0, 900.0))
def test_gases_of_the_lung_share_the_dry_pressure(shares, pressure):
    total = sum(shares)
    parts = [gas_exchange.alveolar_gas_pressure(s, total, pressure) for s in shares]
    assert sum(parts) == pytest.approx(pressure - 6.2661522, rel=1e-7)


@covers("gas_exchange.gas_transfer")
@given(flow=st.floats(1.0, 20.0), one=st.floats(5.0, 30.0), other=st.floats(5.0, 30.0))
def test_transfer_turns_its_sign_with_the_contents(flow, one, other):
    there, back = gas_exchange.gas_transfer(flow, one, other), gas_exchange.gas_transfer(flow, other, one)
    assert there == -back
    assert np.sign(there) == np.sign(one - other)


@given(
    ratio=st.floats(0.3, 1.0),
    fio2=st.floats(0.3, 0.99),
    pressure=st.floats(90.0, 300.0),
    hemoglobin=st.floats(3.0, 18.0),
    model=st.sampled_from(["ratio", "shunt"]),
)
def test_the_pressure_found_gives_what_was_wanted(ratio, fio2, pressure, hemoglobin, model):
    shunt = (1.0 - ratio) / 3.0
    person = Person(arterial_alveolar_ratio=ratio, shunt_fraction=shunt, hemoglobin=hemoglobin)
    alveolar = lungs.alveolar_po2(pressure, fio2, 5.332895496599999, 0.8)
    if model == "ratio":
        wanted = ratio * alveolar
    else:
        assume(shunt / (1.0 - shunt) * 5.0 < 0.9 * blood.o2_content(alveolar, hemoglobin))
        wanted = blood.arterial_po2_from_shunt(alveolar, shunt, hemoglobin)
    found = gas_exchange.pressure_for(person, arterial_po2=wanted, fio2=fio2, model=model)
    assert found == pytest.approx(pressure, rel=1e-6)
    again = gas_exchange.fio2_for(person, ambient_pressure=pressure, arterial_po2=wanted, model=model)
    assert again == pytest.approx(fio2, rel=1e-6)
