"""Likelihoods by hand, fits that find the truth of simulated outcomes, intervals, tests, outcome files."""

from __future__ import annotations

import math
import os

import numpy as np
import pytest
from scipy.stats import binom

from gasphys import Exposure, risk
from gasphys.errors import InputFileError, NotReachableError, RangeError, UnknownNameError
from gasphys.risk import Compartment, HazardModel, Outcome

DIVE = Exposure.start("air").travel(depth=30, minutes=2).stay(40).travel(depth=0, minutes=3)
MODEL = HazardModel([Compartment(240.0, 3e-3)])

#: Simulated data sets of the calibration: many in the long run.
CALIBRATIONS = 200 if os.environ.get("GASPHYS_LONG") else 20


def _hazards(model: HazardModel, exposure: Exposure, *times: float) -> list[float]:
    ds = risk.probability(exposure, model, at=times)
    return [ds.total_hazard.sel(time=t).item() for t in times] + [ds.total_hazard[-1].item()]


def test_likelihood_of_each_kind_of_outcome() -> None:
    first, second, whole = _hazards(MODEL, DIVE, 100.0, 200.0)
    cases = [
        (Outcome(DIVE, "none"), -whole),
        (Outcome(DIVE, "event"), math.log1p(-math.exp(-whole))),
        (Outcome(DIVE, "event", 100.0, 200.0), -first + math.log(1.0 - math.exp(-(second - first)))),
        (
            Outcome(DIVE, "marginal"),
            0.1 * math.log1p(-math.exp(-whole)) - 0.9 * whole,
        ),
        (Outcome(DIVE, "event", weight=0.4), 0.4 * math.log1p(-math.exp(-whole)) - 0.6 * whole),
        (Outcome(DIVE, "none", count=7.0), -7.0 * whole),
    ]
    for outcome, expected in cases:
        assert risk.log_likelihood([outcome], MODEL) == pytest.approx(expected, rel=1e-10)
    together = risk.log_likelihood([one for one, _ in cases], MODEL)
    assert together == pytest.approx(sum(x for _, x in cases), rel=1e-12)
    untimed = risk.log_likelihood([cases[2][0]], MODEL, use_times=False)
    assert untimed == pytest.approx(cases[1][1], rel=1e-10)
    assert risk.log_likelihood([cases[3][0]], MODEL, marginal_weight=0.0) == pytest.approx(-whole, rel=1e-12)


def test_three_outcomes_are_told_apart() -> None:
    grave = HazardModel([Compartment(12.0, 5e-4)])
    mild, serious = _hazards(MODEL, DIVE)[0], _hazards(grave, DIVE)[0]
    expected = {
        "none": -mild - serious,
        "mild": -serious + math.log1p(-math.exp(-mild)),
        "serious": math.log1p(-math.exp(-serious)),
    }
    for outcome, value in expected.items():
        found = risk.log_likelihood([Outcome(DIVE, outcome)], MODEL, serious=grave)
        assert found == pytest.approx(value, rel=1e-10)
    assert sum(math.exp(v) for v in expected.values()) == pytest.approx(1.0, rel=1e-10)
    with pytest.raises(RangeError, match="three outcomes are none, mild and serious; 'event'"):
        risk.log_likelihood([Outcome(DIVE, "event")], MODEL, serious=grave)


def test_null_log_likelihood_of_the_large_navy_set() -> None:
    """190 events in 3322 exposures: Howle et al. 2017 data; with 110 marginals of weight 0.1 -758.6012."""
    plain = [Outcome(DIVE, "event", count=190), Outcome(DIVE, "none", count=3132)]
    assert risk.null_log_likelihood(plain) == pytest.approx(-728.1065, abs=5e-5)
    marginal = [*plain[:1], Outcome(DIVE, "none", count=3022), Outcome(DIVE, "marginal", count=110)]
    assert risk.null_log_likelihood(marginal) == pytest.approx(-758.6012, abs=5e-5)
    assert risk.null_log_likelihood([Outcome(DIVE, "none", count=9)]) == 0.0


def test_one_gain_has_a_closed_solution() -> None:
    """Exposures all alike: the estimate gives the observed share, its error the binomial's (saturated)."""
    seen = [Outcome(DIVE, "event", count=13), Outcome(DIVE, "none", count=187)]
    found = risk.fit(seen, MODEL)
    chance = risk.probability(DIVE, found.model).final_probability.item()
    assert chance == pytest.approx(13 / 200, rel=1e-6)
    assert found.log_likelihood == pytest.approx(risk.null_log_likelihood(seen), rel=1e-9)
    assert found.log_likelihood == pytest.approx(
        binom.logpmf(13, 200, 0.065) - math.log(math.comb(200, 13)), rel=1e-9
    )
    # R = -ln(1 - p): its variance is p/(n (1 - p)), and the gain is proportional to R.
    relative = found.result.standard_error.item() / found.result.estimate.item()
    assert relative == pytest.approx(math.sqrt(0.065 / (200 * 0.935)) / -math.log(0.935), rel=1e-4)


