"""Parameter sets of dissolved-gas models: one file a publication, and the reader of them.

A file says what the numbers are for: gases, start, convention for vapor, CO2, exchange ratio and the
nitrogen of air, source unit, when the limit is tested, what is refused, what is not claimed, how each
number is known, and sums that a mistyped digit would break. A user's own file has the same format.
"""

from __future__ import annotations

import functools
import hashlib
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.errors import GasphysError, InputFileError, UnitError, UnknownNameError, unknown_name
from gasphys.gas import FORMULAS
from gasphys.policy import PROVENANCE, weakest
from gasphys.sources import cite, sources
from gasphys.tissues.equations import intercept_from_surfacing
from gasphys.toml_files import parse_toml, read_text
from gasphys.units import convert, parse_quantity, unit

__all__ = ["TissueSet", "load", "models"]

Array = NDArray[np.float64]

#: Ways to write a limit: what a gas of a compartment must give, and whether it is a pressure.
FORMS: dict[str, dict[str, bool]] = {
    "a_b": {"a": True, "b": False},
    "surfacing_slope": {"surfacing": True, "slope": False},
    "surfacing": {"surfacing": True},
    "ratio": {"ratio": False},
    "ratio_offset": {"ratio": False, "offset": True},
}

#: Kinds of kinetics, conventions for what reaches the tissue, and rules for two gases.
KINETICS = ("exponential", "exponential_linear", "serial")
ALVEOLAR = ("schreiner", "thalmann", "ambient")
MIXED = ("weighted", "smallest")
TESTED = ("before_leaving", "on_arrival")

_TEXTS = ("title", "edition", "source", "depth", "refuses", "does_not_claim")
_TOP: dict[str, type | tuple[type, ...]] = {
    **dict.fromkeys(_TEXTS, str),
    "evidence": str,
    "references": list,
    "based_on": str,
    "kinetics": str,
    "inert_gases": list,
    "counted_as": dict,
    "air_only": bool,
    "unit": str,
    "default_compartments": list,
    "never_together": list,
    "mixed_gas": str,
    "ordered": bool,
    "highest_pressure": (int, float),
    "deepest": (int, float),
    "convention": dict,
    "start": dict,
    "limit": dict,
    "short_deep": dict,
    "integrity": dict,
    "compartment": dict,
    "variant": dict,
}
#: Numbers of the convention: whether they are pressures, and their default.
_CONVENTION: dict[str, tuple[bool, float]] = {
    "water_vapor_pressure": (True, 0.0),
    "respiratory_exchange_ratio": (False, 1.0),
    "arterial_pco2": (True, 0.0),
    "air_nitrogen": (False, 0.79),
    "venous_po2": (True, 0.0),
    "venous_pco2": (True, 0.0),
    "gas_phase_overpressure": (True, 0.0),
    "flow_coefficient": (False, 0.0),
    "flow_offset": (True, 0.0),
}


@dataclass(frozen=True)
class ShortDeep:
    """Range in which a set has no trustworthy limit: short and deep.

    Parameters
    ----------
    depth : float
        Depth from which it holds, as pressure above the surface [kPa].
    bottom_time : float
        Longest bottom time it holds for [min].
    action : {"refuse", "flag"}
        What is done about it.
    reason : str
        Why.
    """

    depth: float
    bottom_time: float
    action: str
    reason: str


