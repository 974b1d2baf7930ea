"""The review in words: a ruler of authorities for each quantity, and three levers."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import UnitError
from gasphys.exposure import Exposure
from gasphys.gas_exchange import carboxyhemoglobin, oxygenation
from gasphys.limits import Limit
from gasphys.person import Person
from gasphys.quantities import CAUTION, quantity
from gasphys.reviews import levers
from gasphys.sources import cite, sources
from gasphys.units import convert, unit

__all__ = ["Units", "minutes_text", "review_text", "summary_text"]

_WIDTH = 100


@dataclass(frozen=True)
class Units:
    """Units a face shows: pressures, and depths where pressures are differences.

    Parameters
    ----------
    pressure : str
        Unit of absolute pressures.
    depth : str
        Unit of depths and of changes of pressure.

    Examples
    --------
    >>> Units.parse("atm,fsw")
    Units(pressure='atm', depth='fsw')
    """

    pressure: str = "kPa"
    depth: str = "msw"

    @classmethod
    def parse(cls, text: str, depth: str = "msw") -> Units:
        """Read ``"atm"``, ``"fsw"`` or ``"atm,fsw"``.

        Parameters
        ----------
        text : str
            One or two unit names, separated by a comma.
        depth : str
            Depth unit where the text gives none.

        Returns
        -------
        Units
            What to show.

        Raises
        ------
        UnitError
            If a name is no unit of pressure or depth.

        Examples
        --------
        >>> Units.parse("bar").depth
        'msw'
        """
        chosen = {"pressure": "kPa", "depth": depth}
        for name in filter(None, (part.strip() for part in text.split(","))):
            one = unit(name)
            if name == "m" or one.gauge:
                chosen["depth"] = name
            elif one.is_like(unit("kPa")):
                chosen["pressure"] = name
            else:
                raise UnitError(f"--units {name!r} is not a unit of pressure or depth")
        return cls(**chosen)

    def show(self, value: float, name: str) -> tuple[float, str]:
        """Return a value of a quantity in the unit it is shown in, and that unit."""
        one = quantity(name)
        if one.is_pressure and not one.is_depth:
            return float(convert(value, one.unit, self.pressure)), self.pressure
        if name == "compression_rate":
            rate = self.depth if self.depth != "m" else "msw"
            return float(convert(value, "kPa/min", f"{rate}/min")), f"{rate}/min"
        if name.startswith(("chamber_", "breathing_gas_co2", "breathing_gas_o2_fraction")):
            return value * 100.0, "%"
        return value, one.dose_unit or ("" if one.unit == "1" else one.unit)


def _round(value: float) -> str:
    """Four significant digits, no exponent, no lost meaning."""
    if not np.isfinite(value):
        return "-"
    if value == 0.0:
        return "0"
    digits = max(0, 3 - int(np.floor(np.log10(abs(value)))))
    text = f"{value:.{min(digits, 6)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def minutes_text(value: float) -> str:
    """Return a time in words, seconds where it is short.

    Parameters
    ----------
    value : float
        Time [min].

    Returns
    -------
    str
        Such as ``"12.5 min"`` or ``"24 s"``.

    Examples
    --------
    >>> minutes_text(0.4)
    '24 s'
    """
    return f"{value * 60.0:.0f} s" if 0.0 < value < 0.95 else f"{value:.1f} min"


def summary_text(exposure: Exposure, person: Person | None, units: Units) -> str:
    """Return what the exposure is and what lungs and blood carry at its highest pressure.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    person : Person or None
        Whose lungs and blood.
    units : Units
        What to show.

    Returns
    -------
    str
        A few lines.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=18, minutes=2)
    >>> print(summary_text(dive, None, Units()).splitlines()[0])
    exposure: pressure and breathing gas against time
    """
    from gasphys.doses import oxygen

    ds = oxygenation(exposure, person, model="both")
    start, end = exposure.columns["start_pressure"], exposure.columns["end_pressure"]
    top = float(max(start.max(), end.max()))
    lines = [str(exposure.attrs.get("title", "exposure: pressure and breathing gas against time"))]
    shown = f"{_round(convert(top, 'kPa', units.pressure))} {units.pressure}"
    over = top - float(exposure.surface_pressure)
    depth = units.depth if units.depth != "m" else "msw"
    lines.append(
        f"  {exposure.duration:.4g} min, highest pressure {shown} absolute "
        f"({_round(convert(over, 'kPa', depth))} {depth} above the surface)"
    )
    if "table_minutes" in exposure.attrs:
        lines.append(
            f"  table clock {exposure.attrs['table_minutes']:g} min, {exposure.attrs['table_clock']}"
        )
        doses = [
            float(oxygen(exposure, ["uptd"], count=c).dose.values[0]) for c in ("oxygen", "table", "all")
        ]
        lines.append(
            f"  pulmonary oxygen dose {doses[0]:.2f} UPTD oxygen periods, {doses[1]:.2f} table, "
            f"{doses[2]:.2f} whole exposure"
        )
        lines.append(
            f"  {exposure.attrs['edition']}; provenance {exposure.attrs['provenance']}; "
            f"{exposure.attrs['note']}"
        )
    best = int(np.argmax(ds["alveolar_po2"].values))
    row = ds.isel(time=best)

    lines.append(
        f"  at {float(row['time']):.1f} min, "
        f"{_round(convert(float(row['ambient_pressure']), 'kPa', units.pressure))} {units.pressure}, "
        f"FIO2 {float(row['fio2']):.3g}: alveolar PO2 "
        f"{_round(convert(float(row['alveolar_po2']), 'kPa', units.pressure))} {units.pressure}, "
        f"arterial PO2 {_range(row['arterial_po2'], units.pressure)},"
    )
    lines.append(
        f"    dissolved O2 {_range(row['arterial_dissolved_o2'])}, "
        f"arterial O2 content {_range(row['arterial_o2_content'])}"
    )
    lines.append(f"    arterial PO2 {_by_model(row['arterial_po2'], units.pressure)}")
    lines += _venous_text(ds, row, person, units)
    lines += _carbon_monoxide_text(exposure, person)
    for word in ("measured", "assumed"):
        if ds.attrs[word]:
            lines += _wrapped(f"{word}: {_shorter(ds.attrs[word])}", "    ", hang=2)
    if "flags" in ds.attrs:
        lines += _wrapped(f"flag: {ds.attrs['flags']}", "    ", hang=2)
    if exposure.history:
        lines.append("  about the record:")
        lines.extend(f"    {h}" for h in exposure.history[:12])
        if len(exposure.history) > 12:
            lines.append(f"    and {len(exposure.history) - 12} more entries in the saved file's history")
    return "\n".join(lines)


def _venous_text(ds: xr.Dataset, row: xr.Dataset, person: Person | None, units: Units) -> list[str]:
    """Tell what the tissues leave, and whether O2 in solution alone would do."""
    low, high = ds.attrs["arteriovenous_band"]
    both = xr.concat([row["mixed_venous_po2_low"], row["mixed_venous_po2_high"]], "end")
    both.attrs = row["mixed_venous_po2"].attrs
    pco2 = row["venous_arterial_pco2_difference"]
    found = [
        f"mixed venous PO2 {_range(both, units.pressure)} for an arteriovenous difference of "
        f"{_round(low)} to {_round(high)} mL/dL, venous PCO2 {_range(pco2, units.pressure)} above arterial",
        f"O2 delivery {_range(row['o2_delivery_stpd'])}, of which the tissues take "
        f"{_range(row['o2_extraction'], '%')}",
    ]
    difference = (Person() if person is None else person).value("arteriovenous_difference")
    dissolved = row["arterial_dissolved_o2"]
    covers = [str(m) for m in dissolved["model"].values if float(dissolved.sel(model=m)) >= difference]
    by = (
        "by neither model"
        if not covers
        else "by both models"
        if len(covers) == 2
        else f"by constant {covers[0]}"
    )
    found.append(f"dissolved O2 alone covers a difference of {_round(difference)} mL/dL {by}")
    return [line for text in found for line in _wrapped(text, "    ", hang=2)]


def _carbon_monoxide_text(exposure: Exposure, person: Person | None) -> list[str]:
    """Tell what becomes of a person's carboxyhemoglobin, with the band."""
    if person is None or not person.value("cohb_fraction") > 0.0:
        return []
    ds = carboxyhemoglobin(exposure, person, target=0.5 * person.value("cohb_fraction"))
    end = [100.0 * float(ds[f"cohb_fraction{x}"][-1]) for x in ("", "_low", "_high")]
    half = [float(v) for v in ds["time_at_target"].values]
    told = [minutes_text(v) if np.isfinite(v) else "after the end" for v in half]
    text = (
        f"carboxyhemoglobin {100.0 * person.value('cohb_fraction'):.1f} % at the start, {end[0]:.1f} % at "
        f"the end (band {end[1]:.1f} to {end[2]:.1f} %); half of it at {told[0]} "
        f"(band {told[1]} to {told[2]}). Evidence: {ds.attrs['evidence']}"
    )
    return _wrapped(text, "    ", hang=2)


