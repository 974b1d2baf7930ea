"""Command line: ``python -m gasphys``.

Exit status 0 whatever is beyond a limit; 2 with a short message for input that cannot be used.
"""

from __future__ import annotations

import argparse
import sys
import warnings
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from gasphys.errors import GasphysError
from gasphys.quantities import CAUTION

__all__ = ["main"]


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Words of the command line; default those of the process.

    Returns
    -------
    int
        0, or 2 for input that cannot be used.

    Examples
    --------
    >>> main(["treatment", "usn_5"])  # doctest: +ELLIPSIS
    US Navy Treatment Table 5, patient
    ...
    0
    """
    options = _parser().parse_args(arguments)
    with warnings.catch_warnings():
        warnings.showwarning = _show_warning
        try:
            return int(options.run(options))
        except GasphysError as error:
            print(f"gasphys: {error}", file=sys.stderr)
            return 2
        except BrokenPipeError:
            # The reader of our output has left; nothing is wrong with the input.
            sys.stderr.close()
            return 0
        except OSError as error:
            name = f"{error.filename}: " if error.filename else ""
            print(f"gasphys: {name}{error.strerror or error}", file=sys.stderr)
            return 2


def _show_warning(message: Any, *_: Any, **__: Any) -> None:
    print(f"note: {message}", file=sys.stderr)


def _parser() -> argparse.ArgumentParser:
    common = argparse.ArgumentParser(add_help=False)
    common.add_argument("--person", metavar="FILE", help="what is measured of the person (TOML)")
    common.add_argument("--role", choices=("diver", "patient", "attendant"), help="whose exposure it is")
    common.add_argument("--units", default="", metavar="UNITS", help="such as atm,fsw or bar,msw or mmHg")
    common.add_argument("--save", metavar="FILE.nc", help="write exposure, gases and review as netCDF")
    common.add_argument("--figure", metavar="FILE.png", help="draw the exposure")
    common.add_argument(
        "--limits", metavar="FILE", help="the site's own limits (TOML), added to the shipped ones"
    )
    common.add_argument(
        "--surface-pressure", metavar="P", help="pressure at the surface, such as '101.0 kPa' or '760 mmHg'"
    )
    common.add_argument("--breathing", metavar="FILE", help="breathing periods laid over the log (CSV)")
    parser = argparse.ArgumentParser(
        prog="python -m gasphys", description=__doc__.split("\n")[0], epilog=CAUTION
    )
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    one = commands.add_parser(
        "review", parents=[common], help="compare a recorded exposure with limits", epilog=CAUTION
    )
    one.add_argument(
        "file", metavar="FILE", help="log of pressure and gas (CSV) or a saved exposure (netCDF)"
    )
    one.set_defaults(run=_review)
    one = commands.add_parser(
        "treatment", parents=[common], help="what a treatment table does to a person", epilog=CAUTION
    )
    one.add_argument(
        "name", metavar="NAME", help="such as usn_6, or a protocol (.txt); an unknown name lists them"
    )
    one.add_argument("--extensions-deep", type=int, default=0, metavar="N")
    one.add_argument("--extensions-shallow", type=int, default=0, metavar="N")
    one.add_argument("--attendant", action="store_true", help="the inside attendant's exposure instead")
    one.add_argument("--descent", default="air", metavar="GAS", help="gas breathed on the way down")
    _table_options(one)
    one.set_defaults(run=_treatment)
    one = commands.add_parser(
        "compare", parents=[common], help="was what was done what was prescribed", epilog=CAUTION
    )
    one.add_argument("recorded", metavar="RECORDED", help="log (CSV) or saved exposure (netCDF)")
    one.add_argument(
        "prescribed", metavar="PRESCRIBED", help="a treatment table's name, a log or a saved exposure"
    )
    one.set_defaults(run=_compare)
    one = commands.add_parser(
        "doses", parents=[common], help="every published oxygen measure side by side", epilog=CAUTION
    )
    one.add_argument("file", metavar="WHAT", help="a treatment table's name, a log or a saved exposure")
    one.set_defaults(run=_doses)
    one = commands.add_parser(
        "course", parents=[common], help="what a course of sessions adds up to", epilog=CAUTION
    )
    one.add_argument("file", metavar="FILE", help="course file (TOML or CSV): date, time, schedule or log")
    one.set_defaults(run=_course)
    one = commands.add_parser(
        "worksheet",
        parents=[common],
        help="what to expect of a treatment, to print and fill in",
        epilog=CAUTION,
    )
    one.add_argument("patient", metavar="PERSON", help="what is measured of the patient, and devices (TOML)")
    one.add_argument("--treatment", metavar="NAME", required=True, help="a table's name or a protocol (.txt)")
    one.add_argument(
        "--chamber", metavar="FILE", required=True, help="the chamber, its gas and people (TOML)"
    )
    one.add_argument("--readings", metavar="FILE", help="what was read so far: narrows the ranges (TOML)")
    one.add_argument("--course", metavar="FILE", help="course file, for the dose of the whole course")
    one.add_argument("--page", metavar="FILE.html", help="write the page to print")
    one.add_argument("--extensions-deep", type=int, default=0, metavar="N")
    one.add_argument("--extensions-shallow", type=int, default=0, metavar="N")
    _table_options(one)
    one.set_defaults(run=_worksheet)
    one = commands.add_parser(
        "ascent", parents=[common], help="the ascent that several models ask for", epilog=CAUTION
    )
    one.add_argument(
        "file", metavar="FILE", help="log (CSV) or saved exposure (netCDF) with the bottom in it"
    )
    one.add_argument(
        "--models", default="buhlmann_1995_c,workman_1965", metavar="A,B", help="names, or files of sets"
    )
    one.add_argument(
        "--gas",
        action="append",
        metavar="TEXT",
        help="'nitrox 48 from 20 msw', 'oxygen from 1.6 bar', one each; default: those of the log's way up",
    )
    one.add_argument("--without", metavar="GAS", help="a gas that is lost")
    one.add_argument(
        "--measured",
        action="append",
        default=[],
        metavar="A=B",
        help="'nitrox 48=nitrox 46.5': found by analysis",
    )
    one.add_argument(
        "--leave-at", type=float, metavar="MIN", help="when the bottom is left; default: as the log does"
    )
    one.add_argument("--rate", metavar="TEXT", help="'9', or '9, 3 above 6' (depth unit a minute)")
    one.add_argument("--spacing", type=float, metavar="D", help="distance of stops")
    one.add_argument("--last-stop", type=float, metavar="D", help="depth of the last stop")
    one.add_argument(
        "--gradients", metavar="LOW,HIGH", help="share of the limit at the first stop and the surface"
    )
    one.add_argument("--shortest-stop", type=float, default=0.0, metavar="MIN")
    one.add_argument("--switch-minutes", type=float, default=0.0, metavar="MIN", help="time a switch takes")
    one.add_argument(
        "--breaks", metavar="TEXT", help="'5 min on air every 20 min from 1.4 bar' and, if so, ', on top'"
    )
    one.add_argument(
        "--not-rounded", action="store_true", help="stops as long as the model asks, not whole minutes"
    )
    one.add_argument("--follow", metavar="MODEL", help="whose ascent is listed; default: the first")
    one.add_argument(
        "--control-figure", metavar="FILE.png", help="draw the half-times in control along that ascent"
    )
    one.add_argument("--csv", metavar="FILE.csv", help="write that ascent as a log")
    one.add_argument("--sheet", metavar="FILE.html", help="write that ascent as one page to print")
    one.add_argument(
        "--title", default="", metavar="WORDS", help="words for the top of the sheet and the CSV"
    )
    one.set_defaults(run=_ascent)
    one = commands.add_parser(
        "supply", parents=[common], help="gas used, gas left, and what is kept back", epilog=CAUTION
    )
    one.add_argument("file", metavar="FILE", help="supply file (TOML): cylinders, demand, reserve, exposure")
    one.set_defaults(run=_supply)
    one = commands.add_parser(
        "fill", parents=[common], help="moles and pressures to fill a cylinder with a mix", epilog=CAUTION
    )
    one.add_argument("target", metavar="GAS", help="the gas wanted, such as 'trimix 17/48'")
    one.add_argument("pressure", metavar="P", help="its pressure, absolute, settled: '220 bar'")
    one.add_argument("--water-capacity", default="1 L", metavar="V", help="inner volume of the cylinder")
    one.add_argument("--temperature", default="20 degC", metavar="T", help="of the settled cylinder")
    one.add_argument("--hot", metavar="T", help="temperature of the gas at the end of each step, as measured")
    one.add_argument("--remainder", metavar="GAS", help="what is in the cylinder already")
    one.add_argument("--remainder-pressure", default="0 kPa", metavar="P", help="its pressure, absolute")
    one.add_argument("--order", default="helium,oxygen,air", metavar="A,B", help="gases added, in this order")
    one.add_argument("--gauge", action="store_true", help="all pressures as a gauge reads them")
    one.set_defaults(run=_fill)
    one = commands.add_parser(
        "open", help="open an app, an equation or a notebook in the browser", epilog=CAUTION
    )
    one.add_argument("name", metavar="NAME", nargs="?", help="without it: the list of names")
    one.add_argument("--page", action="store_true", help="a notebook as a page, without its code")
    one.add_argument("--no-browser", action="store_true", help="print the address only")
    one.add_argument(
        "--port", type=int, default=0, metavar="N", help="port on this machine; default: a free one"
    )
    one.set_defaults(run=_open)
    one = commands.add_parser("equations", help="list every equation, or print them all as JSON")
    one.add_argument("--json", action="store_true", help="as JSON")
    one.set_defaults(run=_equations)
    return parser


def _table_options(one: argparse.ArgumentParser) -> None:
    one.add_argument("--variant", default="", metavar="NAME", help="a variant the table itself allows")
    one.add_argument("--bottom-minutes", type=float, metavar="MIN", help="where the table leaves it open")
    one.add_argument(
        "--unverified", action="store_true", help="build a table that rests on memory and is off otherwise"
    )


def _table(options: argparse.Namespace) -> dict[str, Any]:
    return {
        "variant": options.variant,
        "bottom_minutes": options.bottom_minutes,
        "unverified": options.unverified,
    }


def _open(options: argparse.Namespace) -> int:
    from gasphys.widgets.opening import listing, open_name

    if options.name is None:
        print(listing())
        return 0
    return open_name(options.name, page=options.page, browser=not options.no_browser, port=options.port)


def _equations(options: argparse.Namespace) -> int:
    import json

    from gasphys.registry import as_records

    records = as_records()
    if options.json:
        print(json.dumps(records, indent=1, ensure_ascii=False))
        return 0
    width = max(len(r["name"]) for r in records)
    for record in records:
        arguments = ", ".join(a["name"] for a in record["arguments"])
        print(
            f"{record['name']:<{width}}  {record['kind']:<8} "
            f"{record['result']} [{record['unit']}] of {arguments}"
        )
    return 0


def _surface(options: argparse.Namespace) -> float | None:
    from gasphys.quantities import quantity

    if options.surface_pressure is None:
        return None
    one = quantity("surface_pressure")
    value = one.from_text(options.surface_pressure)
    if not one.possible[0] <= value <= one.possible[1]:
        raise one.range_error(value)
    return value


def _exposure(file: str, options: argparse.Namespace) -> Any:
    from gasphys.exposure import Exposure

    if Path(file).suffix not in (".nc", ".nc4"):
        return Exposure.from_csv(file, surface_pressure=_surface(options), breathing=options.breathing)
    import xarray as xr

    try:
        with xr.open_dataset(file) as ds:
            return Exposure.from_dataset(ds.load())
    except (FileNotFoundError, GasphysError):
        raise
    except (ValueError, OSError) as error:
        raise GasphysError(f"{file}: cannot be read as netCDF ({error})") from None


def _review(options: argparse.Namespace) -> int:
    return _show(_exposure(options.file, options), options, role="diver")


def _named(what: str, options: argparse.Namespace, **more: Any) -> tuple[Any, str]:
    """Return the exposure of a table's name or a file, and the role that goes with it."""
    from gasphys.schedules import names, treatment

    if what in names() or not Path(what).exists():
        return treatment(what, **more), "patient"
    return _exposure(what, options), "diver"


