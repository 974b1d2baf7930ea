"""A public name, its arguments and their order change on purpose only."""

from __future__ import annotations

import inspect
from pathlib import Path
from typing import Any

import pytest

import gasphys as gp

from . import names


def test_public_names_are_those_written_down() -> None:
    """After a change on purpose: python -m tests.packaging.names, and a line in the list of changes."""
    written = set(names.FILE.read_text(encoding="utf-8").split("\n")) - {""}
    ours = set(names.public_names())
    assert not written - ours, "gone or changed"
    assert not ours - written, "new"


def test_no_function_has_the_name_of_a_module() -> None:
    """Whichever is imported last would hide the other."""
    package = Path(gp.__file__).parent
    for name in gp.__all__:
        value: Any = getattr(gp, name)
        for part in getattr(value, "__all__", ()) if inspect.ismodule(value) else ():
            if not inspect.ismodule(getattr(value, part)):
                assert not (package / name / f"{part}.py").exists(), f"{name}.{part}"
        if not inspect.ismodule(value):
            assert not (package / f"{name}.py").exists(), name


@pytest.mark.parametrize("name", gp.__all__)
def test_names_load_on_first_use_and_stay(name: str) -> None:
    assert getattr(gp, name) is getattr(gp, name)
    assert name in dir(gp)


def test_unknown_name_is_an_attribute_error() -> None:
    with pytest.raises(AttributeError, match="nonsense"):
        _ = gp.nonsense  # type: ignore[attr-defined]


@pytest.mark.parametrize("name", [n for n in gp.__all__ if inspect.ismodule(getattr(gp, n))])
def test_all_of_a_module_exists(name: str) -> None:
    module: Any = getattr(gp, name)
    assert len(module.__all__) == len(set(module.__all__))
    for part in module.__all__:
        assert hasattr(module, part), f"{name}.__all__ names {part}"


#: Calls that must work whatever else changes: name, operands in order, keywords with their defaults.
CALLS: dict[str, tuple[str, dict[str, Any]]] = {
    "convert": ("value source_unit target_unit", {}),
    "laws.boyle_volume": ("volume initial_pressure final_pressure", {}),
    "laws.dalton_partial_pressure": ("fraction total_pressure", {}),
    "laws.convert_gas_volume": (
        "volume source target ambient_pressure temperature relative_humidity",
        {
            "source": "btps",
            "target": "stpd",
            "ambient_pressure": 101.325,
            "temperature": 20.0,
            "relative_humidity": 1.0,
        },
    ),
    "surroundings.pressure_at_depth": (
        "depth water latitude surface_pressure",
        {"water": "msw", "latitude": 45.0, "surface_pressure": 101.325},
    ),
    "surroundings.depth_at_pressure": (
        "ambient_pressure water latitude surface_pressure",
        {"water": "msw", "latitude": 45.0, "surface_pressure": 101.325},
    ),
    "surroundings.standard_atmosphere_pressure": ("altitude", {}),
    "surroundings.altitude_at_pressure": ("ambient_pressure", {}),
    "lungs.water_vapor_pressure": ("temperature", {}),
    "lungs.inspired_po2": ("ambient_pressure fio2 water_vapor_pressure", {"water_vapor_pressure": 6.266}),
    "lungs.alveolar_po2": (
        "ambient_pressure fio2 alveolar_pco2 respiratory_exchange_ratio fico2 water_vapor_pressure",
        {"respiratory_exchange_ratio": 0.8, "fico2": 0.0, "water_vapor_pressure": 6.266},
    ),
    "lungs.alveolar_pco2": ("co2_output_stpd alveolar_ventilation_btps", {}),
    "blood.o2_saturation": (
        "po2 model ph temperature",
        {"model": "severinghaus_1979", "ph": 7.4, "temperature": 37.0},
    ),
    "blood.o2_content": ("po2 hemoglobin model", {"hemoglobin": 15.0}),
    "real_gas.density": ("ambient_pressure gas temperature model", {"temperature": 20.0}),
    "doses.uptd": ("po2 duration exponent", {"exponent": 5.0 / 6.0}),
    "doses.uptd_ramp": ("start_po2 end_po2 duration exponent", {"exponent": 5.0 / 6.0}),
    "doses.noaa_cns_fraction": ("po2 duration rule total", {}),
    "doses.noaa_cns_ramp": ("start_po2 end_po2 duration", {}),
    "gas_exchange.arterial_po2_from_ratio": ("alveolar_po2 ratio", {}),
}


@pytest.mark.parametrize("name", CALLS)
def test_promised_calls_fit(name: str) -> None:
    operands, defaults = CALLS[name]
    value: Any = gp
    for part in name.split("."):
        value = getattr(value, part)
    parameters = inspect.signature(value).parameters
    first = [p.name for p in parameters.values() if p.kind is not p.KEYWORD_ONLY][: len(operands.split())]
    assert first == operands.split()
    for argument, default in defaults.items():
        ours = parameters[argument].default
        assert ours == default or ours == pytest.approx(default, abs=5e-4)
    rest = list(parameters.values())[len(operands.split()) :]
    assert all(p.default is not p.empty for p in rest)
