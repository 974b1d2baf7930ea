"""Properties of the equations of lungs and blood: monotone, bounded, consistent, inverted exactly."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import blood, lungs, vapor
from gasphys.blood.carbon_dioxide import content_of_buffered_blood
from gasphys.blood.inert_gas import fat_nitrogen, lean_nitrogen
from gasphys.constants import ATMOSPHERE, MMHG
from gasphys.errors import NotReachableError, RangeError

from .coverage import covers, members

MODELS = tuple(blood.o2_saturation.registry)
WITHOUT_HILL = tuple(m for m in MODELS if m != "hill")

pressures = st.floats(0.1, 3000.0).map(lambda p: p * float(MMHG))
hemoglobins = st.floats(0.0, 20.0)
states = st.fixed_dictionaries(
    {"ph": st.floats(6.9, 7.7), "temperature": st.floats(25.0, 42.0), "pco2": st.floats(2.7, 13.3)}
)
ventilations = st.floats(1.0, 60.0)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


def _above_kelman(model: str, po2: float) -> float:
    """Kelman's polynomial begins at 10 mmHg, whatever the state it is shifted from."""
    return po2 if model != "kelman_1966" else 10.0 * float(MMHG) * 3.0 + po2


# -- Saturation and content --------------------------------------------------------------------------


@covers(*members("blood.o2_saturation"))
@pytest.mark.parametrize("model", MODELS)
@given(po2=pressures, factor=st.floats(1.001, 3.0), state=states)
def test_saturation_rises_between_nothing_and_full(model, po2, factor, state):
    po2 = _above_kelman(model, po2)
    low, high = (blood.o2_saturation(po2 * f, model, **state) for f in (1.0, factor))
    assert 0.0 <= low <= high
    # Kelman's ratio of polynomials passes 1 by less than 1e-6, beyond 9000 mmHg.
    assert high <= 1.0 + 1e-6
    assert low < high or high > 0.999


@pytest.mark.parametrize("model", MODELS)
def test_saturation_without_oxygen_is_nothing(model):
    assert blood.o2_saturation(0.0, model) == 0.0
    assert blood.o2_saturation(np.array([0.0, 1e-300, 20000.0]), model)[0] == 0.0
    assert blood.po2_at_saturation(0.0, model) == 0.0
    assert blood.po2_at_content(0.0, 15.0, model) == 0.0


@covers(*members("blood.o2_content"), *members("blood.po2_at_content"))
@pytest.mark.parametrize("model", MODELS)
@given(po2=pressures, hemoglobin=hemoglobins, state=states)
def test_content_rises_and_comes_back(model, po2, hemoglobin, state):
    po2 = _above_kelman(model, po2)
    content = blood.o2_content(po2, hemoglobin, model, **state)
    assert content > blood.o2_content(po2 * (1.0 - 1e-6), hemoglobin, model, **state)
    assert blood.po2_at_content(content, hemoglobin, model, **state) == pytest.approx(po2, rel=1e-8)


@covers(*members("blood.po2_at_saturation"))
@pytest.mark.parametrize("model", MODELS)
@given(saturation=st.floats(0.1, 0.98), state=states)
def test_saturation_comes_back(model, saturation, state):
    po2 = blood.po2_at_saturation(saturation, model, **state)
    assert blood.o2_saturation(po2, model, **state) == pytest.approx(saturation, rel=1e-10)


@covers(*members("blood.p50"))
@pytest.mark.parametrize("model", WITHOUT_HILL)
@given(state=states, acid=st.floats(0.05, 0.3), warmer=st.floats(0.5, 5.0))
def test_p50_rises_with_acid_and_heat(model, state, acid, warmer):
    middle = blood.p50(model, **state)
    assert blood.o2_saturation(middle, model, **state) == pytest.approx(0.5, rel=1e-10)
    assert blood.p50(model, **{**state, "ph": state["ph"] - acid}) > middle
    assert blood.p50(model, **{**state, "temperature": state["temperature"] + warmer}) > middle


