"""Pressure against depth in named waters, and against altitude."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from gasphys.constants import (
    ATMOSPHERE,
    EN13319_PRESSURE_PER_METER,
    FRESH_WATER_DENSITY,
    FSW,
    FSW_32_646_PER_BAR,
    FSW_33_08_PER_ATM,
    FSW_64_LB_FT3,
    MSW,
    STANDARD_GRAVITY,
)
from gasphys.equation import EquationFunction, Value, choice, formula, inverse, table
from gasphys.errors import GasphysError, NotTraceable
from gasphys.maths import sin

__all__ = [
    "WATERS",
    "altitude_at_pressure",
    "depth_at_pressure",
    "pressure_at_depth",
    "standard_atmosphere_pressure",
]


def _at_depth(
    *, source: str, provenance: str, quantities: dict[str, str] | None = None
) -> Callable[[Callable[..., Any]], EquationFunction]:
    return formula(
        result="ambient_pressure",
        quantities=quantities,
        source=source,
        provenance=provenance,
        register=False,
    )


@_at_depth(quantities={"depth": "depth_msw"}, source="msw_convention", provenance="secondary")
def _msw(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth in meters of sea water of 10 kPa each."""
    return surface_pressure + MSW * depth


@_at_depth(quantities={"depth": "depth_fsw"}, source="usn_manual", provenance="secondary")
def _fsw(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth in feet of sea water, 33 to the atmosphere."""
    return surface_pressure + FSW * depth


@_at_depth(quantities={"depth": "depth_fsw"}, source="usn_physics", provenance="secondary")
def _fsw_64_lb_ft3(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth in feet of water of 64 lb/ft3."""
    return surface_pressure + FSW_64_LB_FT3 * depth


@_at_depth(quantities={"depth": "depth_fsw"}, source="uhms_fsw", provenance="memory_medium")
def _fsw_33_08_per_atm(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth in feet of sea water, 33.08 to the atmosphere."""
    return surface_pressure + FSW_33_08_PER_ATM * depth


@_at_depth(quantities={"depth": "depth_fsw"}, source="uhms_fsw", provenance="memory_medium")
def _fsw_32_646_per_bar(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth in feet of sea water, 32.646 to the bar."""
    return surface_pressure + FSW_32_646_PER_BAR * depth


@_at_depth(source="common_practice", provenance="secondary")
def _fresh(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth in fresh water of 1000 kg/m3 at standard gravity."""
    return surface_pressure + FRESH_WATER_DENSITY * STANDARD_GRAVITY * depth / 1000.0


@_at_depth(source="en_13319", provenance="secondary")
def _en13319(depth: Value, surface_pressure: Value = ATMOSPHERE) -> Value:
    """Pressure at a depth as gauges to EN 13319 show it: one bar for ten meters."""
    return surface_pressure + EN13319_PRESSURE_PER_METER * depth


@formula(
    result="depth",
    valid={"latitude": (-90.0, 90.0)},
    source="unesco_1983",
    provenance="secondary",
    register=False,
)
def _unesco_1983_depth(
    ambient_pressure: Value, latitude: Value = 45.0, surface_pressure: Value = ATMOSPHERE
) -> Value:
    """Depth in standard sea water at an absolute pressure, UNESCO 1983."""
    p = (ambient_pressure - surface_pressure) / 10.0
    s = sin(latitude * 0.017453292519943295) ** 2
    gravity = 9.780318 * (1.0 + 5.2788e-3 * s + 2.36e-5 * s * s) + 1.092e-6 * p
    return (((-1.82e-15 * p + 2.279e-10) * p - 2.2512e-5) * p + 9.72659) * p / gravity


def _gsw() -> Any:
    try:
        import gsw
    except ImportError:
        raise GasphysError(
            "water 'teos10' needs the library gsw; install it with: pip install 'gasphys[ocean]'"
        ) from None
    return gsw


def _teos10_evaluate(ambient_pressure: Any, latitude: Any, surface_pressure: Any) -> Any:
    return -_gsw().z_from_p((ambient_pressure - surface_pressure) / 10.0, latitude)


def _teos10_root(depth: Any, latitude: Any, surface_pressure: Any) -> Any:
    return surface_pressure + 10.0 * _gsw().p_from_z(-depth, latitude)


def _teos10_slope(name: str) -> Any:
    """Hydrostatic balance of the same standard ocean: dz/dp = 1/(density gravity)."""

    def by_pressure(ambient_pressure: Any, latitude: Any, surface_pressure: Any) -> Any:
        gsw = _gsw()
        p = (ambient_pressure - surface_pressure) / 10.0
        slope = 1e3 / (gsw.rho(35.16504, 0.0, p) * gsw.grav(latitude, p))
        return slope if name == "ambient_pressure" else -slope

    if name == "latitude":
        raise NotTraceable("surroundings.depth_at_pressure[teos10]: no derivative by latitude")
    return by_pressure


def _teos10_explain(**inputs: float) -> str:
    p = (inputs["ambient_pressure"] - inputs["surface_pressure"]) / 10.0
    return f"depth = -gsw.z_from_p({p:.7g} dbar, {inputs['latitude']:g})"


@table(
    result="depth",
    source="teos_10",
    provenance="read",
    array=_teos10_evaluate,
    slope=_teos10_slope,
    explain=_teos10_explain,
    register=False,
)
def _teos10_depth(
    ambient_pressure: Value, latitude: Value = 45.0, surface_pressure: Value = ATMOSPHERE
) -> Value:
    """Depth in the standard ocean of TEOS-10 (35.16504 g/kg, 0 degC), as the library gsw gives it."""


_INVERSE_DOC = """The other way round, found from the forward equation."""


def _turned(forward: EquationFunction, argument: str, name: str, kernel: Any = None) -> EquationFunction:
    return inverse(
        forward, argument, name=name, module=__name__, doc=_INVERSE_DOC, kernel=kernel, register=False
    )


_FORWARD = {
    "msw": _msw,
    "fsw": _fsw,
    "fresh": _fresh,
    "en13319": _en13319,
    "fsw_64_lb_ft3": _fsw_64_lb_ft3,
    "fsw_33_08_per_atm": _fsw_33_08_per_atm,
    "fsw_32_646_per_bar": _fsw_32_646_per_bar,
}

#: Every water by name: pressure at a depth.
WATERS: dict[str, EquationFunction] = {
    **_FORWARD,
    "unesco_1983": _turned(_unesco_1983_depth, "ambient_pressure", "pressure_at_depth"),
    "teos10": _turned(_teos10_depth, "ambient_pressure", "pressure_at_depth", _teos10_root),
}

#: Every water by name: depth at a pressure.
_DEPTHS: dict[str, EquationFunction] = {
    **{name: _turned(f, "depth", "depth_at_pressure") for name, f in _FORWARD.items()},
    "unesco_1983": _unesco_1983_depth,
    "teos10": _teos10_depth,
}


@choice(option="water", registry=WATERS)
def pressure_at_depth(
    depth: Value,
    water: str = "msw",
    latitude: Value = 45.0,
    surface_pressure: Value = 101.325,
) -> Value:
    """Absolute pressure at a depth below the surface of a named water.

    Notes
    -----
    The depth is in msw for ``"msw"``, in fsw for the ``"fsw..."`` waters and in meters for all
    others. P = surface pressure + density x gravity x depth. A meter of sea water (msw) and a
    foot of sea water (fsw) are pressures by definition, 10 kPa and (for ``"fsw"``) 101.325/33
    kPa; the other definitions of the foot differ by 0.2 %. ``latitude`` matters only where the
    water's equation uses it.

    Examples
    --------
    >>> pressure_at_depth(18.0)
    281.325
    >>> round(pressure_at_depth(60.0, water="fsw"), 3)
    285.552
    """


@choice(option="water", registry=_DEPTHS)
def depth_at_pressure(
    ambient_pressure: Value,
    water: str = "msw",
    latitude: Value = 45.0,
    surface_pressure: Value = 101.325,
) -> Value:
    """Depth below the surface of a named water at an absolute pressure.

    Notes
    -----
    The inverse of :func:`pressure_at_depth`; the depth is in msw for ``"msw"``, in fsw for the
    ``"fsw..."`` waters and in meters for all others. A pressure below the surface pressure has no
    depth.

    Examples
    --------
    >>> depth_at_pressure(281.325)
    18.0
    """


@formula(
    result="ambient_pressure",
    valid={"altitude": (-500.0, 11019.0)},
    source="us_standard_1976",
    provenance="secondary",
)
def standard_atmosphere_pressure(altitude: Value) -> Value:
    """Pressure of the standard atmosphere at a geometric altitude.

    Notes
    -----
    p = P0 (1 - 0.0065 H/288.15)^5.255876 with the geopotential height
    H = 6356766 h/(6356766 + h) of the geometric altitude h in meters, up to 11 km geopotential.
    Real mountains at low latitude have a higher pressure than the standard.

    Examples
    --------
    >>> round(standard_atmosphere_pressure(3000.0), 3)
    70.121
    """
    geopotential = 6356766.0 * altitude / (6356766.0 + altitude)
    return ATMOSPHERE * (1.0 - 0.0065 * geopotential / 288.15) ** 5.255876


altitude_at_pressure = inverse(
    standard_atmosphere_pressure,
    "altitude",
    name="altitude_at_pressure",
    module=__name__,
    doc="""Geometric altitude at which the standard atmosphere has a pressure.

Notes
-----
The inverse of :func:`standard_atmosphere_pressure`, found from it.

Examples
--------
>>> round(altitude_at_pressure(70.12120), 0)
3000.0
""",
)
