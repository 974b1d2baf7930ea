"""Equations: written once, used as code, as symbols and as documentation.

Four kinds, told by ``f.kind``:

* *formula*: closed form, traced by running the same code object with other globals;
* *choice*: picks a formula by name;
* *inverse*: declared from a formula, never written twice;
* *table*: nodes and a rule.

Every equation is a plain function with attributes: ``raw`` (numpy body), ``symbolic``, ``latex``,
``derivative``, ``solve_for``, ``working``, ``kind``, ``arguments``, ``result``.
"""

from __future__ import annotations

import dis
import functools
import inspect
import re
import types
from collections.abc import Callable, Mapping
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import CONSTANTS, Constant
from gasphys.errors import NotReachableError, NotTraceable, unknown_name
from gasphys.maths import ARRAY, SCALAR, lambdify_names, symbolic_names
from gasphys.policy import PROVENANCE, STRICT, weakest
from gasphys.quantities import Quantity, quantity
from gasphys.shell import Argument, Spec, call
from gasphys.sources import cite

__all__ = ["EQUATIONS", "EquationFunction", "choice", "formula", "inverse", "table"]

#: Any accepted kind of input: number, text with a unit, array, Series, DataArray.
Value = Any

#: Range an equation was made for, with the reason where the warning should give it.
Valid = tuple[float, float] | tuple[float, float, str]


class EquationFunction(Protocol):
    """What an equation offers besides being called."""

    kind: str
    name: str
    arguments: tuple[Argument, ...]
    result: Quantity
    raw: Callable[..., Any]
    provenance: str
    sources: tuple[str, ...]
    constants: dict[str, Constant]

    def __call__(self, *args: Any, **kwargs: Any) -> Any:
        """Evaluate."""

    def symbolic(self, **options: Any) -> Any:
        """Return the traced sympy expression."""

    def latex(self, **options: Any) -> str:
        """Return the equation in LaTeX."""

    def derivative(self, name: str, **options: Any) -> Any:
        """Return the derivative with respect to one argument."""

    def solve_for(self, name: str, **known: Any) -> NDArray[np.float64]:
        """Return every root of the equation in one argument."""

    def working(self, **inputs: Any) -> Working:
        """Return the equation with its inputs, constants and result filled in."""


#: Every equation by its dotted name, in order of definition.
EQUATIONS: dict[str, EquationFunction] = {}


class Working:
    """One evaluation written out: equation, inputs, constants, result, sources.

    ``str()`` gives plain text; notebooks show LaTeX.
    """

    #: Variable of a Dataset this working belongs to, where there is one.
    variable: str = ""

    def __init__(
        self,
        equation: EquationFunction,
        inputs: dict[str, Any],
        result: Any,
        text: str,
        latex: str,
        notes: tuple[str, ...] = (),
    ) -> None:
        self.equation, self.inputs, self.result = equation, inputs, result
        self._text, self._latex, self.notes = text, latex, notes

    def __str__(self) -> str:
        f = self.equation
        lines = [f"{f.name}: {f.result.long_name}", f"  {self._text}"]
        width = max([len(k) for k in [*self.inputs, *f.constants]], default=0)
        units = {a.name: a.quantity for a in f.arguments}
        for name, value in self.inputs.items():
            one = units.get(name)
            unit, meaning = (one.unit, one.long_name) if one else ("", "")
            shown = f"{value:.7g}" if isinstance(value, float) else str(value)
            lines.append(f"  {name:<{width}} = {shown} {_shown(unit)} ({meaning})".replace("  (", " ("))
        for name, constant in f.constants.items():
            lines.append(
                f"  {name:<{width}} = {float(constant):.10g} {_shown(constant.unit)} "
                f"({constant.meaning}; {constant.provenance})"
            )
        lines.append(f"  = {self.result:.7g} {_shown(f.result.unit)}".rstrip())
        lines.extend(f"  note: {note}" for note in self.notes)
        lines.extend(f"  source: {cite(key)}" for key in f.sources)
        known: dict[str, str] = f._spec.attributes_for(list(self.inputs.values()))  # type: ignore[attr-defined]
        lines.extend(f"  {key.replace('_', ' ')}: {text}" for key, text in known.items())
        return "\n".join(lines)

    __repr__ = __str__

    def _repr_latex_(self) -> str:
        unit = _tex_unit(self.equation.result.unit)
        return f"$\\displaystyle {self._latex} = {self.result:.6g}\\ \\mathrm{{{unit}}}$"


def _shown(unit: str) -> str:
    return "" if unit == "1" else unit


def _tex_unit(unit: str) -> str:
    return "" if unit == "1" else unit.replace("%", r"\%").replace("_", r"\_")


class Derivative:
    """Derivative of an equation with respect to one argument.

    Call it with the arguments of the equation; ``expression`` is the sympy form.
    """

    def __init__(
        self,
        of: EquationFunction,
        name: str,
        expression: Any,
        function: Callable[..., Any],
        latex: str = "",
    ) -> None:
        self.of, self.name, self.expression, self._function = of, name, expression, function
        self._tex = latex

    def __call__(self, *args: Any, **kwargs: Any) -> Any:
        values = _bind(self.of, args, kwargs)
        spec = Spec(
            name=f"derivative of {self.of.name}",
            arguments=self.of.arguments,
            result=self.of.result,
            scalar=self._function,
            array=self._function,
            provenance=self.of.provenance,
        )
        result = call(spec, values)
        if hasattr(result, "attrs"):
            wrt = next(a for a in self.of.arguments if a.name == self.name)
            unit = f"({self.of.result.unit})/({wrt.quantity.unit})"
            result.attrs = {"units": unit, "long_name": f"d({self.of.result.name})/d({self.name})"}
            if hasattr(result, "name"):
                result.name = f"d_{self.of.result.name}_d_{self.name}"
        return result

    def _sympy_(self) -> Any:
        return self.expression

    def latex(self) -> str:
        """Return the derivative in LaTeX."""
        return self._tex

    def _repr_latex_(self) -> str:
        return f"$\\displaystyle {self._tex}$"

    def __repr__(self) -> str:
        return f"d({self.of.name})/d({self.name}) = {self.expression}"


# ---------------------------------------------------------------------------------------------
# Binding one code object to other names