def _role(options: argparse.Namespace, otherwise: str) -> tuple[Any, str]:
    from gasphys.person import Person

    person = Person.from_toml(options.person) if options.person else None
    return person, options.role or (person.role if person and person.role else otherwise)


def _doses(options: argparse.Namespace) -> int:
    from gasphys.doses import dose_text, oxygen

    exposure, role = _named(options.file, options)
    _, role = _role(options, role)
    found = oxygen(exposure, "all", role=role)
    print(exposure.attrs.get("title", "exposure"))
    print(f"reviewed as: {role}\n")
    print(dose_text(found))
    _write(found, options.save)
    return 0


def _course(options: argparse.Namespace) -> int:
    from gasphys.doses import course_doses, course_text, read_course, sessions_left

    person, role = _role(options, "patient")
    course = read_course(options.file, person=person.code if person else None)
    print(course_text(course, role=role))
    _write(course_doses(course, "all", role=role) if options.save else None, options.save)
    if options.figure:
        from gasphys.plots import course_figure, save_figure

        save_figure(course_figure(sessions_left(course, role=role)), options.figure)
        print(f"figure: {options.figure}")
    return 0


def _ascent(options: argparse.Namespace) -> int:
    from gasphys.ascent import compare_ascents, plan_csv
    from gasphys.ascent.reading import breaks_from_text, gas_from_text, rate_from_text, until_leaving
    from gasphys.ascent.rules import Rules

    bottom, own = until_leaving(_exposure(options.file, options), options.leave_at)
    gases = own if options.gas is None else [gas_from_text(text) for text in options.gas]
    low, high = _gradients(options.gradients)
    rules = Rules(
        ascent_rate=None if options.rate is None else rate_from_text(options.rate),
        stop_spacing=options.spacing,
        last_stop=options.last_stop,
        whole_minutes=not options.not_rounded,
        gradient_low=low,
        gradient_high=high,
        shortest_stop=options.shortest_stop,
        switch_minutes=options.switch_minutes,
        breaks=None if options.breaks is None else breaks_from_text(options.breaks),
    )
    found = compare_ascents(
        bottom,
        gases,
        [name.strip() for name in options.models.split(",") if name.strip()],
        rules,
        options.without,
        measured=_pairs(options.measured),
    )
    followed = found.followed(options.follow)
    print(found)
    print(f"\nThe {followed}")
    if options.csv:
        _text_file(options.csv, plan_csv(followed, options.title))
    if options.sheet:
        _text_file(options.sheet, found.sheet(options.follow, options.title))
    _write(found.to_dataset() if options.save else None, options.save)
    if options.figure or options.control_figure:
        from gasphys.plots import ascents_figure, control_path_figure, save_figure

        if options.figure:
            save_figure(ascents_figure(found.to_dataset(judged=False)), options.figure)
            print(f"figure: {options.figure}")
        if options.control_figure:
            save_figure(control_path_figure(found.control(options.follow)), options.control_figure)
            print(f"figure: {options.control_figure}")
    return 0