@given(po2=pressures, excess=st.floats(0.1, 4.0))
def test_dpg_and_acid_base_excess_shift_where_the_model_has_them(po2, excess):
    for model in ("dash_bassingthwaighte_2016", "siggaard_andersen_1984"):
        assert blood.o2_saturation(po2, model, dpg_excess=excess) < blood.o2_saturation(po2, model)
    assert blood.o2_saturation(po2, "siggaard_andersen_1984", base_excess=excess) < blood.o2_saturation(
        po2, "siggaard_andersen_1984"
    )
    assert blood.o2_saturation(po2, dpg_excess=excess) == blood.o2_saturation(po2)


@covers("blood.bound_o2", "blood.dissolved_o2", "blood.dissolved_o2_share", "blood.po2_for_dissolved_o2")
@given(po2=pressures, hemoglobin=st.floats(0.0, 20.0))
def test_content_is_bound_and_dissolved(po2, hemoglobin):
    bound = blood.bound_o2(blood.o2_saturation(po2), hemoglobin)
    dissolved = blood.dissolved_o2(po2)
    content = blood.o2_content(po2, hemoglobin)
    assert bound + dissolved == pytest.approx(content, rel=1e-14)
    assert blood.po2_for_dissolved_o2(dissolved) == pytest.approx(po2, rel=1e-12)
    if content > 1e-5:
        share = blood.dissolved_o2_share(po2, content)
        assert share == pytest.approx(dissolved / content, rel=1e-14)
        assert share <= 1.0 + 1e-14


@covers("blood.o2_delivery", "blood.o2_extraction", "blood.arteriovenous_o2_difference")
@given(uptake=st.floats(0.05, 4.0), output=st.floats(1.0, 30.0), content=st.floats(5.0, 30.0))
def test_uptake_is_delivery_times_extraction(uptake, output, content):
    difference = blood.arteriovenous_o2_difference(uptake, output)
    if not 0.1 <= difference <= 25.0:
        return
    extraction = blood.o2_extraction(difference, content)
    assert blood.o2_delivery(output, content) * extraction == pytest.approx(uptake, rel=1e-12)


@covers("blood.severinghaus_ph_coefficient")
@given(po2=pressures)
def test_coefficient_of_ph_is_the_shift_of_the_curve(po2):
    # A shift along the curve at one saturation: what the coefficient at the measured PO2 says.
    saturation = blood.o2_saturation(po2, ph=7.3)
    standard = blood.po2_at_saturation(saturation)
    coefficient = blood.severinghaus_ph_coefficient(po2)
    assert np.log(standard / po2) == pytest.approx(0.1 * coefficient, rel=1e-4, abs=1e-4)


@covers("blood.severinghaus_temperature_coefficient")
@given(po2=pressures, more=st.floats(1.0, 500.0))
def test_coefficient_of_temperature_falls_from_one_plateau_to_the_other(po2, more):
    low, high = (blood.severinghaus_temperature_coefficient(po2 + x) for x in (0.0, more))
    assert 0.013 <= high <= low <= 0.071 + 1e-12


# -- CO2 ---------------------------------------------------------------------------------------------


@covers("blood.ph_from", "blood.bicarbonate")
@given(pco2=st.floats(1.0, 20.0), bicarbonate=st.floats(1.0, 60.0))
def test_bicarbonate_comes_back(pco2, bicarbonate):
    ph = blood.ph_from(pco2, bicarbonate)
    if 6.0 <= ph <= 8.5:
        assert blood.bicarbonate(ph, pco2) == pytest.approx(bicarbonate, rel=1e-11)
        assert blood.ph_from(2.0 * pco2, bicarbonate) == pytest.approx(ph - np.log10(2.0), abs=1e-12)