def _rebind(
    body: Any,
    names: Mapping[str, Any],
    constant: Callable[[Constant], Any],
    solved: Callable[[Any], Any],
    symbols: bool = False,
) -> Any:
    """Run the same code with other globals: functions, constants, bodies and inverses it calls."""
    if body.__closure__:
        raise NotTraceable(f"{body.__name__}: a body uses names of its module, not local ones")
    code = body.__code__
    space: dict[str, Any] = {"__builtins__": {}}
    for name in code.co_names:
        if name in names:
            space[name] = names[name]
            continue
        value = body.__globals__.get(name, _MISSING)
        if isinstance(value, Constant):
            space[name] = constant(value)
        elif getattr(value, "kind", None) == "formula" and not (symbols and value.stands):
            space[name] = _rebind(value._body, names, constant, solved, symbols)
        elif getattr(value, "kind", None) in ("formula", "inverse"):
            space[name] = solved(value)
        else:
            raise NotTraceable(
                f"{body.__name__} uses {name!r}: a body may use arithmetic, the closed list of "
                "gasphys.maths, constants, other formulas and inverses only"
            )
    code = code.replace(co_argcount=code.co_argcount + code.co_kwonlyargcount, co_kwonlyargcount=0)
    return types.FunctionType(code, space, body.__name__)


_MISSING = object()


def _is_light(body: Any) -> bool:
    """Whether a body is a few arithmetic operations and calls nothing."""
    names = [i.opname for i in dis.get_instructions(body)]
    return "CALL" not in names and names.count("BINARY_OP") <= 4


def _constants_of(body: Any) -> tuple[dict[str, Constant], list[str]]:
    """Return the constants of a body, and the provenance of formulas whose constants are theirs alone."""
    found: dict[str, Constant] = {}
    words: list[str] = []
    for name in body.__code__.co_names:
        value: Any = body.__globals__.get(name, _MISSING)
        if isinstance(value, Constant):
            found[value.name] = value
        elif getattr(value, "kind", None) in ("formula", "inverse"):
            words.append(value.provenance)
            if value.kind == "formula" and not value.stands:
                found.update(value.constants)
    return found, words


def _bind(f: EquationFunction, args: tuple[Any, ...], kwargs: dict[str, Any]) -> list[Any]:
    bound = inspect.Signature(
        [
            inspect.Parameter(
                a.name,
                inspect.Parameter.POSITIONAL_OR_KEYWORD,
                default=inspect.Parameter.empty if a.default is None else a.default,
            )
            for a in f.arguments
        ]
    ).bind(*args, **kwargs)
    bound.apply_defaults()
    return list(bound.arguments.values())


# ---------------------------------------------------------------------------------------------
# formula


def formula(
    *,
    result: str,
    quantities: Mapping[str, str] | None = None,
    valid: Mapping[str, Valid] | None = None,
    refuse: Mapping[str, tuple[float, float]] | None = None,
    source: tuple[str, ...] | str,
    provenance: str,
    check_result: bool = False,
    register: bool = True,
    labels: Mapping[str, str] | None = None,
    judged: Callable[[Mapping[str, Any]], dict[str, str]] | None = None,
    stands: bool = False,
) -> Callable[[Callable[..., Any]], EquationFunction]:
    """Make an equation of a body.

    Parameters
    ----------
    result : str
        Quantity of the result.
    quantities : mapping, optional
        Argument to quantity, where their names differ.
    valid : mapping, optional
        Argument to the range the equation was made for: outside it a warning, which says why if the
        reason stands third.
    refuse : mapping, optional
        Argument to the range outside which the equation gives no answer: an error.
    source : str or tuple of str
        Keys of ``sources.toml``.
    provenance : str
        How the equation itself is known; constants add their own.
    check_result : bool
        Report a result that is not possible for its quantity.
    register : bool
        Put it into the registry under its own name (formulas of a choice go under the choice's).
    labels : mapping, optional
        Further attributes of labelled results.
    judged : callable, optional
        Takes the inputs by name and returns the attributes that depend on them, "provenance"
        among them: which numbers are used may depend on which gases are present.
    stands : bool
        In equations that call this one it stands as a function by its own symbol, not written out
        and its constants not repeated; derivatives remain exact.

    Returns
    -------
    callable
        The decorator; the decorated function becomes the shell.

    Raises
    ------
    NotTraceable
        If the body uses a name that is not allowed.

    Examples
    --------
    >>> import gasphys as gp
    >>> gp.laws.boyle_volume.kind
    'formula'
    """
    keys = (source,) if isinstance(source, str) else tuple(source)

    def decorate(body: Callable[..., Any]) -> EquationFunction:
        arguments = _arguments(body, quantities or {}, valid or {}, refuse or {})
        constants, words = _constants_of(body)
        known = weakest([provenance, *words, *(c.provenance for c in constants.values())])
        raw = _rebind(body, ARRAY, float, lambda g: g.raw)
        spec = Spec(
            name=_dotted(body),
            arguments=arguments,
            result=quantity(result),
            scalar=_rebind(body, SCALAR, float, lambda g: g._spec.scalar),
            array=raw,
            provenance=known,
            references=_references(keys),
            check_result=check_result,
            light=_is_light(body),
            labels=dict(labels or {}),
            judged=judged,
        )
        f = _shell_function(body, spec)
        f.kind = "formula"
        f.stands = stands
        f._body = body
        _equip(f, spec, keys, constants, raw)
        f.symbolic = functools.partial(_symbolic, f)
        f.latex = functools.partial(_latex, f)
        f.derivative = functools.partial(_derivative, f)
        f.solve_for = functools.partial(_solve_for, f)
        f.working = functools.partial(_working, f)
        f.__doc__ = _docstring(body.__doc__ or "", f, body)
        if register:
            EQUATIONS[spec.name] = f
        return f  # type: ignore[no-any-return]

    return decorate


def _references(keys: tuple[str, ...]) -> str:
    return "; ".join(keys)


def _dotted(body: Any) -> str:
    return f"{_topic(body.__module__)}.{body.__name__.lstrip('_')}"


def _topic(module: str) -> str:
    """Return the module or package of gasphys an equation belongs to, whichever file it stands in."""
    return module.removeprefix("gasphys.").split(".")[0]


def _arguments(
    body: Any,
    names: Mapping[str, str],
    valid: Mapping[str, Valid],
    refuse: Mapping[str, tuple[float, float]],
) -> tuple[Argument, ...]:
    found = []
    for name, parameter in inspect.signature(body).parameters.items():
        default = parameter.default
        found.append(
            Argument(
                name=name,
                quantity=quantity(names.get(name, name)),
                default=None if default is inspect.Parameter.empty else float(default),
                valid=valid.get(name),
                refuse=refuse.get(name),
            )
        )
    return tuple(found)


def _equip(
    f: Any,
    spec: Spec,
    sources: tuple[str, ...],
    constants: dict[str, Constant],
    raw: Callable[..., Any],
) -> None:
    for key in sources:
        cite(key)
    assert spec.provenance in PROVENANCE
    f.name, f.arguments, f.result = spec.name, spec.arguments, spec.result
    f.provenance, f.sources, f.constants = spec.provenance, sources, constants
    f.raw, f._spec = raw, spec


