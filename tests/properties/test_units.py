"""Units: round trips, and the same factors as two general-purpose unit libraries."""

from __future__ import annotations

import math
import re

import numpy as np
import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gasphys.quantities import QUANTITIES
from gasphys.units import UNITS, convert, parse_quantity, unit

PINT = pint.UnitRegistry()

#: Units the libraries do not know, or know under another meaning, and what they mean here.
OURS_ALONE = {
    "ata": "trade word for atm",
    "msw": "10 kPa; a gauge depth",
    "fsw": "33 to the atmosphere",
    "fsw_64_lb_ft3": "64 lb/ft3",
    "fsw_33_08_per_atm": "33.08 per atm",
    "fsw_32_646_per_bar": "32.646 per bar",
    "mfw": "fresh water",
    "1": "nothing to look up",
    "%": "read as a modulus there",
    "degrees_north": "a word of the climate conventions",
}

SHARED = sorted(set(UNITS) - set(OURS_ALONE))

numbers = st.floats(-1e6, 1e6).filter(lambda x: x == 0.0 or abs(x) > 1e-6)


def _same_kind() -> list[tuple[str, str]]:
    scales = ("degC", "degF", "K")
    differences = ("delta_degC", "delta_degF")
    return [
        (a, b)
        for a in UNITS
        for b in UNITS
        if UNITS[a].is_like(UNITS[b])
        and not (a in scales and b in differences)
        and not (a in differences and b in scales)
    ]


@given(numbers, st.sampled_from(_same_kind()))
def test_conversions_come_back(value: float, pair: tuple[str, str]) -> None:
    there = convert(value, *pair)
    # A temperature of a million degrees keeps its digits relative to the zero point.
    room = 1e-9 if UNITS[pair[0]].offset or UNITS[pair[1]].offset else 0.0
    assert convert(there, pair[1], pair[0]) == pytest.approx(value, rel=1e-13, abs=room)
    array = convert(np.array([value, value]), *pair)
    np.testing.assert_array_equal(array, [there, there])


@given(numbers, st.sampled_from(_same_kind()))
def test_conversions_chain(value: float, pair: tuple[str, str]) -> None:
    a, b = pair
    for c in UNITS:
        if (b, c) in _CHAINS and (a, c) in _CHAINS:
            direct = convert(value, a, c)
            assert convert(convert(value, a, b), b, c) == pytest.approx(direct, rel=1e-12, abs=1e-7)


_CHAINS = set(_same_kind())


def _by_pint(name: str) -> float:
    # A scale has no factor; its degree has.
    text = f"delta_{name}" if name in ("degC", "degF") else name
    factor: float = PINT.Quantity(1.0, text).to_base_units().magnitude
    return factor


@pytest.mark.parametrize("name", SHARED)
def test_factor_is_that_of_pint(name: str) -> None:
    assert _by_pint(re.sub(r"(?<=[a-z])(\d)$", r"**\1", name)) == pytest.approx(unit(name).factor, rel=1e-8)


@pytest.mark.parametrize("name", ["degC", "degF"])
def test_zero_of_a_scale_is_that_of_pint(name: str) -> None:
    assert PINT.Quantity(0.0, name).to("K").magnitude == pytest.approx(unit(name).offset, rel=1e-12)


@pytest.mark.parametrize("name", sorted({q.unit for q in QUANTITIES.values()} - set(OURS_ALONE)))
def test_unit_of_every_quantity_means_the_same_to_pint(name: str) -> None:
    assert _by_pint(name) == pytest.approx(unit(name).factor, rel=1e-8)


@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from(sorted(UNITS)))
def test_text_comes_back(value: float, name: str) -> None:
    for text in (f"{value!r} {name}", f"  {value!r}   {name} "):
        number, found = parse_quantity(text)
        assert number == value
        assert found == name
        assert math.copysign(1.0, number) == math.copysign(1.0, value)


@given(st.sampled_from(sorted(set(UNITS) - {"1", "%", "degC", "degF"})), st.integers(-3, 3))
def test_products_multiply_factors(name: str, power: int) -> None:
    one = unit(name)
    if name[-1].isdigit():
        return
    assert unit(f"{name}^{power}" if power >= 0 else f"{name}{power}").factor == pytest.approx(
        one.factor**power, rel=1e-12
    )
    assert unit(f"{name}/min").factor == pytest.approx(one.factor / 60.0, rel=1e-12)
    assert unit(f"{name}*s").factor == pytest.approx(one.factor, rel=1e-12)
