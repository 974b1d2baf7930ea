"""Integrity of the words: quantities, sources, constants, units, standards of dry air."""

from __future__ import annotations

import importlib
import re
import tomllib
from collections import Counter
from importlib import resources
from pathlib import Path
from typing import Any

import pint
import pytest

import gasphys as gp
from gasphys.constants import CONSTANTS
from gasphys.gas import FORMULAS, dry_air_standards
from gasphys.policy import PROVENANCE
from gasphys.quantities import QUANTITIES, attributes
from gasphys.sources import sources
from gasphys.units import UNITS, unit

PACKAGE = Path(str(resources.files("gasphys")))

gp.equations()  # some constants are made where they are used

each_quantity = pytest.mark.parametrize("name", QUANTITIES)
each_constant = pytest.mark.parametrize("name", CONSTANTS)

PINT = pint.UnitRegistry()


# -- quantities.toml -----------------------------------------------------------------------------


@each_quantity
def test_quantity_is_complete(name: str) -> None:
    one = QUANTITIES[name]
    assert re.fullmatch(r"[a-z][a-z0-9_]*", name)
    assert one.symbol
    assert one.symbol.count("{") == one.symbol.count("}")
    assert one.long_name
    assert one.long_name == one.long_name.strip()
    assert not one.long_name.endswith(".")
    assert one.meaning == one.meaning.strip()
    assert one.meaning.endswith((".", ".)")), one.meaning


@each_quantity
def test_possible_contains_usual(name: str) -> None:
    one = QUANTITIES[name]
    assert one.possible[0] <= one.usual[0] < one.usual[1] <= one.possible[1]


@each_quantity
def test_unit_parses_here_in_pint_and_in_udunits(name: str) -> None:
    cf_units = pytest.importorskip("cf_units")
    one = QUANTITIES[name]
    ours = unit(one.unit)
    written = attributes(name)["units"]
    # A degree of a scale is compared; scales have no factor.
    for text in (written,) if ours.gauge else (one.unit, written):
        if text == "degC":
            assert cf_units.Unit(text).convert(0.0, "K") == pytest.approx(ours.offset)
            assert PINT.Quantity(0.0, text).to("K").magnitude == pytest.approx(ours.offset)
            continue
        theirs = cf_units.Unit(text)
        assert not theirs.is_unknown()
        base = cf_units.Unit(_base(ours.dimension))
        if text != "degrees_north":
            assert theirs.convert(1.0, base) == pytest.approx(ours.factor, rel=1e-8)
            # A foot of sea water is no unit anywhere: "3.07 kPa" is an expression, not a unit, to pint.
            by_pint = PINT.parse_expression(text) if ours.gauge else PINT.Quantity(1.0, text)
            assert by_pint.to_base_units().magnitude == pytest.approx(ours.factor, rel=1e-8)


def _base(dimension: tuple[int, ...]) -> str:
    names = ("kg", "m", "s", "K", "mol")
    return " ".join(f"{n}{p}" for n, p in zip(names, dimension, strict=True) if p) or "1"


def test_names_never_differ_only_by_case() -> None:
    for names in (list(QUANTITIES), list(CONSTANTS), list(FORMULAS.values())):
        folded = Counter(name.casefold() for name in names)
        assert not {name for name, count in folded.items() if count > 1}


def test_pressures_say_absolute_or_what_they_are_partial_to() -> None:
    for name, one in QUANTITIES.items():
        if (
            one.is_pressure
            and not one.is_depth
            and re.search(r"(ambient|surface|barometric|total|chamber)_pressure", name)
        ):
            assert re.search("absolute|gauge|difference", one.long_name), name


def test_names_that_refuse_each_other_exist_and_share_their_unit() -> None:
    for name, one in QUANTITIES.items():
        for other in one.refuses:
            assert QUANTITIES[other].unit == one.unit, (name, other)
            assert other != name