def _shell_function(body: Any, spec: Spec) -> Any:
    """Write the function with the body's own signature; plain numbers in range take a short way."""
    names = [a.name for a in spec.arguments]
    tests = [f"{n}.__class__ is float" for n in names]
    tests += [f"{a.low!r} <= {a.name} <= {a.high!r}" for a in spec.arguments]
    tests.append("not _strict.active")
    low, high = spec.result.possible
    leave = "if _r.__class__ is float: return _r"
    if spec.check_result:
        leave = f"if _r.__class__ is float and {low!r} <= _r <= {high!r}: return _r"
    joined = ", ".join(names)
    text = (
        f"def {body.__name__}({_signature(body)}):\n"
        f"    if {' and '.join(tests)}:\n"
        f"        try:\n"
        f"            _r = _scalar({joined})\n"
        f"            {leave}\n"
        f"        except (ArithmeticError, ValueError, TypeError):\n"
        f"            pass\n"
        f"    return _call(_spec, ({joined},))\n"
    )
    space: dict[str, Any] = {
        "_scalar": spec.scalar,
        "_call": call,
        "_spec": spec,
        "_strict": STRICT,
        "ArithmeticError": ArithmeticError,
        "ValueError": ValueError,
        "TypeError": TypeError,
        "float": float,
        "inf": float("inf"),
    }
    exec(compile(text, f"<shell of {spec.name}>", "exec"), space)
    f = space[body.__name__]
    f.__module__, f.__qualname__ = body.__module__, body.__qualname__
    f.__annotations__ = dict(body.__annotations__)
    return f


def _signature(body: Any) -> str:
    parts, starred = [], False
    for name, parameter in inspect.signature(body).parameters.items():
        if parameter.kind is inspect.Parameter.KEYWORD_ONLY and not starred:
            parts.append("*")
            starred = True
        if parameter.default is inspect.Parameter.empty:
            parts.append(name)
        elif isinstance(parameter.default, str):
            parts.append(f"{name}={parameter.default!r}")
        else:
            parts.append(f"{name}={float(parameter.default)!r}")
    return ", ".join(parts)


# ---------------------------------------------------------------------------------------------
# The methods of a formula


#: Constants that stand as symbols in traced expressions; a derivative may bring those of an inverse.
_TRACED: dict[str, Constant] = {}


def _trace(f: Any) -> Any:
    """Return the traced expression with arguments and constants as symbols, once."""
    if not hasattr(f, "_expression"):
        import sympy as sp

        def symbol(constant: Constant) -> Any:
            _TRACED[constant.name] = constant
            return sp.Symbol(constant.name)

        body = _rebind(f._body, symbolic_names(), symbol, _stand_in, True)
        f._expression = sp.sympify(body(*[sp.Symbol(a.name) for a in f.arguments]))
    return f._expression


@functools.cache
def _stand_in(g: Any) -> Any:
    """Return an inverse, or a formula that stands for itself, as a function of sympy.

    Its derivatives are functions too, and exact: of the formula, or by the inverse's forward equation.
    """
    import sympy as sp

    symbols = [sp.Symbol(a.name) for a in g.arguments]

    class Called(sp.Function):  # type: ignore[misc]
        nargs = len(symbols)
        _imp_ = staticmethod(g.raw)  # what lambdify calls

        def fdiff(self, argindex: int = 1) -> Any:
            return _slope(g, symbols[argindex - 1].name)(*self.args)

        def _latex(self, printer: Any, exp: str = "") -> str:
            shown = [printer._print(v) for v, own in zip(self.args, symbols, strict=True) if v != own]
            return _raised(g.result.symbol, shown, exp)

        def _sympystr(self, printer: Any) -> str:
            return str(g.name.rsplit(".", 1)[-1])

    Called.__name__ = _identifier(g)
    return Called


@functools.cache
def _slope(g: Any, name: str) -> Any:
    """Return the derivative of an inverse, or of a formula that stands for itself, likewise."""
    import sympy as sp

    symbols = [sp.Symbol(a.name) for a in g.arguments]
    derivative = g.derivative(name)
    if derivative.expression == 0:
        return lambda *_: sp.Integer(0)

    class Slope(sp.Function):  # type: ignore[misc]
        nargs = len(g.arguments)
        _imp_ = staticmethod(derivative._function)

        def fdiff(self, argindex: int = 1) -> Any:
            raise NotTraceable(f"second derivatives of {g.name} are not traced")

        def _latex(self, printer: Any, exp: str = "") -> str:
            below = _argument(g, name).quantity.symbol
            if sum(a.quantity.symbol == below for a in g.arguments) > 1:
                below += rf"\,[\mathrm{{{name.replace('_', ' ')}}}]"
            shown = [printer._print(v) for v, own in zip(self.args, symbols, strict=True) if v != own]
            return _raised(rf"\frac{{\partial {g.result.symbol}}}{{\partial {below}}}", shown, exp)

        def _sympystr(self, printer: Any) -> str:
            return f"d({g.name.rsplit('.', 1)[-1]})/d({name})"

    Slope.__name__ = f"{_identifier(g)}_by_{name}"
    return Slope


def _identifier(g: Any) -> str:
    name = g.name if g.kind == "formula" else f"{g.name}_of_{g.forward.name}"
    return re.sub(r"\W", "_", name)


def _raised(symbol: str, shown: list[str], exp: str) -> str:
    text = symbol + (rf"\left({', '.join(shown)}\right)" if shown else "")
    return rf"\left({text}\right)^{{{exp}}}" if exp else text


def _symbolic(f: Any, *, numbers: bool = False) -> Any:
    """Return the traced expression; with `numbers` constants stand as their values."""
    expression = _trace(f)
    if numbers:
        import sympy as sp

        expression = expression.xreplace(
            {sp.Symbol(name): sp.Float(float(c), 17) for name, c in f.constants.items()}
        )
    return expression


def _symbol_names(f: Any) -> dict[Any, str]:
    import sympy as sp

    names = {sp.Symbol(a.name): a.quantity.symbol for a in f.arguments}
    names.update({sp.Symbol(name): c.symbol for name, c in {**_TRACED, **f.constants}.items()})
    return names


def _tidy(expression: Any) -> Any:
    """Write 37 for 37.0: whole numbers of a body are floats only to the computer."""
    import sympy as sp

    whole = {x: sp.Integer(int(x)) for x in expression.atoms(sp.Float) if float(x).is_integer()}
    return expression.xreplace(whole)


def _tex(f: Any, expression: Any, names: dict[Any, str] | None = None) -> str:
    import sympy as sp

    return str(
        sp.latex(
            _tidy(expression),
            symbol_names={**_symbol_names(f), **(names or {})},
            ln_notation=True,
            full_prec=False,
        )
    )


