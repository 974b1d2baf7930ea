"""The shell around every equation: kinds of input, units, ranges, attributes.

A body computes and nothing else; everything a caller may get wrong is caught here, once. Number
in, number out; array in, array out; labelled array in, labelled array out, its attributes
replaced from the registry.
"""

from __future__ import annotations

import math
import numbers
import uuid
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.errors import GasphysError, RangeError, UnitError
from gasphys.policy import STRICT, outside_validity, require_provenance
from gasphys.quantities import CAUTION, Quantity, attributes, quantity

__all__ = ["FLAGS", "Argument", "Spec", "call", "number"]

#: Meaning of the flag variable that lazy results carry.
FLAGS = ("inside", "outside_validity", "impossible", "missing")


@dataclass(frozen=True)
class Argument:
    """One argument of an equation: its name, its quantity, default and validity range."""

    name: str
    quantity: Quantity
    default: float | None = None
    valid: tuple[float, float] | tuple[float, float, str] | None = None
    refuse: tuple[float, float] | None = None

    @property
    def possible(self) -> tuple[float, float]:
        """Range outside which a value is refused: the quantity's, or the equation's own domain."""
        low, high = self.quantity.possible
        if self.refuse is None:
            return low, high
        return max(low, self.refuse[0]), min(high, self.refuse[1])

    def range_error(self, value: float) -> RangeError:
        """Return the error for a refused value."""
        low, high = self.quantity.possible
        if self.refuse is not None and low <= value <= high:
            low, high = self.possible
            return RangeError(
                f"{self.name} = {value:g} {self.quantity.unit} is outside the domain of the equation, "
                f"{low:g} to {high:g} {self.quantity.unit}; it is not extrapolated"
            )
        return _named(self, self.quantity.range_error(value, *self.possible))

    @property
    def low(self) -> float:
        """Lower end of what passes without a word."""
        low = self.possible[0]
        return low if self.valid is None else max(low, self.valid[0])

    @property
    def high(self) -> float:
        """Upper end of what passes without a word."""
        high = self.possible[1]
        return high if self.valid is None else min(high, self.valid[1])


@dataclass(frozen=True)
class Spec:
    """What the shell must know of an equation."""

    name: str
    arguments: tuple[Argument, ...]
    result: Quantity
    scalar: Callable[..., float]
    array: Callable[..., Any]
    provenance: str = "read"
    references: str = ""
    check_result: bool = False
    labels: dict[str, str] = field(default_factory=dict)
    #: Whether the body is no more than a few operations; else large arrays are evaluated by parts.
    light: bool = False
    #: For an inverse: the argument of which equation the result is; its validity counts.
    target: Argument | None = None
    forward: str = ""
    #: Names the equation in a task graph; names of members of a choice are not unique.
    token: str = field(default_factory=lambda: uuid.uuid4().hex)
    #: Attributes that depend on the inputs, "provenance" among them; takes the inputs by name.
    judged: Callable[[dict[str, Any]], dict[str, str]] | None = None

    def attributes_for(self, values: Sequence[Any]) -> dict[str, str]:
        """Return provenance and further attributes of a result from these inputs."""
        fixed = {"provenance": self.provenance, **self.labels}
        if self.judged is None:
            return fixed
        return fixed | self.judged({a.name: v for a, v in zip(self.arguments, values, strict=True)})


def number(value: Any, argument: Argument) -> float:
    """Return one number in the canonical unit, or raise what is wrong with it."""
    one = argument.quantity
    if isinstance(value, str):
        try:
            return one.from_text(value)
        except UnitError as error:
            raise UnitError(f"{argument.name}: {error}") from None
    if isinstance(value, (bool, np.bool_)):
        raise TypeError(f"{argument.name} must be a number in {one.unit}, not a truth value")
    if isinstance(value, (numbers.Real, np.floating, np.integer)):
        return float(value)
    raise _foreign(value, argument)


