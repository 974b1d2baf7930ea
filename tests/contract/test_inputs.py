"""One sweep over the registry: every kind of input, right and wrong, into every equation."""

from __future__ import annotations

import contextlib
import copy
import re
import warnings
from collections.abc import Iterator
from types import SimpleNamespace
from typing import Any

import dask
import numpy as np
import pandas as pd
import pint
import pytest
import xarray as xr

import gasphys as gp
from gasphys import shell
from gasphys.errors import (
    NotReachableError,
    ProvenanceError,
    RangeError,
    UnitError,
    ValidityError,
    ValidityWarning,
)
from gasphys.policy import PROVENANCE
from gasphys.quantities import CAUTION, attributes

from .samples import LEAVES, columns, each, each_argument, for_all, other_unit, samples, wrong_units

TIGHT = 1e-12

PINT = pint.UnitRegistry()


def _argument(f: Any, name: str) -> Any:
    return next(a for a in f.arguments if a.name == name)


def _labelled(f: Any, values: dict[str, Any], dims: tuple[str, ...] = ("x",), **more: Any) -> dict[str, Any]:
    return {
        a.name: xr.DataArray(
            values[a.name], dims=dims, attrs={"units": attributes(a.quantity.name)["units"]}, **more
        )
        for a in f.arguments
    }


def _raw(f: Any, values: dict[str, Any]) -> np.ndarray:
    return np.asarray(f.raw(*[values[a.name] for a in f.arguments]), dtype=float)


# -- One number ----------------------------------------------------------------------------------


@each
def test_numbers_of_every_kind_give_one_float(name: str) -> None:
    f = LEAVES[name]
    for row in samples(name):
        plain = f(**row)
        assert type(plain) is float
        np.testing.assert_allclose(plain, _raw(f, row), rtol=TIGHT)
        texts = {a.name: f"{row[a.name]!r} {a.quantity.unit}" for a in f.arguments}
        bare = {k: repr(v) for k, v in row.items()}
        for same in (
            texts,
            bare,
            {k: np.float64(v) for k, v in row.items()},
            {k: np.array(v) for k, v in row.items()},
        ):
            result = f(**same)
            assert type(result) is float
            np.testing.assert_allclose(result, plain, rtol=TIGHT)
        assert f(*row.values()) == plain