def _latex(f: Any, *, expand: bool = False) -> str:
    """Return ``result = expression`` in LaTeX, with the registry's symbols.

    Formulas that the body calls stand as their own symbols with a line each below; with `expand`
    everything is written into one line.
    """
    if expand:
        return _expanded(f)
    lines: list[str] = []
    taken = {f.result.symbol: f} | {a.quantity.symbol: a for a in f.arguments}
    _tex_lines(f, lines, f.result.symbol, taken)
    if len(lines) == 1:
        return lines[0]
    return r"\begin{aligned}" + r"\\ ".join(x.replace(" = ", " &= ", 1) for x in lines) + r"\end{aligned}"


def _expanded(f: Any) -> str:
    """Return the equation with every called formula written out, inverses with their arguments."""
    import sympy as sp

    body = _rebind(
        f._body,
        symbolic_names(),
        lambda c: sp.Symbol(c.name),
        lambda g: sp.Function(g.result.symbol),
    )
    expression = sp.sympify(body(*[sp.Symbol(a.name) for a in f.arguments]))
    constants = {sp.Symbol(name): c.symbol for name, c in CONSTANTS.items()}
    return f"{f.result.symbol} = {_tex(f, expression, constants)}"


def _own_label(g: Any, label: str, taken: dict[str, Any], form: str) -> str:
    """Return a label for a called formula: with its name where something else has the same one."""
    if taken.setdefault(label, g) is g:
        return label
    named = form.format(label, str(g.name).rsplit(".", 1)[-1].replace("_", " "))
    taken.setdefault(named, g)
    return named


_TEX_LABEL = r"{}\,[\text{{{}}}]"
_TEXT_LABEL = "{}[{}]"


def _tex_lines(f: Any, lines: list[str], symbol: str, taken: dict[str, Any]) -> None:
    expression, called = _trace_nested(f)
    names = {}
    for stand_in, (g, count) in called.items():
        label = _own_label(g, g.result.symbol, taken, _TEX_LABEL)
        names[stand_in] = label + (rf"^{{({count})}}" if count > 1 else "")
    lines.append(f"{symbol} = {_tex(f, expression, names)}")
    for stand_in, (g, _) in called.items():
        if g.kind == "inverse":  # its forward equation, in which the root stands
            g = g.forward
            names[stand_in] = _own_label(g, g.result.symbol, taken, _TEX_LABEL)
        if not (g.stands or any(line.startswith(f"{names[stand_in]} = ") for line in lines)):
            _tex_lines(g, lines, names[stand_in], taken)


def _text_lines(f: Any, lines: list[str], label: str = "", taken: dict[str, Any] | None = None) -> list[str]:
    """Write the equation in plain text, formulas that it calls on lines of their own."""
    import sympy as sp

    label = label or f.result.name
    taken = {label: f} | {a.name: a for a in f.arguments} if taken is None else taken
    expression, called = _trace_nested(f)
    labels = {k: _own_label(g, g.result.name, taken, _TEXT_LABEL) for k, (g, _) in called.items()}
    names = {k: sp.Symbol(labels[k] + (f"_{n}" if n > 1 else "")) for k, (_, n) in called.items()}
    lines.append(f"{label} = {_tidy(expression).subs(names)}")
    for stand_in, (g, _) in called.items():
        if g.kind == "inverse":
            g = g.forward
            labels[stand_in] = _own_label(g, g.result.name, taken, _TEXT_LABEL)
        if not (g.stands or any(line.startswith(f"{labels[stand_in]} = ") for line in lines)):
            _text_lines(g, lines, labels[stand_in], taken)
    return lines


def _trace_nested(f: Any) -> tuple[Any, dict[Any, tuple[Any, int]]]:
    """Trace with every called formula standing as one symbol; return also which they are.

    A formula called twice with different inputs stands for two symbols, numbered.
    """
    import sympy as sp

    called: dict[Any, tuple[Any, int]] = {}
    by_inputs: dict[Any, Any] = {}

    def stand_in(g: Any) -> Callable[..., Any]:
        def answer(*args: Any) -> Any:
            key = (g.name, args)
            if key not in by_inputs:
                count = 1 + sum(v[0] is g for v in called.values())
                by_inputs[key] = sp.Symbol(f"_{g.name}_{count}")
                called[by_inputs[key]] = (g, count)
            return by_inputs[key]

        return answer

    code = f._body.__code__
    space: dict[str, Any] = {"__builtins__": {}}
    known = symbolic_names()
    for name in code.co_names:
        value = f._body.__globals__.get(name, _MISSING)
        if name in known:
            space[name] = known[name]
        elif isinstance(value, Constant):
            space[name] = sp.Symbol(value.name)
        else:
            space[name] = stand_in(value)
    code = code.replace(co_argcount=code.co_argcount + code.co_kwonlyargcount, co_kwonlyargcount=0)
    body = types.FunctionType(code, space, f._body.__name__)
    return sp.sympify(body(*[sp.Symbol(a.name) for a in f.arguments])), called


def _numeric(f: Any, expression: Any) -> Callable[..., Any]:
    import sympy as sp

    symbols = [sp.Symbol(a.name) for a in f.arguments]
    values = {sp.Symbol(name): sp.Float(float(c), 17) for name, c in {**_TRACED, **f.constants}.items()}
    expression = expression.xreplace(values)
    # As sympy prints them, numbers beside arrays would not broadcast.
    for switch, name in ((sp.Max, "maximum"), (sp.Min, "minimum")):
        pair = sp.Function(name)
        expression = expression.replace(switch, lambda *of, pair=pair: functools.reduce(pair, of))
    function = sp.lambdify(symbols, expression, modules=lambdify_names())

    def evaluate(*args: Any) -> Any:
        with np.errstate(all="ignore"):
            # Conditions of one shape: sympy joins them in a list.
            return function(*(np.broadcast_arrays(*args) if any(map(np.ndim, args)) else args))

    return evaluate


def _argument(f: Any, name: str) -> Argument:
    for argument in f.arguments:
        if argument.name == name:
            return argument  # type: ignore[no-any-return]
    raise unknown_name(f"argument of {f.name}", name, [a.name for a in f.arguments])


def _derivative(f: Any, name: str) -> Derivative:
    """Return the derivative with respect to one argument, as a function and as an expression."""
    import sympy as sp

    _argument(f, name)
    cache = f.__dict__.setdefault("_derivatives", {})
    if name not in cache:
        expression = _differentiate(_trace(f), sp.Symbol(name))
        right = _tex(f, expression)
        left = rf"\frac{{\partial {f.result.symbol}}}{{\partial {_argument(f, name).quantity.symbol}}}"
        cache[name] = Derivative(f, name, expression, _numeric(f, expression), f"{left} = {right}")
    return cache[name]  # type: ignore[no-any-return]