def _dives() -> list[Exposure]:
    out = []
    for depth in (18.0, 24.0, 30.0, 36.0, 42.0):
        for minutes in (12.0, 25.0, 50.0, 90.0):
            x = Exposure.start("air").travel(depth=depth, rate=18.0).stay(minutes)
            out.append(x.travel(depth=0.0, rate=9.0))
    return out


DIVES = _dives()
TRUTH = HazardModel([Compartment(15.0, 4e-4), Compartment(360.0, 1.5e-3)])


def _simulated(rng: np.random.Generator, each: int) -> tuple[Outcome, ...]:
    return risk.simulate(DIVES, TRUTH, rng, each)


def test_simulated_outcomes_are_binomial() -> None:
    chance = np.array([risk.probability(d, TRUTH).final_probability.item() for d in DIVES])
    seen = _simulated(np.random.default_rng(5), 100_000)
    events = {id(o.exposure): o.count for o in seen if o.outcome == "event"}
    share = np.array([events.get(id(d), 0.0) for d in DIVES]) / 100_000
    assert np.all(np.abs(share - chance) < 5.0 * np.sqrt(chance * (1 - chance) / 100_000))
    assert sum(o.count for o in seen) == 100_000 * len(DIVES)
    with pytest.raises(RangeError, match="at least 1"):
        risk.simulate(DIVES, TRUTH, np.random.default_rng(0), 0)


def test_the_truth_of_many_outcomes_is_found() -> None:
    seen = _simulated(np.random.default_rng(42), 40_000)
    start = TRUTH.with_parameters({"gain_1": 1e-3, "half_time_2": 200.0, "gain_2": 5e-4})
    found = risk.fit(seen, start, ["gain_1", "half_time_2", "gain_2"])
    for name, truth in TRUTH.parameters().items():
        if name in found.names:
            row = found.result.sel(parameter=name)
            assert abs(row.estimate.item() - truth) < 4.0 * row.standard_error.item()
            assert row.standard_error.item() < 0.1 * truth
            assert row.delta_low.item() < row.estimate.item() < row.delta_high.item()
    bins = risk.goodness_of_fit(found, bins=8)
    assert bins.attrs["p_value"] > 0.001
    assert bins.observed.sum().item() == found.result.attrs["events"]
    assert bins.predicted.sum().item() == pytest.approx(found.result.attrs["events"], rel=0.02)
    assert np.all(np.diff(bins.mean_probability) > 0.0)
    # A wrong model is noticed.
    wrong = risk.fit(seen, HazardModel([Compartment(5.0, 1e-3)]))
    assert risk.goodness_of_fit(wrong, bins=8).attrs["p_value"] < 1e-6


def test_intervals_cover_the_truth_as_often_as_they_say() -> None:
    """95 % intervals by profile and by delta: 90 to 99 % of 200 simulated calibrations (long run)."""
    rng = np.random.default_rng(2042)
    covered = np.zeros(2, dtype=int)
    truth = TRUTH.parameters()
    for _ in range(CALIBRATIONS):
        found = risk.fit(_simulated(rng, 60), TRUTH, ["gain_2"])
        row = found.result.sel(parameter="gain_2")
        covered[0] += row.delta_low.item() <= truth["gain_2"] <= row.delta_high.item()
        low, high = found.profile_interval("gain_2")
        covered[1] += low <= truth["gain_2"] <= high
    share = covered / CALIBRATIONS
    least = 0.90 if CALIBRATIONS >= 200 else 0.80
    assert np.all(share >= least), share
    assert np.all(share <= (0.99 if CALIBRATIONS >= 200 else 1.0)), share
    print(f"{CALIBRATIONS} calibrations: delta {share[0]:.3f}, profile {share[1]:.3f}")


def test_likelihood_ratio_and_profile() -> None:
    seen = _simulated(np.random.default_rng(7), 2000)
    small = risk.fit(seen, TRUTH.with_parameters({"half_time_2": 200.0}), ["gain_2"])
    large = risk.fit(seen, TRUTH.with_parameters({"half_time_2": 200.0}), ["gain_2", "half_time_2"])
    test = risk.likelihood_ratio_test(small, large)
    assert test.statistic.item() == pytest.approx(2 * (large.log_likelihood - small.log_likelihood), rel=1e-9)
    assert test.p_value.item() < 1e-3
    with pytest.raises(RangeError, match="no more parameters"):
        risk.likelihood_ratio_test(large, small)
    low, high = large.profile_interval("half_time_2")
    for end in (low, high):  # at the ends ln L has fallen by 1.92, the other refitted
        held = risk.fit(seen, large.model.with_parameters({"half_time_2": end}), ["gain_2"])
        assert large.log_likelihood - held.log_likelihood == pytest.approx(1.920729, abs=1e-3)
    with pytest.raises(UnknownNameError, match="gain_2"):
        large.profile_interval("gain_3")
    # Bands by the covariance: the spread of the draws is the standard error.
    rng = np.random.default_rng(1)
    drawn = [m.compartments[1].half_time for m in large.draws(4000, rng)]
    error = large.result.sel(parameter="half_time_2").standard_error.item()
    assert np.std(drawn) == pytest.approx(error, rel=0.06)