@covers(*members("blood.co2_content"), "blood.plasma_co2")
@pytest.mark.parametrize("model", blood.co2_content.registry)
@given(
    pco2=st.floats(2.0, 10.0),
    ph=st.floats(7.05, 7.65),
    hemoglobin=st.floats(0.0, 20.0),
    saturation=st.floats(0.0, 1.0),
)
def test_blood_holds_less_co2_than_plasma_and_less_when_saturated(model, pco2, ph, hemoglobin, saturation):
    content = blood.co2_content(pco2, ph, hemoglobin, saturation, model)
    per_mmol = {"douglas_1988": 2.226, "kelman_1967": 2.22}[model]
    plasma = per_mmol * blood.plasma_co2(pco2, ph)
    assert 0.0 < content <= plasma * (1.0 + 1e-14)
    assert blood.co2_content(pco2, ph, hemoglobin, 1.0, model) <= content * (1.0 + 1e-14)
    assert blood.co2_content(1.01 * pco2, ph, hemoglobin, saturation, model) > content
    assert blood.co2_content(pco2, ph, 0.0, saturation, model) == pytest.approx(plasma, rel=1e-14)


@pytest.mark.parametrize("ph", [6.999, 7.701, 6.5, 8.142])
def test_co2_content_is_refused_where_the_bracket_was_not_made_for(ph):
    for model in blood.co2_content.registry:
        with pytest.raises(RangeError, match="ph"):
            blood.co2_content(5.3, ph, model=model)
    with gp.validity("warn"), pytest.warns(gp.ValidityWarning, match="ph"):
        values = blood.co2_content(5.3, np.array([7.4, ph]))
    assert np.isfinite(values[0])
    assert np.isnan(values[1])


@covers("blood.base_excess", "blood.ph_at_base_excess", "blood.pco2_at_base_excess")
@given(
    pco2=st.floats(1.6, 12.8),
    ph=st.floats(6.9, 7.7),
    hemoglobin=st.floats(0.0, 20.0),
    saturation=st.floats(0.0, 1.0),
)
def test_base_excess_fixes_ph_and_pco2(pco2, ph, hemoglobin, saturation):
    excess = blood.base_excess(pco2, ph, hemoglobin, saturation)
    assert blood.base_excess(pco2, ph + 0.01, hemoglobin, saturation) > excess
    if -60.0 <= excess <= 60.0:
        assert blood.ph_at_base_excess(excess, pco2, hemoglobin, saturation) == pytest.approx(ph, abs=1e-12)
        found = blood.pco2_at_base_excess(excess, ph, hemoglobin, saturation)
        assert found == pytest.approx(pco2, rel=1e-11)


@covers("blood.ph_at_co2_content", "blood.pco2_at_co2_content")
@given(
    ph=st.floats(7.02, 7.68),
    excess=st.floats(-10.0, 10.0),
    hemoglobin=st.floats(0.0, 20.0),
    saturation=st.floats(0.0, 1.0),
)
def test_blood_of_a_base_excess_comes_back_from_its_co2(ph, excess, hemoglobin, saturation):
    content = content_of_buffered_blood(ph, excess, hemoglobin, saturation)
    try:
        pco2 = blood.pco2_at_base_excess(excess, ph, hemoglobin, saturation)
    except NotReachableError:
        return
    state = (excess, hemoglobin, saturation)
    assert blood.ph_at_co2_content(content, *state) == pytest.approx(ph, abs=1e-11)
    assert blood.pco2_at_co2_content(content, *state) == pytest.approx(pco2, rel=1e-9)