def _differentiate(expression: Any, x: Any) -> Any:
    """Differentiate; branch by branch where a clipped number is raised to a power.

    There the chain rule would multiply the slope zero of the clipped side by zero to a negative power.
    """
    import sympy as sp

    switches = (sp.Max, sp.Min, sp.Piecewise)
    clipped = any(
        p.base.has(*switches) and not (p.exp.is_Integer and p.exp > 0) for p in expression.atoms(sp.Pow)
    )
    if not clipped:
        return sp.diff(expression, x)
    branches = sp.piecewise_fold(expression.rewrite((sp.Max, sp.Min), sp.Piecewise))
    if not isinstance(branches, sp.Piecewise):
        return sp.diff(branches, x)

    def without(branch: Any) -> Any:
        return branch.replace(lambda e: e.is_Pow and e.base.is_zero, lambda e: sp.Integer(0))

    return sp.Piecewise(*[(sp.diff(without(b), x), condition) for b, condition in branches.args])


def _known(f: Any, name: str, known: dict[str, Any]) -> tuple[float, dict[str, float]]:
    """Split what `solve_for` was given into the result's value and the other arguments."""
    from gasphys.shell import number

    unknown = _argument(f, name)
    known = dict(known)
    short = f.name.rsplit(".", 1)[-1].split("[")[0]
    keys = [k for k in dict.fromkeys((f.result.name, short, "result")) if k in known and k != name]
    if len(keys) != 1 or any(a.name == keys[0] for a in f.arguments):
        raise TypeError(
            f"{f.name}.solve_for({name!r}) needs the result once, as {f.result.name}=, {short}= or result="
        )
    wanted = number(known.pop(keys[0]), Argument(f.result.name, f.result))
    if not np.isfinite(wanted):
        raise f.result.range_error(wanted)
    values = {}
    for argument in f.arguments:
        if argument.name == unknown.name:
            if argument.name in known:
                raise TypeError(f"{name} is the unknown; do not give it")
            continue
        if argument.name in known:
            values[argument.name] = number(known.pop(argument.name), argument)
            low, high = argument.possible
            if not low <= values[argument.name] <= high:
                raise argument.range_error(values[argument.name])
        elif argument.default is not None:
            values[argument.name] = argument.default
        else:
            raise TypeError(f"{f.name}.solve_for({name!r}) needs {argument.name}")
    if known:
        raise unknown_name(f"argument of {f.name}", next(iter(known)), [a.name for a in f.arguments])
    return wanted, values


def _closed_form(f: Any, name: str) -> Callable[..., Any] | None:
    """Return the roots in closed form where the unknown is polynomial of degree 1 or 2."""
    cache = f.__dict__.setdefault("_solutions", {})
    if name not in cache:
        import sympy as sp

        x, y = sp.Symbol(name), sp.Symbol("_wanted")
        cache[name] = None
        expression = _trace(f)
        if not expression.has(sp.Piecewise, sp.Min, sp.Max) and expression.has(x):
            coefficients = _coefficients(y - expression, x)
            if 2 <= len(coefficients) <= 3:
                inputs = [sp.Symbol(a.name) for a in f.arguments if a.name != name]
                values = {sp.Symbol(k): sp.Float(float(c), 17) for k, c in f.constants.items()}
                cache[name] = sp.lambdify(
                    [y, *inputs],
                    [c.xreplace(values) for c in coefficients],
                    modules=[lambdify_names()[0], "math"],
                )
    return cache[name]  # type: ignore[no-any-return]


def _coefficients(expression: Any, x: Any) -> list[Any]:
    """Return the coefficients of the polynomial in x whose roots are those of the expression, or none."""
    import sympy as sp

    if any(function.has(x) for function in expression.atoms(sp.Function)):
        return []
    slope = sp.diff(expression, x)
    if not slope.has(x):
        return [slope, expression.subs(x, 0)]
    bend = sp.diff(slope, x)
    if not bend.has(x):
        return [bend / 2, slope.subs(x, 0), expression.subs(x, 0)]
    numerator, _ = sp.fraction(sp.together(expression))
    return list(sp.Poly(numerator, x).all_coeffs()) if numerator.is_polynomial(x) else []


def _solve_for(f: Any, name: str, **known: Any) -> NDArray[np.float64]:
    """Return every value of one argument that gives the wanted result, in rising order."""
    wanted, values = _known(f, name, known)
    low, high = _argument(f, name).possible
    roots = (
        _roots_forward(f, name, wanted, values) if f.kind == "inverse" else _roots(f, name, wanted, values)
    )
    inside = sorted(r for r in roots if low <= r <= high)
    if not inside:
        raise _not_reachable(f, name, wanted, values, roots)
    return np.asarray(inside)


def _roots(f: Any, name: str, wanted: float, values: dict[str, float]) -> list[float]:
    coefficients = _closed_form(f, name) if f.kind == "formula" else None
    if coefficients is not None:
        try:
            found = coefficients(wanted, *values.values())
            roots = [float(r.real) for r in np.roots(found) if abs(r.imag) <= 1e-12 * abs(r)]
        except (ArithmeticError, ValueError):
            roots = []
        if roots:
            return roots
    return _scan(f, name, wanted, values)


def _roots_forward(f: Any, name: str, wanted: float, values: dict[str, float]) -> list[float]:
    """Return the roots of an inverse by its forward equation, which costs less than an inverse a step."""
    low, high = _argument(f.forward, f.unknown).possible
    if not low <= wanted <= high:
        return []
    given = f.arguments[0].name
    known = {
        a.name: wanted if a.name == f.unknown else values.get(a.name, np.nan) for a in f.forward.arguments
    }
    with np.errstate(all="ignore"):
        if name == given:
            found = [float(np.asarray(f.forward.raw(*map(np.float64, known.values()))))]
        else:
            del known[name]
            found = _roots(f.forward, name, values[given], known)

        def again(root: float) -> float:
            inputs = (root if a.name == name else values[a.name] for a in f.arguments)
            return float(np.asarray(f.raw(*map(np.float64, inputs))))

        # The inverse is one branch of the forward equation.
        return [root for root in found if abs(again(root) - wanted) <= 1e-6 * max(abs(wanted), 1e-12)]


def _ends(argument: Argument) -> NDArray[np.float64]:
    """Sample the possible and the usual range evenly, and evenly in the logarithm over decades."""
    low, high = argument.possible
    usual = argument.quantity.usual
    grid = np.union1d(np.linspace(low, high, 257), np.clip(np.linspace(*usual, 65), low, high))
    start = max(low, min(high * 1e-9, abs(usual[1]) * 1e-6))
    if 0.0 < start < high:
        grid = np.union1d(grid, np.geomspace(start, high, 400))
    return grid