@dataclass(frozen=True, eq=False, repr=False)
class TissueSet:
    """One parameter set, in kPa and minutes, ready for the kernels.

    Parameters
    ----------
    name, title, edition, source, depth, refuses, does_not_claim : str
        Name and texts of the file; ``source`` is a key of ``sources.toml`` or free text.
    evidence : str
        What trials say for or against the set; "" where nothing is known here.
    references : tuple of str
        The source, and those of the evidence.
    kinetics : {"exponential", "exponential_linear", "serial"}
        How tissues take up and give off.
    inert_gases : tuple of str
        Gases tracked, or ``("total",)``.
    counted_as : dict
        Gas to the tracked gas it is counted with.
    air_only : bool
        Whether any breathing gas but air is refused.
    compartments : tuple of str
        Names of the compartments in use.
    half_time : array
        ``(compartment, inert_gas)`` [min]; NaN where there is none.
    a, b : array
        ``(compartment, inert_gas)``, M = a + P/b [kPa, 1]; NaN without a limit, b infinite where only a
        surfacing value is known.
    surfacing_only : bool
        Whether the limits hold at the surface only.
    mixed_gas : {"weighted", "smallest"}
        Rule for a compartment with several gases.
    alveolar : {"schreiner", "thalmann", "ambient"}
        Convention for what reaches the tissues.
    convention : dict
        Its numbers [kPa, 1, min].
    start, on_the_way : str
        Start state; how the limit is kept between stops.
    tested : tuple of str
        When the limit is tested: "before_leaving", "on_arrival".
    highest_pressure, deepest : float
        Validity: absolute pressure and pressure above the surface [kPa]; infinite where not said.
    short_deep : ShortDeep or None
        Short deep range without a trustworthy limit.
    provenance_of : dict
        Weakest provenance of the numbers of each gas, the convention included.
    digest : str
        First 12 digits of the SHA-256 of the files read.
    variant : str
        Variant applied; "" for none.
    """

    name: str
    title: str
    edition: str
    source: str
    depth: str
    refuses: str
    does_not_claim: str
    evidence: str
    references: tuple[str, ...]
    kinetics: str
    inert_gases: tuple[str, ...]
    counted_as: Mapping[str, str]
    air_only: bool
    compartments: tuple[str, ...]
    half_time: Array
    a: Array
    b: Array
    surfacing_only: bool
    mixed_gas: str
    alveolar: str
    convention: Mapping[str, float]
    start: str
    on_the_way: str
    tested: tuple[str, ...]
    highest_pressure: float
    deepest: float
    short_deep: ShortDeep | None
    provenance_of: Mapping[str, str]
    digest: str
    variant: str = ""

    @property
    def limited(self) -> bool:
        """Whether any compartment has a limit."""
        return not bool(np.isnan(self.a).all())

    def formulas_of(self, gas: str) -> tuple[str, ...]:
        """Return the breathing gases counted into a tracked one.

        Parameters
        ----------
        gas : str
            One of :attr:`inert_gases`.

        Returns
        -------
        tuple of str
            Formulas, the gas itself first.

        Examples
        --------
        >>> load("workman_1965").formulas_of("N2")
        ('N2', 'Ar')
        """
        return (gas, *(k for k, v in self.counted_as.items() if v == gas))

    def accepted(self) -> tuple[str, ...]:
        """Return the formulas of the breathing gases the set takes.

        Returns
        -------
        tuple of str
            O2 and CO2 among them.

        Examples
        --------
        >>> load("buhlmann_1983").accepted()
        ('O2', 'N2', 'Ar', 'CO2')
        """
        own = {f for gas in self.inert_gases for f in self.formulas_of(gas)}
        if "total" in self.inert_gases:
            own |= {"N2", "Ar"}
        return tuple(f for f in FORMULAS if f in own or f in ("O2", "CO2"))

    def __repr__(self) -> str:
        return (
            f"<TissueSet {self.name}: {len(self.compartments)} compartments, {', '.join(self.inert_gases)}>"
        )

    def __str__(self) -> str:
        reference = cite(self.source) if self.source in sources() else self.source
        words = {
            "gases": ", ".join(self.inert_gases) + ("; air only" if self.air_only else ""),
            "compartments": ", ".join(self.compartments),
            "kinetics": self.kinetics.replace("_", "-"),
            "start": self.start,
            "depth": self.depth,
            "limit tested": " and ".join(t.replace("_", " ") for t in self.tested) or "never: there is none",
            "on the way": self.on_the_way,
            "refuses": self.refuses,
            "does not claim": self.does_not_claim,
            **({"evidence": self.evidence} if self.evidence else {}),
            "provenance": "; ".join(f"{k}: {v}" for k, v in self.provenance_of.items()),
            "source": reference,
            "file": self.digest,
        }
        variant = f", variant {self.variant}" if self.variant else ""
        return "\n".join(
            [f"{self.name}{variant}: {self.title} ({self.edition})"]
            + [f"  {k}: {v}" for k, v in words.items()]
        )


# -- Names and files ------------------------------------------------------------------------------


def models() -> tuple[str, ...]:
    """Return the names of the shipped parameter sets.

    Returns
    -------
    tuple of str
        Each is a file beside the code; a path to a file of the same format may stand wherever a name does.

    Examples
    --------
    >>> "buhlmann_1995_c" in models()
    True
    """
    return tuple(_shipped())