def _foreign(value: Any, argument: Argument) -> TypeError:
    unit = argument.quantity.unit
    kind = f"{type(value).__module__}.{type(value).__name__}"
    if hasattr(value, "magnitude") or (hasattr(value, "unit") and hasattr(value, "to")):
        return TypeError(
            f"{argument.name}: unit objects ({kind}) are not taken; write the number in {unit}, a "
            f"text such as '1 {unit}', or a DataArray with a units attribute"
        )
    return TypeError(
        f"{argument.name} must be a number, text with a unit, array, Series or DataArray in {unit}; "
        f"got {kind}"
    )


_NUMBERS = (numbers.Real, np.floating, np.integer, np.ndarray)


def _flat(value: Any) -> Iterator[Any]:
    for one in value:
        if isinstance(one, (list, tuple)):
            yield from _flat(one)
        else:
            yield one


def _array(value: Any, argument: Argument) -> NDArray[np.float64] | float:
    """Return a float64 array, or a float for anything that is one number."""
    if isinstance(value, (list, tuple)):
        # numpy would take truth values for numbers and strip unit objects of their unit.
        kinds = {type(v) for v in _flat(value)}
        if bool in kinds or not all(issubclass(k, _NUMBERS) for k in kinds):
            value = [number(v, argument) for v in value]
        try:
            value = np.asarray(value)
        except ValueError:
            raise TypeError(f"{argument.name}: rows of different length") from None
    if isinstance(value, np.ma.MaskedArray):
        value = np.ma.filled(value.astype(float), np.nan)
    if not isinstance(value, np.ndarray):
        return number(value, argument)
    if value.dtype.kind == "O":
        value = np.array([number(v, argument) for v in value.flat]).reshape(value.shape)
    if value.dtype.kind not in "fiu":
        raise TypeError(f"{argument.name} must hold numbers, not {value.dtype}")
    numbers_: NDArray[np.float64] = value.astype(np.float64, copy=False)
    return numbers_


def _is_series(value: Any) -> bool:
    return type(value).__name__ == "Series" and type(value).__module__.startswith("pandas")


def _is_labelled(value: Any) -> bool:
    return type(value).__name__ in ("DataArray", "Variable") and type(value).__module__.startswith("xarray")


def call(spec: Spec, values: Sequence[Any]) -> Any:
    """Evaluate an equation for inputs of any accepted kind.

    Parameters
    ----------
    spec : Spec
        The equation.
    values : sequence
        One value an argument, in order.

    Returns
    -------
    float, array, Series or DataArray
        The richest kind among the inputs.
    """
    if STRICT.active:
        require_provenance(spec.attributes_for(values)["provenance"], spec.name)
    plain = True
    for value in values:
        if value.__class__ is not float:
            plain = False
            break
    if plain:
        return _scalar(spec, list(values))
    if any(_is_labelled(v) for v in values):
        return _labelled(spec, values)
    if any(_is_series(v) for v in values):
        return _series(spec, values)
    arrays = [_array(v, a) for v, a in zip(values, spec.arguments, strict=True)]
    if not any(isinstance(a, np.ndarray) and a.ndim for a in arrays):
        return _scalar(spec, [float(a) for a in arrays])
    return _arrays(spec, arrays)


def _outside_text(spec: Spec, argument: Argument, value: float) -> str:
    one = argument.quantity
    return (
        f"{spec.name}: {argument.name} = {value:g} {one.unit} is outside the range this equation "
        f"is valid for, {argument.low:g} to {argument.high:g} {one.unit}"
        + (f": {argument.valid[2]}" if argument.valid and len(argument.valid) == 3 else "")
    )


def _check_number(spec: Spec, argument: Argument, value: float) -> None:
    low, high = argument.possible
    if not low <= value <= high:
        raise argument.range_error(value)
    if not argument.low <= value <= argument.high:
        outside_validity(_outside_text(spec, argument, value))


def _named(argument: Argument, error: RangeError) -> RangeError:
    if argument.name == argument.quantity.name:
        return error
    return RangeError(f"{argument.name}: {error}")