def _gradients(text: str | None) -> tuple[float, float]:
    if text is None:
        return 1.0, 1.0
    try:
        low, high = (float(part) for part in text.split(","))
    except ValueError:
        raise GasphysError(f"--gradients {text!r}: write the low and the high one, such as 0.5,0.9") from None
    return low, high


def _pairs(texts: Sequence[str]) -> dict[str, str]:
    pairs = {}
    for text in texts:
        planned, equals, measured = text.partition("=")
        if not (planned.strip() and equals and measured.strip()):
            raise GasphysError(f"--measured {text!r}: write 'nitrox 48=nitrox 46.5'")
        pairs[planned.strip()] = measured.strip()
    return pairs


def _text_file(path: str, text: str) -> None:
    Path(path).write_text(text, encoding="utf-8")
    print(f"saved: {path}")


def _supply(options: argparse.Namespace) -> int:
    from gasphys.ascent import plan
    from gasphys.report import Units
    from gasphys.supply import loss_table, loss_text, read_supply, stock, stock_text

    file = read_supply(options.file)
    exposure, losses = file.exposure, None
    if file.gases is not None:
        losses = loss_table(
            exposure,
            file.gases,
            file.cylinders,
            file.moments,
            file.demand,
            spare=file.spare,
            model=file.model,
            rules=file.rules,
        )
        exposure = plan(exposure, file.gases, file.model, file.rules).exposure
    found = stock(
        exposure, file.cylinders, file.reserve, file.demand, water_temperature=file.water_temperature
    )
    print(stock_text(found, Units.parse(options.units or "bar").pressure))
    if losses is not None:
        print(f"\n{loss_text(losses)}")
    _write(found, options.save)
    if options.figure:
        if losses is None:
            raise GasphysError("--figure draws the loss table: give the file a table [ascent]")
        from gasphys.plots import loss_table_figure, save_figure

        save_figure(loss_table_figure(losses), options.figure)
        print(f"figure: {options.figure}")
    return 0