def _range(values: xr.DataArray, shown: str = "") -> str:
    """Return the lowest and the highest of the models, in words."""
    unit_name = shown or str(values.attrs["units"])
    low, high = (float(convert(v, values.attrs["units"], unit_name)) for v in (values.min(), values.max()))
    text = [_digits(v, shown) for v in (low, high)]
    return f"{text[0]} {unit_name}" if text[0] == text[1] else f"{text[0]} to {text[1]} {unit_name}"


def _digits(value: float, pressure: str) -> str:
    return _round(value) if pressure or not np.isfinite(value) else f"{value:.2f}"


def _by_model(arterial: xr.DataArray, shown: str) -> str:
    parts = []
    for model in arterial["model"].values:
        value = float(convert(arterial.sel(model=model), "kPa", shown))
        parts.append(f"{_round(value)} {shown} by constant {model}")
    return ", ".join(parts)


def _shorter(text: str) -> str:
    """Return the same in three digits and without the signs."""
    parts = []
    for one in text.split(", "):
        name, _, told = one.partition(" = ")
        number, _, unit = told.partition(" ")
        parts.append(one if unit.startswith("to ") else f"{name} {float(number):.3g} {unit}".rstrip())
    return ", ".join(parts)


def review_text(exposure: Exposure, found: xr.Dataset, limits: tuple[Limit, ...], units: Units) -> str:
    """Return a review in words.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    found : Dataset
        From :func:`gasphys.review` of it.
    limits : tuple of Limit
        The limits it was compared with.
    units : Units
        What to show.

    Returns
    -------
    str
        Three blocks: beyond, nearest, could not be judged; then what does not apply, sources, what
        rests on memory, and the caution.

    Examples
    --------
    >>> from gasphys.limits import load
    >>> from gasphys.reviews import review
    >>> dive = Exposure.start("nitrox 48").travel(depth=20, minutes=2)
    >>> print(review_text(dive, review(dive), load(), Units()).splitlines()[0])
    BEYOND, by first minute
    """
    groups: dict[tuple[str, str, str], list[Limit]] = {}
    rows = {x.id: found.sel(limit=x.id) for x in limits}
    status = {x.id: str(rows[x.id]["status"].values) for x in limits}
    for limit in limits:
        if status[limit.id] in ("beyond", "within"):
            groups.setdefault((limit.quantity, limit.comparison, limit.model), []).append(limit)
    beyond, nearest = [], []
    for group in groups.values():
        crossed = [float(rows[x.id]["first_crossing"].values) for x in group if status[x.id] == "beyond"]
        if crossed:
            beyond.append((min(crossed), group))
        else:
            near = min(abs(float(rows[x.id]["margin"].values)) / abs(x.value) for x in group)
            nearest.append((near, group))
    out: list[str] = []
    for heading, entries in (("BEYOND, by first minute", beyond), ("NEAREST, by closeness", nearest)):
        if entries:
            out += [heading, ""]
            for _, group in sorted(entries, key=lambda entry: entry[0]):
                out += [*_group_text(exposure, group, rows, status, units), ""]
    out += _unjudged(limits, rows, status, "not judged", "COULD NOT BE JUDGED")
    out += _unjudged(limits, rows, status, "not applicable", "NOT APPLICABLE")
    out += _foot(limits, status)
    return "\n".join(out)