@functools.cache
def _shipped() -> dict[str, str]:
    """Name to text of every file beside this one: the registry."""
    folder = resources.files("gasphys.tissues")
    found = {e.name.removesuffix(".toml"): e for e in folder.iterdir() if e.name.endswith(".toml")}
    return {name: found[name].read_text(encoding="utf-8") for name in sorted(found)}


def load(
    model: str | os.PathLike[str] | TissueSet,
    *,
    compartments: Sequence[str] | None = None,
    variant: str = "",
) -> TissueSet:
    """Read a parameter set.

    Parameters
    ----------
    model : str, path or TissueSet
        A name of :func:`models`, the path of a file of the same format (ending in ``.toml``), or a set.
    compartments : sequence of str, optional
        Names of the compartments to use, where not the set's own choice: ``"1b"`` in place of ``"1"``.
    variant : str
        A variant the file offers, such as ``"b4_formula"``.

    Returns
    -------
    TissueSet
        In kPa and minutes; ``str()`` tells everything the file says.

    Raises
    ------
    UnknownNameError
        If there is no such set, compartment or variant.
    InputFileError
        With file and key, for a file that cannot be read as meant or whose sums do not agree.

    Examples
    --------
    >>> load("buhlmann_1995_a").compartments[:3]
    ('1', '2', '3')
    >>> load("buhlmann_1995_a", compartments=["1b", "2"]).half_time[0].tolist()
    [5.0, 1.88]
    """
    if isinstance(model, TissueSet):
        if compartments is None and not variant:
            return model
        raise UnknownNameError("compartments and variant are chosen when a set is read: give its name")
    chosen = None if compartments is None else tuple(str(c) for c in compartments)
    path = os.fspath(model)
    if not path.endswith(".toml"):
        if path not in _shipped():
            raise unknown_name("tissue model", path, _shipped())
        return _load_shipped(path, chosen, variant)
    return _Reader(Path(path).stem, read_text(path), path, shipped=False).read(chosen, variant)


@functools.lru_cache(maxsize=64)
def _load_shipped(name: str, compartments: tuple[str, ...] | None, variant: str) -> TissueSet:
    reader = _Reader(name, _shipped()[name], f"gasphys/tissues/{name}.toml", shipped=True)
    return reader.read(compartments, variant)


# -- Reading --------------------------------------------------------------------------------------


def _merged(base: Mapping[str, Any], change: Mapping[str, Any]) -> dict[str, Any]:
    """Lay one table over another, table by table."""
    out = dict(base)
    for key, value in change.items():
        old = out.get(key)
        out[key] = _merged(old, value) if isinstance(old, Mapping) and isinstance(value, Mapping) else value
    return out


