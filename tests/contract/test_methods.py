"""What an equation offers besides being called: symbols, derivative, roots, working, docstring."""

from __future__ import annotations

import contextlib
import functools
import inspect
import re
from typing import Any

import numpy as np
import pytest
import sympy as sp
import xarray as xr
from scipy.optimize import brentq

import gasphys as gp
from gasphys.errors import NotReachableError, NotTraceable, RangeError, UnitError, UnknownNameError
from gasphys.maths import lambdify_names
from gasphys.quantities import QUANTITIES, attributes
from gasphys.sources import sources

from .samples import (
    CHOICES,
    FORMULAS_ONLY,
    LEAVES,
    REGISTRY,
    SPREAD,
    each,
    each_argument,
    for_all,
    quiet_range,
    samples,
)

TIGHT = 1e-12

each_formula = pytest.mark.parametrize("name", FORMULAS_ONLY)
each_option = pytest.mark.parametrize(
    ("name", "key"), [(n, key) for n, f in CHOICES.items() for key in f.registry], ids=str
)


def _argument(f: Any, name: str) -> Any:
    return next(a for a in f.arguments if a.name == name)


def _scale(f: Any, name: str, at: float) -> float:
    low, high = quiet_range(_argument(f, name))
    return max(abs(at), 0.05 * (high - low))


# -- Traced form ---------------------------------------------------------------------------------


@each_formula
def test_number_array_labelled_lazy_and_traced_agree(name: str) -> None:
    f = FORMULAS_ONLY[name]
    names = [a.name for a in f.arguments]
    symbols = [sp.Symbol(n) for n in names]
    expression = f.symbolic(numbers=True)
    assert expression.free_symbols <= set(symbols)
    traced = sp.lambdify(symbols, expression, modules=lambdify_names())
    for row in samples(name):
        number = f(**row)
        one = {k: np.array([v]) for k, v in row.items()}
        labelled = {
            a.name: xr.DataArray(
                [row[a.name]], dims="x", attrs={"units": attributes(a.quantity.name)["units"]}
            )
            for a in f.arguments
        }
        lazy = {k: v.chunk() for k, v in labelled.items()}
        np.testing.assert_allclose(f(**one)[0], number, rtol=TIGHT)
        np.testing.assert_allclose(float(f(**labelled)[0]), number, rtol=TIGHT)
        np.testing.assert_allclose(float(f(**lazy).compute()[0]), number, rtol=TIGHT)
        np.testing.assert_allclose(float(traced(*row.values())), number, rtol=TIGHT)


@for_all(FORMULAS_ONLY)
def test_symbols_of_constants_stand_for_themselves(name: str) -> None:
    f = FORMULAS_ONLY[name]
    expression = f.symbolic()
    constants = {sp.Symbol(c) for c in f.constants}
    assert expression.free_symbols <= {sp.Symbol(a.name) for a in f.arguments} | constants


@each_formula
def test_latex_names_the_result_and_every_argument(name: str) -> None:
    f = FORMULAS_ONLY[name]
    plain = f.latex(expand=True)
    assert plain.startswith(f"{f.result.symbol} = ")
    # What stands only inside a called function that has a symbol of its own need not be written.
    called = {c: sp.Dummy() for c in f.symbolic().atoms(sp.Function) if hasattr(c, "_imp_")}
    written = f.symbolic().xreplace(called).free_symbols
    for a in f.arguments:
        if sp.Symbol(a.name) in written:
            assert a.quantity.symbol in plain, a.name
    for line in re.sub(r"\\(begin|end){aligned}", "", f.latex()).split(r"\\"):
        left, _, right = line.replace("&", "").partition(" = ")
        assert left.strip() != right.strip(), f"{line} says nothing"
    for text in (plain, f.latex()):
        assert text.count("{") == text.count("}")
        assert text.count(r"\left") == text.count(r"\right")
        assert text.count(r"\begin") == text.count(r"\end")


@for_all([n for n in LEAVES if n not in FORMULAS_ONLY])
def test_what_cannot_be_traced_says_why(name: str) -> None:
    f = LEAVES[name]
    for method in (f.symbolic, f.latex):
        with pytest.raises(NotTraceable, match=re.escape(f.name.partition("[")[0])):
            method()