def _heading(group: list[Limit], units: Units) -> str:
    one = quantity(group[0].quantity)
    side = "highest" if group[0].comparison == "<=" else "lowest"
    name = one.long_name[0].upper() + one.long_name[1:]
    _, shown = units.show(1.0, one.name)
    label = f"{name}, {shown}" if shown else name
    return label if one.dose_unit or one.name == "compression_rate" else f"{label}, {side}"


def _group_text(
    exposure: Exposure,
    group: list[Limit],
    rows: dict[str, Any],
    status: dict[str, str],
    units: Units,
) -> list[str]:
    name = group[0].quantity
    ordered = sorted(group, key=lambda x: (x.value, x.authority))
    letters = dict(zip((x.id for x in ordered), _letters(), strict=False))
    first = rows[ordered[0].id]
    worst, when = float(first["worst"].values), float(first["time_of_worst"].values)
    heading, right = f"  {_heading(group, units)}", f"worst at {minutes_text(when)}"
    lines = [f"{heading:<{_WIDTH - len(right) - 1}} {right}", f"    {_ruler(ordered, letters, worst, units)}"]
    state = []
    for limit in ordered:
        row = rows[limit.id]
        if status[limit.id] == "beyond":
            state.append(f"beyond {letters[limit.id]} {minutes_text(float(row['time_beyond'].values))}")
        else:
            margin, _shown = units.show(float(row["margin"].values), name)
            state.append(f"within {letters[limit.id]} by {_round(margin)}")
    lines += _wrapped(", ".join(state), "    ")
    crossed = [float(rows[x.id]["first_crossing"].values) for x in ordered if status[x.id] == "beyond"]
    if crossed:
        lines.append(f"    first crossed at {minutes_text(min(crossed))}")
    lines += _lever_lines(exposure, ordered, letters, status, units)
    for limit in ordered:
        own = " (this site)" if limit.site else ""
        lines += _wrapped(
            f"{letters[limit.id]}  {limit.published_value:g} {limit.unit}{own}: {limit.authority}, "
            f"{limit.edition}; {limit.conditions} [{limit.provenance}]".replace(" 1:", ":"),
            "      ",
            hang=3,
        )
    return lines


