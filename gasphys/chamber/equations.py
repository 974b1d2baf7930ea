"""Chamber gas, heat and the bedside: one relation each, for well-mixed gas in a rigid chamber."""

from __future__ import annotations

from gasphys.constants import (
    ATMOSPHERE,
    BODY_TEMPERATURE,
    BODY_VAPOR_PRESSURE,
    USN_AIR_STOCK,
    USN_INNER_LOCK_FILLS,
    USN_OUTER_LOCK_FILLS,
    ZERO_CELSIUS,
)
from gasphys.equation import Value, choice, formula, inverse
from gasphys.laws import boyle_volume
from gasphys.maths import exp, log, ramp_gain, sqrt
from gasphys.vapor import saturation_pressure

__all__ = [
    "actual_flow",
    "air_flow_for_co2",
    "air_flow_for_o2",
    "air_stock",
    "co2_pressure",
    "co2_surface_equivalent",
    "compressor_flow",
    "cuff_volume",
    "cylinders_needed",
    "filling_amount_ratio",
    "filling_temperature",
    "gauge_fall_time",
    "humidity_after",
    "isentropic_temperature",
    "mask_oxygen",
    "mask_oxygen_stpd",
    "middle_ear_difference",
    "o2_fraction",
    "pressurization_gas",
    "standard_flow",
    "steady_co2_pressure",
    "steady_o2_fraction",
    "temperature_after",
    "time_to_co2",
    "time_to_o2",
    "trapped_gas_volume",
    "trapped_volume_loss",
    "travel_pressure",
    "travel_rate_for",
    "ventilator_volume",
]

_BALANCE = "chamber_balance"

# -- Trapped gas ------------------------------------------------------------------------------------