@covers("blood.venous_pco2", "blood.haldane_penalty")
@given(
    pco2=st.floats(3.5, 8.0),
    load=st.floats(0.5, 6.0),
    venous=st.floats(0.3, 0.97),
    hemoglobin=st.floats(1.0, 18.0),
)
def test_a_saturated_vein_costs_pco2(pco2, load, venous, hemoglobin):
    state = {"hemoglobin": hemoglobin}
    value = blood.venous_pco2(pco2, load, venous, **state)
    assert value > blood.venous_pco2(pco2, 0.5 * load, venous, **state)
    assert blood.venous_pco2(pco2, 0.0, 0.975, 0.975, **state) == pytest.approx(pco2, rel=1e-10)
    penalty = blood.haldane_penalty(pco2, load, venous, **state)
    assert penalty > 0.0
    saturated = blood.venous_pco2(pco2, load, 1.0, 1.0, **state)
    assert penalty == pytest.approx(saturated - value, abs=1e-10)
    assert blood.haldane_penalty(pco2, load, 1.0, 1.0, **state) == pytest.approx(0.0, abs=1e-12)


# -- CO ----------------------------------------------------------------------------------------------


@covers("blood.co_resistance", "lungs.inspired_pco", "blood.co_capillary_po2")
@given(ventilation=ventilations, diffusing=st.floats(30.0, 400.0), ambient=st.floats(60.0, 600.0))
def test_resistances_add_and_pressures_are_dalton(ventilation, diffusing, ambient):
    # 863 mmHg over BTPS ventilation, whatever the chamber pressure.
    expected = 1.0 / diffusing + 863.0 * float(MMHG) / (1000.0 * ventilation)
    assert blood.co_resistance(ventilation, diffusing) == pytest.approx(expected, rel=1e-4)
    dry = ambient - 47.0 * float(MMHG)
    assert lungs.inspired_pco(ambient, 35e-6) == pytest.approx(35e-6 * dry, rel=1e-12)
    capillary = blood.co_capillary_po2(dry)
    assert capillary == pytest.approx(dry - 49.0 * float(MMHG), rel=1e-12)


@covers("blood.cohb_linear", "blood.cohb_half_life")
@given(
    start=st.floats(0.0, 0.6),
    capillary=st.floats(10.0, 300.0),
    co=st.floats(0.0, 0.005),
    first=st.floats(0.0, 200.0),
    second=st.floats(0.0, 200.0),
)
def test_linear_cohb_is_additive_in_time_and_halves_in_a_half_life(start, capillary, co, first, second):
    once = blood.cohb_linear.raw(first + second, start, co, capillary, *_CO_DEFAULTS)
    middle = blood.cohb_linear.raw(first, start, co, capillary, *_CO_DEFAULTS)
    twice = blood.cohb_linear.raw(second, middle, co, capillary, *_CO_DEFAULTS)
    assert twice == pytest.approx(once, rel=1e-11, abs=1e-13)
    half = blood.cohb_half_life(capillary)
    final = blood.cohb_linear.raw(1e9, start, co, capillary, *_CO_DEFAULTS)
    at_half = blood.cohb_linear.raw(half, start, co, capillary, *_CO_DEFAULTS)
    assert at_half - final == pytest.approx(0.5 * (start - final), rel=1e-9, abs=1e-12)


_CO_DEFAULTS = [a.default for a in blood.cohb_linear.arguments[4:]]


@covers("blood.cohb_rate", "blood.cohb_steady_state")
@given(
    co=st.floats(0.0, 0.02),
    capillary=st.floats(10.0, 300.0),
    ventilation=ventilations,
    hemoglobin=st.floats(3.0, 18.0),
)
def test_nonlinear_rate_vanishes_at_the_steady_state_only(co, capillary, ventilation, hemoglobin):
    steady = blood.cohb_steady_state(co, capillary, ventilation)
    if steady > 0.9:
        return

    def rate(fraction):
        return blood.cohb_rate(fraction, co, capillary, ventilation, hemoglobin=hemoglobin)

    assert rate(steady) == pytest.approx(0.0, abs=1e-12)
    assert rate(0.9 * steady) > 0.0 > rate(steady + 0.04)


# -- Alveolar gas ------------------------------------------------------------------------------------