def _scan(f: Any, name: str, wanted: float, values: dict[str, float]) -> list[float]:
    from scipy.optimize import brentq

    def difference(x: Any) -> Any:
        inputs = [x if a.name == name else values[a.name] for a in f.arguments]
        with np.errstate(all="ignore"):
            return np.asarray(f.raw(*inputs), dtype=float) - wanted

    def single(x: float) -> float:
        inputs = [x if a.name == name else values[a.name] for a in f.arguments]
        try:
            return float(f._spec.scalar(*inputs)) - wanted
        except (ArithmeticError, ValueError, TypeError):
            return float(difference(x))

    grid = _ends(_argument(f, name))
    level = np.broadcast_to(difference(grid), grid.shape)
    roots = [float(x) for x, d in zip(grid, level, strict=True) if d == 0.0]
    finite = np.isfinite(level)
    signs = np.where(finite, np.sign(np.where(finite, level, 0.0)), 0.0)
    for i in np.flatnonzero(signs[:-1] * signs[1:] < 0.0):
        close = 1e-16 * abs(grid[i + 1]) + 1e-300
        root = brentq(single, grid[i], grid[i + 1], xtol=close, rtol=1e-15)
        # A pole changes sign without a root.
        if abs(single(root)) <= 1e-6 * max(abs(level[i]), abs(level[i + 1]), 1e-12):
            roots.append(float(root))
    return roots


def _not_reachable(
    f: Any, name: str, wanted: float, values: dict[str, float], roots: list[float]
) -> NotReachableError:
    low, high = _argument(f, name).possible
    unit = _argument(f, name).quantity.unit
    inputs = [_ends(a) if a.name == name else values[a.name] for a in f.arguments]
    with np.errstate(all="ignore"):
        reached = np.asarray(f.raw(*inputs), dtype=float)
    reached = reached[np.isfinite(reached)]
    span = (
        f"over {low:g} to {high:g} {unit} the result spans {reached.min():g} to {reached.max():g}"
        if reached.size
        else "the result is not finite anywhere in the possible range"
    )
    text = f"no {name} gives {f.result.name} = {wanted:g} {f.result.unit}: {span} {f.result.unit}"
    if roots:
        text += f"; the formal solution {roots[0]:g} {unit} is outside the possible range"
    return NotReachableError(text)


def _working(f: Any, **inputs: Any) -> Working:
    """Return the evaluation written out for one set of numbers."""
    from gasphys.shell import number

    values = dict(zip([a.name for a in f.arguments], _bind(f, (), inputs), strict=True))
    plain = {n: number(v, _argument(f, n)) for n, v in values.items()}
    result = f(**plain)
    text = "\n  ".join(_text_lines(f, []))
    return Working(f, plain, result, text, _latex(f))


# ---------------------------------------------------------------------------------------------
# choice


def choice(
    *,
    option: str | tuple[str, ...],
    registry: Mapping[Any, Any],
    word: str = "",
    spread: Mapping[str, Callable[[Any], dict[str, Any]]] | None = None,
) -> Callable[[Callable[..., Any]], EquationFunction]:
    """Make an equation that picks a formula by name.

    Parameters
    ----------
    option : str or tuple of str
        The argument(s) whose value is the name.
    registry : mapping
        Name (or tuple of names) to equation: the one list there is.
    word : str
        What the name is called in errors (default: the option's name).
    spread : mapping, optional
        Argument to a function that turns it into several arguments of the formulas (a gas into
        its mole fractions).

    Returns
    -------
    callable
        The decorator. Of the decorated function only the signature and the docstring are used:
        it names every argument of every formula. A keyword that the picked formula does not use
        has no effect.

    Raises
    ------
    UnknownNameError
        When called with a name that is not in the registry.

    Examples
    --------
    >>> import gasphys as gp
    >>> gp.surroundings.pressure_at_depth.kind
    'choice'
    """
    options = (option,) if isinstance(option, str) else option
    return lambda body: _choice(body, options, registry, word, dict(spread or {}))


def _choice(
    body: Callable[..., Any],
    options: tuple[str, ...],
    registry: Mapping[Any, Any],
    word: str,
    spread: dict[str, Callable[[Any], dict[str, Any]]],
) -> EquationFunction:
    signature = inspect.signature(body)
    name = _dotted(body)
    members = list(dict.fromkeys(registry.values()))

    def pick(selected: tuple[Any, ...]) -> Any:
        key = selected[0] if len(options) == 1 else selected
        try:
            return registry[key]
        except (KeyError, TypeError):
            for n, (opt, given) in enumerate(zip(options, selected, strict=True)):
                valid = {k if len(options) == 1 else k[n] for k in registry}
                if not isinstance(given, str) or given not in valid:
                    raise unknown_name(word or opt, given, valid) from None
            raise unknown_name(word or " and ".join(options), key, registry) from None

    def split(args: tuple[Any, ...], kwargs: dict[str, Any]) -> tuple[Any, dict[str, Any]]:
        bound = signature.bind(*args, **kwargs)
        bound.apply_defaults()
        given = dict(bound.arguments)
        chosen = pick(tuple(given.pop(o) for o in options))
        for argument, function in spread.items():
            given.update(function(given.pop(argument)))
        return chosen, {a.name: given[a.name] for a in chosen.arguments}

    def selected_by(kwargs: dict[str, Any]) -> Any:
        return pick(tuple(kwargs.pop(o, signature.parameters[o].default) for o in options))

    g = _dispatcher(body, options, registry, pick, tuple(spread), split)
    g.__signature__, g.__annotations__ = signature, dict(body.__annotations__)
    arguments: dict[str, Argument] = {}
    for member in members:
        for argument in member.arguments:
            arguments.setdefault(argument.name, argument)
    first = [n for n in signature.parameters if n in arguments]
    g.arguments = tuple(arguments[n] for n in [*first, *(a for a in arguments if a not in first)])
    g.kind, g.name, g.result = "choice", name, members[0].result
    g.registry, g.options, g.spread, g.spread_by = registry, options, tuple(spread), spread
    g.provenance = weakest([m.provenance for m in members])
    g.sources = tuple(dict.fromkeys(k for m in members for k in m.sources))
    g.constants = {k: v for m in members for k, v in m.constants.items()}

    def raw(*args: Any, **kwargs: Any) -> Any:
        chosen, inputs = split(args, kwargs)
        return chosen.raw(*inputs.values())

    def via(method: str) -> Callable[..., Any]:
        def passed(*args: Any, **kwargs: Any) -> Any:
            chosen = selected_by(kwargs)
            for argument, function in spread.items():
                if argument in kwargs:
                    kwargs.update(function(kwargs.pop(argument)))
            keep = {a.name for a in chosen.arguments}
            unused = (set(signature.parameters) | set(arguments)) - keep
            return getattr(chosen, method)(*args, **{k: v for k, v in kwargs.items() if k not in unused})

        return passed

    g.raw = raw
    for method in ("symbolic", "latex", "derivative", "solve_for", "working"):
        setattr(g, method, via(method))
    g.pick = lambda **names: selected_by(names)
    g.__doc__ = _docstring(body.__doc__ or "", g, body)
    EQUATIONS[name] = g
    for key, member in registry.items():
        label = ",".join(map(str, key if isinstance(key, tuple) else (key,)))
        EQUATIONS.setdefault(f"{name}[{label}]", member)
    return g  # type: ignore[no-any-return]


