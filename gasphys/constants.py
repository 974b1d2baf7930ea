"""Constants: each with its value, unit, exactness, source and provenance.

A :class:`Constant` is a float, so arithmetic works as usual; in a traced equation it becomes a
symbol with its own LaTeX name.
"""

from __future__ import annotations

from gasphys.units import UNITS

__all__ = ["CONSTANTS", "Constant"]


class Constant(float):
    """A named number with unit, source and provenance.

    Parameters
    ----------
    name : str
        Name in the code.
    value : float
        The number.
    unit : str
        Its unit.
    symbol : str
        LaTeX name.
    meaning : str
        One line.
    source : str
        Key of a reference in ``sources.toml``.
    provenance : str
        One of the words of :data:`gasphys.policy.PROVENANCE`.
    exact : bool
        True if exact by definition.
    uncertainty : float or None
        Standard uncertainty where it is not exact and known.
    """

    __slots__ = ("exact", "meaning", "name", "provenance", "source", "symbol", "uncertainty", "unit")

    name: str
    unit: str
    symbol: str
    meaning: str
    source: str
    provenance: str
    exact: bool
    uncertainty: float | None

    def __new__(
        cls,
        name: str,
        value: float,
        unit: str,
        symbol: str,
        meaning: str,
        source: str,
        provenance: str,
        exact: bool = False,
        uncertainty: float | None = None,
    ) -> Constant:
        self = super().__new__(cls, value)
        self.name, self.unit, self.symbol, self.meaning = name, unit, symbol, meaning
        self.source, self.provenance = source, provenance
        self.exact, self.uncertainty = exact, uncertainty
        return self

    def __reduce__(self) -> tuple[object, ...]:
        return (
            Constant,
            (
                self.name,
                float(self),
                self.unit,
                self.symbol,
                self.meaning,
                self.source,
                self.provenance,
                self.exact,
                self.uncertainty,
            ),
        )

    def __repr__(self) -> str:
        return f"{float(self)!r}"


#: Every constant by name.
CONSTANTS: dict[str, Constant] = {}


def _constant(
    name: str,
    value: float,
    unit: str,
    symbol: str,
    meaning: str,
    source: str,
    provenance: str,
    exact: bool = False,
    uncertainty: float | None = None,
) -> Constant:
    one = Constant(name, value, unit, symbol, meaning, source, provenance, exact, uncertainty)
    CONSTANTS[name] = one
    return one