@covers("lungs.inspired_po2", "lungs.inspired_pco2", "lungs.inspired_pn2", "lungs.alveolar_pn2")
@given(ambient=st.floats(60.0, 700.0), o2=st.floats(0.05, 1.0), co2=st.floats(0.0, 0.05))
def test_moist_gas_adds_up_to_ambient_pressure(ambient, o2, co2):
    o2 = min(o2, 1.0 - co2)
    n2 = max(1.0 - o2 - co2, 0.0)
    parts = (
        lungs.inspired_po2(ambient, o2),
        lungs.inspired_pco2(ambient, co2),
        lungs.inspired_pn2(ambient, n2),
    )
    assert sum(parts) + 47.0 * float(MMHG) == pytest.approx(ambient, rel=1e-12)
    assert lungs.alveolar_pn2(ambient, parts[0], parts[1]) == pytest.approx(parts[2], rel=1e-9, abs=1e-9)


@covers("lungs.alveolar_po2")
@given(
    ambient=st.floats(60.0, 700.0),
    fio2=st.floats(0.15, 1.0),
    fico2=st.floats(0.0, 0.02),
    pco2=st.floats(1.0, 12.0),
    ratio=st.floats(0.6, 1.2),
)
def test_alveolar_gas_keeps_its_inert_gas(ambient, fio2, fico2, pco2, ratio):
    dry = ambient - 47.0 * float(MMHG)
    po2 = lungs.alveolar_po2(ambient, fio2, pco2, ratio, fico2)
    # As much inert gas leaves as enters, and R is CO2 out over O2 in.
    inert_in, inert_out = 1.0 - fio2 - fico2, 1.0 - (po2 + pco2) / dry
    if inert_in > 1e-3:
        expired = inert_in / inert_out
        uptake, output = fio2 - expired * po2 / dry, expired * pco2 / dry - fico2
        assert output == pytest.approx(ratio * uptake, rel=1e-6, abs=1e-9)
    pure = lungs.alveolar_po2(ambient, 1.0, pco2, ratio)
    assert pure == pytest.approx(dry - pco2, rel=1e-12)
    even = lungs.alveolar_po2(ambient, fio2, pco2, 1.0)
    assert even == pytest.approx(lungs.inspired_po2(ambient, fio2) - pco2, rel=1e-10, abs=1e-10)


@covers("lungs.alveolar_pco2")
@given(output=st.floats(0.05, 3.0), ventilation=ventilations, factor=st.floats(0.5, 2.0))
def test_alveolar_pco2_is_output_over_ventilation(output, ventilation, factor):
    pco2 = lungs.alveolar_pco2(output, ventilation)
    assert lungs.alveolar_pco2(factor * output, factor * ventilation) == pytest.approx(pco2, rel=1e-12)
    # Dry gas of the alveoli that holds the CO2: VCO2 = VA(STPD) x PACO2/(PB - 47), at any pressure.
    for ambient in (101.325, 303.975):
        stpd = gp.laws.convert_gas_volume(ventilation, "btps", "stpd", ambient_pressure=ambient)
        share = pco2 / (ambient - 47.0 * float(MMHG))
        assert stpd * share == pytest.approx(output, rel=1e-12)


# -- Ventilation -------------------------------------------------------------------------------------


@covers(
    "lungs.bohr_dead_space_fraction",
    "lungs.enghoff_dead_space_fraction",
    "lungs.alveolar_ventilation",
    "lungs.alveolar_ventilation_at_pco2",
    "lungs.anatomical_dead_space",
)
@given(
    mass=st.floats(20.0, 150.0),
    frequency=st.floats(6.0, 30.0),
    tidal=st.floats(0.4, 3.0),
    output=st.floats(0.1, 3.0),
)
def test_dead_space_by_co2_is_the_dead_space_of_the_breath(mass, frequency, tidal, output):
    dead = lungs.anatomical_dead_space(mass)
    if not frequency * (tidal - dead) > 0.2:
        return
    ventilation = lungs.alveolar_ventilation(frequency * tidal, frequency, dead)
    alveolar = lungs.alveolar_pco2(output, ventilation)
    if not 0.5 <= alveolar <= 30.0:
        return
    assert lungs.alveolar_ventilation_at_pco2(alveolar, output) == pytest.approx(ventilation, rel=1e-11)
    # All CO2 comes out of the alveolar part of the breath.
    expired = alveolar * ventilation / (frequency * tidal)
    for f in (lungs.bohr_dead_space_fraction, lungs.enghoff_dead_space_fraction):
        assert f(alveolar, expired) == pytest.approx(dead / tidal, rel=1e-9)


