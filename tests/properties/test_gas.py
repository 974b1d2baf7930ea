"""A gas reads back from its own text, and its fractions are one whole."""

from __future__ import annotations

import contextlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys.errors import GasphysError

percents = st.integers(0, 100)


@st.composite
def gases(draw: st.DrawFn) -> gp.Gas:
    names = ("oxygen", "helium", "argon", "hydrogen", "neon", "carbon_dioxide")
    some = draw(st.lists(st.sampled_from(names), unique=True, min_size=1, max_size=6))
    shares = [draw(st.floats(0.0, 1.0)) for _ in some]
    rest = draw(st.floats(0.0, 1.0))
    whole = sum(shares) + rest or 1.0
    return gp.Gas(**{"oxygen": 0.0} | {n: s / whole for n, s in zip(some, shares, strict=True)})


@given(gases())
def test_text_reads_back(gas: gp.Gas) -> None:
    assert gp.Gas.parse(str(gas)) == gas
    assert gp.Gas.parse(str(gas).upper()) == gas
    assert gp.Gas.parse(f"  {gas} ") == gas


@given(gases())
def test_fractions_are_one_whole(gas: gp.Gas) -> None:
    assert sum(gas.fractions.values()) == pytest.approx(1.0, abs=1e-9)
    assert all(0.0 <= f <= 1.0 for f in gas.fractions.values())
    light, heavy = gp.Gas(oxygen=0.0, hydrogen=1.0), gp.Gas(oxygen=0.0, carbon_dioxide=1.0)
    assert light.molar_mass * (1.0 - 1e-9) <= gas.molar_mass <= heavy.molar_mass * (1.0 + 1e-9)


@given(percents, percents)
def test_names_of_the_trade_mean_what_they_say(oxygen: int, helium: int) -> None:
    for name in (f"nitrox {oxygen}", f"EAN{oxygen}"):
        assert gp.Gas.parse(name).oxygen == oxygen / 100.0
    if oxygen + helium <= 100:
        gas = gp.Gas.parse(f"trimix {oxygen}/{helium}")
        assert (gas.oxygen, gas.helium) == (oxygen / 100.0, helium / 100.0)
        assert gp.Gas.parse(str(gas)) == gas
    else:
        with pytest.raises(GasphysError):
            gp.Gas.parse(f"trimix {oxygen}/{helium}")


@given(st.text(max_size=20))
def test_any_text_is_a_gas_or_a_clear_refusal(text: str) -> None:
    with contextlib.suppress(GasphysError):
        gas = gp.Gas.parse(text)
        assert gp.Gas.parse(str(gas)) == gas