def _fill(options: argparse.Namespace) -> int:
    from gasphys.constants import ATMOSPHERE
    from gasphys.quantities import quantity
    from gasphys.report import Units
    from gasphys.supply import fill_text, partial_pressure_fill

    surface = (_surface(options) or float(ATMOSPHERE)) if options.gauge else 0.0
    wanted, left = (
        quantity("cylinder_pressure").from_text(p) for p in (options.pressure, options.remainder_pressure)
    )
    there = options.remainder is not None
    found = partial_pressure_fill(
        options.target,
        wanted + surface,
        options.water_capacity,
        options.temperature,
        remainder=options.remainder,
        remainder_pressure=left + surface if there else left,
        order=[name.strip() for name in options.order.split(",")],
        filling_temperature=options.hot,
    )
    unit = Units.parse(options.units or "bar").pressure
    print(fill_text(found, unit, surface if options.gauge else None))
    _write(found, options.save)
    if options.figure:
        from gasphys.plots import fill_figure, save_figure

        save_figure(fill_figure(found, unit), options.figure)
        print(f"figure: {options.figure}")
    return 0


def _write(found: Any, path: str | None) -> None:
    if path:
        found.to_netcdf(path)
        print(f"\nsaved: {path}")


def _compare(options: argparse.Namespace) -> int:
    from gasphys.comparison import compare, comparison_text

    recorded = _exposure(options.recorded, options)
    prescribed, _ = _named(options.prescribed, options, surface_pressure=recorded.surface_pressure)
    found = compare(recorded, prescribed)
    print(comparison_text(found))
    _write(found, options.save)
    return 0