def test_keys_of_the_file_are_those_the_reader_knows() -> None:
    known = {"symbol", "unit", "long_name", "possible", "usual", "meaning", "dose_unit", "refuses"}
    rows = tomllib.loads((PACKAGE / "quantities.toml").read_text(encoding="utf-8"))
    for name, row in rows.items():
        assert set(row) <= known, name


def test_every_quantity_is_used() -> None:
    """By an equation, or by its name in the code or data of the package."""
    used = {a.quantity.name for f in gp.equations().values() for a in f.arguments}
    used |= {f.result.name for f in gp.equations().values()}
    used |= {other for one in QUANTITIES.values() for other in one.refuses}
    text = "\n".join(p.read_text(encoding="utf-8") for p in _files() if p.name != "quantities.toml")
    words = set(re.findall(r"\w+", text))
    unused = set(QUANTITIES) - used - words
    assert not unused


# -- sources.toml --------------------------------------------------------------------------------


def _files() -> list[Path]:
    return [p for s in ("*.py", "*.toml", "*.csv") for p in sorted(PACKAGE.rglob(s))]


def _cited() -> set[str]:
    found = {key for f in gp.equations().values() for key in f.sources}
    return found | {c.source for c in CONSTANTS.values()}


def test_every_cited_key_exists() -> None:
    missing = _cited() - set(sources())
    assert not missing


def test_every_source_is_used() -> None:
    text = "\n".join(p.read_text(encoding="utf-8") for p in _files() if p.name != "sources.toml")
    words = set(re.findall(r"\w+", text))
    unused = set(sources()) - _cited() - words
    assert not unused


def test_citations_are_one_line_of_plain_text() -> None:
    for key, text in sources().items():
        assert re.fullmatch(r"[a-z][a-z0-9_]*", key)
        assert text == " ".join(text.split())
        assert len(text) > 10, key
    assert len(set(sources().values())) == len(sources()), "one reference stands under two keys"


# -- Constants -----------------------------------------------------------------------------------


@each_constant
def test_constant_is_complete(name: str) -> None:
    one = CONSTANTS[name]
    assert one.name == name
    assert name.isupper()
    assert one.symbol
    assert one.meaning
    assert one.source in sources()
    assert one.provenance in PROVENANCE
    assert isinstance(one.exact, bool)
    assert not (one.exact and one.uncertainty)
    if one.unit not in ("msw", "fsw"):
        PINT.parse_units(one.unit if one.unit != "1" else "")


def test_one_constant_one_value() -> None:
    """273.15 here and 273.16 there is one number too many."""
    rows = list(CONSTANTS.values())
    for i, one in enumerate(rows):
        for other in rows[i + 1 :]:
            if (one.symbol, one.unit) == (other.symbol, other.unit):
                assert abs(float(one) - float(other)) > 0.01 * abs(float(one)), (one.name, other.name)


@pytest.mark.parametrize("name", [n for n, f in gp.equations().items() if f.kind == "formula"])
def test_symbols_in_one_equation_tell_apart(name: str) -> None:
    f = gp.equations()[name]
    quantities = {a.quantity.name: a.quantity.symbol for a in f.arguments}
    symbols = Counter([*quantities.values(), *(c.symbol for c in f.constants.values())])
    assert not {s for s, n in symbols.items() if n > 1}


def test_constants_are_pickled_and_printed_as_numbers() -> None:
    import copy
    import pickle

    for one in CONSTANTS.values():
        for again in (pickle.loads(pickle.dumps(one)), copy.copy(one)):
            assert float(again) == float(one)
            assert again.symbol == one.symbol
        assert float(repr(one)) == float(one)


def test_derived_constants_are_computed() -> None:
    """What follows from other numbers must agree with them to the last bit."""
    c = {k: float(v) for k, v in CONSTANTS.items()}
    assert c["ATMOSPHERE"] == 101.325
    assert c["FSW"] == c["ATMOSPHERE"] / 33.0
    assert c["BODY_TEMPERATURE"] == c["ZERO_CELSIUS"] + 37.0
    assert c["BODY_VAPOR_PRESSURE"] == pytest.approx(47.0 * c["MMHG"], rel=1e-15)
    assert c["MMHG"] == UNITS["mmHg"].factor / 1e3
    assert c["UPTD_THRESHOLD"] == 0.5 * c["ATMOSPHERE"]
    # 22.414 L is the molar volume of an ideal gas at STPD that textbooks print.
    volume = c["GAS_CONSTANT"] * c["ZERO_CELSIUS"] / c["ATMOSPHERE"]
    assert round(volume, 3) == 22.414