# -- Krogh -------------------------------------------------------------------------------------------


@covers("blood.krogh_po2", "blood.krogh_critical_po2", "blood.krogh_radius")
@given(
    capillary=st.floats(2.0, 5.0),
    wide=st.floats(1.5, 40.0),
    use=st.floats(0.1, 10.0),
    diffusion=st.floats(1e-9, 6e-9),
)
def test_krogh_cylinder_is_what_it_says(capillary, wide, use, diffusion):
    radius = capillary * wide
    shape = (radius, capillary, use, diffusion)
    critical = blood.krogh_critical_po2(*shape)
    assert blood.krogh_po2(capillary, 10.0, *shape) == pytest.approx(10.0, rel=1e-12)
    assert blood.krogh_po2(radius, critical, *shape) == pytest.approx(0.0, abs=1e-9 * critical)
    slope = blood.krogh_po2.derivative("radial_distance")
    steep = slope(capillary, critical, *shape)
    # No flux across the rim; at the wall the flux carries the use of the whole annulus.
    assert slope(radius, critical, *shape) == pytest.approx(0.0, abs=1e-9 * abs(steep))
    flux = -diffusion * steep * 1e4 * 2.0 * np.pi * capillary * 1e-4
    annulus = np.pi * (radius**2 - capillary**2) * 1e-8 * use / 6000.0
    assert flux == pytest.approx(annulus, rel=1e-9)
    if critical < 20000.0:
        assert blood.krogh_radius(critical, capillary, use, diffusion) == pytest.approx(radius, rel=1e-7)


# -- Solubility and nitrogen -------------------------------------------------------------------------


@covers(*members("blood.bunsen_coefficient"))
@pytest.mark.parametrize(("gas", "model"), blood.bunsen_coefficient.registry)
@given(temperature=st.floats(0.0, 40.0), salinity=st.floats(1.0, 35.0))
def test_salt_water_dissolves_less(gas, model, temperature, salinity):
    pure = blood.bunsen_coefficient(gas, temperature, model=model)
    assert 0.005 < pure < 2.0
    salty = blood.bunsen_coefficient(gas, temperature, salinity, model=model)
    assert salty < pure or model.startswith("iupac")
    if gas in ("N2", "O2", "Ar", "CO", "CO2") and temperature < 35.0:
        assert blood.bunsen_coefficient(gas, temperature + 5.0, model=model) < pure


@covers(
    "blood.ostwald_from_bunsen",
    "blood.bunsen_from_ostwald",
    "blood.bunsen_from_henry",
    "blood.solubility_from_bunsen",
    "blood.water_density",
)
@given(bunsen=st.floats(0.005, 2.0), temperature=st.floats(0.0, 40.0))
def test_names_of_solubility_convert(bunsen, temperature):
    ostwald = blood.ostwald_from_bunsen(bunsen, temperature)
    assert ostwald == pytest.approx(bunsen * (temperature + 273.15) / 273.15, rel=1e-12)
    assert blood.bunsen_from_ostwald(ostwald, temperature) == pytest.approx(bunsen, rel=1e-12)
    # One molecule counted two ways: mol/m3/Pa times the molar volume at STPD, and mL/dL/kPa.
    henry = bunsen / (8.314462618 * 273.15)
    assert blood.bunsen_from_henry(henry, 0.0, temperature) == pytest.approx(bunsen, rel=1e-9)
    assert blood.solubility_from_bunsen(bunsen) == pytest.approx(100.0 * bunsen / 101.325, rel=1e-12)
    assert 990.0 < blood.water_density(temperature) <= 999.976