def _scalar(spec: Spec, values: list[float]) -> float:
    for argument, value in zip(spec.arguments, values, strict=True):
        _check_number(spec, argument, value)
    try:
        result = float(spec.scalar(*values))
    except GasphysError:
        raise
    except (ArithmeticError, ValueError, TypeError):
        # Where numpy returns inf or nan the math module raises, and a negative number to a fraction
        # becomes complex: answer as the array would.
        with np.errstate(all="ignore"):
            result = float(spec.array(*[np.float64(v) for v in values]))
    if spec.target is not None and not spec.target.low <= result <= spec.target.high:
        outside_validity(_root_text(spec, spec.target, result))
    if spec.check_result and not spec.result.possible[0] <= result <= spec.result.possible[1]:
        outside_validity(_result_text(spec, f"{result:g}"))
    return result


def _root_text(spec: Spec, target: Argument, value: float) -> str:
    return (
        f"{spec.name}: {target.name} = {value:g} {target.quantity.unit} is outside the range that "
        f"{spec.forward} is valid for, {target.low:g} to {target.high:g} {target.quantity.unit}"
    )


def _result_text(spec: Spec, value: str) -> str:
    low, high = spec.result.possible
    return (
        f"{spec.name}: the result {value} {spec.result.unit} is not possible for "
        f"{spec.result.long_name} ({low:g} to {high:g} {spec.result.unit}); the inputs cannot "
        "stand together"
    )


def _all_within(value: NDArray[np.float64], low: float, high: float) -> bool:
    """Whether no element is outside or missing."""
    if low == 0.0:
        # Not negative floats are ordered like their bits, and the bits of negative ones and of nan
        # are larger: one pass over the memory instead of two.
        return bool(value.view(np.uint64).max() <= np.float64(high).view(np.uint64))
    return bool(low <= value.min() and value.max() <= high)


def _screen(spec: Spec, arrays: list[Any], report: bool) -> tuple[list[Any], NDArray[np.bool_] | None]:
    """Blank impossible elements and report them; return the arrays and where validity ends."""
    outside: NDArray[np.bool_] | None = None
    for k, (argument, value) in enumerate(zip(spec.arguments, arrays, strict=True)):
        if not isinstance(value, np.ndarray) or not value.ndim:
            if report:
                _check_number(spec, argument, float(value))
                continue
            value = np.asarray(value, dtype=np.float64)
        if not value.size or _all_within(value, argument.low, argument.high):
            continue
        possible_low, possible_high = argument.possible
        with np.errstate(invalid="ignore"):
            impossible = (value < possible_low) | (value > possible_high)
            beyond = ((value < argument.low) | (value > argument.high)) & ~impossible
        for mask, impossible_kind in ((impossible, True), (beyond, False)):
            count = int(np.count_nonzero(mask))
            if not count:
                continue
            if report:
                first = np.unravel_index(int(np.argmax(mask)), mask.shape)
                worst = float(value[first])
                index = tuple(int(i) for i in first)
                text = f"{count} of {value.size} values ({argument.name}{list(index)} = {worst:g})"
                if impossible_kind:
                    message = f"{spec.name}: {text}: {argument.range_error(worst)}; those results are nan"
                else:
                    message = f"{spec.name}: {text}: {_outside_text(spec, argument, worst)}"
                outside_validity(message)
            if not impossible_kind:
                outside = mask if outside is None else outside | mask
        if impossible.any():
            arrays[k] = np.where(impossible, np.nan, value)
    return arrays, outside


#: Elements evaluated at once: inputs and intermediate results stay in the processor's cache.
_AT_ONCE = 1 << 15