@each_argument
def test_whole_numbers_are_numbers(name: str, argument: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    whole = float(round(row[argument]))
    with gp.validity("ignore"):
        try:
            expected = f(**{**row, argument: whole})
        except (RangeError, gp.GasphysError):
            return  # no whole number near the sample is possible
        for kind in (int, np.int64, np.int16, np.float32, np.uint8):
            if not 0 <= whole < 256:
                continue
            result = f(**{**row, argument: kind(whole)})
            assert type(result) is float
            assert result == expected


@each_argument
def test_text_in_another_unit_is_converted(name: str, argument: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    own = _argument(f, argument).quantity.unit
    other = other_unit(own)
    text = f"{gp.convert(row[argument], own, other)!r} {other}"
    np.testing.assert_allclose(f(**{**row, argument: text}), f(**row), rtol=1e-9)


@each_argument
def test_one_wrong_number_is_refused(name: str, argument: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    one = _argument(f, argument)
    low, high = one.possible
    beyond = max(abs(low), abs(high)) * 2.0 + 1.0
    for wrong in (float("nan"), float("inf"), -float("inf"), beyond, -beyond, np.float64(beyond)):
        if low <= wrong <= high:
            continue
        with pytest.raises(RangeError) as caught:
            f(**{**row, argument: wrong})
        text = str(caught.value)
        assert argument in text
        if np.isfinite(wrong):
            assert f"{wrong:g} {one.quantity.unit}" in text
        else:
            assert "nan" in text or "inf" in text
        assert f"{low:g} to {high:g} {one.quantity.unit}" in text
    with pytest.raises(RangeError):
        f(**{**row, argument: f"{beyond!r} {one.quantity.unit}"})


class _Foreign:
    """What a unit object of any library looks like from outside."""

    def __init__(self, value: float) -> None:
        self.value, self.magnitude, self.unit = value, value, "kPa"

    def to(self, unit: str) -> _Foreign:
        return self

    def __float__(self) -> float:
        return self.value


@each_argument
def test_what_is_no_number_is_refused(name: str, argument: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    unit = _argument(f, argument).quantity.unit
    value = row[argument]
    for wrong in (
        True,
        np.True_,
        [True, False],
        [True, value],
        np.array([True]),
        value + 0j,
        np.complex128(value),
        np.array([value], dtype=complex),
        None,
        {},
        {"a": value},
        object(),
        b"1",
        np.array(["1"]),
        np.array(["2020-01-01"], dtype="datetime64[D]"),
        [[value], [value, value]],
    ):
        with pytest.raises(TypeError, match=re.escape(argument)):
            f(**{**row, argument: wrong})
    for foreign in (
        _Foreign(value),
        PINT.Quantity(value, "kPa"),
        PINT.Quantity(np.array([value]), "kPa"),
        [PINT.Quantity(value, "kPa")],
        [_Foreign(value)],
    ):
        with pytest.raises(TypeError, match="unit object") as caught:
            f(**{**row, argument: foreign})
        assert argument in str(caught.value)
        assert unit in str(caught.value)
    for text in ("", "one", "1,5", f"{value!r} furlong", f"{value!r} {wrong_units(unit)[0]}"):
        with pytest.raises(UnitError, match=re.escape(argument)):
            f(**{**row, argument: text})


@for_all(LEAVES)
def test_calls_are_bound_like_any_function(name: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    with pytest.raises(TypeError, match="nonsense"):
        f(**row, nonsense=1.0)
    required = {a.name: row[a.name] for a in f.arguments if a.default is None}
    if required:
        with pytest.raises(TypeError, match=next(iter(required))):
            f()
    full = {**{a.name: a.default for a in f.arguments if a.default is not None}, **required}

    def outcome(values: dict[str, float]) -> float | str:
        try:
            return f(**values)
        except gp.errors.NotReachableError as error:  # a sample that the defaults do not reach
            return str(error)

    with gp.validity("ignore"):
        assert outcome(required) == outcome(full)


# -- Arrays --------------------------------------------------------------------------------------


@each
def test_arrays_give_arrays_and_the_numbers(name: str) -> None:
    f, values = LEAVES[name], columns(name, 4)
    expected = [f(**row) for row in samples(name, 4)]
    before = copy.deepcopy(values)
    for same in (
        values,
        {k: v.tolist() for k, v in values.items()},
        {k: tuple(v) for k, v in values.items()},
        {k: v[::-1][::-1] for k, v in values.items()},
        {k: np.asfortranarray(v) for k, v in values.items()},
        {k: [f"{float(x)!r}" for x in v] for k, v in values.items()},
    ):
        result = f(**same)
        assert type(result) is np.ndarray
        assert result.dtype == np.float64
        np.testing.assert_allclose(result, expected, rtol=TIGHT)
    for k, v in values.items():
        np.testing.assert_array_equal(v, before[k], strict=True)
    one = f(**{k: v[:1] for k, v in values.items()})
    assert one.shape == (1,)
    np.testing.assert_allclose(one[0], expected[0], rtol=TIGHT)


@each
def test_large_arrays_are_evaluated_by_parts_alike(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    f, values = LEAVES[name], columns(name, 8)
    first = f.arguments[0]
    whole = f(**values)
    square = {k: v.reshape(2, 4) for k, v in values.items()}
    holes = values[first.name].copy()
    holes[4] = max(map(abs, first.possible)) * 2.0 + 1.0
    with gp.validity("ignore"):
        blanked = f(**{**values, first.name: holes})
    monkeypatch.setattr(shell, "_AT_ONCE", 3)
    np.testing.assert_allclose(f(**values), whole, rtol=TIGHT)
    np.testing.assert_allclose(f(**square), whole.reshape(2, 4), rtol=TIGHT)
    np.testing.assert_allclose(f(**{k: v.T for k, v in square.items()}), whole.reshape(2, 4).T, rtol=TIGHT)
    row = samples(name)[0]
    np.testing.assert_allclose(f(**{**row, first.name: np.full(8, row[first.name])}), f(**row), rtol=TIGHT)
    with pytest.warns(ValidityWarning, match=re.escape(f"1 of 8 values ({first.name}[4]")):
        again = f(**{**values, first.name: holes})
    np.testing.assert_allclose(again, blanked, rtol=TIGHT)


@each
def test_shapes_broadcast(name: str) -> None:
    f, rows = LEAVES[name], samples(name, 2)
    first = f.arguments[0].name
    rest = {k: v for k, v in rows[0].items() if k != first}
    x = rows[0][first]
    grid = np.array([[x], [x], [x]])
    for column in rest or {first: x}:
        result = f(**{**rest, first: grid, column: np.array([rows[0][column]] * 2)}) if rest else f(grid)
        assert result.shape == ((3, 2) if rest else (3, 1))
        np.testing.assert_allclose(result, f(**rows[0]), rtol=TIGHT)
    for shape in ((0,), (0, 3), (2, 0)):
        empty = f(**{**rest, first: np.empty(shape)})
        assert type(empty) is np.ndarray
        assert empty.shape == shape
        assert empty.dtype == np.float64
    assert f(**{**rest, first: []}).shape == (0,)
    if rest:
        with pytest.raises(ValueError, match="broadcast"):
            f(**{**rest, first: np.full(3, x), next(iter(rest)): np.full(2, next(iter(rest.values())))})


@for_all(LEAVES)
def test_results_own_their_memory(name: str) -> None:
    """A caller may write into a result without changing an input or another element."""
    f, row = LEAVES[name], samples(name)[0]
    for argument in row:
        given = np.full(3, row[argument])
        result = f(**{**row, argument: given})
        assert result.shape == (3,)
        before = result[1]
        result[0] = -1.0
        assert result[1] == before
        np.testing.assert_array_equal(given, np.full(3, row[argument]))


@each_argument
def test_nan_in_an_array_stays_where_it_is(name: str, argument: str) -> None:
    f, values = LEAVES[name], columns(name)
    clean = f(**values)
    holes = values[argument].copy()
    holes[1] = np.nan
    for given in (holes, np.ma.masked_invalid(holes)):
        result = f(**{**values, argument: given})
        assert np.isnan(result[1])
        np.testing.assert_allclose(result[[0, 2]], clean[[0, 2]], rtol=TIGHT)
    # The missing element stands against one number of every other argument, too.
    alone = f(**{**samples(name)[0], argument: np.array([np.nan, samples(name)[0][argument]])})
    assert np.isnan(alone[0])
    assert np.isfinite(alone[1])


@each_argument
def test_impossible_elements_become_nan_and_are_reported(name: str, argument: str) -> None:
    f, values = LEAVES[name], columns(name)
    clean = f(**values)
    one = _argument(f, argument)
    low, high = one.possible
    beyond = max(abs(low), abs(high)) * 2.0 + 1.0
    for wrong in (np.inf, -np.inf, beyond, -beyond):
        if low <= wrong <= high:
            continue
        given = values[argument].copy()
        given[1] = wrong
        with pytest.warns(ValidityWarning, match=re.escape(f"1 of 3 values ({argument}[1]")):
            result = f(**{**values, argument: given})
        assert np.isnan(result[1])
        np.testing.assert_allclose(result[[0, 2]], clean[[0, 2]], rtol=TIGHT)
        with gp.validity("raise"), pytest.raises(ValidityError):
            f(**{**values, argument: given})
        with gp.validity("ignore"):
            assert np.isnan(f(**{**values, argument: given})[1])
    # One number beside an array is still one number.
    other = next((k for k in values if k != argument), None)
    if other is not None:
        row = samples(name)[0]
        with pytest.raises(RangeError, match=re.escape(argument)):
            f(**{**row, argument: beyond, other: np.full(2, row[other])})


@each_argument
def test_outside_validity_is_said(name: str, argument: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    one = _argument(f, argument)
    low, high = one.possible
    outside = []
    if one.low > low:
        outside.append(0.5 * (low + one.low))
    if one.high < high:
        outside.append(min(high, one.high + 0.05 * (one.high - one.low)))
    for value in outside:
        kinds = {
            "number": value,
            "array": np.array([value, row[argument]]),
            "labelled": xr.DataArray(
                [value, row[argument]],
                dims="x",
                attrs={"units": attributes(one.quantity.name)["units"]},
            ),
        }
        unreachable = contextlib.suppress(NotReachableError if f.kind == "inverse" else ())
        for kind in kinds.values():
            with warnings.catch_warnings(record=True) as caught, unreachable:
                warnings.simplefilter("always")
                f(**{**row, argument: kind})
            told = [w for w in caught if issubclass(w.category, ValidityWarning)]
            about = [w for w in told if f"{argument} = {value:g} {one.quantity.unit}" in str(w.message)]
            assert about, [str(w.message) for w in told]
            assert f"{one.low:g} to {one.high:g}" in str(about[0].message)
            assert about[0].filename == __file__, "the warning must point at the caller's line"
            with gp.validity("raise"), pytest.raises(ValidityError):
                f(**{**row, argument: kind})
            with gp.validity("ignore"), warnings.catch_warnings(), unreachable:
                warnings.simplefilter("error")
                f(**{**row, argument: kind})
    if not outside:
        assert (one.low, one.high) == one.possible


# -- Series --------------------------------------------------------------------------------------


@each
def test_series_keep_their_index(name: str) -> None:
    f, values = LEAVES[name], columns(name)
    index = pd.Index([10, 20, 30], name="minute")
    given = {k: pd.Series(v, index=index, name="other") for k, v in values.items()}
    before = copy.deepcopy(given)
    result = f(**given)
    assert isinstance(result, pd.Series)
    assert result.name == f.result.name
    assert result.attrs == {"units": f.result.unit}
    pd.testing.assert_index_equal(result.index, index)
    np.testing.assert_allclose(result.to_numpy(), f(**values), rtol=TIGHT)
    for k, v in given.items():
        pd.testing.assert_series_equal(v, before[k])
    first = f.arguments[0].name
    mixed = f(**{**samples(name)[0], first: pd.Series([samples(name)[0][first]] * 2)})
    np.testing.assert_allclose(mixed.to_numpy(), f(**samples(name)[0]), rtol=TIGHT)
    if len(given) > 1:
        last = f.arguments[-1].name
        with pytest.raises(ValueError, match="index"):
            f(**{**given, last: pd.Series(values[last], index=[1, 2, 3])})


# -- DataArrays ----------------------------------------------------------------------------------


@each
def test_labelled_in_labelled_out(name: str) -> None:
    f, values = LEAVES[name], columns(name)
    stale = {"standard_name": "stale", "long_name": "stale", "quantity": "", "color": "stale"}
    given = _labelled(f, values, coords={"x": [1.0, 2.0, 3.0]}, name="something_else")
    for v in given.values():
        v.attrs |= stale
    before = copy.deepcopy(given)
    result = f(**given)
    assert type(result) is xr.DataArray
    assert result.name == f.result.name
    assert result.dims == ("x",)
    assert result.x.values.tolist() == [1.0, 2.0, 3.0]
    np.testing.assert_allclose(result.values, f(**values), rtol=TIGHT)
    assert "stale" not in result.attrs.values()
    for key, value in attributes(f.result.name).items():
        assert result.attrs[key] == value
    assert result.attrs["comment"] == CAUTION
    assert result.attrs["provenance"] == f.provenance
    assert result.attrs["references"]
    assert result.attrs["equation"]
    assert all(isinstance(v, (str, int, float)) for v in result.attrs.values())
    for k, v in given.items():
        assert v.identical(before[k]), f"{k} was changed"


@for_all(LEAVES)
def test_labelled_single_value(name: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    result = f(**_labelled(f, row, dims=()))
    assert type(result) is xr.DataArray
    assert result.shape == ()
    np.testing.assert_allclose(float(result), f(**row), rtol=TIGHT)
    first = f.arguments[0]
    wrong = _labelled(f, {**row, first.name: np.nan}, dims=())
    with pytest.raises(RangeError, match=re.escape(first.name)):
        f(**wrong)


@each
def test_dimensions_broadcast_by_name(name: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    given = {
        a.name: xr.DataArray(
            [row[a.name]] * (n + 2),
            dims=f"d{n}",
            attrs={"units": attributes(a.quantity.name)["units"]},
        )
        for n, a in enumerate(f.arguments[:3])
    }
    result = f(**{**row, **given})
    assert result.sizes == {f"d{n}": n + 2 for n in range(len(given))}
    np.testing.assert_allclose(result.values, f(**row), rtol=TIGHT)
    first, *others = (a.name for a in f.arguments)
    if others:
        with pytest.raises(TypeError, match=re.escape(others[0])):
            f(**{**row, first: given[first], others[0]: np.array([row[others[0]]] * 2)})


@each_argument
def test_units_of_labelled_input(name: str, argument: str) -> None:
    f, values = LEAVES[name], columns(name)
    one = _argument(f, argument).quantity
    good = _labelled(f, values)
    expected = f(**good)
    other = other_unit(one.unit)
    converted = good[argument].copy(data=gp.convert(values[argument], one.unit, other))
    converted.attrs["units"] = other
    np.testing.assert_allclose(f(**{**good, argument: converted}).values, expected.values, rtol=1e-9)
    missing = good[argument].assign_attrs()
    missing.attrs.clear()
    with pytest.raises(UnitError, match="units") as caught:
        f(**{**good, argument: missing})
    assert argument in str(caught.value)
    assert one.unit in str(caught.value)
    for wrong in [*wrong_units(one.unit), "furlong"]:
        bad = good[argument].copy()
        bad.attrs["units"] = wrong
        with pytest.raises(UnitError, match=re.escape(argument)):
            f(**{**good, argument: bad})
    for refused in one.refuses:
        bad = good[argument].copy()
        bad.attrs["quantity"] = refused
        with pytest.raises(UnitError, match=refused):
            f(**{**good, argument: bad})
        bad = good[argument].rename(refused)
        with pytest.raises(UnitError, match=refused):
            f(**{**good, argument: bad})
    for dtype in (bool, complex, "datetime64[s]", str):
        bad = good[argument].copy(data=np.ones(3).astype(dtype))
        with pytest.raises(TypeError, match=re.escape(argument)):
            f(**{**good, argument: bad})


# -- Lazy ----------------------------------------------------------------------------------------


@pytest.fixture(autouse=True)
def _one_thread() -> Iterator[None]:
    with dask.config.set(scheduler="synchronous"):
        yield


def _never(*_: Any, **__: Any) -> Any:
    raise AssertionError("computed too early")


@each
def test_lazy_stays_lazy_and_equals_eager(name: str) -> None:
    f, values = LEAVES[name], columns(name, 4)
    eager = f(**_labelled(f, values))
    with dask.config.set(scheduler=_never):
        given = {k: v.chunk(x=2) for k, v in _labelled(f, values).items()}
        result = f(**given)
        again = f(**{**given, f.arguments[0].name: given[f.arguments[0].name].assign_coords(result.coords)})
    flag = result.coords[f"{f.result.name}_flag"]
    for lazy in (result, flag, again):
        assert lazy.chunks == ((2, 2),)
    assert result.name == f.result.name
    assert result.attrs == eager.attrs
    np.testing.assert_allclose(result.compute().values, eager.values, rtol=TIGHT)
    assert flag.dtype.kind == "u"
    assert flag.compute().values.tolist() == [0, 0, 0, 0]
    assert flag.attrs["flag_meanings"].split() == ["inside", "outside_validity", "impossible", "missing"]
    row = samples(name)[0]
    for k in row:
        one = xr.DataArray([row[k]] * 4, dims="x", attrs=given[k].attrs).chunk(x=2)
        np.testing.assert_allclose(f(**{**row, k: one}).compute().values, f(**row), rtol=TIGHT)


@each_argument
def test_lazy_flags_what_eager_reports(name: str, argument: str) -> None:
    f, values = LEAVES[name], columns(name, 5)
    one = _argument(f, argument)
    low, high = one.possible
    beyond = max(abs(low), abs(high)) * 2.0 + 1.0
    given = values[argument].copy()
    given[1], given[3] = np.nan, beyond
    if one.high < high:
        given[4] = min(high, one.high + 0.05 * (one.high - one.low))
    labelled = _labelled(f, {**values, argument: given})
    with warnings.catch_warnings(record=True) as told:
        warnings.simplefilter("always")
        eager = f(**labelled)
    # Beyond validity an inverse may find nothing, and a formula something impossible.
    impossible = any("cannot stand together" in str(w.message) for w in told)
    beyond_validity = 2 if impossible or np.isnan(eager.values[4]) else 1
    expected = [0, 3, 0, 2, beyond_validity if one.high < high else 0]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        result = f(**{k: v.chunk(x=2) for k, v in labelled.items()}).compute()
    assert result.coords[f"{f.result.name}_flag"].values.tolist() == expected
    np.testing.assert_allclose(result.values, eager.values, rtol=TIGHT)
    # One number beside lazy arrays is checked at once, as beside any array.
    others = [a.name for a in f.arguments if a.name != argument]
    if others:
        lazy = _labelled(f, values)[others[0]].chunk(x=2)
        with pytest.raises(RangeError, match=re.escape(argument)):
            f(**{**samples(name)[0], others[0]: lazy, argument: beyond})


# -- Provenance ----------------------------------------------------------------------------------


@for_all(LEAVES)
def test_weaker_provenance_is_refused(name: str) -> None:
    f, row, values = LEAVES[name], samples(name)[0], columns(name)
    rank = PROVENANCE.index(f.provenance)
    with gp.provenance(f.provenance):
        f(**row)
        f(**values)
    if rank:
        with gp.provenance(PROVENANCE[rank - 1]):
            for given in (row, values, _labelled(f, values)):
                with pytest.raises(ProvenanceError, match=f.provenance):
                    f(**given)
    assert f(**row) == f(**row)


def test_namespace_is_not_confused_with_units() -> None:
    """Anything with unit-like attributes is refused by name, whatever its class."""
    with pytest.raises(TypeError, match="unit object"):
        gp.blood.dissolved_o2(SimpleNamespace(magnitude=1.0))
