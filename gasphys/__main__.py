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
    one.add_argument("name", metavar="NAME", help="such as usn_6; an unknown name lists them")
    one.add_argument("--extensions-deep", type=int, default=0, metavar="N")
    one.add_argument("--extensions-shallow", type=int, default=0, metavar="N")
    one.add_argument("--attendant", action="store_true", help="the inside attendant's exposure instead")
    one.add_argument("--descent", default="air", metavar="GAS", help="gas breathed on the way down")
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
    one = commands.add_parser("equations", help="list every equation, or print them all as JSON")
    one.add_argument("--json", action="store_true", help="as JSON")
    one.set_defaults(run=_equations)
    return parser


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


def _treatment(options: argparse.Namespace) -> int:
    from gasphys.schedules import treatment

    surface = _surface(options)
    more = {} if surface is None else {"surface_pressure": surface}
    exposure = treatment(
        options.name,
        options.extensions_deep,
        options.extensions_shallow,
        attendant=options.attendant,
        descent=options.descent,
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