def _by_parts(spec: Spec, arrays: list[Any]) -> NDArray[np.float64] | None:
    """Evaluate large arrays of one shape part by part; None if there is anything to report."""
    shapes = {a.shape for a in arrays if np.ndim(a)}
    if spec.light or len(shapes) != 1:
        return None
    (shape,) = shapes
    size = math.prod(shape)
    if size < 2 * _AT_ONCE or not all(a.flags.c_contiguous for a in arrays if np.ndim(a)):
        return None
    ranges = [(a.low, a.high) for a in spec.arguments]
    limits = _result_range(spec)
    flat = [a.reshape(-1) if np.ndim(a) else float(a) for a in arrays]
    result = np.empty(size)
    for start in range(0, size, _AT_ONCE):
        parts = [a if isinstance(a, float) else a[start : start + _AT_ONCE] for a in flat]
        for part, (low, high) in zip(parts, ranges, strict=True):
            if not (low <= part <= high if isinstance(part, float) else _all_within(part, low, high)):
                return None
        with np.errstate(all="ignore"):
            result[start : start + _AT_ONCE] = spec.array(*parts)
        if limits is not None and not _all_within(result[start : start + _AT_ONCE], *limits):
            return None
    return result.reshape(shape)


def _result_range(spec: Spec) -> tuple[float, float] | None:
    """Return the range inside which nothing is to be said of a result; None if any is taken."""
    if spec.target is not None:
        return spec.target.low, spec.target.high
    return spec.result.possible if spec.check_result else None


def _arrays(spec: Spec, arrays: list[Any], report: bool = True) -> NDArray[np.float64]:
    result = _by_parts(spec, arrays)
    if result is not None:
        return result
    arrays, _ = _screen(spec, list(arrays), report)
    with np.errstate(all="ignore"):
        result = np.asarray(spec.array(*arrays), dtype=np.float64)
    shape = np.broadcast_shapes(*(np.shape(a) for a in arrays))
    if result.shape != shape:
        result = np.broadcast_to(result, shape).copy()
    if report:
        for mask, text in _doubtful(spec, result, arrays):
            worst = float(result[mask].flat[0])
            outside_validity(f"{int(mask.sum())} of {result.size} results: {text(worst)}")
    return result


def _doubtful(
    spec: Spec, result: NDArray[np.float64], arrays: list[Any]
) -> list[tuple[NDArray[np.bool_], Callable[[float], str]]]:
    """Return where results are not found, outside validity or not possible, and what to say of it."""
    limits, target = _result_range(spec), spec.target
    if limits is None or not result.size or _all_within(result, *limits):
        return []
    low, high = limits
    beyond = (result < low) | (result > high)
    lost = np.isnan(result)
    for value in arrays:
        lost = lost & ~np.isnan(value)
    found: list[tuple[NDArray[np.bool_], Callable[[float], str]]] = []
    if lost.any():
        why = (
            "no result from these inputs" if target is None else f"not reached by any possible {target.name}"
        )
        found.append((lost, lambda _: f"{spec.name}: {why}; they are nan"))
    if beyond.any() and target is None:
        found.append((beyond, lambda value: _result_text(spec, f"{value:g}")))
    elif beyond.any() and target is not None:
        found.append((beyond, lambda value: _root_text(spec, target, value)))
    return found


class _Block:
    """The evaluation of one block of lazy arrays, which dask can name without pickling it."""

    def __init__(self, spec: Spec) -> None:
        self.spec = spec
        self.__name__ = spec.name  # names the layer of the task graph

    def __call__(self, *arrays: Any) -> tuple[NDArray[np.float64], NDArray[np.uint8]]:
        result = _arrays(self.spec, list(arrays), report=False)
        return result, _flags(self.spec, result, *arrays)

    def __dask_tokenize__(self) -> str:
        return self.spec.token


def _flags(spec: Spec, result: NDArray[np.float64], *arrays: Any) -> NDArray[np.uint8]:
    """Return, element by element, the index into :data:`FLAGS`."""
    flag = np.zeros(result.shape, dtype=np.uint8)
    for mask, _ in _doubtful(spec, result, list(arrays)):
        valid = spec.target is not None and not np.isnan(result[mask]).any()
        flag[mask] = 1 if valid else 2
    for argument, value in zip(spec.arguments, arrays, strict=True):
        value = np.asarray(value)
        low, high = argument.possible
        with np.errstate(invalid="ignore"):
            beyond = (value < argument.low) | (value > argument.high)
            impossible = (value < low) | (value > high)
        flag = np.where(beyond & (flag < 1), 1, flag)
        flag = np.where(impossible, 2, flag)
        flag = np.where(np.isnan(value) & (flag < 2), 3, flag)
    return flag.astype(np.uint8)