def _letters() -> list[str]:
    alphabet = "ABCDEFGHIJKLMNOPQRSTUVWXYZ"
    return [*alphabet, *(a + b for a in alphabet for b in alphabet)]


def _ruler(ordered: list[Limit], letters: dict[str, str], worst: float, units: Units) -> str:
    """Place the value among the limits, in numerical order, spacing in proportion."""
    marks: list[tuple[float, str]] = []
    for limit in ordered:
        shown, _ = units.show(limit.value, limit.quantity)
        if marks and abs(marks[-1][0] - limit.value) <= 1e-9 * abs(limit.value):
            marks[-1] = (limit.value, f"{marks[-1][1]},{letters[limit.id]}")
        else:
            marks.append((limit.value, f"{_round(shown)} {letters[limit.id]}"))
    value, _ = units.show(worst, ordered[0].quantity)
    marks.append((worst, f"[{_round(value)}]"))
    marks.sort(key=lambda mark: mark[0])
    span = max(marks[-1][0] - marks[0][0], 1e-300)
    room = max(_WIDTH - 8 - sum(len(text) for _, text in marks), 4 * len(marks))
    line = marks[0][1]
    for (before, _), (after, text) in itertools.pairwise(marks):
        line += " " + "-" * max(2, round(room * 0.8 * (after - before) / span)) + " " + text
    return line