ATMOSPHERE = _constant(
    "ATMOSPHERE", 101.325, "kPa", "P_0", "standard atmosphere", "cgpm_1954", "read", exact=True
)
BAR = _constant("BAR", 100.0, "kPa", "p_{bar}", "one bar", "si_brochure_2019", "read", exact=True)
MMHG = _constant(
    "MMHG",
    UNITS["mmHg"].factor / 1e3,
    "kPa",
    "p_{mmHg}",
    "conventional millimeter of mercury",
    "si_brochure_2019",
    "secondary",
    exact=True,
)
ZERO_CELSIUS = _constant(
    "ZERO_CELSIUS",
    273.15,
    "K",
    "T_0",
    "zero of the Celsius scale, temperature of STPD",
    "si_brochure_2019",
    "read",
    exact=True,
)
BODY_TEMPERATURE = _constant(
    "BODY_TEMPERATURE",
    310.15,
    "K",
    "T_b",
    "body temperature of BTPS, 37 degC",
    "common_practice",
    "secondary",
    exact=True,
)
GAS_CONSTANT = _constant(
    "GAS_CONSTANT",
    8.31446261815324,
    "J/mol/K",
    "R_m",
    "molar gas constant",
    "si_brochure_2019",
    "read",
    exact=True,
)
BODY_VAPOR_PRESSURE = _constant(
    "BODY_VAPOR_PRESSURE",
    47.0 * UNITS["mmHg"].factor / 1e3,
    "kPa",
    "P_{H_2O,37}",
    "water vapor pressure at 37 degC by convention, 47 mmHg",
    "common_practice",
    "secondary",
    exact=True,
)
STANDARD_GRAVITY = _constant(
    "STANDARD_GRAVITY", 9.80665, "m/s^2", "g_n", "standard gravity", "cgpm_1901", "read", exact=True
)
MSW = _constant(
    "MSW", 10.0, "kPa", "p_{msw}", "pressure of one meter of sea water", "msw_convention",
    "secondary", exact=True,
)  # fmt: skip
FSW = _constant(
    "FSW",
    101.325 / 33.0,
    "kPa",
    "p_{fsw}",
    "pressure of one foot of sea water, 33 per atmosphere",
    "usn_manual",
    "secondary",
    exact=True,
)
FSW_64_LB_FT3 = _constant(
    "FSW_64_LB_FT3",
    UNITS["fsw_64_lb_ft3"].factor / 1e3,
    "kPa",
    "p_{fsw,64}",
    "pressure of one foot of water of 64 lb/ft3",
    "usn_physics",
    "secondary",
    exact=True,
)
FSW_33_08_PER_ATM = _constant(
    "FSW_33_08_PER_ATM",
    101.325 / 33.08,
    "kPa",
    "p_{fsw,33.08}",
    "pressure of one foot of sea water, 33.08 per atmosphere",
    "uhms_fsw",
    "memory_medium",
    exact=True,
)
FSW_32_646_PER_BAR = _constant(
    "FSW_32_646_PER_BAR",
    100.0 / 32.646,
    "kPa",
    "p_{fsw,32.646}",
    "pressure of one foot of sea water, 32.646 per bar",
    "uhms_fsw",
    "memory_medium",
    exact=True,
)
FRESH_WATER_DENSITY = _constant(
    "FRESH_WATER_DENSITY",
    1000.0,
    "kg/m^3",
    r"\rho_{fw}",
    "fresh water, conventional",
    "common_practice",
    "secondary",
    exact=True,
)
EN13319_PRESSURE_PER_METER = _constant(
    "EN13319_PRESSURE_PER_METER",
    10.0,
    "kPa/m",
    "g_{13319}",
    "EN 13319: one bar for ten meters",
    "en_13319",
    "secondary",
    exact=True,
)
HUEFNER = _constant(
    "HUEFNER",
    1.34,
    "mL/g",
    r"\beta",
    "O2 carried by one gram of hemoglobin, in vivo",
    "o2_capacity_texts",
    "secondary",
)
O2_SOLUBILITY = _constant(
    "O2_SOLUBILITY",
    0.0031,
    "mL/dL/mmHg",
    r"\alpha_{O_2}",
    "O2 dissolved in blood at 37 degC",
    "o2_capacity_texts",
    "secondary",
)
MOLAR_MASS_O2 = _constant(
    "MOLAR_MASS_O2", 31.9988, "g/mol", "M_{O_2}", "molar mass of oxygen", "ciaaw", "memory_high"
)
MOLAR_MASS_N2 = _constant(
    "MOLAR_MASS_N2", 28.0134, "g/mol", "M_{N_2}", "molar mass of nitrogen", "ciaaw", "memory_high"
)
MOLAR_MASS_HE = _constant(
    "MOLAR_MASS_HE", 4.002602, "g/mol", "M_{He}", "molar mass of helium", "ciaaw", "memory_high"
)
MOLAR_MASS_AR = _constant(
    "MOLAR_MASS_AR", 39.948, "g/mol", "M_{Ar}", "molar mass of argon", "ciaaw", "memory_high"
)
MOLAR_MASS_H2 = _constant(
    "MOLAR_MASS_H2", 2.01588, "g/mol", "M_{H_2}", "molar mass of hydrogen", "ciaaw", "memory_high"
)
MOLAR_MASS_NE = _constant(
    "MOLAR_MASS_NE", 20.1797, "g/mol", "M_{Ne}", "molar mass of neon", "ciaaw", "memory_high"
)
MOLAR_MASS_CO2 = _constant(
    "MOLAR_MASS_CO2",
    44.0095,
    "g/mol",
    "M_{CO_2}",
    "molar mass of carbon dioxide",
    "ciaaw",
    "memory_high",
)
UPTD_THRESHOLD = _constant(
    "UPTD_THRESHOLD",
    0.5 * 101.325,
    "kPa",
    "P_{1/2}",
    "PO2 below which no pulmonary dose is counted, 0.5 atm",
    "clark_lambertsen_1971",
    "memory_high",
    exact=True,
)
WATER_CRITICAL_TEMPERATURE = _constant(
    "WATER_CRITICAL_TEMPERATURE",
    647.096,
    "K",
    "T_c",
    "critical temperature of water",
    "wagner_pruss_1993",
    "memory_high",
)
WATER_CRITICAL_PRESSURE = _constant(
    "WATER_CRITICAL_PRESSURE",
    22064.0,
    "kPa",
    "p_c",
    "critical pressure of water",
    "wagner_pruss_1993",
    "memory_high",
)
PK_CO2 = _constant(
    "PK_CO2",
    6.1,
    "1",
    "pK'",
    "apparent pK of carbonic acid in plasma",
    "henderson_hasselbalch_texts",
    "secondary",
)
CO2_PLASMA_SOLUBILITY = _constant(
    "CO2_PLASMA_SOLUBILITY",
    0.03,
    "mmol/L/mmHg",
    r"\alpha_{CO_2}",
    "CO2 dissolved in plasma at 37 degC, rounded as the bedside equation uses it",
    "henderson_hasselbalch_texts",
    "secondary",
)
CO_CAPACITY = _constant(
    "CO_CAPACITY",
    1.38,
    "mL/g",
    r"\beta_{CO}",
    "CO (or O2) carried by one gram of hemoglobin in the Coburn-Forster-Kane equation",
    "coburn_forster_kane_1965",
    "secondary",
)
CO2_MOLAR_VOLUME = _constant(
    "CO2_MOLAR_VOLUME",
    22.26,
    "L/mol",
    "V_{CO_2}",
    "volume of a mole of real CO2 at 0 degC and 101.325 kPa",
    "douglas_1988",
    "secondary",
)
MOLAR_MASS_H2O = _constant(
    "MOLAR_MASS_H2O", 18.01528, "g/mol", "M_{H_2O}", "molar mass of water", "ciaaw", "memory_high"
)
N2_SOLUBILITY_LEAN = _constant(
    "N2_SOLUBILITY_LEAN",
    0.0125,
    "1",
    r"\alpha_w",
    "Bunsen coefficient of N2 in the water of lean tissue, 37 degC",
    "farhi_1963",
    "read",
)
N2_SOLUBILITY_BLOOD = _constant(
    "N2_SOLUBILITY_BLOOD",
    0.0127,
    "1",
    r"\alpha_b",
    "Bunsen coefficient of N2 in human blood, middle of 0.0125-0.0129 at 37.3 degC",
    "farhi_1963",
    "read",
)
N2_SOLUBILITY_FAT = _constant(
    "N2_SOLUBILITY_FAT",
    0.0615,
    "1",
    r"\alpha_f",
    "Bunsen coefficient of N2 in body fat, 37 degC",
    "solubility_texts",
    "memory_medium",
)
LEAN_WATER = _constant(
    "LEAN_WATER",
    0.73,
    "L/kg",
    "w",
    "water of a kilogram of lean tissue",
    "body_composition_texts",
    "memory_high",
)
FAT_DENSITY = _constant(
    "FAT_DENSITY", 0.9, "kg/L", r"\rho_f", "density of body fat", "body_composition_texts", "memory_high"
)
DEAD_SPACE_PER_MASS = _constant(
    "DEAD_SPACE_PER_MASS",
    0.0022,
    "L/kg",
    "v_D",
    "anatomical dead space of a kilogram of body mass",
    "alveolar_ventilation_texts",
    "memory_high",
)
WATER_MOLAR_VOLUME = _constant(
    "WATER_MOLAR_VOLUME",
    float(MOLAR_MASS_H2O) / 993.33,
    "L/mol",
    "V_w",
    "volume of a mole of liquid water at 37 degC, molar mass over a density of 993.33 g/L",
    "tanaka_2001",
    "memory_high",
)
ARIELI_EXPONENT = _constant(
    "ARIELI_EXPONENT",
    4.57,
    "1",
    "c_p",
    "power of PO2 in the pulmonary oxygen index",
    "arieli_2002",
    "read",
)
CNS_ACTIVE_EXPONENT = _constant(
    "CNS_ACTIVE_EXPONENT", 3.38, "1", "n", "half the power of PO2, active divers", "arieli_2002", "read"
)
CNS_ACTIVE_MEDIAN = _constant(
    "CNS_ACTIVE_MEDIAN",
    9.63,
    "1",
    "m",
    "logarithm of the median exposure, active divers",
    "arieli_2002",
    "read",
)
CNS_ACTIVE_SPREAD = _constant(
    "CNS_ACTIVE_SPREAD",
    2.02,
    "1",
    "s",
    "standard deviation of the logarithm, active divers",
    "arieli_2002",
    "read",
)
CNS_MODERATE_MEDIAN = _constant(
    "CNS_MODERATE_MEDIAN",
    11.19,
    "1",
    "m",
    "logarithm of the median exposure, O2 uptake 0.9 L/min",
    "arieli_2003",
    "read",
)
CNS_MODERATE_SPREAD = _constant(
    "CNS_MODERATE_SPREAD",
    1.35,
    "1",
    "s",
    "standard deviation of the logarithm, O2 uptake 0.9 L/min",
    "arieli_2003",
    "read",
)
CNS_IMMERSED_EXPONENT = _constant(
    "CNS_IMMERSED_EXPONENT",
    10.93 / 2.0,
    "1",
    "n",
    "half the power of PO2, immersed rest",
    "aviner_2020",
    "read",
)
CNS_IMMERSED_MEDIAN = _constant(
    "CNS_IMMERSED_MEDIAN",
    8.99,
    "1",
    "m",
    "logarithm of the median exposure, immersed rest",
    "aviner_2020",
    "read",
)
CNS_IMMERSED_SPREAD = _constant(
    "CNS_IMMERSED_SPREAD",
    0.81,
    "1",
    "s",
    "standard deviation of the logarithm, immersed rest",
    "aviner_2020",
    "read",
)
CNS_DRY_EXPONENT = _constant(
    "CNS_DRY_EXPONENT", 12.99 / 2.0, "1", "n", "half the power of PO2, dry rest", "aviner_2020", "read"
)
CNS_DRY_MEDIAN = _constant(
    "CNS_DRY_MEDIAN", 11.34, "1", "m", "logarithm of the median exposure, dry rest", "aviner_2020", "read"
)
CNS_DRY_SPREAD = _constant(
    "CNS_DRY_SPREAD", 0.65, "1", "s", "standard deviation of the logarithm, dry rest", "aviner_2020", "read"
)
SURFACE_MSW = _constant(
    "SURFACE_MSW",
    10.0,
    "msw",
    "d_s",
    "surface pressure as a depth, in msw",
    "equivalent_depth_practice",
    "secondary",
    exact=True,
)
SURFACE_FSW = _constant(
    "SURFACE_FSW",
    33.0,
    "fsw",
    "d_s",
    "surface pressure as a depth, in fsw",
    "equivalent_depth_practice",
    "secondary",
    exact=True,
)
SURFACE_METERS = _constant(
    "SURFACE_METERS",
    10.0,
    "m",
    "d_s",
    "surface pressure as a depth, in meters",
    "equivalent_depth_practice",
    "secondary",
    exact=True,
)
N2_IN_AIR = _constant(
    "N2_IN_AIR",
    0.79,
    "1",
    "F_{N_2,air}",
    "nitrogen of the trade's air, argon counted with it",
    "equivalent_depth_practice",
    "secondary",
    exact=True,
)
MOLAR_MASS_HYDROXIDE = _constant(
    "MOLAR_MASS_HYDROXIDE",
    74.093,
    "g/mol",
    "M_{Ca(OH)_2}",
    "molar mass of calcium hydroxide",
    "ciaaw",
    "memory_high",
)
EVA_HALF_TIME = _constant(
    "EVA_HALF_TIME",
    360.0,
    "min",
    "t_{EVA}",
    "half-time of the one tissue of the space suit prebreathe trials",
    "waligora_1984",
    "memory_high",
)
EXERCISE_WASHOUT_SCALE = _constant(
    "EXERCISE_WASHOUT_SCALE",
    51.937,
    "min",
    r"\tau",
    "shortest time constant of N2 washout in the exercise prebreathe model",
    "conkin_2004",
    "memory_medium",
)
EXERCISE_WASHOUT_RISE = _constant(
    "EXERCISE_WASHOUT_RISE",
    0.03,
    "kg*min/mL",
    r"\lambda",
    "rise of N2 washout with O2 uptake in the exercise prebreathe model",
    "conkin_2004",
    "memory_medium",
)
LN2 = _constant(
    "LN2",
    0.6931471805599453,
    "1",
    r"(\ln 2)",
    "natural logarithm of two, between half-times and rates",
    "common_practice",
    "computed",
    exact=True,
)
USN_INNER_LOCK_FILLS = _constant(
    "USN_INNER_LOCK_FILLS",
    5.0,
    "1",
    "n_i",
    "free air over the inner lock's volume, once to 165 fsw",
    "usn_rev4",
    "secondary",
)
USN_OUTER_LOCK_FILLS = _constant(
    "USN_OUTER_LOCK_FILLS",
    10.0,
    "1",
    "n_o",
    "free air over the outer lock's volume, twice to 165 fsw",
    "usn_rev4",
    "secondary",
)
USN_AIR_STOCK = _constant(
    "USN_AIR_STOCK",
    45390.0 * UNITS["ft3"].factor / UNITS["L"].factor,
    "L",
    "V_{TT4}",
    "free air for one Treatment Table 4, 45 390 standard cubic feet",
    "usn_rev4",
    "secondary",
)
PI = _constant(
    "PI",
    3.141592653589793,
    "1",
    r"\pi",
    "circumference over diameter",
    "common_practice",
    "computed",
    exact=True,
)
SECONDS_PER_MINUTE = _constant(
    "SECONDS_PER_MINUTE",
    UNITS["min"].factor / UNITS["s"].factor,
    "s/min",
    r"s_{min}",
    "seconds in a minute",
    "si_brochure_2019",
    "read",
    exact=True,
)
ENERGY_OF_O2 = _constant(
    "ENERGY_OF_O2",
    20.1,
    "J/mL",
    r"e_{O_2}",
    "energy of a milliliter of O2 used, STPD",
    "respiratory_muscle_efficiency",
    "memory_medium",
)
WARKANDER_SURFACE = _constant(
    "WARKANDER_SURFACE", 2.49, "kPa", r"w_0", "external work for a liter at the surface, limit",
    "warkander_2007", "read",
)  # fmt: skip
WARKANDER_SLOPE = _constant(
    "WARKANDER_SLOPE", 0.016, "kPa", r"w_z", "fall of the limit of external work for each msw",
    "warkander_2007", "read",
)  # fmt: skip
MORRISON_REIMERS_REST = _constant(
    "MORRISON_REIMERS_REST", 0.5, "J/L", r"w_r", "external work for a liter without ventilation, limit",
    "morrison_reimers_1982", "memory_medium",
)  # fmt: skip
MORRISON_REIMERS_PREFERRED = _constant(
    "MORRISON_REIMERS_PREFERRED", 0.02, "J*min/L^2", r"w_p", "rise of the preferred limit with ventilation",
    "morrison_reimers_1982", "memory_medium",
)  # fmt: skip
MORRISON_REIMERS_MAXIMUM = _constant(
    "MORRISON_REIMERS_MAXIMUM", 0.04, "J*min/L^2", r"w_m", "rise of the highest limit with ventilation",
    "morrison_reimers_1982", "memory_medium",
)  # fmt: skip
LATENT_HEAT = _constant(
    "LATENT_HEAT", 2420.0, "J/g", r"h_{fg}", "heat that evaporates a gram of water in the airways",
    "respiratory_heat_texts", "secondary",
)  # fmt: skip
EXPIRED_WARMTH = _constant(
    "EXPIRED_WARMTH", 34.8, "degC", r"T_{ref}", "temperature of the rule of minimum inspired temperature",
    "piantadosi_1980", "memory_medium",
)  # fmt: skip
EXPIRED_BASE = _constant(
    "EXPIRED_BASE", 24.0, "degC", r"T_{e0}", "expired temperature for gas of 0 degC",
    "hyperbaric_heat_work", "memory_medium",
)  # fmt: skip
EXPIRED_SLOPE = _constant(
    "EXPIRED_SLOPE", 0.32, "1", r"b_e", "rise of expired with inspired temperature",
    "hyperbaric_heat_work", "memory_medium",
)  # fmt: skip
PI = _constant(
    "PI",
    3.141592653589793,
    "1",
    r"\pi",
    "circumference of a circle over its diameter",
    "common_practice",
    "computed",
    exact=True,
)
VPM_SURFACE_TENSION = _constant(
    "VPM_SURFACE_TENSION",
    0.0179,
    "N/m",
    r"\gamma",
    "surface tension of the skin of a nucleus, 17.9 dyn/cm",
    "yount_hoffman_1986",
    "memory_high",
)
VPM_SKIN_COMPRESSION = _constant(
    "VPM_SKIN_COMPRESSION",
    0.257,
    "N/m",
    r"\gamma_c",
    "crumbling compression of the skin of a nucleus, 257 dyn/cm",
    "yount_hoffman_1986",
    "memory_high",
)
VPM_REGENERATION_TIME = _constant(
    "VPM_REGENERATION_TIME",
    20160.0,
    "min",
    r"\tau_R",
    "time constant in which a nucleus heals",
    "yount_hoffman_1986",
    "memory_high",
)
VPM_CRITICAL_VOLUME = _constant(
    "VPM_CRITICAL_VOLUME",
    7500.0 * float(FSW),
    "kPa*min",
    r"\lambda",
    "critical-volume parameter, 7500 fsw min at 33 fsw/atm; 7180 in a later paper of the authors",
    "yount_hoffman_1986",
    "memory_high",
)
VPM_ONSET = _constant(
    "VPM_ONSET",
    8.2 * float(ATMOSPHERE),
    "kPa",
    r"\Delta p^*",
    "crushing gradient at which the skin of a nucleus closes, 8.2 atm in gelatin",
    "yount_1979",
    "memory_high",
)
VPM_OTHER_GASES = _constant(
    "VPM_OTHER_GASES",
    102.0 * float(MMHG),
    "kPa",
    r"p_{other}",
    "other active gases in tissue, 102 mmHg; what they are made of is not known",
    "yount_lally_1980",
    "memory_medium",
)
VPM_NITROGEN_RADIUS = _constant(
    "VPM_NITROGEN_RADIUS",
    0.8,
    "um",
    r"r_{0,N_2}",
    "initial critical radius of nuclei, nitrogen",
    "yount_hoffman_1986",
    "memory_medium",
)
VPM_HELIUM_RADIUS = _constant(
    "VPM_HELIUM_RADIUS",
    0.7,
    "um",
    r"r_{0,He}",
    "initial critical radius of nuclei, helium",
    "yount_hoffman_1986",
    "memory_medium",
)