def _series(spec: Spec, values: Sequence[Any]) -> Any:
    index = None
    arrays: list[Any] = []
    series_type: Any = None
    for value, argument in zip(values, spec.arguments, strict=True):
        if _is_series(value):
            if index is None:
                index, series_type = value.index, type(value)
            elif not index.equals(value.index):
                raise UnitError(f"{argument.name}: the Series have different indexes")
            value = value.to_numpy()
        arrays.append(_array(value, argument))
    result = series_type(_arrays(spec, arrays), index=index, name=spec.result.name)
    result.attrs["units"] = spec.result.unit
    return result


def _labelled(spec: Spec, values: Sequence[Any]) -> Any:
    import xarray as xr

    prepared: list[Any] = []
    lazy = False
    for value, argument in zip(values, spec.arguments, strict=True):
        one = argument.quantity
        if not _is_labelled(value):
            prepared.append(_array(value, argument))
            if isinstance(prepared[-1], np.ndarray) and prepared[-1].ndim:
                raise TypeError(
                    f"{argument.name}: give a DataArray (dimension names are needed beside another "
                    "DataArray), not a bare array"
                )
            continue
        given = value.attrs.get("units")
        if given is None:
            raise UnitError(
                f"{argument.name}: the DataArray has no units attribute; set "
                f"x.attrs['units'] = '{one.unit}' ({one.long_name})"
            )
        meant = value.attrs.get("quantity") or getattr(value, "name", None)
        if meant in one.refuses:
            raise UnitError(
                f"{argument.name} is {one.long_name}; {meant} ({quantity(meant).long_name}) must not "
                f"stand in its place"
            )
        if value.dtype.kind not in "fiu":
            raise TypeError(f"{argument.name} must hold numbers, not {value.dtype}")
        if given != one.unit and given != attributes(one.name)["units"]:
            try:
                value = one.from_unit(value.astype(float), str(given))
            except UnitError as error:
                raise UnitError(f"{argument.name}: {error}") from None
        elif value.dtype != np.float64:
            value = value.astype(float)
        lazy = lazy or value.chunks is not None
        prepared.append(value)
    if lazy:
        for value, argument in zip(prepared, spec.arguments, strict=True):
            if isinstance(value, float):  # one number beside arrays is checked at once
                _check_number(spec, argument, value)
        result, flag = xr.apply_ufunc(
            _Block(spec),
            *prepared,
            dask="parallelized",
            output_core_dims=[(), ()],
            output_dtypes=[np.float64, np.uint8],
            keep_attrs=False,
        )
        flag.attrs = {
            "long_name": f"validity of {spec.result.long_name}",
            "flag_values": [0, 1, 2, 3],
            "flag_meanings": " ".join(FLAGS),
        }
        result = result.assign_coords({f"{spec.result.name}_flag": flag.variable})
    else:
        result = xr.apply_ufunc(lambda *a: _from_ufunc(spec, a), *prepared, keep_attrs=False)
    if isinstance(result, xr.DataArray):
        result.name = spec.result.name
    result.attrs = {
        **attributes(spec.result.name),
        "equation": spec.name,
        "references": spec.references,
        "comment": CAUTION,
        **spec.attributes_for(values),
    }
    return result


def _from_ufunc(spec: Spec, arrays: tuple[Any, ...]) -> Any:
    arrays = tuple(np.asarray(a, dtype=np.float64) if np.ndim(a) else float(a) for a in arrays)
    if not any(np.ndim(a) for a in arrays):
        return np.asarray(_scalar(spec, list(arrays)))
    return _arrays(spec, list(arrays))
