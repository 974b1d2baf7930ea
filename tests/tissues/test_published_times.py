"""Published no-stop times beside what the models compute, every row; `pytest -s` prints the table.

A row is judged only where the literature says that the bare model is behind it; the others are shown with the
reason. Nothing was tuned on any of them.
"""

from __future__ import annotations

import csv
import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import gasphys as gp
from gasphys import tissues
from gasphys.errors import ValidityError, ValidityWarning

FOLDER = Path(__file__).parent / "published"


def read(name: str) -> list[dict[str, str]]:
    """Return the rows of one file."""
    with (FOLDER / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@dataclass(frozen=True)
class Line:
    """One printed time beside ours; ``tolerance`` None means shown, not judged."""

    table: str
    depth: str
    printed: str
    computed: float | None
    how: str
    tolerance: float | None
    reason: str

    @property
    def agrees(self) -> bool:
        """Whether the computed time is within the tolerance of the printed one."""
        if self.tolerance is None or self.computed is None:
            return True
        if self.printed == "unlimited":
            return bool(np.isinf(self.computed))
        return abs(self.computed - float(self.printed)) <= self.tolerance

    def __str__(self) -> str:
        ours = "-" if self.computed is None else f"{self.computed:.1f}"
        judged = self.reason or ("within" if self.tolerance else "")
        return f"{self.table:<34} {self.depth:>9} {self.printed:>9} {ours:>8}  {self.how:<40} {judged}"


def _quiet(*args: Any, **kwargs: Any) -> Any:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ValidityWarning)
        return tissues.no_stop_time(*args, **kwargs)


US_NAVY_1957 = {"model": "us_navy_1957", "depth_unit": "fsw", "descent_rate": 75.0, "ascent_rate": 60.0}
VVAL18 = {"model": "thalmann_vval18", "depth_unit": "fsw", "descent_rate": 75.0, "ascent_rate": 30.0}
ROGERS_POWELL = {"model": "rogers_powell_1994", "depth_unit": "fsw", "descent_rate": 60.0}
KIDD_STUBBS = {
    "model": "kidd_stubbs_1983",
    "surface_pressure": 100.6,
    "descent_rate": 18.0,
    "ascent_rate": 18.0,
}


def us_navy_1957() -> list[Line]:
    """Within 3 min; the two others with the literature's reason."""
    why = {
        "30": "the table prints a limit where the six tissues give none (shallower than 31.56 fsw)",
        "60": "the model gives 65.6 min; the table was set shorter here",
        "160": "deeper than 120 fsw the table was set shorter than the model",
    }
    lines = []
    for row in read("no_stop_usn1957_air"):
        depth = row["depth_fsw"]
        tolerance = None if depth in why else 3.0
        ours = _quiet(float(depth), "air", **US_NAVY_1957)
        lines.append(
            Line(
                "US Navy 1957",
                f"{depth} fsw",
                row["minutes"],
                ours,
                "limit on arrival",
                tolerance,
                why.get(depth, ""),
            )
        )
    return lines


def us_navy_later() -> list[Line]:
    """The rows that the 40-, 80- and 120-min tissues set come out within 1.1 min; deeper ones are flagged."""
    lines = []
    for row in read("no_stop_usn_rev6_rev7_air"):
        depth = row["depth_fsw"]
        ours = _quiet(float(depth), "air", **VVAL18)
        for edition in ("rev7", "rev6"):
            reason = ""
            if float(depth) >= 100.0:
                reason = "the limits of the 5- and 10-min tissues are not those of this table"
            elif row[f"{edition}_min"] != row["rev7_min"]:
                reason = "the two revisions differ here"
            tolerance = None if reason else 1.1
            lines.append(
                Line(
                    f"US Navy {edition}",
                    f"{depth} fsw",
                    row[f"{edition}_min"],
                    ours,
                    "smaller of both tests",
                    tolerance,
                    reason,
                )
            )
    return lines


def rogers_powell() -> list[Line]:
    """Both readings of every row, none tuned."""
    lines = []
    for row in read("no_stop_rogers_powell1994_air_ft"):
        for ascent in (None, 60.0):
            ours = _quiet(float(row["depth_ft"]), "air", **ROGERS_POWELL, ascent_rate=ascent)
            how = "limit before the ascent" if ascent is None else "limit after an ascent at 60 ft/min"
            lines.append(
                Line(
                    "Rogers-Powell 1994",
                    f"{row['depth_ft']} ft",
                    row["minutes"],
                    ours,
                    how,
                    None,
                    "both readings are shown, none is tuned",
                )
            )
    return lines


def dciem() -> list[Line]:
    """The serial model agrees with the deep rows to a minute and not with the shallow ones."""
    lines = []
    for row in read("no_stop_dciem1992_air"):
        depth = float(row["depth_msw"])
        ours = _quiet(depth, "air", **KIDD_STUBBS)
        agrees = 36.0 <= depth <= 60.0 or row["minutes"] == "unlimited"
        reason = (
            ""
            if agrees
            else "constants provisional; the printed limits are set otherwise"
            if depth < 36
            else "printed limits stay at 5 min"
        )
        lines.append(
            Line(
                "DCIEM 1992",
                f"{row['depth_msw']} msw",
                row["minutes"],
                ours,
                "serial model, on arrival",
                1.0 if agrees else None,
                reason,
            )
        )
    return lines