class _Reader:
    """Reads one file; every complaint names the file, the key and where it stands."""

    def __init__(self, name: str, text: str, path: str, shipped: bool) -> None:
        self.name, self.path, self.shipped = name, path, shipped
        self.texts = [text]
        self.file = parse_toml(text, path, "write TOML as in the shipped sets")
        data: dict[str, Any] = dict(self.file.data)
        if "based_on" in data:
            base = data.pop("based_on")
            if base not in _shipped():
                raise self.refuse("based_on", str(unknown_name("tissue model", base, _shipped())))
            below = _Reader(base, _shipped()[base], f"gasphys/tissues/{base}.toml", shipped=True)
            self.texts += below.texts
            inherited = below.data
            if not shipped:  # a changed number breaks the sums of the set it changes
                inherited = {k: v for k, v in inherited.items() if k != "integrity"}
            data = _merged(inherited, data)
        self.data: dict[str, Any] = data

    def refuse(self, key: str, message: str, remedy: str = "") -> InputFileError:
        """Return the error for one key, with its place where it can be found."""
        return self.file.error(f"{key}: {message}", remedy or f"correct {key}", key=key.rsplit(".", 1)[-1])

    def read(self, wanted: tuple[str, ...] | None, variant: str) -> TissueSet:
        data = self.data
        variants = data.pop("variant", {})
        if variant:
            if variant not in variants:
                raise unknown_name(f"variant of {self.name}", variant, variants)
            data = _merged(data, {k: v for k, v in variants[variant].items() if k != "note"})
        self._check_top(data)
        names = tuple(data["compartment"])
        gases = tuple(data["inert_gases"])
        form = data["limit"].get("form", "")
        half_time, a, b, provenance = self._compartments(data, names, gases, form)
        self._check_integrity(data, names, gases)
        convention, alveolar = self._convention(data)
        if data.get("ordered", False):
            self._check_order(names, half_time, a, b)
        chosen = self._chosen(data, names, wanted)
        rows = [names.index(c) for c in chosen]
        provenance_of = {
            g: weakest([provenance[g][i] for i in rows] + [data["convention"]["provenance"]]) for g in gases
        }
        surfacing_only = form == "surfacing"
        return TissueSet(
            name=self.name,
            **{k: str(data.get(k, "")) for k in (*_TEXTS, "evidence")},
            references=(str(data["source"]), *(str(r) for r in data.get("references", ()))),
            kinetics=data["kinetics"],
            inert_gases=gases,
            counted_as=dict(data.get("counted_as", {})),
            air_only=bool(data.get("air_only", False)),
            compartments=chosen,
            half_time=_frozen(half_time[rows]),
            a=_frozen(a[rows]),
            b=_frozen(b[rows]),
            surfacing_only=surfacing_only,
            mixed_gas=data.get("mixed_gas", "weighted"),
            alveolar=alveolar,
            convention=convention,
            start=str(data["start"]["state"]),
            on_the_way=str(data["limit"].get("on_the_way", "")),
            tested=tuple(data["limit"].get("tested", ())),
            highest_pressure=self._pressure(
                data, "highest_pressure", data.get("highest_pressure", float("inf"))
            ),
            deepest=self._pressure(data, "deepest", data.get("deepest", float("inf"))),
            short_deep=self._short_deep(data),
            provenance_of=provenance_of,
            digest=hashlib.sha256("\0".join(self.texts).encode()).hexdigest()[:12],
            variant=variant,
        )

    def _check_top(self, data: dict[str, Any]) -> None:
        for key, value in data.items():
            if key not in _TOP:
                raise self.refuse(key, str(unknown_name("entry of a tissue set", key, _TOP)))
            if not isinstance(value, _TOP[key]) or (isinstance(value, bool) and _TOP[key] is not bool):
                raise self.refuse(key, f"{value!r} is of the wrong kind")
        needed = (*_TEXTS, "kinetics", "inert_gases", "unit", "convention", "start", "limit", "compartment")
        for key in needed:
            if key not in data:
                raise self.refuse(key, "is missing", f"add {key} = ...")
        for key, valid, given in (
            ("kinetics", KINETICS, data["kinetics"]),
            ("mixed_gas", MIXED, data.get("mixed_gas", "weighted")),
            ("convention.alveolar", ALVEOLAR, data["convention"].get("alveolar")),
            *(("limit.tested", TESTED, t) for t in data["limit"].get("tested", ())),
            *([("limit.form", FORMS, data["limit"]["form"])] if "form" in data["limit"] else []),
        ):
            if given not in valid:
                raise self.refuse(key, str(unknown_name(key, given, valid)))
        if "state" not in data["start"]:
            raise self.refuse("start.state", "is missing", "say what the tissues hold at the start")
        if not data["inert_gases"] or not data["compartment"]:
            raise self.refuse("compartment", "there is none", "add at least one gas and one compartment")
        inert = [g for g in FORMULAS if g not in ("O2", "CO2")]
        for gas in (*data["inert_gases"], *data.get("counted_as", {})):
            if gas not in inert and not (gas == "total" and data["inert_gases"] == ["total"]):
                raise self.refuse("inert_gases", str(unknown_name("inert gas", gas, [*inert, "total"])))
        for gas in data.get("counted_as", {}).values():
            if gas not in data["inert_gases"]:
                raise self.refuse(
                    "counted_as", str(unknown_name("inert gas of this set", gas, data["inert_gases"]))
                )
        total, ambient = data["inert_gases"] == ["total"], data["convention"]["alveolar"] == "ambient"
        if total != ambient or (total and not data.get("air_only", False)):
            raise self.refuse("inert_gases", "'total', alveolar = 'ambient' and air_only = true go together")
        linear = data["kinetics"] == "exponential_linear"
        if linear != (data["convention"]["alveolar"] == "thalmann"):
            raise self.refuse(
                "convention.alveolar", "exponential_linear and alveolar = 'thalmann' go together"
            )
        if linear and len(data["inert_gases"]) != 1:
            raise self.refuse("inert_gases", "exponential_linear tracks one gas")
        if data["kinetics"] == "serial" and not ambient:
            raise self.refuse("kinetics", "serial compartments are driven by the ambient pressure")
        if not self.shipped:
            return
        for key in (data["source"], *data.get("references", ())):
            if key not in sources():
                raise self.refuse("source", f"unknown source {key!r}", "add it to sources.toml")
        if "integrity" not in data:
            raise self.refuse("integrity", "is missing", "give the count and the sums")

    def _pressure(self, data: dict[str, Any], key: str, value: Any) -> float:
        """Return a pressure of the file in kPa; a number is in the file's unit, a text has its own."""
        name = data["unit"]
        try:
            if isinstance(value, str):
                value, name = parse_quantity(value)
            if not unit(name).is_like(unit("kPa")):
                raise UnitError(f"{name!r} is not a unit of pressure")
            return float(convert(float(value), name, "kPa"))
        except (GasphysError, TypeError, ValueError) as error:
            raise self.refuse(key, str(error)) from None

    def _convention(self, data: dict[str, Any]) -> tuple[dict[str, float], str]:
        given = dict(data["convention"])
        alveolar = given.pop("alveolar")
        if given.pop("provenance", None) not in PROVENANCE:
            raise self.refuse("convention.provenance", f"say how it is known: {', '.join(PROVENANCE)}")
        numbers = {}
        for key, (is_pressure, default) in _CONVENTION.items():
            value = given.pop(key, default)
            numbers[key] = self._pressure(data, f"convention.{key}", value) if is_pressure else float(value)
        if given:
            key = next(iter(given))
            raise self.refuse(key, str(unknown_name("entry of the convention", key, _CONVENTION)))
        # Slip flow is written per source unit of pressure.
        numbers["flow_coefficient"] /= self._pressure(data, "unit", 1.0)
        if not 0.0 < numbers["respiratory_exchange_ratio"] <= 2.0 or not 0.0 < numbers["air_nitrogen"] < 1.0:
            raise self.refuse("convention", "the exchange ratio or the nitrogen of air is not possible")
        return numbers, alveolar

    def _compartments(
        self, data: dict[str, Any], names: tuple[str, ...], gases: tuple[str, ...], form: str
    ) -> tuple[Array, Array, Array, dict[str, list[str]]]:
        shape = (len(names), len(gases))
        half_time, a, b = np.full(shape, np.nan), np.full(shape, np.nan), np.full(shape, np.nan)
        provenance: dict[str, list[str]] = {g: [] for g in gases}
        needs = FORMS.get(form, {})
        surface = self._pressure(data, "limit.surface_pressure", data["limit"].get("surface_pressure", 0.0))
        for i, name in enumerate(names):
            row = data["compartment"][name]
            for gas in row:
                if gas not in gases:
                    where = f"compartment.{name}"
                    raise self.refuse(where, str(unknown_name("inert gas of this set", gas, gases)))
            for j, gas in enumerate(gases):
                at = f"compartment.{name}.{gas}"
                if gas not in row:
                    raise self.refuse(at, "is missing", f"add {gas} = {{ ... }}")
                one = dict(row[gas])
                known = one.pop("provenance", None)
                if known not in PROVENANCE:
                    raise self.refuse(f"{at}.provenance", f"say how it is known: {', '.join(PROVENANCE)}")
                provenance[gas].append(known)
                if data["kinetics"] != "serial":
                    half_time[i, j] = self._number(one, at, "half_time")
                if one and set(one) - set(needs):
                    wrong = next(k for k in one if k not in needs)
                    raise self.refuse(
                        at, str(unknown_name("entry of a compartment", wrong, ["half_time", *needs]))
                    )
                if one:
                    numbers = {k: self._number(one, at, k, positive=k not in ("a", "offset")) for k in needs}
                    for k, is_pressure in needs.items():
                        if is_pressure:
                            numbers[k] = self._pressure(data, f"{at}.{k}", numbers[k])
                    a[i, j], b[i, j] = _coefficients(form, numbers, surface)
        return half_time, a, b, provenance

    def _number(self, row: dict[str, Any], at: str, key: str, positive: bool = True) -> float:
        value = row.pop(key, None)
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise self.refuse(f"{at}.{key}", "is missing or not a number", f"add {key} = ...")
        if not np.isfinite(value) or (positive and not value > 0.0):
            raise self.refuse(f"{at}.{key}", f"{value:g} is not possible")
        return float(value)

    def _chosen(
        self, data: dict[str, Any], names: tuple[str, ...], wanted: tuple[str, ...] | None
    ) -> tuple[str, ...]:
        default = tuple(str(c) for c in data.get("default_compartments", names))
        chosen = default if wanted is None else wanted
        for name in chosen:
            if name not in names:
                raise unknown_name(f"compartment of {self.name}", name, names)
        if not chosen or len(set(chosen)) != len(chosen):
            raise UnknownNameError(f"compartments of {self.name}: give at least one, and each once")
        for pair in data.get("never_together", ()):
            if set(pair) <= set(chosen):
                raise UnknownNameError(
                    f"compartments {' and '.join(pair)} of {self.name} are two choices for one place: use one"
                )
        if data["kinetics"] == "serial" and chosen != names:
            raise UnknownNameError(f"{self.name}: compartments in series cannot be left out")
        return chosen

    def _short_deep(self, data: dict[str, Any]) -> ShortDeep | None:
        given = data.get("short_deep")
        if given is None:
            return None
        missing = {"depth", "bottom_time", "action", "reason"} ^ set(given)
        if missing or given["action"] not in ("refuse", "flag"):
            raise self.refuse(
                "short_deep", "needs depth, bottom_time, action ('refuse' or 'flag') and reason"
            )
        return ShortDeep(
            depth=self._pressure(data, "short_deep.depth", given["depth"]),
            bottom_time=float(given["bottom_time"]),
            action=given["action"],
            reason=str(given["reason"]),
        )

    def _check_integrity(self, data: dict[str, Any], names: tuple[str, ...], gases: tuple[str, ...]) -> None:
        """Compare the count and the sums the file gives with its own numbers as printed."""
        for key, expected in data.get("integrity", {}).items():
            if key == "compartments":
                if expected != len(names):
                    raise self.refuse("integrity.compartments", f"{expected} promised, {len(names)} found")
                continue
            column = key.removeprefix("sum_")
            for gas, value in expected.items():
                if gas not in gases:
                    raise self.refuse(
                        f"integrity.{key}", str(unknown_name("inert gas of this set", gas, gases))
                    )
                found = sum(float(data["compartment"][n][gas].get(column, 0.0)) for n in names)
                if not abs(found - value) <= 1e-9 * max(1.0, abs(value)):
                    raise self.refuse(
                        f"integrity.{key}",
                        f"the {column} of {gas} sum to {found:.10g}, the file promises {value:.10g}",
                        "a number of the table or the sum is mistyped",
                    )

    def _check_order(self, names: tuple[str, ...], half_time: Array, a: Array, b: Array) -> None:
        """Half-times rise, and the limit at one atmosphere falls, from each compartment to the next."""
        for values, sign, what in (
            (half_time, 1.0, "half_time rises"),
            (a + 101.325 / b, -1.0, "the limit falls"),
            (b, 1.0, "b rises"),
        ):
            if what == "b rises" and self.data["limit"].get("form") != "a_b":
                continue
            steps = sign * np.diff(values, axis=0)
            rounding = 1e-9 * np.nanmax(np.abs(np.where(np.isfinite(values), values, 0.0)), initial=1.0)
            if (steps < -rounding).any():
                place = int(np.argwhere(steps < -rounding)[0][0])
                raise self.refuse(
                    f"compartment.{names[place + 1]}",
                    f"the file is ordered, but not: {what} from {names[place]}",
                )


def _coefficients(form: str, n: Mapping[str, float], surface: float) -> tuple[float, float]:
    """Return a [kPa] and b of M = a + P/b for every way a limit is written."""
    if form == "a_b":
        return n["a"], n["b"]
    if form == "surfacing_slope":
        return float(intercept_from_surfacing.raw(n["surfacing"], n["slope"], surface)), 1.0 / n["slope"]
    if form == "surfacing":
        return n["surfacing"], float("inf")
    if form == "ratio":
        return 0.0, 1.0 / n["ratio"]
    return n["ratio"] * n["offset"], 1.0 / n["ratio"]


def _frozen(values: Array) -> Array:
    values = np.array(values)
    values.flags.writeable = False
    return values