def _lever_lines(
    exposure: Exposure,
    ordered: list[Limit],
    letters: dict[str, str],
    status: dict[str, str],
    units: Units,
) -> list[str]:
    crossed = [x for x in ordered if status[x.id] == "beyond"]
    if not crossed:
        return []
    # The limit nearest to the value: the one that the smallest change meets.
    target = crossed[-1] if crossed[0].comparison == "<=" else crossed[0]
    lines = []
    depth = units.depth if units.depth != "m" else "msw"
    for lever in levers(exposure, target):
        parts = []
        if lever.pressure is None:
            parts.append("not by pressure")
        else:
            amount = convert(abs(lever.pressure), "kPa", depth)
            parts.append(f"{_up(amount)} {depth} {'less' if lever.pressure < 0 else 'more'}")
        if lever.gas is None:
            parts.append("not by another gas")
        else:
            parts.append(f"{lever.gas} instead of {lever.of}" if lever.of else f"{lever.gas} instead")
        parts.append("not by less time" if lever.time is None else f"{_up(lever.time)} min less")
        if parts[0].startswith("not "):  # "with not by pressure" is no English
            parts.sort(key=lambda part: part.startswith("not "))
        of = f" ({lever.of})" if lever.of else ""
        lines += _wrapped(f"back to {letters[target.id]}{of} with {' | '.join(parts)}", "    ", hang=4)
    return lines


def _up(value: float) -> str:
    """A tenth, rounded up: the change must reach."""
    return f"{np.ceil(value * 10.0 - 1e-6) / 10.0:.1f}"


def _unjudged(
    limits: tuple[Limit, ...],
    rows: dict[str, Any],
    status: dict[str, str],
    state: str,
    heading: str,
) -> list[str]:
    by_reason: dict[str, list[str]] = {}
    for limit in limits:
        if status[limit.id] == state:
            reason = str(rows[limit.id]["reason"].values)
            by_reason.setdefault(reason, []).append(
                f"{limit.title} ({limit.published_value:g} {limit.unit}, {limit.authority})".replace(
                    " 1,", ","
                )
            )
    if not by_reason:
        return []
    out = [heading, ""]
    for reason, names in by_reason.items():
        out += _wrapped(f"{reason}:", "  ")
        for name in names:
            out += _wrapped(name, "    ", hang=2)
    return [*out, ""]


def _foot(limits: tuple[Limit, ...], status: dict[str, str]) -> list[str]:
    judged = [x for x in limits if status[x.id] in ("beyond", "within")]
    memory = [x for x in judged if x.provenance.startswith("memory")]
    out = ["SOURCES", ""]
    for key in dict.fromkeys(x.source for x in judged):
        out += _wrapped(cite(key) if key in sources() else key, "  ", hang=2)
    out.append("")
    if memory:
        names = "; ".join(f"{x.published_value:g} {x.unit} {x.authority}".replace(" 1 ", " ") for x in memory)
        out += [*_wrapped(f"Rests on numbers from memory: {names}.", ""), ""]
    out += _wrapped("Within a limit is not thereby without danger. Levers are arithmetic, not advice.", "")
    out += _wrapped(CAUTION, "")
    return out


def _wrapped(text: str, indent: str, hang: int = 0) -> list[str]:
    import textwrap

    return textwrap.wrap(
        text,
        width=_WIDTH,
        initial_indent=indent,
        subsequent_indent=indent + " " * hang,
        break_long_words=False,
    )