# -- Units ---------------------------------------------------------------------------------------


def test_every_unit_says_what_it_is() -> None:
    for name, one in UNITS.items():
        assert one.name == name
        assert one.definition
        assert one.factor > 0.0


# -- Dry air -------------------------------------------------------------------------------------


@pytest.mark.parametrize("standard", dry_air_standards())
def test_dry_air_is_air(standard: str) -> None:
    row = dry_air_standards()[standard]
    assert set(row) - {"provenance", "source"} <= set(FORMULAS.values()) - {"nitrogen"}
    assert row["provenance"] in PROVENANCE
    assert row["source"]
    gas = gp.Gas.dry_air(standard)
    assert sum(gas.fractions.values()) == pytest.approx(1.0, abs=1e-12)
    assert 0.2093 < gas.oxygen < 0.2096
    assert 0.0093 < gas.argon < 0.0094
    assert 0.7806 < gas.nitrogen < 0.7812
    # CIPM-2007 prints 28.96546 g/mol at 400 ppm CO2, the CRC Handbook 28.965, a later list 28.9647.
    assert gas.molar_mass == pytest.approx(28.965, abs=0.002)


def test_standards_print_their_molar_mass() -> None:
    assert gp.Gas.dry_air("cipm_2007").molar_mass == pytest.approx(28.96546, abs=0.001)
    assert gp.Gas.dry_air("crc_83").molar_mass == pytest.approx(28.965, abs=0.001)


# -- Every data file -----------------------------------------------------------------------------


@pytest.mark.parametrize("path", [p for p in _files() if p.suffix != ".py"], ids=lambda p: p.name)
def test_data_files_parse_and_say_where_they_come_from(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert text.endswith("\n")
    assert "\t" not in text
    assert "\r" not in text
    if path.suffix == ".toml":
        tomllib.loads(text)
    words = "|".join(PROVENANCE)
    if path.name not in ("quantities.toml", "sources.toml", "start_values.toml"):
        assert re.search(rf"provenance|{words}|source", text), "no word about where the numbers come from"


def test_words_of_provenance_in_data_files_are_known() -> None:
    def walk(node: Any) -> None:
        if isinstance(node, dict):
            for key, value in node.items():
                # A row may tell its story in free text if it gives the one word beside it.
                if key == "word" or (key == "provenance" and "word" not in node and isinstance(value, str)):
                    assert value in PROVENANCE, value
                walk(value)
        elif isinstance(node, list):
            for value in node:
                walk(value)

    for path in _files():
        if path.suffix == ".toml":
            walk(tomllib.loads(path.read_text(encoding="utf-8")))


def test_registry_is_complete() -> None:
    """Every equation that a public module offers stands in the registry; a step of one is not offered."""
    registry = {id(f) for f in gp.equations().values()}
    missing = []
    for name in gp.__all__:
        module = getattr(gp, name)
        for part in getattr(module, "__all__", ()):
            value = getattr(module, part)
            kinds = ("formula", "choice", "inverse", "table")
            if getattr(value, "kind", "") in kinds and id(value) not in registry:
                missing.append(f"{name}.{part}")
    assert not missing


def test_registry_names_lead_to_the_equations() -> None:
    for name, f in gp.equations().items():
        choice, _, member = name.partition("[")
        module, _, function = choice.rpartition(".")
        value = getattr(importlib.import_module(f"gasphys.{module}"), function)
        if member:
            keys = {
                ",".join(map(str, k if isinstance(k, tuple) else (k,))): v for k, v in value.registry.items()
            }
            value = keys[member.removesuffix("]")]
        assert value is f, name
