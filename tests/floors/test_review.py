"""The review: crossings against dense sampling, statuses, levers, files."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

from gasphys import Exposure, review
from gasphys.doses import uptd
from gasphys.errors import ExposureError, InputFileError, ProvenanceError, UnknownNameError
from gasphys.limits import Limit, load
from gasphys.policy import provenance
from gasphys.reviews import TRACES, levers
from gasphys.schedules import treatment
from tests.floors.exposures import exposures

MADE = Limit(
    id="made",
    title="made for a test",
    quantity="breathing_gas_po2",
    comparison="<=",
    value=120.0,
    unit="kPa",
    published_value=120.0,
    authority="a test",
    edition="none",
    roles=("diver",),
    conditions="",
    provenance="read",
    source="common_practice",
)


def limit(**changed) -> Limit:
    return Limit(**{**MADE.__dict__, **changed})


@settings(max_examples=60, deadline=None)
@given(exposures(), st.floats(30.0, 250.0), st.sampled_from(["<=", ">="]))
def test_crossings_against_dense_samples(exposure: Exposure, value: float, comparison: str) -> None:
    found = review(exposure, limits=[limit(value=value, comparison=comparison)]).isel(limit=0)
    pieces = exposure.pieces()
    sign = 1.0 if comparison == "<=" else -1.0
    first, beyond, worst = np.nan, 0.0, -np.inf
    samples = (np.arange(4000) + 0.5) / 4000
    for k in range(len(exposure.part)):
        line = pieces.start_po2[k] + (pieces.end_po2[k] - pieces.start_po2[k]) * samples
        over = sign * line > sign * value + 1e-9 * value
        beyond += over.mean() * pieces.duration[k]
        if over.any() and np.isnan(first):
            first = pieces.times[k] + samples[np.argmax(over)] * pieces.duration[k]
        worst = max(worst, sign * pieces.start_po2[k], sign * pieces.end_po2[k])
    assert float(found.worst) == pytest.approx(sign * worst, rel=1e-12)
    step = exposure.columns["segment_duration"].max() / 4000
    assert float(found.time_beyond) == pytest.approx(beyond, abs=step * len(exposure.part))
    assert float(found.first_crossing) == pytest.approx(first, abs=step, nan_ok=True)
    assert float(found.margin) == pytest.approx(sign * value - worst, rel=1e-9, abs=1e-9)
    assert str(found.status.values) == ("within" if np.isnan(first) else "beyond")


@settings(max_examples=40, deadline=None)
@given(exposures(loops=False), st.floats(0.05, 0.95))
def test_dose_crossing_is_a_root(exposure: Exposure, share: float) -> None:
    total = float(TRACES["uptd"](exposure, exposure.pieces()).end[-1])
    if total < 1e-6:
        return
    value = share * total
    found = review(exposure, limits=[limit(quantity="uptd", value=value, unit="1")]).isel(limit=0)
    cut = exposure._split([float(found.first_crossing)])
    times = cut.pieces().times
    reached = TRACES["uptd"](cut, cut.pieces()).end
    index = int(np.argmin(np.abs(times[1:] - float(found.first_crossing))))
    assert reached[index] == pytest.approx(value, rel=1e-9)
    assert float(found.time_beyond) == pytest.approx(
        exposure.duration - float(found.first_crossing), rel=1e-9, abs=1e-9
    )


def test_a_value_on_the_limit_is_within() -> None:
    exposure = Exposure.start("oxygen").travel(pressure=120.0, minutes=1).stay(5)
    found = review(exposure, limits=[limit()])
    assert found.status.values.tolist() == ["within"]
    assert np.isnan(found.first_crossing.values[0])
    above = Exposure.start("oxygen").travel(pressure=120.001, minutes=1).stay(5)
    assert review(above, limits=[limit()]).status.values.tolist() == ["beyond"]


def test_roles_and_reasons() -> None:
    found = review(treatment("usn_6"), role="patient")
    row = found.sel(limit="noaa_cns_single")
    assert str(row.status.values) == "not applicable"
    assert "1.60 atm" in str(row.reason.values)
    assert "made for divers" in str(row.reason.values)
    as_diver = review(treatment("usn_6"), role="diver").sel(limit="noaa_cns_single")
    assert str(as_diver.status.values) == "not applicable"
    assert "1.60 atm" in str(as_diver.reason.values)
    assert str(found.sel(limit="chamber_o2_nfpa").status.values) == "not judged"
    assert set(np.unique(found.status.values)) <= {"beyond", "within", "not applicable", "not judged"}


def test_every_default_limit_has_a_status_for_every_role() -> None:
    dive = Exposure.start("nitrox 48").travel(depth=25, minutes=2).stay(5)
    for role in ("diver", "patient", "attendant"):
        found = review(dive, role=role)
        assert found.sizes["limit"] == len(load())
        for name in found.limit.values:
            row = found.sel(limit=name)
            judged = str(row.status.values) in ("beyond", "within")
            assert judged == (str(row.reason.values) == "")
            if judged:
                assert np.isfinite(row.worst)
                assert np.isfinite(row.margin)


def test_scenarios_equal_single_reviews() -> None:
    depth = xr.DataArray([5.0, 20.0, 40.0], dims="depth", attrs={"units": "msw"})
    many = review(Exposure.start("nitrox 48").travel(depth=depth, rate=10).stay(30).travel(depth=0, rate=9))
    for k, one in enumerate((5.0, 20.0, 40.0)):
        single = review(
            Exposure.start("nitrox 48").travel(depth=one, rate=10).stay(30).travel(depth=0, rate=9)
        )
        np.testing.assert_array_equal(many.status.isel(depth=k), single.status)
        for name in ("worst", "margin", "time_of_worst", "first_crossing", "time_beyond"):
            got, expected = many[name].isel(depth=k).values, single[name].values
            np.testing.assert_allclose(got, expected, rtol=1e-12, err_msg=name)


def test_scenarios_that_a_limit_is_not_for_leave_the_others_alone() -> None:
    """One without helium, one on pure oxygen, one with CO2, one longer than a day, in one batch."""
    mix = xr.DataArray(
        [[0.18, 0.37, 0.45, 0.0], [1.0, 0.0, 0.0, 0.0], [0.21, 0.78, 0.0, 0.01], [0.21, 0.79, 0.0, 0.0]],
        dims=("case", "gas"),
        coords={"gas": ["O2", "N2", "He", "CO2"]},
        attrs={"units": "1"},
    )
    minutes = xr.DataArray([20.0, 30.0, 10.0, 2000.0], dims="case", attrs={"units": "min"})

    def dive(gas: xr.DataArray, time: object) -> Exposure:
        start = Exposure.start(gas, depth_unit="fsw")
        return start.travel(depth=20, minutes=1).stay(time).travel(depth=0, minutes=1)

    whole = dive(mix, minutes)
    for role in ("diver", "attendant"):
        many = review(whole, role=role)
        for k, one in enumerate(whole.scenarios()):
            single = review(one, role=role)
            np.testing.assert_array_equal(many.status.isel(case=k), single.status)
            for name in ("worst", "margin", "first_crossing", "time_beyond"):
                got, expected = many[name].isel(case=k).values, single[name].values
                np.testing.assert_allclose(got, expected, rtol=1e-12, err_msg=name)


def test_netcdf_round_trip(tmp_path) -> None:
    found = review(treatment("usn_5"), role="patient")
    for engine in ("scipy", "h5netcdf"):
        found.to_netcdf(tmp_path / f"{engine}.nc", engine=engine)
        with xr.open_dataset(tmp_path / f"{engine}.nc", engine=engine) as back:
            assert back.load().identical(found)


@settings(max_examples=40, deadline=None)
@given(exposures(loops=False), st.floats(60.0, 200.0))
def test_levers_bring_the_exposure_back(exposure: Exposure, value: float) -> None:
    bound = limit(value=value)
    for lever in levers(exposure, bound):
        assert lever.time is None
        index = [exposure.gas_name(k) for k in range(len(exposure.part))].index(lever.of)
        same = np.array([exposure.gas_name(k) == lever.of for k in range(len(exposure.part))])
        pieces = exposure.pieces()
        top = np.maximum(pieces.start_pressure, pieces.end_pressure)[same].max()
        if lever.pressure is not None:
            assert exposure.fractions["O2"][index] * (top + lever.pressure) == pytest.approx(value, rel=1e-6)
        if lever.gas is not None:
            from gasphys import Gas

            instead = Gas.parse(lever.gas).oxygen * top
            # Rounded to a tenth of a percent on the side of the limit.
            assert value - 0.0011 * top <= instead <= value * (1 + 1e-9)


def test_lever_of_the_story() -> None:
    """0.9 msw less, or nitrox 46.5 instead of 48, by hand: 140/0.48 and 140/301.325."""
    dive = Exposure.start("trimix 17/48").travel(depth=56, rate=20).stay(10).travel(depth=20, rate=9)
    dive = dive.switch("nitrox 48").stay(3).travel(depth=0, rate=9)
    bound = next(x for x in load() if x.id == "po2_recreational_common")
    (lever,) = levers(dive, bound)
    assert lever.of == "nitrox 48"
    assert lever.pressure == pytest.approx(140.0 / 0.48 - 301.325, abs=1e-6)
    assert lever.gas == "nitrox 46.4"  # 140/301.325 = 46.46 %, rounded down to stay under
    assert lever.time is None


def test_time_lever_of_a_dose() -> None:
    exposure = Exposure.start("oxygen").stay(700)
    bound = limit(quantity="uptd", value=615.0, unit="1")
    (lever,) = levers(exposure, bound)
    assert lever.time == pytest.approx(85.0, abs=1e-6)
    shorter = Exposure.start("oxygen").stay(700 - lever.time)
    assert uptd(101.325, shorter.duration) == pytest.approx(615.0, rel=1e-9)


def test_levers_of_density_use_helium() -> None:
    exposure = Exposure.start("air").travel(depth=45, minutes=3).stay(5)
    bound = next(x for x in load() if x.id == "density_recommended")
    (lever,) = levers(exposure, bound)
    assert lever.gas is not None
    assert lever.gas.startswith("trimix 21/")
    assert review(Exposure.start(lever.gas).travel(depth=45, minutes=3), limits=[bound]).status.values == [
        "within"
    ]


def test_refusals() -> None:
    with pytest.raises(UnknownNameError, match="role"):
        review(Exposure.start("air").stay(1), role="nurse")
    with pytest.raises(ExposureError, match="no piece"):
        review(Exposure.start("air"))
    with provenance("secondary"), pytest.raises(ProvenanceError, match="memory_high"):
        review(Exposure.start("air").stay(1))
    with provenance("secondary"):
        assert review(Exposure.start("air").stay(1), limits=[limit()]).status.values == ["within"]


SITE = """
[[limit]]
id = "house_po2"
title = "Highest PO2 of the unit"
quantity = "breathing_gas_po2"
comparison = "<="
value = 2.5
unit = "atm"
authority = "the unit"
edition = "house rule 3"
roles = ["patient"]
conditions = "all sessions"
provenance = "read"
source = "house rule 3"
"""


def test_a_sites_limits_come_first_and_only_add(tmp_path) -> None:
    path = tmp_path / "house.toml"
    path.write_text(SITE)
    found = review(treatment("usn_6"), role="patient", limits=path)
    assert str(found.limit.values[0]) == "house_po2"
    assert found.sizes["limit"] == len(load()) + 1
    assert str(found.status.values[0]) == "beyond"
    path.write_text(SITE.replace("house_po2", "density_maximum"))
    with pytest.raises(UnknownNameError, match="can only add"):
        load(path)
    assert load([MADE, "default"])[0].id != ""


@pytest.mark.parametrize(
    ("old", "new", "line", "words"),
    [
        ("value = 2.5", "value = two", 7, "Invalid"),
        ("value = 2.5", 'value = "2.5"', 7, "wrong kind"),
        ("value = 2.5", "value = 1e9", 7, "outside the possible range"),
        ('unit = "atm"', 'unit = "min"', 8, "measures something else"),
        ('unit = "atm"', 'unit = "atmo"', 8, "unknown unit"),
        ('comparison = "<="', 'comparison = "<"', 6, "write <= or >="),
        ('roles = ["patient"]', 'roles = ["nurse"]', 11, "unknown role"),
        ('quantity = "breathing_gas_po2"', 'quantity = "po"', 5, "unknown quantity"),
        ('provenance = "read"', 'provenance = "sure"', 13, "unknown provenance"),
        ('edition = "house rule 3"\n', "", 2, "has no edition"),
        ('title = "Highest PO2 of the unit"', 'titel = "x"', 4, "nearest: 'title'"),
        ("[[limit]]", "[limit]", None, "[[limit]]"),
    ],
)
def test_bad_limit_files(tmp_path, old: str, new: str, line: int | None, words: str) -> None:
    path = tmp_path / "house.toml"
    path.write_text(SITE.replace(old, new))
    with pytest.raises(InputFileError) as caught:
        load(path)
    assert words in str(caught.value)
    assert "Remedy" in str(caught.value)
    assert caught.value.line == line