@covers(
    "blood.body_nitrogen",
    "blood.nitrogen_delivery",
    "blood.tissue_nitrogen_washout",
    "blood.body_nitrogen_washout",
)
@given(
    mass=st.floats(40.0, 150.0),
    fat=st.floats(0.0, 0.6),
    share=st.floats(0.0, 0.3),
    start=st.floats(10.0, 500.0),
    end=st.floats(0.0, 500.0),
    minutes=st.floats(0.0, 600.0),
)
def test_nitrogen_is_conserved(mass, fat, share, start, end, minutes):
    store = blood.body_nitrogen(start, mass, fat)
    lean, fatty = lean_nitrogen(start, mass, fat), fat_nitrogen(start, mass, fat)
    assert lean + fatty == pytest.approx(store, rel=1e-12)
    left = store - blood.body_nitrogen(end, mass, fat)
    out = blood.body_nitrogen_washout(minutes, start, share, mass, fat, 5.5, end)
    assert abs(out) <= abs(left) + 1e-12
    # No faster than blood can carry the difference, and all of it in the end.
    assert abs(out) <= minutes * blood.nitrogen_delivery(abs(start - end), 5.5) + 1e-12
    if share > 1e-3:
        forever = blood.body_nitrogen_washout(1e7, start, share, mass, fat, 5.5, end)
        assert forever == pytest.approx(left, rel=1e-9, abs=1e-12)
    # One tissue: halves add up, because what is left starts again from its own pressure.
    first = blood.tissue_nitrogen_washout(minutes, start, 33.0, 1.0, end_pn2=end)
    per_kpa = 33.0 * 0.0125 / float(ATMOSPHERE)
    middle = start - first / per_kpa
    second = blood.tissue_nitrogen_washout(minutes, max(middle, 0.0), 33.0, 1.0, end_pn2=end)
    both = blood.tissue_nitrogen_washout(2.0 * minutes, start, 33.0, 1.0, end_pn2=end)
    assert first + second == pytest.approx(both, rel=1e-9, abs=1e-9)


# -- Vapor -------------------------------------------------------------------------------------------


@covers(*members("lungs.water_vapor_pressure"))
@pytest.mark.parametrize("model", lungs.water_vapor_pressure.registry)
@given(share=st.floats(0.0, 1.0))
def test_vapor_formulas_rise_and_agree_where_they_are_valid(model, share):
    argument = lungs.water_vapor_pressure.pick(model=model).arguments[0]
    low, high = max(argument.low, 0.0), min(argument.high, 45.0)
    temperature = low + share * (high - low - 0.1)
    value = lungs.water_vapor_pressure(temperature, model)
    assert lungs.water_vapor_pressure(temperature + 0.1, model) > value
    # Antoine is 0.9 % low at 1 degC, the forms of the analyzers 0.7 % at 0 degC.
    assert value == pytest.approx(lungs.water_vapor_pressure(temperature), rel=0.0095)


@covers("vapor.enhancement_factor", "vapor.poynting_factor")
@given(pressure=st.floats(50.0, 600.0), more=st.floats(1.0, 100.0), temperature=st.floats(0.0, 45.0))
def test_pressure_adds_a_little_vapor(pressure, more, temperature):
    assert vapor.enhancement_factor(pressure + more) > vapor.enhancement_factor(pressure) > 1.0
    low, high = (vapor.poynting_factor(p, temperature) for p in (pressure, pressure + more))
    assert high > low
    assert vapor.poynting_factor(101.325, temperature) == 1.0
    assert abs(vapor.enhancement_factor(pressure) - 1.0) > abs(low - 1.0) * 0.5