def buhlmann_1986() -> list[Line]:
    """Shown only: the table carries a surcharge and safety stops that the bare set has not."""
    reason = "the table carries a surcharge on depth and safety stops; not tested against"
    return [
        Line(
            f"Buehlmann 1986, {row['altitude_band_m']} m",
            f"{row['depth_m']} m",
            row["minutes"],
            _quiet(float(row["depth_m"]), "air", "buhlmann_1995_c", surface_pressure=100.0)
            if row["altitude_band_m"] == "0-700"
            else None,
            "bare set C",
            None,
            reason,
        )
        for row in read("no_stop_buhlmann1986_air")
    ]


def others() -> list[Line]:
    """Tables without a model of their own here."""
    lines = [
        Line(
            "RNPL 1972",
            f"{r['depth_m']} m",
            r["minutes"],
            None,
            "-",
            None,
            "no model of this table is known here",
        )
        for r in read("no_stop_rnpl1972_air")
    ]
    for r in read("no_stop_noaa_nitrox"):
        gas = gp.Gas(oxygen=float(r["O2_fraction"]))
        ours = _quiet(float(r["depth_fsw"]), gas, **US_NAVY_1957)
        reason = "the print reads the next deeper air row at the equivalent air depth"
        lines.append(
            Line(
                f"NOAA {r['mix']}",
                f"{r['depth_fsw']} fsw",
                r["minutes"],
                ours,
                "the 1957 model on the mix itself",
                None,
                reason,
            )
        )
    return lines


TABLES = (us_navy_1957, us_navy_later, rogers_powell, dciem, buhlmann_1986, others)


@pytest.mark.parametrize("table", TABLES, ids=lambda t: t.__name__)
def test_every_row_side_by_side(table: Any) -> None:
    lines = table()
    print()
    print("\n".join(map(str, lines)))
    assert not [str(line) for line in lines if not line.agrees]
    assert all(line.reason for line in lines if line.tolerance is None)


def test_every_file_is_shown() -> None:
    shown = sum(len(table()) for table in (us_navy_1957, dciem, buhlmann_1986, others))
    files = [p.stem for p in FOLDER.glob("no_stop_*.csv")]
    assert shown == sum(len(read(f)) for f in files if "rev6" not in f and "rogers" not in f)
    assert len(us_navy_later()) == 2 * len(read("no_stop_usn_rev6_rev7_air"))
    assert len(rogers_powell()) == 2 * len(read("no_stop_rogers_powell1994_air_ft"))


# -- What others computed with the same sets --------------------------------------------------------

#: The bare sets at 1.0 bar, 0.1 bar/m, air 0.79, vapor 0.0627 bar, instantaneous, without 1b [computed].
BARE = {
    12: (254.4, 233.2, 178.5), 15: (115.5, 104.2, 89.3), 18: (64.2, 64.2, 59.1), 21: (40.4, 40.4, 40.4),
    24: (28.5, 28.5, 28.5), 27: (21.3, 21.3, 21.3), 30: (16.3, 16.3, 16.3), 33: (13.5, 13.5, 13.5),
    36: (11.5, 11.5, 11.5), 39: (9.6, 9.6, 9.6), 42: (8.1, 8.1, 8.1),
}  # fmt: skip


@pytest.mark.parametrize(("column", "letter"), list(enumerate("abc")))
def test_bare_buhlmann_sets(column: int, letter: str) -> None:
    depths = np.array(list(BARE), dtype=float)
    ours = tissues.no_stop_time(depths, "air", f"buhlmann_1995_{letter}", surface_pressure=100.0)
    np.testing.assert_allclose(ours, [v[column] for v in BARE.values()], rtol=0.0, atol=0.1)


def test_the_choice_of_b4_and_of_the_surface_pressure_moves_the_time() -> None:
    """18 m: 64.2 min with the print, 65.4 with the formula, 65.6 at 1.01325 bar [computed]."""
    f = tissues.no_stop_time
    formula = tissues.load("buhlmann_1995_a", variant="b4_formula")
    assert f(18.0, "air", "buhlmann_1995_a", surface_pressure=100.0) == pytest.approx(64.2, abs=0.05)
    assert f(18.0, "air", formula, surface_pressure=100.0) == pytest.approx(65.4, abs=0.05)
    assert f(18.0, "air", "buhlmann_1995_a", surface_pressure=101.325) == pytest.approx(65.6, abs=0.05)