def test_a_likelihood_without_maximum_is_said() -> None:
    with pytest.raises(NotReachableError, match="gain_1 runs to zero or without end"):
        risk.fit([Outcome(DIVE, "event", count=5)], MODEL)  # certain events: the gain grows for ever
    with pytest.raises(NotReachableError, match="gain_1 runs to zero or without end"):
        risk.fit([Outcome(DIVE, "none", count=5)], MODEL)
    seen = [Outcome(DIVE, "event", count=13), Outcome(DIVE, "none", count=187)]
    with pytest.raises(NotReachableError, match=r"flat or has no maximum|runs to zero"):
        risk.fit(seen, MODEL, ["gain_1", "half_time_1"])  # one kind of exposure tells one number
    with pytest.raises(RangeError, match="no outcome"):
        risk.fit([], MODEL)


def test_three_outcomes_are_fitted() -> None:
    grave = HazardModel([Compartment(12.0, 2e-4)])
    seen = [
        Outcome(DIVE, "mild", count=9),
        Outcome(DIVE, "serious", count=2),
        Outcome(DIVE, "none", count=189),
    ]
    found = risk.fit(seen, MODEL, serious=grave)
    assert found.names == ["gain_1", "serious.gain_1"]
    serious = risk.probability(DIVE, found.serious).final_probability.item()
    mild = risk.probability(DIVE, found.model).final_probability.item()
    assert serious == pytest.approx(2 / 200, rel=1e-5)
    assert (1.0 - serious) * mild == pytest.approx(9 / 200, rel=1e-5)


FILE = """# Invented outcomes.
exposure,outcome,last_well_min,first_symptom_min,weight,count
dive.csv,none,,,,12
usn_9,event,60,180,,1
dive.csv,marginal,,,0.2,2
"""


@pytest.fixture
def folder(tmp_path):
    log = "time_min,depth_msw,gas\n0,0,air\n2,18,air\n40,18,air\n44,0,air\n"
    (tmp_path / "dive.csv").write_text(log, encoding="utf-8")
    return tmp_path


def test_a_file_of_outcomes(folder) -> None:
    path = folder / "outcomes.csv"
    path.write_text(FILE, encoding="utf-8")
    seen = risk.read_outcomes(path)
    assert [(o.name, o.outcome, o.count) for o in seen] == [
        ("dive.csv", "none", 12.0),
        ("usn_9", "event", 1.0),
        ("dive.csv", "marginal", 2.0),
    ]
    assert (seen[1].last_well, seen[1].first_symptom) == (60.0, 180.0)
    assert seen[2].share(0.1) == 0.2
    assert seen[0].exposure is seen[2].exposure


@pytest.mark.parametrize(
    ("old", "new", "line", "column", "message"),
    [
        ("weight,count", "weigth,count", 2, 50, "nearest: 'weight'"),
        ("exposure,outcome", "outcome,outcome", 2, None, "stands 0 times"),
        ("none,,,,12", "none,,,12", 3, None, "5 cells, the header has 6"),
        (",none,", ",nothing,", 3, 10, "unknown outcome 'nothing'"),
        ("12\n", "many\n", 3, 18, "count 'many' is not a number"),
        ("60,180", "180,60", 4, 13, "last_well 180 min must be before"),
        ("60,180", "60,", 4, 13, "go together"),
        ("usn_9", "usn_99", 4, 1, "usn_99"),
        ("0.2,2", "1.2,2", 5, 21, "weight = 1.2 is not between 0 and 1"),
        ("dive.csv,none", "dive2.csv,none", None, None, "dive2.csv"),
        ("none,,,,12", "none,10,20,,12", 3, None, "no time of onset"),
    ],
)
def test_a_file_of_outcomes_with_an_error(folder, old, new, line, column, message) -> None:
    path = folder / "outcomes.csv"
    path.write_text(FILE.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(InputFileError, match=message) as caught:
        risk.read_outcomes(path)
    if line is not None:
        assert caught.value.line == line
    if column is not None:
        assert caught.value.column == column


def test_an_empty_file_of_outcomes(folder) -> None:
    path = folder / "outcomes.csv"
    for text, message in (("# nothing\n", "empty"), ("exposure,outcome\n", "no outcome follows")):
        path.write_text(text, encoding="utf-8")
        with pytest.raises(InputFileError, match=message):
            risk.read_outcomes(path)