@each
def test_working_shows_inputs_result_and_sources(name: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    shown = f.working(**row)
    assert shown.result == f(**row)
    assert shown.inputs == row
    text = str(shown)
    assert f"= {shown.result:.7g}" in text
    for a in f.arguments:
        assert re.search(rf"{a.name} += {row[a.name]:.7g}", text), a.name
        assert a.quantity.long_name in text
    for constant in f.constants.values():
        assert constant.name in text
        assert constant.provenance in text
    for key in f.sources:
        assert sources()[key] in text
    assert f"provenance: {f.provenance}" in text
    assert shown._repr_latex_().startswith("$")
    written = {a.name: f"{row[a.name]!r} {a.quantity.unit}" for a in f.arguments}
    assert f.working(**written).result == shown.result
    if f.kind == "inverse":
        assert "put back" in text


def _has_no_slope(f: Any, argument: str) -> bool:
    """Whether a table refuses one derivative, saying which."""
    row = samples(next(n for n, leaf in LEAVES.items() if leaf is f))[0]
    with contextlib.suppress(NotTraceable):
        f.derivative(argument)(**row)
        return False
    with pytest.raises(NotTraceable, match=argument):
        f.derivative(argument)(**row)
    return True


def _rests_on_a_table(f: Any) -> bool:
    return "table" in (f.kind, getattr(f, "forward", f).kind)


# -- Derivative ----------------------------------------------------------------------------------


@functools.cache
def _switches(f: Any) -> list[Any]:
    """Return the expressions at whose zeros the traced form changes its branch."""
    if f.kind != "formula" or not f.symbolic().has(sp.Max, sp.Min, sp.Piecewise, sp.Function):
        return []
    expression = f.symbolic(numbers=True)
    found = [a - b for m in expression.atoms(sp.Max, sp.Min) for a in m.args for b in m.args if a != b]
    for piecewise in expression.atoms(sp.Piecewise):
        found += [c.lhs - c.rhs for c in piecewise.atoms(sp.core.relational.Relational)]
    for function in expression.atoms(sp.Function):
        if type(function).__name__ == "MeanPower":
            found += function.args[:2]
    return found


def _kinks(f: Any, name: str, row: dict[str, float]) -> list[float]:
    """Return where the traced form changes its branch along one argument."""
    x = sp.Symbol(name)
    fixed = {sp.Symbol(k): v for k, v in row.items() if k != name}
    low, high = quiet_range(_argument(f, name))
    grid = np.linspace(low, high, 1501)
    found: set[float] = set()
    for switch in _switches(f):
        if not switch.has(x):
            continue
        fixed_switch = switch.subs(fixed)
        for kind, pair in ((sp.Max, "maximum"), (sp.Min, "minimum")):  # sympy 1.12 does not broadcast them
            fixed_switch = fixed_switch.replace(
                kind, lambda *of, pair=pair: functools.reduce(sp.Function(pair), of)
            )
        g = sp.lambdify(x, fixed_switch, modules=lambdify_names())
        level = np.broadcast_to(np.asarray(g(grid), dtype=float), grid.shape)
        for i in np.flatnonzero(level[:-1] * level[1:] < 0.0):
            found.add(round(float(brentq(g, grid[i], grid[i + 1], xtol=1e-12)), 9))
    return sorted(found)


def _slope(f: Any, name: str, row: dict[str, float], step: float) -> float:
    def at(x: float) -> float:
        values = {**row, name: x}
        with np.errstate(all="ignore"):
            return float(np.asarray(f.raw(*[np.float64(values[a.name]) for a in f.arguments])))

    x = row[name]
    one, two = at(x + step) - at(x - step), at(x + 2.0 * step) - at(x - 2.0 * step)
    return (8.0 * one - two) / (12.0 * step)


@each_argument
def test_derivative_against_differences_and_beside_every_kink(name: str, argument: str) -> None:
    f = LEAVES[name]
    low, high = _argument(f, argument).possible
    if _rests_on_a_table(f) and _has_no_slope(f, argument):
        return
    derivative = f.derivative(argument)
    for row in samples(name):
        scale = _scale(f, argument, row[argument])
        kinks = _kinks(f, argument, row)
        points = [row[argument]] + [k + side * 0.01 * scale for k in kinks for side in (-1.0, 1.0)]
        for point in filter(lambda x: low <= x <= high, points):
            here = {**row, argument: point}
            # Never across a kink: the step stays well inside the branch.
            room = min([abs(point - k) for k in kinks] + [scale])
            with gp.validity("ignore"):
                value = f(**here)
                ours = derivative(**here)
            # The smaller step serves where the function bends hard, the larger where it is flat.
            steps = [min(1e-3 * scale, 0.2 * room) * shrink for shrink in (1.0, 0.1, 0.01)]
            apart = [
                abs(ours - _slope(f, argument, here, s)) - 1e-6 * abs(ours) - 1e-12 * abs(value) / s
                for s in steps
            ]
            assert min(apart) <= 1e-14, (here, ours, [_slope(f, argument, here, s) for s in steps])
        shaped = derivative(**{k: np.array([v, v]) for k, v in row.items()})
        assert shaped.shape == (2,)


@each
def test_derivative_knows_its_argument_and_unit(name: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    with pytest.raises(UnknownNameError, match=f.arguments[0].name):
        f.derivative("nonsense")
    first = f.arguments[0]
    x = xr.DataArray([row[first.name]], dims="x", attrs={"units": attributes(first.quantity.name)["units"]})
    result = f.derivative(first.name)(**{**row, first.name: x})
    assert result.attrs["units"] == f"({f.result.unit})/({first.quantity.unit})"
    assert "standard_name" not in result.attrs


@for_all(FORMULAS_ONLY)
def test_derivative_as_an_expression(name: str) -> None:
    f = FORMULAS_ONLY[name]
    for a in f.arguments:
        derivative = f.derivative(a.name)
        assert derivative.latex().startswith(
            rf"\frac{{\partial {f.result.symbol}}}{{\partial {a.quantity.symbol}}} = "
        )
        assert sp.sympify(derivative) == derivative.expression


# -- Roots ---------------------------------------------------------------------------------------


@each_argument
def test_every_invertible_argument_is_inverted(name: str, argument: str) -> None:
    f = LEAVES[name]
    for row in samples(name, 2):
        value = f(**row)
        x = row[argument]
        slope = _slope(f, argument, row, 1e-4 * _scale(f, argument, x))
        known = {k: v for k, v in row.items() if k != argument}
        # Where the result does not answer, no more digits of the argument can come back.
        sharp = abs(slope * x) / max(abs(value), 1e-300)
        if sharp < 1e-9:
            continue
        roots = f.solve_for(argument, **known, result=value)
        assert roots.ndim == 1
        assert np.all(np.diff(roots) > 0.0)
        np.testing.assert_allclose(roots[np.argmin(abs(roots - x))], x, rtol=max(1e-9, 1e-14 / sharp))
        for root in roots:
            with np.errstate(all="ignore"):
                again = f.raw(*[np.float64({**row, argument: root}[a.name]) for a in f.arguments])
            np.testing.assert_allclose(again, value, rtol=1e-9, atol=1e-12)
        named = f.solve_for(
            argument, **known, **({f.result.name: value} if f.result.name not in row else {"result": value})
        )
        np.testing.assert_array_equal(named, roots)


@each
def test_solve_for_says_what_it_needs(name: str) -> None:
    f, row = LEAVES[name], samples(name)[0]
    first, *rest = row
    known = {k: row[k] for k in rest}
    with pytest.raises(TypeError, match="needs the result"):
        f.solve_for(first, **known)
    with pytest.raises(TypeError, match=first):
        f.solve_for(first, **known, **{first: row[first]}, result=f(**row))
    with pytest.raises(UnknownNameError, match=first):
        f.solve_for("nonsense", **row, result=f(**row))
    with pytest.raises(UnknownNameError, match="nonsense"):
        f.solve_for(first, **known, nonsense=1.0, result=f(**row))
    for k in rest:
        beyond = max(map(abs, _argument(f, k).possible)) * 2.0 + 1.0
        with pytest.raises(RangeError, match=k):
            f.solve_for(first, **{**known, k: beyond}, result=f(**row))
    for wrong in (float("nan"), float("inf")):
        with pytest.raises(RangeError, match=f.result.name):
            f.solve_for(first, **known, result=wrong)
    with gp.validity("ignore"), pytest.raises(NotReachableError, match=first):
        f.solve_for(first, **known, result=_beyond_reach(f, first, known))


def _beyond_reach(f: Any, name: str, known: dict[str, float]) -> float:
    """Return a value above all the equation gives over the possible range of one argument."""
    if f.kind == "inverse":  # close to an asymptote it may give any value that is possible
        return 2.0 * _argument(f.forward, f.unknown).possible[1] + 1.0
    low, high = _argument(f, name).possible
    x = np.concatenate([np.linspace(low, high, 4001), np.geomspace(max(low, high * 1e-12), high, 4001)])
    with np.errstate(all="ignore"):
        values = np.asarray(f.raw(*[x if a.name == name else known[a.name] for a in f.arguments]))
    values = values[np.isfinite(values)]
    return float(values.max() + 10.0 * np.ptp(values) + 1.0)


# -- Choice --------------------------------------------------------------------------------------


@each_option
def test_choice_passes_on(name: str, key: Any) -> None:
    f = CHOICES[name]
    member = f.registry[key]
    options = dict(zip(f.options, key if isinstance(key, tuple) else (key,), strict=True))
    assert f.pick(**options) is member
    leaf = next(n for n, leaf in LEAVES.items() if leaf is member)
    label = ",".join(map(str, key if isinstance(key, tuple) else (key,)))
    assert REGISTRY[f"{name}[{label}]"] is member
    for row in samples(leaf):
        given: dict[str, Any] = dict(row)
        for argument, spread in f.spread_by.items():
            parts = {k: v for k, v in spread(SPREAD[argument]).items() if k in row}
            row = row | parts
            given = {k: v for k, v in row.items() if k not in parts} | {argument: SPREAD[argument]}
        expected = member(**row)
        assert f(**given, **options) == expected
        if not f.spread:
            np.testing.assert_allclose(f.raw(**given, **options), expected, rtol=TIGHT)
            assert f.working(**given, **options).result == expected
            for a in row:
                with contextlib.suppress(NotTraceable if _rests_on_a_table(member) else ()):
                    by_member = member.derivative(a)(**row)
                    np.testing.assert_array_equal(f.derivative(a, **options)(**row), by_member)
        values = {k: v if k in f.spread else np.array([v, v]) for k, v in given.items()}
        np.testing.assert_allclose(f(**values, **options), [expected] * 2, rtol=TIGHT)
        # A keyword that another member uses has no effect on this one.
        others = {a.name: a.default for a in f.arguments if a.name not in row and a.default is not None}
        others = {k: v for k, v in others.items() if k in inspect.signature(f).parameters}
        assert f(**given, **options, **others) == expected


@for_all(CHOICES)
def test_choice_lists_what_there_is(name: str) -> None:
    f = CHOICES[name]
    row = samples(next(n for n, leaf in LEAVES.items() if leaf is next(iter(f.registry.values()))))[0]
    given = {k: v for k, v in row.items() if k in inspect.signature(f).parameters}
    given |= {k: SPREAD[k] for k in f.spread}
    for option in f.options:
        for wrong in ("nonsense", 7, None, ["list"]):
            with pytest.raises(UnknownNameError) as caught:
                f(**given, **{option: wrong})
            place = f.options.index(option)
            for key in f.registry:
                assert str(key[place] if isinstance(key, tuple) else key) in str(caught.value)
        default = inspect.signature(f).parameters[option].default
        assert isinstance(default, (str, bool))
    f.pick()


# -- Registry and docstrings ---------------------------------------------------------------------


@for_all(REGISTRY)
def test_registry_entry(name: str) -> None:
    f = REGISTRY[name]
    assert f.kind in ("formula", "choice", "inverse", "table")
    assert f.result is QUANTITIES[f.result.name]
    assert f.sources
    assert set(f.sources) <= set(sources())
    assert len({a.name for a in f.arguments}) == len(f.arguments)
    for a in f.arguments:
        assert a.quantity is QUANTITIES[a.quantity.name]
        assert a.possible[0] <= a.low < a.high <= a.possible[1]
        if a.default is not None:
            assert a.possible[0] <= a.default <= a.possible[1]


_SECTIONS = ("Parameters", "Returns", "Raises", "Notes", "References")


def _sections(text: str) -> dict[str, str]:
    parts = re.split(r"^(\w[\w ]*)\n-{3,}\n", text, flags=re.MULTILINE)
    return {"": parts[0]} | dict(zip(parts[1::2], parts[2::2], strict=True))


@for_all(REGISTRY)
def test_docstring_is_complete_and_fits_the_signature(name: str) -> None:
    f = REGISTRY[name]
    found = _sections(inspect.getdoc(f) or "")
    summary = found[""].strip()
    assert re.fullmatch(r"[A-Z].*\.", summary.splitlines()[0]), summary
    assert "\n\n" not in summary, "only one line stands above the sections"
    public = "[" not in name
    for section in _SECTIONS + (("Examples",) if public else ()):
        assert found.get(section, "").strip(), section
    if public:
        assert ">>> " in found["Examples"]
        assert len(found["Notes"].strip().splitlines()) > 2, "say what the equation is and is not for"
    documented = re.findall(r"^(\w+) : ", found["Parameters"], flags=re.MULTILINE)
    assert documented == list(inspect.signature(f).parameters)
    for a in f.arguments:
        if a.name in documented:
            entry = re.search(rf"^{a.name} : (.*)\n    (.*)", found["Parameters"], flags=re.MULTILINE)
            assert entry is not None
            assert f"[{a.quantity.unit}]" in entry[2]
            assert ("default" in entry[1]) is (a.default is not None)
    assert f"[{f.result.unit}]" in found["Returns"]
    for error in (RangeError, UnitError):
        assert error.__name__ in found["Raises"]
    assert f"Provenance: {f.provenance}" in found["Notes"]
    for key in f.sources:
        assert sources()[key] in found["References"]


@for_all(REGISTRY)
def test_signature_has_plain_defaults_and_pickles_by_reference(name: str) -> None:
    f = REGISTRY[name]
    for parameter in inspect.signature(f).parameters.values():
        assert parameter.kind in (parameter.POSITIONAL_OR_KEYWORD, parameter.KEYWORD_ONLY)
        assert parameter.default is parameter.empty or type(parameter.default) in (float, str, bool)
    if "[" not in name:
        module = inspect.getmodule(f)
        assert getattr(module, f.__name__) is f
        assert f.__name__ in module.__all__