def _worksheet(options: argparse.Namespace) -> int:
    from gasphys.chamber import Chamber, Devices, read_readings, worksheet, worksheet_page, worksheet_text
    from gasphys.doses import read_course
    from gasphys.person import Person

    for name in ("person", "role", "units", "breathing"):
        if getattr(options, name):
            raise GasphysError(f"--{name} does not apply to a worksheet")
    person = Person.from_toml(options.patient)
    room, surface = Chamber.from_toml(options.chamber), _surface(options)
    is_file = Path(options.treatment).suffix.lower() in (".txt", ".protocol")
    extensions = {
        "extensions_deep": options.extensions_deep,
        "extensions_shallow": options.extensions_shallow,
    }
    found = worksheet(
        options.treatment,
        person,
        room if surface is None else room.narrowed(surface_pressure=surface),
        Devices.from_toml(options.patient),
        read_readings(options.readings) if options.readings else (),
        course=read_course(options.course, person.code or None) if options.course else None,
        limits=options.limits or "default",
        **({} if is_file else {**extensions, **_table(options)}),
    )
    print(worksheet_text(found))
    if options.page:
        Path(options.page).write_text(worksheet_page(found), encoding="utf-8")
        print(f"\npage to print: {options.page}")
    _write(found, options.save)
    if options.figure:
        from gasphys.plots import save_figure, worksheet_figure

        save_figure(worksheet_figure(found), options.figure)
        print(f"figure: {options.figure}")
    return 0


def _treatment(options: argparse.Namespace) -> int:
    from gasphys.schedules import read_protocol, treatment

    surface = _surface(options)
    more: dict[str, Any] = {} if surface is None else {"surface_pressure": surface}
    if Path(options.name).suffix.lower() in (".txt", ".protocol"):
        return _show(read_protocol(options.name, **more), options, role="patient")
    exposure = treatment(
        options.name,
        options.extensions_deep,
        options.extensions_shallow,
        attendant=options.attendant,
        descent=options.descent,
        **_table(options),
        **more,
    )
    return _show(exposure, options, role="attendant" if options.attendant else "patient")


def _show(exposure: Any, options: argparse.Namespace, role: str) -> int:
    from gasphys.limits import load
    from gasphys.report import Units, review_text, summary_text
    from gasphys.reviews import review

    person, role = _role(options, role)
    limits = load(options.limits or "default")
    units = Units.parse(options.units, depth=exposure.depth_unit)
    found = review(exposure, person, role=role, limits=limits)
    print(summary_text(exposure, person, units))
    print(f"  reviewed as: {role}{', person ' + person.code if person and person.code else ''}")
    print()
    print(review_text(exposure, found, limits, units))
    if options.save:
        _save(exposure, person, found, options.save)
        print(f"\nsaved: {options.save}")
    if options.figure:
        from gasphys.plots import exposure_figure, save_figure

        save_figure(exposure_figure(exposure, found, units), options.figure)
        print(f"figure: {options.figure}")
    return 0


def _save(exposure: Any, person: Any, found: Any, path: str) -> None:
    import xarray as xr

    from gasphys.gas_exchange import oxygenation

    whole = xr.merge(
        [exposure.to_dataset(), oxygenation(exposure, person), found],
        combine_attrs="drop_conflicts",
        compat="override",
        join="exact",
    )
    whole.attrs = {
        **exposure.to_dataset().attrs,
        **{k: found.attrs[k] for k in ("role", "person", "from_memory")},
    }
    whole.attrs["title"] = found.attrs["title"]
    whole.to_netcdf(path)


if __name__ == "__main__":
    raise SystemExit(main())