def _dispatcher(
    body: Callable[..., Any],
    options: tuple[str, ...],
    registry: Mapping[Any, Any],
    pick: Callable[[tuple[Any, ...]], Any],
    spread: tuple[str, ...],
    split: Callable[[tuple[Any, ...], dict[str, Any]], tuple[Any, dict[str, Any]]],
) -> Any:
    """Write the function that looks the name up and passes on what the formula uses."""
    parameters = list(inspect.signature(body).parameters)
    passed = ", ".join(n for n in parameters if n not in options)
    space: dict[str, Any] = {"_pick": pick, "_split": split, "float": float, "inf": float("inf")}
    routes: dict[Any, Any] = {}
    if not spread:
        for number, (key, member) in enumerate(registry.items()):
            space[f"_member{number}"] = member
            inputs = ", ".join(f"{a.name}={a.name}" for a in member.arguments)
            routes[key] = eval(f"lambda {passed}: _member{number}({inputs})", space)
    key = options[0] if len(options) == 1 else f"({', '.join(options)})"
    chosen = f"({', '.join(options)},)"
    every = ", ".join(f"{n}={n}" for n in parameters)
    text = (
        f"def {body.__name__}({_signature(body)}):\n"
        f"    try:\n"
        f"        _route = _routes[{key}]\n"
        f"    except (KeyError, TypeError):\n"
        f"        _pick({chosen})\n"
        f"        _f, _inputs = _split((), dict({every}))\n"
        f"        return _f(**_inputs)\n"
        f"    return _route({passed})\n"
    )
    space |= {"_routes": routes, "KeyError": KeyError, "TypeError": TypeError, "dict": dict}
    exec(compile(text, f"<choice {body.__name__}>", "exec"), space)
    f = space[body.__name__]
    f.__module__, f.__qualname__ = body.__module__, body.__qualname__
    return f


# ---------------------------------------------------------------------------------------------
# inverse


def inverse(
    forward: EquationFunction,
    argument: str,
    *,
    name: str,
    module: str,
    doc: str,
    kernel: Callable[..., Any] | None = None,
    result: str = "",
    valid: Mapping[str, Valid] | None = None,
    given: str = "",
    register: bool = True,
) -> EquationFunction:
    """Declare the inverse of a formula in one argument.

    Parameters
    ----------
    forward : EquationFunction
        A formula, monotone in the argument.
    argument : str
        The argument to be found.
    name, module : str
        Name and module of the new function.
    doc : str
        Its docstring: summary, notes, example.
    kernel : callable, optional
        A fast vectorized inverse with the new function's arguments; without one the forward
        body's root is found by a bracketed search over the argument's possible range.
    result : str, optional
        Quantity of the result where it differs from the argument's.
    valid : mapping, optional
        Argument to validity range.
    given : str, optional
        Name of the argument that holds the forward result, where it differs from the quantity's.
    register : bool
        Put it into the registry.

    Returns
    -------
    EquationFunction
        Kind "inverse"; its derivative is exact, its working puts the root back.

    Raises
    ------
    UnknownNameError
        If the forward formula has no such argument.

    Examples
    --------
    >>> import gasphys as gp
    >>> gp.surroundings.depth_at_pressure.pick(water="msw").kind
    'inverse'
    """
    from gasphys.maths import find_root

    target = _argument(forward, argument)
    position = [a.name for a in forward.arguments].index(argument)
    others = [a for a in forward.arguments if a.name != argument]
    first = given or forward.result.name
    arguments = (Argument(first, forward.result, None, (valid or {}).get(first)), *others)

    def root(wanted: Any, *rest: Any) -> Any:
        low, high = target.possible

        def difference(x: Any) -> Any:
            inputs = [*rest[:position], x, *rest[position:]]
            return forward.raw(*inputs) - wanted

        shape = np.broadcast_shapes(*(np.shape(v) for v in (wanted, *rest)))
        found = find_root(difference, np.full(shape, low), np.full(shape, high))
        return found

    body = kernel or root

    def one_root(*values: Any) -> float:
        with np.errstate(all="ignore"):
            found = float(body(*[np.float64(v) for v in values]))
        if np.isnan(found):
            known = dict(zip([a.name for a in others], values[1:], strict=True))
            raise _not_reachable(forward, argument, values[0], known, [])
        return found

    spec = Spec(
        name=f"{_topic(module)}.{name}",
        arguments=arguments,
        result=quantity(result) if result else target.quantity,
        scalar=one_root,
        array=body,
        provenance=forward.provenance,
        references=_references(forward.sources),
        labels=forward._spec.labels,  # type: ignore[attr-defined]
        judged=forward._spec.judged,  # type: ignore[attr-defined]
        target=target,
        forward=forward.name,
    )
    parameters = [
        inspect.Parameter(
            a.name,
            inspect.Parameter.POSITIONAL_OR_KEYWORD,
            default=inspect.Parameter.empty if a.default is None else a.default,
        )
        for a in arguments
    ]
    signature = inspect.Signature(parameters)

    def f(*args: Any, **kwargs: Any) -> Any:
        bound = signature.bind(*args, **kwargs)
        bound.apply_defaults()
        return call(spec, tuple(bound.arguments.values()))

    g: Any = f
    g.__name__ = g.__qualname__ = name
    g.__module__ = module
    g.__signature__ = signature
    g.kind, g.forward, g.unknown = "inverse", forward, argument
    _equip(g, spec, forward.sources, forward.constants, body)

    def not_traceable(*_: Any, **__: Any) -> Any:
        raise NotTraceable(f"{spec.name} is an inverse without a closed form; trace {forward.name} instead")

    def put_back(values: list[Any], found: Any) -> list[Any]:
        rest = values[1:]
        return [*rest[:position], found, *rest[position:]]

    def derivative(wrt: str) -> Derivative:
        _argument(g, wrt)
        slope = forward.derivative(argument)._function

        def evaluate(*values: Any) -> Any:
            with np.errstate(all="ignore"):
                found = body(*values)
                inputs = put_back(list(values), found)
                if wrt == first:
                    return 1.0 / slope(*inputs)
                return -forward.derivative(wrt)._function(*inputs) / slope(*inputs)

        return Derivative(g, wrt, None, evaluate, "")

    def working(**inputs: Any) -> Working:
        from gasphys.shell import number

        values = _bind(g, (), inputs)
        plain = {a.name: number(v, a) for a, v in zip(arguments, values, strict=True)}
        found = f(**plain)
        back = put_back(list(plain.values()), found)
        check = float(np.asarray(forward.raw(*back)))
        note = f"put back into {forward.name}: {forward.result.name} = {check:.7g} {forward.result.unit}"
        text = f"{argument} such that {forward.result.name} = {forward.name}(...)"
        tex = forward.latex() if forward.kind == "formula" else ""
        return Working(g, plain, found, text, tex, (note,))

    g.symbolic = g.latex = not_traceable
    g.derivative, g.working = derivative, working
    g.solve_for = functools.partial(_solve_for, g)
    g.__doc__ = _docstring(doc, g, None)
    if register:
        EQUATIONS[spec.name] = g
    return g  # type: ignore[no-any-return]