@formula(
    result="final_volume",
    refuse={"initial_pressure": (6.5, 1e5), "final_pressure": (6.5, 1e5)},
    source="boyle_1662",
    provenance="read",
    register=False,
)
def _humid_volume(volume: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Volume of gas kept saturated at body temperature after a change of pressure."""
    return volume * (initial_pressure - BODY_VAPOR_PRESSURE) / (final_pressure - BODY_VAPOR_PRESSURE)


@choice(option="humid", registry={True: _humid_volume, False: boyle_volume})
def trapped_gas_volume(
    volume: Value, initial_pressure: Value, final_pressure: Value, humid: bool = True
) -> Value:
    """Volume of gas that cannot leave, after a change of pressure.

    Notes
    -----
    In the body gas is saturated and only its dry part is compressed: V2 = V1 (P1 - 47)/(P2 - 47),
    pressures absolute in mmHg. Dry gas (a drip chamber, a bottle) follows Boyle: ``humid=False``. The humid
    gas grows more on the way up. Nothing leaks, and no gas is exchanged with tissue: breathing oxygen
    shrinks a pocket at pressure by washing its nitrogen out. At altitude use the local surface pressure.

    Examples
    --------
    60 mL trapped at 2.4 atm, at the surface, humid and dry:

    >>> round(trapped_gas_volume("60 mL", "2.4 atm", "1 atm"), 4)
    0.1495
    >>> round(trapped_gas_volume("60 mL", "2.4 atm", "1 atm", humid=False), 4)
    0.144
    """


@formula(
    result="final_volume",
    source="cuff_arithmetic",
    provenance="computed",
)
def cuff_volume(volume: Value, initial_pressure: Value, final_pressure: Value, cuff_pressure: Value) -> Value:
    """Volume of the air in a tube cuff after a change of pressure, its gauge pressure held.

    Notes
    -----
    V2 = V1 (P1 + c)/(P2 + c), dry air, c the cuff's pressure above ambient. On compression the cuff
    shrinks and leaks; refilled at pressure it over-expands on the way up. Water instead of air is not
    pressure-free either: 60.8 (SD 42) to 51.6 (40.7) cmH2O at 2.5 atm abs in one study, 70 % above 30 at
    the start (Benzidi 2020). Measure it.

    Examples
    --------
    >>> round(cuff_volume("7 mL", "1 atm", "2.4 atm", "25 cmH2O"), 5)
    0.00296
    """
    return volume * (initial_pressure + cuff_pressure) / (final_pressure + cuff_pressure)


# -- Travel and ears --------------------------------------------------------------------------------


@formula(result="ambient_pressure", source="travel_profiles", provenance="read", register=False)
def _linear_travel(share_of_piece: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Pressure during travel, as much in every minute."""
    return initial_pressure + (final_pressure - initial_pressure) * share_of_piece


@formula(result="ambient_pressure", source="travel_profiles", provenance="read", register=False)
def _constant_ratio_travel(share_of_piece: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Pressure during travel, by the same factor in every minute."""
    return initial_pressure * exp(share_of_piece * log(final_pressure / initial_pressure))


@choice(option="profile", registry={"linear": _linear_travel, "constant_ratio": _constant_ratio_travel})
def travel_pressure(
    share_of_piece: Value, initial_pressure: Value, final_pressure: Value, profile: str = "linear"
) -> Value:
    """Pressure when a share of the travel's minutes has passed.

    Notes
    -----
    "linear": P1 + (P2 - P1) s. "constant_ratio": P1 (P2/P1)^s, which takes the same share of a
    trapped volume in every minute; simulations favor it for the ears (Matity 2024, abstract).

    Examples
    --------
    >>> round(travel_pressure(0.1, "1 atm", "2.4 atm"), 2)
    115.51
    >>> round(travel_pressure(0.1, "1 atm", "2.4 atm", profile="constant_ratio"), 2)
    110.6
    """


@formula(result="trapped_volume_loss", source="boyle_1662", provenance="computed", register=False)
def _linear_loss(share_of_piece: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Share of a trapped volume lost in linear travel."""
    return 1.0 - initial_pressure / _linear_travel(share_of_piece, initial_pressure, final_pressure)


@formula(result="trapped_volume_loss", source="boyle_1662", provenance="computed", register=False)
def _constant_ratio_loss(share_of_piece: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Share of a trapped volume lost in travel of constant ratio."""
    return 1.0 - initial_pressure / _constant_ratio_travel(share_of_piece, initial_pressure, final_pressure)


@choice(option="profile", registry={"linear": _linear_loss, "constant_ratio": _constant_ratio_loss})
def trapped_volume_loss(
    share_of_piece: Value, initial_pressure: Value, final_pressure: Value, profile: str = "linear"
) -> Value:
    """Share of a trapped dry volume lost when a share of the travel's minutes has passed.

    Notes
    -----
    1 - P1/P by Boyle; negative while the volume grows. Linear compression takes most in its first minutes;
    travel of constant ratio takes the same share in each.

    Examples
    --------
    >>> round(trapped_volume_loss(0.1, "1 atm", "2.4 atm"), 4)
    0.1228
    >>> round(trapped_volume_loss(0.1, "1 atm", "2.4 atm", profile="constant_ratio"), 4)
    0.0838
    """


@formula(result="middle_ear_difference", source="ear_texts", provenance="computed")
def middle_ear_difference(compression_rate: Value, duration: Value) -> Value:
    """Pressure across the eardrum when the tube stays shut during compression.

    Notes
    -----
    Rate times the time since the ear was last equal. The eardrum is taken as stiff, an upper bound: its
    movement relieves a little. A tube opens at 10 to 30 mmHg (1.3 to 4.0 kPa) and locks near 90 mmHg
    (12.0 kPa, from memory).

    Examples
    --------
    20 fsw/min for 12 s:

    >>> round(middle_ear_difference("61.409 kPa/min", 0.2), 2)
    12.28
    """
    return compression_rate * duration


travel_rate_for = inverse(
    middle_ear_difference,
    "compression_rate",
    name="travel_rate_for",
    module=__name__,
    kernel=lambda difference, duration: difference / middle_ear_difference.raw(1.0, duration),
    doc="""Rate of compression that keeps the pressure across the eardrum under a chosen limit.

Notes
-----
The inverse of :func:`middle_ear_difference`: the limit over the time between two equalizations. Which limit
is chosen, and how often the person clears the ears, are inputs.

Examples
--------
Cleared every 15 s, kept under 60 mmHg:

>>> round(travel_rate_for("60 mmHg", "15 s"), 2)
32.0
""",
)


# -- Chamber oxygen ---------------------------------------------------------------------------------


@formula(
    result="chamber_o2_fraction",
    quantities={
        "time": "duration",
        "volume": "chamber_volume",
        "initial": "chamber_o2_fraction",
        "supply_o2": "oxygen",
    },
    source=_BALANCE,
    provenance="computed",
)
def o2_fraction(
    time: Value,
    volume: Value,
    o2_inflow: Value,
    air_flow: Value,
    initial: Value = 0.2095,
    supply_o2: Value = 0.2095,
) -> Value:
    """O2 fraction of the chamber atmosphere while oxygen leaks in and air is supplied.

    Notes
    -----
    V dF/dt = F_s Q + q - (Q + q) F: well mixed, pressure held, flows at chamber pressure and temperature.
    What air breathers use up is neglected. With q = 0 it is flushing. Regular at Q + q = 0. Well mixed is
    an assumption: near a leaking mask the fraction is higher.

    Examples
    --------
    20 m3, 8 L/min of oxygen from masks, no ventilation, after 82 min:

    >>> round(o2_fraction(82.0, 20000.0, 8.0, 0.0), 4)
    0.235
    """
    through = air_flow + o2_inflow
    excess = (supply_o2 * air_flow + o2_inflow) - through * initial
    return initial + excess * time / volume * (1.0 - ramp_gain(through * time / volume))


_time_to_o2 = inverse(
    o2_fraction,
    "time",
    name="time_to_o2",
    module=__name__,
    register=False,  # a pole at the steady value: near it the inverse of the inverse is not found
    doc="""Time until the chamber atmosphere reaches an O2 fraction.""",
)


def time_to_o2(
    chamber_o2_fraction: Value,
    volume: Value,
    o2_inflow: Value,
    air_flow: Value,
    initial: Value = 0.2095,
    supply_o2: Value = 0.2095,
) -> Value:
    """Time until the chamber atmosphere reaches an O2 fraction.

    Parameters
    ----------
    chamber_o2_fraction : float, str, array_like or DataArray
        O2 fraction to reach [1].
    volume : float, str, array_like or DataArray
        Gas volume of the chamber [L].
    o2_inflow, air_flow : float, str, array_like or DataArray
        Oxygen that leaks in and air supplied, at chamber conditions [L/min].
    initial, supply_o2 : float, str, array_like or DataArray
        O2 fraction at the start and of the air supplied [1].

    Returns
    -------
    same kind as the input
        Time [min].

    Raises
    ------
    NotReachableError
        If that fraction is not reached at these flows (NaN among many).

    Notes
    -----
    The inverse of :func:`o2_fraction`, found from it: up while oxygen leaks in, down while the chamber is
    flushed (the flow times this time is the air it takes, the same for every flow).

    Examples
    --------
    >>> round(time_to_o2(0.235, 20000.0, 8.0, 0.0), 2)
    81.97
    >>> round(time_to_o2(0.235, 20000.0, 8.0, 200.0), 1)
    175.4

    Flushed from 25 to 23 % with 500 L/min:

    >>> round(time_to_o2(0.23, 20000.0, 0.0, 500.0, initial=0.25), 1)
    27.2
    """
    return _time_to_o2(chamber_o2_fraction, volume, o2_inflow, air_flow, initial, supply_o2)


@formula(
    result="chamber_o2_fraction",
    quantities={"supply_o2": "oxygen"},
    refuse={"air_flow": (1e-6, 1e6)},
    source=_BALANCE,
    provenance="computed",
)
def steady_o2_fraction(o2_inflow: Value, air_flow: Value, supply_o2: Value = 0.2095) -> Value:
    """O2 fraction the chamber atmosphere comes to in the end.

    Notes
    -----
    (F_s Q + q)/(Q + q), flows at chamber conditions: chamber volume does not enter, only how soon.

    Examples
    --------
    >>> round(steady_o2_fraction(8.0, 200.0), 4)
    0.2399
    """
    return (supply_o2 * air_flow + o2_inflow) / (air_flow + o2_inflow)


air_flow_for_o2 = inverse(
    steady_o2_fraction,
    "air_flow",
    name="air_flow_for_o2",
    module=__name__,
    doc="""Air supply that keeps the chamber atmosphere at an O2 fraction for ever.

Notes
-----
The inverse of :func:`steady_o2_fraction`: Q = q (1 - F)/(F - F_s), flows at chamber conditions. The limit
is a choice among authorities that disagree: 23.5, 23 and 25 % are all printed.

Examples
--------
>>> round(air_flow_for_o2(0.235, 10.0), 0)
300.0
""",
)


# -- Chamber carbon dioxide -------------------------------------------------------------------------


@formula(
    result="chamber_pco2",
    quantities={
        "time": "duration",
        "volume": "chamber_volume",
        "initial": "chamber_pco2",
        "supply_co2": "chamber_pco2",
    },
    source=_BALANCE,
    provenance="computed",
)
def co2_pressure(
    time: Value,
    volume: Value,
    co2_output_stpd: Value,
    air_flow: Value,
    temperature: Value = 20.0,
    initial: Value = 0.0405,
    supply_co2: Value = 0.0,
) -> Value:
    """PCO2 of the chamber atmosphere with people in it and air supplied.

    Notes
    -----
    V dP/dt = VCO2 P0 T/T0 - Q (P - P_s): well mixed, air flow at chamber conditions, the output of all
    occupants together at STPD. P_s, the supply's PCO2, is its fraction times chamber pressure. Chamber
    pressure enters in no other way. Regular at Q = 0.

    Examples
    --------
    12 m3, 0.5 L/min, no ventilation, from 0.04 kPa to 1.5 % surface equivalent:

    >>> round(co2_pressure(328.0, "425 ft3", 0.5, 0.0, initial=0.04) / 101.325, 4)
    0.015
    """
    produced = co2_output_stpd * ATMOSPHERE * (temperature + ZERO_CELSIUS) / ZERO_CELSIUS
    excess = produced - air_flow * (initial - supply_co2)
    return initial + excess * time / volume * (1.0 - ramp_gain(air_flow * time / volume))


_time_to_co2 = inverse(
    co2_pressure,
    "time",
    name="time_to_co2",
    module=__name__,
    register=False,  # as above
    doc="""Time until the chamber atmosphere reaches a PCO2.""",
)


def time_to_co2(
    chamber_pco2: Value,
    volume: Value,
    co2_output_stpd: Value,
    air_flow: Value,
    temperature: Value = 20.0,
    initial: Value = 0.0405,
    supply_co2: Value = 0.0,
) -> Value:
    """Time until the chamber atmosphere reaches a PCO2.

    Parameters
    ----------
    chamber_pco2 : float, str, array_like or DataArray
        PCO2 to reach [kPa].
    volume : float, str, array_like or DataArray
        Gas volume of the chamber [L].
    co2_output_stpd : float, str, array_like or DataArray
        Output of all occupants [L/min STPD].
    air_flow : float, str, array_like or DataArray
        Air supplied, at chamber conditions [L/min].
    temperature : float, str, array_like or DataArray
        Temperature of the chamber [degC].
    initial, supply_co2 : float, str, array_like or DataArray
        PCO2 at the start and of the air supplied [kPa].

    Returns
    -------
    same kind as the input
        Time [min].

    Raises
    ------
    NotReachableError
        If it is not reached at this air supply (NaN among many).

    Notes
    -----
    The inverse of :func:`co2_pressure`, found from it.

    Examples
    --------
    >>> round(time_to_co2("11.4 mmHg", 20000.0, 1.0, 0.0, temperature=22.0))
    270
    """
    return _time_to_co2(chamber_pco2, volume, co2_output_stpd, air_flow, temperature, initial, supply_co2)


@formula(
    result="chamber_pco2",
    quantities={"supply_co2": "chamber_pco2"},
    refuse={"air_flow": (1e-6, 1e6)},
    source=_BALANCE,
    provenance="computed",
)
def steady_co2_pressure(
    co2_output_stpd: Value, air_flow: Value, temperature: Value = 20.0, supply_co2: Value = 0.0
) -> Value:
    """PCO2 the chamber atmosphere comes to in the end.

    Notes
    -----
    P_s + VCO2 P0 T/(T0 Q), Q at chamber conditions: the same actual flow gives the same surface
    equivalent at every depth, but costs more free air.

    Examples
    --------
    0.25 L/min at 2 actual ft3/min:

    >>> round(steady_co2_pressure(0.25, "2 ft3/min"), 3)
    0.48
    """
    return supply_co2 + co2_output_stpd * ATMOSPHERE * (temperature + ZERO_CELSIUS) / (
        ZERO_CELSIUS * air_flow
    )


air_flow_for_co2 = inverse(
    steady_co2_pressure,
    "air_flow",
    name="air_flow_for_co2",
    module=__name__,
    doc="""Air supply that keeps the chamber atmosphere at a PCO2 for ever.

Notes
-----
The inverse of :func:`steady_co2_pressure`, flow at chamber conditions.

Examples
--------
1.5 % surface equivalent, one person at rest:

>>> round(air_flow_for_co2("11.4 mmHg", 0.25), 1)
17.9
""",
)


@formula(result="chamber_co2_surface_equivalent", source="usn_rev4", provenance="read")
def co2_surface_equivalent(chamber_pco2: Value) -> Value:
    """CO2 of the chamber atmosphere as surface equivalent.

    Notes
    -----
    PCO2/P0: the fraction that would have the same PCO2 at one standard atmosphere. 1.5 % is 11.4 mmHg.

    Examples
    --------
    >>> round(co2_surface_equivalent("11.4 mmHg"), 4)
    0.015
    """
    return chamber_pco2 / ATMOSPHERE


# -- Gas amounts ------------------------------------------------------------------------------------


@formula(
    result="standard_gas_flow",
    quantities={"flow": "gas_flow", "reference_temperature": "temperature"},
    source="ideal_gas",
    provenance="computed",
)
def standard_flow(
    flow: Value, ambient_pressure: Value, temperature: Value = 20.0, reference_temperature: Value = 0.0
) -> Value:
    """Flow at 1 atm and a reference temperature, from the flow at chamber conditions.

    Notes
    -----
    Q P/P0 T_ref/T. Which reference is meant must be said: 0 degC (STPD, normal liters), 20 degC, or 70 degF
    for the standard cubic foot of the US Navy (from memory).

    Examples
    --------
    >>> round(standard_flow(10.0, "2.4 atm", 20.0, 20.0), 1)
    24.0
    """
    return (
        flow
        * (ambient_pressure / ATMOSPHERE)
        * (reference_temperature + ZERO_CELSIUS)
        / (temperature + ZERO_CELSIUS)
    )


actual_flow = inverse(
    standard_flow,
    "flow",
    name="actual_flow",
    module=__name__,
    kernel=lambda standard, *conditions: standard / standard_flow.raw(1.0, *conditions),
    doc="""Flow at chamber conditions, from a flow at 1 atm and a reference temperature.

Notes
-----
The inverse of :func:`standard_flow`: a flowmeter in normal liters leaks fewer actual liters at pressure.

Examples
--------
>>> round(actual_flow(20.0, "2.4 atm", 20.0), 2)
8.94
""",
)


@formula(
    result="free_gas_volume",
    quantities={"volume": "chamber_volume"},
    source="ideal_gas",
    provenance="computed",
    check_result=True,
)
def pressurization_gas(volume: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Free gas, at 1 atm, that brings a chamber to pressure.

    Notes
    -----
    V (P2 - P1)/P0 at one temperature. The gas is hot on arrival: what is needed to hold the pressure
    while it cools is part of this number, not added to it.

    Examples
    --------
    >>> round(pressurization_gas("20 m3", "1 atm", "2.4 atm"), 6)
    28000.0
    """
    return volume * (final_pressure - initial_pressure) / ATMOSPHERE


@formula(
    result="standard_gas_flow",
    quantities={
        "volume": "chamber_volume",
        "duration": "travel_duration",
        "air_flow": "air_flow",
    },
    source="ideal_gas",
    provenance="computed",
    check_result=True,
)
def compressor_flow(
    volume: Value, initial_pressure: Value, final_pressure: Value, duration: Value, air_flow: Value = 0.0
) -> Value:
    """Free air a compressor must deliver to bring a chamber to pressure in time and ventilate it there.

    Notes
    -----
    Free gas of the compression over its minutes, plus the ventilation (actual, at the final pressure) as
    free air: Q P2/P0. A bank of cylinders may give the first, a smaller compressor the second.

    Examples
    --------
    20 m3 to 2.4 atm in 10 min, ventilated with 300 L/min:

    >>> round(compressor_flow(20000.0, "1 atm", "2.4 atm", 10.0, 300.0), 6)
    3520.0
    """
    return pressurization_gas(volume, initial_pressure, final_pressure) / duration + air_flow * (
        final_pressure / ATMOSPHERE
    )


@formula(
    result="cylinder_count",
    quantities={"reserve_pressure": "cylinder_pressure"},
    refuse={"cylinder_pressure": (100.0, 1e5)},
    source="ideal_gas",
    provenance="computed",
    check_result=True,
)
def cylinders_needed(
    free_gas_volume: Value,
    water_capacity: Value,
    cylinder_pressure: Value,
    reserve_pressure: Value,
    compressibility: Value = 1.0,
) -> Value:
    """Cylinders of a bank that give a volume of free gas before a reserve is reached.

    Notes
    -----
    V_free P0/(V_w (p - p_r)/Z), pressures absolute, one temperature; a whole number is the next one up. Z is
    that of the full cylinder: :func:`gasphys.real_gas.compressibility`. The US Navy leaves 100 psi above
    ambient in an oxygen bottle.

    Examples
    --------
    >>> round(cylinders_needed(28000.0, 50.0, "200 bar", "20 bar"), 2)
    3.15
    """
    return (
        free_gas_volume
        * ATMOSPHERE
        * compressibility
        / (water_capacity * (cylinder_pressure - reserve_pressure))
    )


@formula(
    result="free_gas_volume",
    quantities={"inner_lock_volume": "chamber_volume", "outer_lock_volume": "chamber_volume"},
    source="usn_rev4",
    provenance="secondary",
)
def air_stock(inner_lock_volume: Value, outer_lock_volume: Value) -> Value:
    """Primary air stock of a recompression chamber by the US Navy's rule, free air.

    Notes
    -----
    5 V_inner + 10 V_outer + 45 390 standard cubic feet: the inner lock once and the outer lock twice to
    165 fsw, and one Treatment Table 4. The form is inferred from the listed symbols of Revision 4 Change
    A; later revisions print another constant (48 502, weakly remembered).

    Examples
    --------
    >>> round(air_stock("300 ft3", "100 ft3") / 28.316846592)
    47890
    """
    locks = USN_INNER_LOCK_FILLS * inner_lock_volume + USN_OUTER_LOCK_FILLS * outer_lock_volume
    return locks + USN_AIR_STOCK


@formula(
    result="free_gas_volume",
    quantities={"ventilation": "gas_flow"},
    source="ideal_gas",
    provenance="computed",
)
def mask_oxygen(ventilation: Value, duration: Value, start_pressure: Value, end_pressure: Value) -> Value:
    """Oxygen used by a mask or hood during a stay or linear travel, as volume at 1 atm.

    Notes
    -----
    Flow at chamber conditions times mean pressure over P0 times minutes; exact for linear travel.
    Referred to the same temperature. A hood takes its set flow, often 30 to 60 L/min: ask whether normal
    or actual liters.

    Examples
    --------
    90 min at 2.4 atm, 10 L/min:

    >>> round(mask_oxygen(10.0, 90.0, "2.4 atm", "2.4 atm"), 3)
    2160.0
    """
    return ventilation * duration * ((start_pressure + end_pressure) / 2.0) / ATMOSPHERE


@formula(result="oxygen_used_stpd", source="gas_volume_states", provenance="computed")
def mask_oxygen_stpd(
    ventilation_btps: Value, duration: Value, start_pressure: Value, end_pressure: Value
) -> Value:
    """Oxygen used by a mask during a stay or linear travel, as dry standard volume.

    Notes
    -----
    Minute ventilation at BTPS times (mean pressure - 47 mmHg)/P0 T0/Tb times minutes.

    Examples
    --------
    >>> round(mask_oxygen_stpd(10.0, 90.0, "2.4 atm", "2.4 atm"))
    1853
    """
    dry = (start_pressure + end_pressure) / 2.0 - BODY_VAPOR_PRESSURE
    return ventilation_btps * duration * dry / ATMOSPHERE * ZERO_CELSIUS / BODY_TEMPERATURE


@formula(
    result="duration",
    quantities={
        "volume": "chamber_volume",
        "pressure_fall": "pressure_change",
        "air_flow": "air_flow",
    },
    refuse={"air_flow": (1e-6, 1e6)},
    source="usn_rev4",
    provenance="read",
)
def gauge_fall_time(volume: Value, pressure_fall: Value, air_flow: Value, ambient_pressure: Value) -> Value:
    """Time the chamber gauge takes to fall by a small step while the exhaust passes a flow.

    Notes
    -----
    V dP/(Q P): how a ventilation valve is calibrated with the supply shut; Q at chamber conditions. With
    depths it is 60 V dP/(R (D + 33)) seconds: D alone would be wrong. The pressure is taken as constant
    during the fall.

    Examples
    --------
    >>> round(gauge_fall_time("300 ft3", 10 * 101.325 / 33, "12.5 ft3/min", 93 * 101.325 / 33) * 60, 2)
    154.84
    """
    return volume * pressure_fall / (air_flow * ambient_pressure)


# -- Heat and humidity ------------------------------------------------------------------------------


@formula(result="final_temperature", source="thermodynamics", provenance="computed")
def isentropic_temperature(
    initial_temperature: Value,
    initial_pressure: Value,
    final_pressure: Value,
    heat_capacity_ratio: Value = 1.4,
) -> Value:
    """Temperature of gas compressed without losing heat: an upper bound.

    Notes
    -----
    T2 = T1 (P2/P1)^((gamma - 1)/gamma) of the gas that was in the chamber. Real chambers warm by 5 to 15
    K, for the walls take up heat within about a minute (weakly remembered).

    Examples
    --------
    >>> round(isentropic_temperature(20.0, "1 atm", "2.8 atm"), 1)
    120.3
    """
    share = (heat_capacity_ratio - 1.0) / heat_capacity_ratio
    return (initial_temperature + ZERO_CELSIUS) * exp(
        share * log(final_pressure / initial_pressure)
    ) - ZERO_CELSIUS


@formula(
    result="final_temperature",
    quantities={"supply_temperature": "temperature"},
    source="thermodynamics",
    provenance="computed",
)
def filling_temperature(
    initial_temperature: Value,
    initial_pressure: Value,
    final_pressure: Value,
    supply_temperature: Value = 20.0,
    heat_capacity_ratio: Value = 1.4,
) -> Value:
    """Temperature of a chamber filled from a supply without losing heat.

    Notes
    -----
    Energy balance of a closed rigid vessel: T2 = r gamma Ts T1/(gamma Ts + (r - 1) T1), r = P2/P1. Below the
    isentropic bound of the resident gas and at most gamma times the supply's absolute temperature. Walls
    take most of it: see :func:`isentropic_temperature`.

    Examples
    --------
    >>> round(filling_temperature(20.0, "1 atm", "2.8 atm"), 1)
    86.0
    """
    ratio = final_pressure / initial_pressure
    start, supply = initial_temperature + ZERO_CELSIUS, supply_temperature + ZERO_CELSIUS
    hot = heat_capacity_ratio * supply
    return ratio * hot * start / (hot + (ratio - 1.0) * start) - ZERO_CELSIUS


@formula(
    result="amount_ratio",
    quantities={"supply_temperature": "temperature"},
    source="thermodynamics",
    provenance="computed",
)
def filling_amount_ratio(
    initial_temperature: Value,
    initial_pressure: Value,
    final_pressure: Value,
    supply_temperature: Value = 20.0,
    heat_capacity_ratio: Value = 1.4,
) -> Value:
    """Amount of gas after filling a chamber without losing heat, over that before.

    Notes
    -----
    n2/n1 = r T1/T2 with the temperature of :func:`filling_temperature`: a hot chamber at its pressure
    holds less gas, and takes more up while it cools.

    Examples
    --------
    >>> round(filling_amount_ratio(20.0, "1 atm", "2.8 atm"), 3)
    2.286
    """
    end = filling_temperature(
        initial_temperature, initial_pressure, final_pressure, supply_temperature, heat_capacity_ratio
    )
    return final_pressure / initial_pressure * (initial_temperature + ZERO_CELSIUS) / (end + ZERO_CELSIUS)


@formula(
    result="final_temperature",
    quantities={"time": "duration", "wall_temperature": "temperature"},
    source="thermodynamics",
    provenance="computed",
)
def temperature_after(
    time: Value, initial_temperature: Value, wall_temperature: Value, time_constant: Value
) -> Value:
    """Temperature of chamber gas while it comes back to that of the walls.

    Notes
    -----
    First order: T_w + (T1 - T_w) e^(-t/tau), walls of constant temperature. The time constant is measured
    on the chamber; the walls take the heat within about a minute (weakly remembered).

    Examples
    --------
    >>> round(temperature_after(1.0, 86.0, 20.0, 1.0), 1)
    44.3
    """
    return wall_temperature + (initial_temperature - wall_temperature) * exp(-time / time_constant)


@formula(
    result="saturation_share",
    refuse={"initial_temperature": (-45.0, 100.0), "final_temperature": (-45.0, 100.0)},
    source=("dalton_1802", "wagner_pruss_1993"),
    provenance="computed",
)
def humidity_after(
    relative_humidity: Value,
    initial_pressure: Value,
    final_pressure: Value,
    initial_temperature: Value = 20.0,
    final_temperature: Value = 20.0,
) -> Value:
    """Relative humidity after a change of pressure and temperature; above 1 water condenses.

    Notes
    -----
    The vapor fraction stays, so vapor pressure goes with total pressure; saturation follows temperature
    alone: phi P2/P1 p_s(T1)/p_s(T2). Compressed air is hot and dry at first, then moist as it cools;
    decompression cools with fog. No water leaves or is added: occupants and a dry supply change it.

    Examples
    --------
    >>> humidity_after(0.3, "1 atm", "2 atm")
    0.6
    """
    return (
        relative_humidity
        * (final_pressure / initial_pressure)
        * (saturation_pressure(initial_temperature) / saturation_pressure(final_temperature))
    )


# -- Ventilator -------------------------------------------------------------------------------------


@formula(
    result="tidal_volume",
    quantities={"volume": "tidal_volume"},
    source="ventilator_reports",
    provenance="secondary",
)
def ventilator_volume(volume: Value, density_ratio: Value) -> Value:
    """Tidal volume of a pneumatic ventilator of fixed settings in denser gas, as a first idea.

    Notes
    -----
    Turbulent flow through fixed openings goes with density^(-1/2): V/sqrt(rho/rho_0). Machines differ:
    volume modes lose tidal volume with pressure, pressure modes hold (four machines, 1-6 bar, Stahl 2000,
    quoted); one lost more than 10 % beyond 1.5-2.0 ATA and 38 % at 2.5 ATA (J Hyperbaric Med 1988). Measure
    the exhaled volume at pressure; a spirometer may itself read low there.

    Examples
    --------
    Air at 2.8 atm:

    >>> round(ventilator_volume(0.5, 2.8), 2)
    0.3
    """
    return volume / sqrt(density_ratio)