@pytest.mark.parametrize(
    ("settings", "depths", "expected"),
    [
        (
            US_NAVY_1957,
            (40, 60, 80, 100, 120, 140, 160, 180),
            (199.7, 65.6, 39.1, 25.4, 17.1, 12.3, 9.4, 7.7),
        ),
        (VVAL18, (30, 40, 50, 60, 80), (371.8, 163.7, 92.0, 63.2, 39.8)),
        (VVAL18, (100, 120, 140, 160, 180), (29.1, 22.3, 15.3, 11.2, 9.3)),
        (ROGERS_POWELL, (35, 50, 70, 90, 110, 130), (209.6, 80.6, 39.3, 23.7, 14.2, 10.1)),
        (
            ROGERS_POWELL | {"ascent_rate": 60.0},
            (35, 50, 70, 90, 110, 130),
            (210.8, 81.5, 40.4, 25.7, 17.0, 12.5),
        ),
        (KIDD_STUBBS, (18, 24, 30, 36, 42, 48, 54, 60), (36.1, 19.4, 13.1, 9.9, 7.9, 6.6, 5.6, 5.0)),
    ],
    ids=["us_navy_1957", "vval18", "vval18 deep", "rogers_powell", "rogers_powell ascent", "kidd_stubbs"],
)
def test_another_computation_of_the_same_sets(settings: Any, depths: Any, expected: Any) -> None:
    """Figures of the same sets computed elsewhere, to the printed digit plus the last one's rounding."""
    ours = _quiet(np.array(depths, dtype=float), "air", **settings)
    np.testing.assert_allclose(ours, expected, rtol=0.0, atol=0.06)


def test_kidd_stubbs_limits_of_1971_are_shorter() -> None:
    settings = KIDD_STUBBS | {"model": tissues.load("kidd_stubbs_1983", variant="limits_1971")}
    ours = tissues.no_stop_time(np.array([18.0, 36.0, 60.0]), "air", **settings)
    np.testing.assert_allclose(ours, [26.7, 8.3, 4.3], rtol=0.0, atol=0.06)


@pytest.mark.parametrize(
    ("model", "depth"),
    [
        ("us_navy_1957", 31.56),
        ("workman_1965", 30.29),
        ("rogers_powell_1994", 21.94),
        ("thalmann_vval18", 23.96),
    ],
)
def test_unlimited_depth_is_that_of_the_slowest_tissue(model: str, depth: float) -> None:
    assert np.isinf(tissues.no_stop_time(depth - 0.01, "air", model, depth_unit="fsw"))
    assert np.isfinite(tissues.no_stop_time(depth + 0.01, "air", model, depth_unit="fsw"))


def test_saturation_depths_of_zh_l16_a() -> None:
    for compartment, depth in (("16", 6.69), ("1", 31.64)):
        alone = tissues.load("buhlmann_1995_a", compartments=[compartment])
        assert np.isinf(tissues.no_stop_time(depth - 0.01, "air", alone, surface_pressure=100.0))
        assert np.isfinite(tissues.no_stop_time(depth + 0.01, "air", alone, surface_pressure=100.0))


def test_two_to_one_leaves_33_fsw_unlimited() -> None:
    assert tissues.no_stop_time(33.0, "air", "boycott_1908", depth_unit="fsw") == np.inf
    for half, expected in (("5", 2.89), ("10", 5.78), ("20", 11.56), ("40", 23.11), ("75", 43.33)):
        alone = tissues.load("boycott_1908", compartments=[half])
        assert tissues.no_stop_time(100.0, "air", alone, depth_unit="fsw") == pytest.approx(
            expected, abs=0.005
        )


def test_the_short_deep_range_is_refused_or_flagged() -> None:
    with pytest.raises(ValidityError, match=r"refuses the no-stop time at 100 fsw"):
        tissues.no_stop_time(100.0, "air", "thalmann_vval18m_reconstructed", depth_unit="fsw")
    with pytest.warns(ValidityWarning, match="refuses 1 of 2"):
        two = tissues.no_stop_time(
            np.array([60.0, 120.0]), "air", "thalmann_vval18m_reconstructed", depth_unit="fsw"
        )
    assert np.isfinite(two[0])
    assert np.isnan(two[1])
    with pytest.warns(ValidityWarning, match="doubtful"):
        tissues.no_stop_time(100.0, "air", "thalmann_vval18", depth_unit="fsw")
    tissues.no_stop_time(99.9, "air", "thalmann_vval18", depth_unit="fsw")


def test_a_dry_set_takes_nitrox_as_air_at_the_equivalent_depth() -> None:
    """Nitrox at D and air at its equivalent air depth are the same if vapor is ignored."""
    for fraction, depth in ((0.68, 90.0), (0.64, 60.0)):
        equivalent = fraction / 0.79 * (depth + 33.0) - 33.0
        nitrox = tissues.no_stop_time(depth, gp.Gas(oxygen=1.0 - fraction), "us_navy_1957", depth_unit="fsw")
        air = tissues.no_stop_time(equivalent, "air", "us_navy_1957", depth_unit="fsw")
        assert nitrox == pytest.approx(air, rel=1e-9)