# ---------------------------------------------------------------------------------------------
# table


def table(
    *,
    result: str,
    quantities: Mapping[str, str] | None = None,
    valid: Mapping[str, Valid] | None = None,
    refuse: Mapping[str, tuple[float, float]] | None = None,
    source: tuple[str, ...] | str,
    provenance: str,
    array: Callable[..., Any],
    slope: Callable[..., Callable[..., Any]],
    explain: Callable[..., str],
    register: bool = True,
    name: str = "",
) -> Callable[[Callable[..., Any]], EquationFunction]:
    """Make an equation that reads a table: nodes and a rule.

    Parameters
    ----------
    result, quantities, valid, refuse, source, provenance, register
        As for :func:`formula`.
    array : callable
        Vectorized evaluation.
    slope : callable
        Takes the argument's name, returns the vectorized derivative; at a jump that raises.
    explain : callable
        Returns the line of text that shows which rows were read.
    name : str
        Registry name where it differs from the body's.

    Returns
    -------
    callable
        The decorator; only the signature and docstring of the decorated function are used. The
        result has kind "table" and no symbolic form.

    Raises
    ------
    NotTraceable
        From ``symbolic`` and ``latex``.

    Examples
    --------
    >>> import gasphys as gp
    >>> gp.doses.noaa_cns_fraction.pick(rule="step", total="single").kind
    'table'
    """
    keys = (source,) if isinstance(source, str) else tuple(source)

    def decorate(body: Callable[..., Any]) -> EquationFunction:
        spec = Spec(
            name=name or _dotted(body),
            arguments=_arguments(body, quantities or {}, valid or {}, refuse or {}),
            result=quantity(result),
            scalar=lambda *v: float(np.asarray(array(*v))),
            array=array,
            provenance=provenance,
            references=_references(keys),
        )
        f = _shell_function(body, spec)
        f.kind = "table"
        _equip(f, spec, keys, {}, array)

        def not_traceable(*_: Any, **__: Any) -> Any:
            raise NotTraceable(f"{spec.name} reads a table; it has no closed form to trace")

        def derivative(wrt: str) -> Derivative:
            _argument(f, wrt)
            return Derivative(f, wrt, None, slope(wrt), "")

        def working(**inputs: Any) -> Working:
            from gasphys.shell import number

            values = _bind(f, (), inputs)
            plain = {a.name: number(v, a) for a, v in zip(spec.arguments, values, strict=True)}
            return Working(f, plain, f(**plain), explain(**plain), "", ())

        f.symbolic = f.latex = not_traceable
        f.derivative, f.working = derivative, working
        f.solve_for = functools.partial(_solve_for, f)
        f.__doc__ = _docstring(body.__doc__ or "", f, body)
        if register:
            EQUATIONS[spec.name] = f
        return f  # type: ignore[no-any-return]

    return decorate


# ---------------------------------------------------------------------------------------------
# Docstrings: the registry fills in what it knows

_SECTION = re.compile(r"^(\w[\w ]*)\n-{3,}\n", re.MULTILINE)


def _docstring(text: str, f: Any, body: Any) -> str:
    """Compose the numpydoc docstring from the body's own text and the registry."""
    text = inspect.cleandoc(text)
    pieces = _SECTION.split(text)
    head, own = pieces[0].strip(), dict(zip(pieces[1::2], pieces[2::2], strict=True))
    out = [head, "", "Parameters", "----------"]
    by_name = {a.name: a for a in f.arguments}
    names = list(inspect.signature(body).parameters) if body is not None else list(by_name)
    for name in names:
        argument = by_name.get(name)
        if name in getattr(f, "spread", ()):
            out += _first_parameter(f.spread_by[name])
            continue
        if argument is None:
            valid = sorted(str(v) for v in _option_values(f, name))
            default = inspect.signature(body).parameters[name].default
            or_else = "" if default is inspect.Parameter.empty else f", default {default!r}"
            out.append(f"{name} : {{{', '.join(repr(v) for v in valid)}}}{or_else}")
            out.append("    Name of the formula used.")
            continue
        one = argument.quantity
        kind = "array_like" if argument.default is None else f"array_like, default {argument.default:.6g}"
        out.append(f"{name} : {kind}")
        text = f"{one.long_name[0].upper()}{one.long_name[1:]} [{one.unit}]. {one.meaning}"
        if argument.valid is not None:
            text += f" Valid {argument.low:g} to {argument.high:g} {one.unit}."
        out.append(f"    {text}")
    one = f.result
    out += ["", "Returns", "-------", "float, array, Series or DataArray"]
    out.append(f"    {one.long_name[0].upper()}{one.long_name[1:]} [{one.unit}], broadcast over the inputs.")
    out += ["", "Raises", "------", "RangeError"]
    out.append("    If one number is not possible for its quantity; in arrays that element is NaN.")
    out += ["UnitError", "    If a unit is missing, unknown or of another kind."]
    out += [
        "",
        "Warns",
        "-----",
        "ValidityWarning",
        "    Outside the validity range, see :func:`gasphys.validity`.",
    ]
    if "Notes" in own:
        out += ["", "Notes", "-----", own["Notes"].strip()]
        out += ["", f"Provenance: {f.provenance}."]
    else:
        out += ["", "Notes", "-----", f"Provenance: {f.provenance}."]
    out += ["", "References", "----------"]
    out += [f".. [{n}] {cite(key)}" for n, key in enumerate(f.sources, start=1)]
    if "Examples" in own:
        out += ["", "Examples", "--------", own["Examples"].strip()]
    return "\n".join(out) + "\n"


def _first_parameter(function: Callable[..., Any]) -> list[str]:
    """Return the entry of a function's first parameter from its docstring."""
    text = inspect.cleandoc(function.__doc__ or "")
    match = re.search(r"Parameters\n-+\n(\S.*\n(?: +\S.*(?:\n|$))+)", text)
    return match[1].splitlines() if match else []


def _option_values(f: Any, name: str) -> set[Any]:
    place = f.options.index(name)
    return {k if len(f.options) == 1 else k[place] for k in f.registry}
