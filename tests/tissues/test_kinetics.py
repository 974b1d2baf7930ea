"""Kinetics against a general ODE solver, and what must not change them: splitting, joining, batching."""

from __future__ import annotations

import itertools
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

import gasphys as gp
from gasphys import Exposure, tissues
from gasphys.tissues import kinetics
from gasphys.tissues.equations import tissue_pressure
from gasphys.tissues.kinetics import Breath, advance, along, equilibrium, stretches

from .exposures import random_exposure
from .sets import THREE_GASES

SOLVER: dict[str, Any] = {"method": "DOP853", "rtol": 1e-12, "atol": 1e-13}
FSW = 101.325 / 33.0
AIR = Breath(np.array(0.21), np.array([0.79]), np.array(np.nan))


@pytest.fixture(scope="module")
def three_gases(tmp_path_factory: pytest.TempPathFactory) -> tissues.TissueSet:
    path = tmp_path_factory.mktemp("sets") / "three_gases.toml"
    path.write_text(THREE_GASES, encoding="utf-8")
    return tissues.load(path)


# -- Exponential: 200 random exposures with three inert gases --------------------------------------


def _reference(model: tissues.TissueSet, dive: Exposure) -> np.ndarray:
    """Integrate dp/dt = k (PA - p) piece by piece, PA written out here a second time, split at its kinks."""
    vapor, surplus = 6.27, (1.0 - 0.9) / 0.9 * 40.0 * 0.133322387415
    pieces = dive.pieces()
    k = np.log(2.0) / model.half_time
    n2 = 0.79 * (float(dive.surface_pressure) - vapor + surplus)
    p = np.zeros(model.half_time.shape)
    p[:, 0] = n2
    for i in range(pieces.duration.size):
        t = pieces.duration[i]
        low, high = pieces.start_pressure[i], pieces.end_pressure[i]
        mix = np.array(
            [pieces.fractions.get(g, np.zeros(pieces.duration.size))[i] for g in model.inert_gases]
        )
        setpoint = pieces.setpoint[i]

        def inert(
            s: float, low: float = low, high: float = high, mix: np.ndarray = mix, setpoint: float = setpoint
        ) -> np.ndarray:
            pressure = low + (high - low) * s
            if np.isnan(setpoint):
                return mix * max(pressure - vapor + surplus, 0.0)
            oxygen = 1.0 - mix.sum()
            return mix / (1.0 - oxygen) * max(pressure - vapor - setpoint, 0.0)

        cuts = [0.0, 1.0]
        if not np.isnan(setpoint) and low != high:
            kink = (setpoint + vapor - low) / (high - low)
            if 0.0 < kink < 1.0:
                cuts = [0.0, kink, 1.0]
        for s0, s1 in itertools.pairwise(cuts):

            def slope(s: float, y: np.ndarray, t: float = t, inert: Any = inert) -> np.ndarray:
                return t * (k * (inert(s) - y.reshape(k.shape))).ravel()

            p = solve_ivp(slope, (s0, s1), p.ravel(), **SOLVER).y[:, -1].reshape(k.shape)
    return p


@pytest.mark.parametrize("seed", range(20))
def test_ramps_against_an_ode_solver(seed: int, three_gases: tissues.TissueSet) -> None:
    """Ten exposures a seed, 200 in all, to 1e-9 relative."""
    rng = np.random.default_rng(seed)
    for _ in range(10):
        dive = random_exposure(rng, "argon", pieces=6)
        ours = tissues.tensions(dive, three_gases).final.values
        np.testing.assert_allclose(ours, _reference(three_gases, dive), rtol=1e-9, atol=1e-9)


def test_worked_tensions() -> None:
    """The printed table of tensions [bar], through an exposure and the set's convention."""
    folder = Path(__file__).parent / "published"
    lines = (folder / "worked_tensions_bar.csv").read_text(encoding="utf-8").splitlines()[1:]
    rows = {float(r.split(",")[0]): [float(x) for x in r.split(",")[1:5]] for r in lines}
    model = tissues.load("buhlmann_1995_a", compartments=["1", "1b", "2", "3", "5", "7", "9", "16"][1:])
    fast = tissues.load("buhlmann_1995_a", compartments=["1", "2"])
    start = Exposure.start("air", surface_pressure=100.0)
    step = Exposure.start("air", surface_pressure=100.0, pressure=400.0).stay(20.0)
    ramp = start.travel(depth=30.0, rate=20.0).stay(18.5).travel(depth=0.0, rate=10.0)
    for one in (model, fast):
        held = tissues.tensions(step, one).tissue_pressure.sel(inert_gas="N2")
        run = tissues.tensions(ramp, one).tissue_pressure.sel(inert_gas="N2")
        for c, half in zip(one.compartments, one.half_time[:, 0], strict=True):
            ours = [held.sel(compartment=c)[-1], *run.sel(compartment=c)[1:]]
            np.testing.assert_allclose(
                np.array(ours, dtype=float) / 100.0, rows[half], rtol=0.0, atol=5.001e-7
            )
    # Tissues of 27 min and slower gain gas during that ascent.
    gains = run.isel(time=-1) > run.isel(time=-2)
    assert not gains.any()
    slow = tissues.tensions(ramp, model).tissue_pressure.sel(inert_gas="N2")
    gained = (slow.isel(time=-1) > slow.isel(time=-2)).values
    assert [bool(g) for g in gained] == [bool(h >= 27.0) for h in model.half_time[:, 0]]


@given(
    n=st.integers(1, 300),
    seed=st.integers(0, 2**32 - 1),
    scale=st.sampled_from([1e-9, 1e-3, 0.2, 30.0, 1e5]),
)
def test_the_blocked_scan_is_the_equation_step_by_step(n: int, seed: int, scale: float) -> None:
    rng = np.random.default_rng(seed)
    model = tissues.load("buhlmann_1995_c")
    inert = rng.uniform(0.0, 500.0, (n, 2)), rng.uniform(0.0, 500.0, (n, 2))
    nothing = np.zeros(n)
    row = kinetics.Stretches(rng.exponential(scale, n), nothing, nothing, *inert)
    state = rng.uniform(0.0, 400.0, model.half_time.shape)
    found = along(model, state, row)
    p = state
    for k in range(n):
        p = tissue_pressure.raw(p, inert[0][k], inert[1][k], row.duration[k], model.half_time)
        np.testing.assert_allclose(found[..., k + 1], p, rtol=1e-12, atol=1e-13)


def test_tiny_steps_lose_nothing() -> None:
    """A minute in a hundred thousand steps, helium from nothing, against one step: 1e-12 relative."""
    model = tissues.load("buhlmann_1995_c")
    mix = gp.Gas(oxygen=0.18, helium=0.45)
    whole = Exposure.start(mix).travel(depth=40.0, minutes=1.0)
    n = 100_000
    pieces = whole.pieces()
    edges = np.linspace(pieces.start_pressure[0], pieces.end_pressure[0], n + 1)
    many = gp.exposure.Pieces(
        duration=np.full(n, 1.0 / n),
        start_pressure=edges[:-1],
        end_pressure=edges[1:],
        start_po2=edges[:-1] * 0.18,
        end_po2=edges[1:] * 0.18,
        fractions={k: np.full(n, v[0]) for k, v in pieces.fractions.items()},
        setpoint=np.full(n, np.nan),
        times=np.linspace(0.0, 1.0, n + 1),
    )
    begin = equilibrium(model, 101.325)
    one, steps = (along(model, begin, stretches(model, p)[0])[..., -1] for p in (pieces, many))
    np.testing.assert_allclose(steps, one, rtol=1e-12)


# -- Splitting, joining, batching -------------------------------------------------------------------

EXACT = ("buhlmann_1995_c", "workman_1965", "thalmann_vval18", "thalmann_vval18m_reconstructed")


def _gases_for(model: str) -> str:
    if model in ("boycott_1908", "kidd_stubbs_1983"):
        return "air"
    return "trimix" if len(tissues.load(model).inert_gases) > 1 else "nitrox"


@pytest.mark.parametrize("model", EXACT)
@settings(max_examples=20)
@given(seed=st.integers(0, 2**32 - 1))
def test_splitting_changes_nothing(model: str, seed: int) -> None:
    rng = np.random.default_rng(seed)
    dive = random_exposure(rng, _gases_for(model), pieces=5)
    at = np.sort(rng.uniform(0.0, dive.duration, 9))
    with gp.validity("ignore"):
        whole = tissues.tensions(dive, model)
        cut = tissues.tensions(dive._split(at), model)
        sampled = tissues.tensions(dive, model, at=at)
    for other in (cut, sampled):
        np.testing.assert_allclose(other.final.values, whole.final.values, rtol=1e-12, atol=1e-12)
    middle = cut.tissue_pressure.sel(time=at, method="nearest").values
    np.testing.assert_allclose(sampled.tissue_pressure.sel(time=at).values, middle, rtol=1e-11, atol=1e-11)


@pytest.mark.parametrize("model", tissues.models())
def test_joined_is_chained(model: str) -> None:
    rng = np.random.default_rng(5)
    one, two = (random_exposure(rng, _gases_for(model), pieces=4, deepest=40.0) for _ in range(2))
    two = Exposure.start(
        "air" if _gases_for(model) == "air" else "nitrox 32", surface_pressure=one.surface_pressure
    )
    two = two.travel(depth=20.0, minutes=2.0).stay(20.0).travel(depth=0.0, minutes=2.0)
    with gp.validity("ignore"):
        joined = tissues.tensions(Exposure.join([one, two]), model)
        first = tissues.tensions(one, model)
        for given_back in (first, first.final):
            second = tissues.tensions(two, model, initial=given_back)
            np.testing.assert_allclose(second.final.values, joined.final.values, rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(second.ceiling_pressure[-1], joined.ceiling_pressure[-1], rtol=1e-11)


@pytest.mark.parametrize("model", tissues.models())
def test_every_scenario_is_its_single_run(model: str) -> None:
    depths = xr.DataArray(
        [12.0, 20.0, 33.0], dims="depth", coords={"depth": [12.0, 20.0, 33.0]}, attrs={"units": "msw"}
    )
    stays = xr.DataArray([31.0, 50.0], dims="stay", coords={"stay": [31.0, 50.0]}, attrs={"units": "min"})

    def build(depth: Any, stay: Any) -> Exposure:
        dive = Exposure.start("air").travel(depth=depth, minutes=2.0).stay(stay)
        return dive.travel(depth=0.0, minutes=4.0).stay(30.0)

    batch = tissues.tensions(build(depths, stays), model)
    assert batch.tissue_pressure.dims == ("depth", "stay", "compartment", "inert_gas", "point")
    for depth in depths.values:
        for stay in stays.values:
            alone = tissues.tensions(build(float(depth), float(stay)), model)
            here = batch.sel(depth=depth, stay=stay)
            np.testing.assert_array_equal(here.tissue_pressure.values, alone.tissue_pressure.values)
            np.testing.assert_array_equal(here.ceiling_pressure.values, alone.ceiling_pressure.values)
            assert (
                here.controlling_compartment.values.tolist() == alone.controlling_compartment.values.tolist()
            )


def test_air_at_equilibrium_stays_for_ever() -> None:
    """0.740467 bar at 1.0 bar; 26.07 fsw dry; 24.57 fsw in the exponential-linear convention [computed]."""
    for model, surface, unit, expected in (
        ("buhlmann_1995_a", 100.0, 100.0, 0.740467),
        ("us_navy_1957", 101.325, FSW, 26.07),
        ("thalmann_vval18", 101.325, FSW, 24.57),
    ):
        ds = tissues.tensions(Exposure.start("air", surface_pressure=surface).stay(1e5), model)
        np.testing.assert_allclose(
            ds.tissue_pressure.sel(inert_gas="N2").values / unit,
            expected,
            rtol=0.0,
            atol=5e-3 if unit == FSW else 5e-7,
        )
        np.testing.assert_allclose(ds.residual_pressure.values, 0.0, atol=1e-9)


# -- Loops ------------------------------------------------------------------------------------------


def test_loop_inert_gas_is_what_vapor_and_set_point_leave() -> None:
    """max(0, ambient - vapor - set-point), shared as in the diluent, on both sides of the clamp."""
    model = tissues.load("buhlmann_1995_c", compartments=["4"])
    with gp.validity("ignore"):
        loop = Exposure.start("air").loop("1.3 bar", "trimix 10/60").travel(depth=60.0, minutes=5.0)
    row, before = stretches(model, loop.pieces())
    # Cut where the set-point meets ambient pressure and where vapor leaves room for inert gas.
    assert [round(float(x), 4) for x in row.end_pressure] == [130.0, 136.27, 701.325]
    assert before.tolist() == [0, 1, 3]
    assert not row.start_inert[:2].any()
    np.testing.assert_allclose(
        row.end_inert[-1], np.array([0.3, 0.6]) / 0.9 * (701.325 - 6.27 - 130.0), rtol=1e-12
    )


def test_prebreathed_oxygen_decays_to_nothing() -> None:
    ds = tissues.tensions(
        Exposure.start("oxygen").stay(4.0), tissues.load("buhlmann_1995_c", compartments=["1"])
    )
    p = ds.tissue_pressure.sel(inert_gas="N2", compartment="1").values
    assert p[-1] == pytest.approx(p[0] / 2.0, rel=1e-12)
    # In the exponential-linear convention arterial inert gas on oxygen is held at zero.
    slow = tissues.tensions(
        Exposure.start("oxygen").stay(240.0), tissues.load("thalmann_vval18", compartments=["240"])
    )
    p = slow.tissue_pressure.sel(inert_gas="N2").values[0]
    assert p[-1] == pytest.approx(p[0] / 2.0, rel=1e-12)


# -- Exponential-linear -----------------------------------------------------------------------------


def _linear_reference(half: float, p: float, dive: Exposure, over: float) -> float:
    """Integrate one compartment branch by branch, events at p = L; constants typed again [fsw]."""
    k = np.log(2.0) / half
    pieces = dive.pieces()
    for i in range(pieces.duration.size):
        t, low, high = pieces.duration[i], pieces.start_pressure[i] / FSW, pieces.end_pressure[i] / FSW
        if t == 0.0:
            continue
        oxygen, setpoint = pieces.fractions["O2"][i], pieces.setpoint[i] / FSW

        def ambient(s: float, low: float = low, high: float = high) -> float:
            return low + (high - low) * s

        def arterial(
            s: float, ambient: Any = ambient, oxygen: float = oxygen, setpoint: float = setpoint
        ) -> float:
            pressure = ambient(s)
            po2 = oxygen * pressure if np.isnan(setpoint) else min(setpoint, pressure)
            return max(pressure - po2 - 1.5, 0.0)

        def threshold(s: float, ambient: Any = ambient) -> float:
            return ambient(s) - 2.0 - 2.3 + over

        def below(s: float, y: Any, t: float = t, arterial: Any = arterial) -> Any:
            return [t * k * (arterial(s) - y[0])]

        def above(
            s: float, y: Any, t: float = t, arterial: Any = arterial, threshold: Any = threshold
        ) -> Any:
            return [t * k * (arterial(s) - threshold(s))]

        def meets(s: float, y: Any, threshold: Any = threshold) -> float:
            return float(y[0] - threshold(s))

        meets.terminal = True  # type: ignore[attr-defined]
        kinks = {0.0, 1.0}
        zero = 1.5 / (1.0 - oxygen) if np.isnan(setpoint) and oxygen < 1.0 else setpoint + 1.5
        for edge in (zero, setpoint):
            if low != high and np.isfinite(edge) and 0.0 < (edge - low) / (high - low) < 1.0:
                kinks.add((edge - low) / (high - low))
        stops = sorted(kinks)
        for begin, end in itertools.pairwise(stops):
            s = begin
            while s < end:
                gap = p - threshold(s)
                rate = t * k * (arterial(s) - threshold(s)) - (high - low)
                linear = gap > 1e-9 or (abs(gap) <= 1e-9 and rate > 0.0)
                if abs(gap) <= 1e-9:  # step off the event before looking for the next one
                    s1 = min(end, s + 1e-7)
                    p += t * k * (arterial(s) - (threshold(s) if linear else p)) * (s1 - s)
                    s = s1
                    continue
                found = solve_ivp(
                    above if linear else below, (s, end), [p], events=meets, max_step=0.02, **SOLVER
                )
                p, s = float(found.y[0, -1]), float(found.t[-1])
    return p


@pytest.mark.parametrize("over", [0.0, 10.0])
@pytest.mark.parametrize("seed", range(8))
def test_exponential_linear_against_an_ode_with_events(seed: int, over: float) -> None:
    rng = np.random.default_rng(100 + seed)
    name = "thalmann_vval18" if over == 0.0 else "thalmann_vval18m_reconstructed"
    chosen = ["5", "20", "80"]
    model = tissues.load(name, compartments=chosen)
    dive = random_exposure(rng, "nitrox", pieces=6, deepest=50.0)
    with gp.validity("ignore"):
        ours = tissues.tensions(dive, model, initial=101.325).final.sel(inert_gas="N2").values / FSW
    for c, found in zip(chosen, ours, strict=True):
        assert found == pytest.approx(_linear_reference(float(c), 24.57, dive, over), rel=2e-7, abs=2e-6)


@pytest.mark.parametrize(
    ("half", "oxygen", "start", "low", "high", "minutes", "crossings"),
    [
        # Slow ascent on air: off the linear branch, and on it again near the surface.
        ("20", 0.21, 105.0, 103.0, 33.0, 240.0, 2),
        # The same with the branch left for the middle of the way only.
        ("20", 0.21, 100.7, 103.0, 33.0, 176.4, 2),
        # Very slow descent on a gas with hardly any oxygen: onto the linear branch, and off it again.
        ("5", 0.05, 28.0, 33.0, 100.0, 670.0, 2),
        ("5", 0.05, 30.0, 33.0, 100.0, 670.0, 1),
        ("20", 0.2, 5.65, 10.0, 13.0, 144.0, 2),
        ("20", 0.2, 5.65, 10.0, 16.0, 288.0, 2),
        ("40", 0.21, 70.0, 103.0, 33.0, 240.0, 1),
    ],
)
def test_a_compartment_may_cross_twice_within_one_ramp(
    half: str, oxygen: float, start: float, low: float, high: float, minutes: float, crossings: int
) -> None:
    model = tissues.load("thalmann_vval18", compartments=[half])
    breath = Breath(np.array(oxygen), np.array([1.0 - oxygen]), np.array(np.nan))
    state = np.array([[start * FSW]])
    whole = advance(model, state, np.array(minutes), np.array(low * FSW), np.array(high * FSW), breath)
    edges = np.linspace(low, high, 1001)
    parts, above = state, []
    for a, b in itertools.pairwise(edges):
        parts = advance(
            model, parts, np.array(minutes / 1000.0), np.array(a * FSW), np.array(b * FSW), breath
        )
        above.append(bool(parts[0, 0] / FSW > b - 4.3))
    changes = sum(x != y for x, y in itertools.pairwise([start > low - 4.3, *above]))
    assert changes == crossings
    np.testing.assert_allclose(parts, whole, rtol=1e-11)
    # The same as one stretch of a row.
    ends = np.array([[low, high]]) * FSW
    inert = kinetics.inert_pressure(model, ends[0], breath)
    one = kinetics.Stretches(np.array([minutes]), ends[:, 0], ends[:, 1], inert[:1], inert[1:])
    np.testing.assert_allclose(along(model, state, one)[..., -1], whole, rtol=1e-12)


@pytest.mark.parametrize("over", [0.0, 10.0])
@settings(max_examples=40)
@given(
    n=st.integers(1, 200),
    seed=st.integers(0, 2**32 - 1),
    scale=st.sampled_from([1e-6, 0.2, 5.0, 300.0]),
    swing=st.sampled_from([0.0, 1.0, 60.0]),
)
def test_the_scan_of_branches_is_the_kernel_stretch_by_stretch(
    over: float, n: int, seed: int, scale: float, swing: float
) -> None:
    """Blocks taken on one branch, crossings and all, against one exact stretch after the other."""
    name = "thalmann_vval18" if over == 0.0 else "thalmann_vval18m_reconstructed"
    model = tissues.load(name)
    rng = np.random.default_rng(seed)
    pressure = 101.325 + np.abs(np.cumsum(rng.normal(0.0, swing, (3, n + 1)), axis=-1))
    oxygen = rng.uniform(0.05, 0.9, (3, 1))
    inert = np.maximum((1.0 - oxygen) * pressure - 1.5 * FSW, 0.0)[..., None]
    row = kinetics.Stretches(
        rng.exponential(scale, (3, n)), pressure[:, :-1], pressure[:, 1:], inert[:, :-1], inert[:, 1:]
    )
    state = rng.uniform(40.0, 400.0, (3, *model.half_time.shape))
    found = along(model, state, row)
    p = state
    for k in range(n):
        p = kinetics.KERNELS["exponential_linear"](model, p, *row.at(k))
        np.testing.assert_allclose(found[..., k + 1], p, rtol=1e-11, atol=1e-11)


@pytest.mark.parametrize("model", tissues.models())
@settings(max_examples=15)
@given(seed=st.integers(0, 2**32 - 1))
def test_what_is_worked_out_once_is_the_plain_step(model: str, seed: int) -> None:
    """Stays of several lengths and passages of several states, as planners ask, against advance."""
    one = tissues.load(model)
    rng = np.random.default_rng(seed)
    lanes = 3
    gases = len(one.inert_gases)
    oxygen = np.full(lanes, 0.21) if one.air_only else rng.uniform(0.1, 0.9, lanes)
    shares = rng.dirichlet(np.ones(gases), lanes)
    setpoint = (
        np.where(rng.uniform(size=lanes) < 0.3, 130.0, np.nan) if not one.air_only else np.full(3, np.nan)
    )
    breath = Breath(oxygen, (1.0 - oxygen)[:, None] * shares, setpoint)
    state = rng.uniform(50.0, 300.0, (lanes, *one.half_time.shape))
    low, high = rng.uniform(105.0, 500.0, (2, lanes))
    minutes = rng.exponential(10.0, (lanes, 4))
    rows = [Breath(oxygen[k], breath.inert[k], setpoint[k]) for k in range(lanes)]
    stays = kinetics.stay(one, state, minutes, low, breath)
    shared = kinetics.stay(one, state, minutes[:1], low, breath)
    single = kinetics.stay(one, state, minutes[:, 0], low, breath)
    passage = kinetics.Passage.of(one, minutes[:, 0], low, high, breath)
    passed, several = passage(state), passage.take(np.array([2, 0]))(stays[[2, 0]])
    for k in range(lanes):
        np.testing.assert_allclose(single[k], stays[k, 0], rtol=1e-12)
        plain = advance(one, state[k], minutes[k, 0], low[k], high[k], rows[k])
        np.testing.assert_allclose(passed[k], plain, rtol=1e-11)
        for j in range(4):
            plain = advance(one, state[k], minutes[k, j], low[k], low[k], rows[k])
            np.testing.assert_allclose(stays[k, j], plain, rtol=1e-11)
            plain = advance(one, state[k], minutes[0, j], low[k], low[k], rows[k])
            np.testing.assert_allclose(shared[k, j], plain, rtol=1e-11)
    for place, k in enumerate((2, 0)):
        for j in range(4):
            plain = advance(one, stays[k, j], minutes[k, 0], low[k], high[k], rows[k])
            np.testing.assert_allclose(several[place, j], plain, rtol=1e-11)


def test_worked_values_of_the_linear_branch() -> None:
    """40-min tissue, 43 fsw absolute on air, from 50 fsw [computed]."""
    for name, minutes, expected in (
        ("thalmann_vval18", 60.0, 43.5225),
        ("thalmann_vval18", 150.0, 35.3102),
        ("thalmann_vval18m_reconstructed", 60.0, 38.6867),
    ):
        model = tissues.load(name, compartments=["40"])
        p = advance(
            model,
            np.array([[50.0 * FSW]]),
            np.array(minutes),
            np.array(43.0 * FSW),
            np.array(43.0 * FSW),
            AIR,
        )
        assert float(p[0, 0]) / FSW == pytest.approx(expected, abs=5e-5)
    for name, rate in (("thalmann_vval18", -0.10796), ("thalmann_vval18m_reconstructed", -0.28124)):
        model = tissues.load(name, compartments=["40"])
        p = advance(
            model, np.array([[60.0 * FSW]]), np.array(1.0), np.array(43.0 * FSW), np.array(43.0 * FSW), AIR
        )
        assert float(p[0, 0]) / FSW - 60.0 == pytest.approx(rate, abs=5e-6)


def test_a_large_overpressure_is_the_exponential_model(tmp_path: Path) -> None:
    path = tmp_path / "never_linear.toml"
    path.write_text(
        'based_on = "thalmann_vval18"\ntitle = "never linear"\n[convention]\ngas_phase_overpressure = 1e5\n',
        encoding="utf-8",
    )
    never = tissues.load(path)
    dive = (
        Exposure.start("air", depth_unit="fsw")
        .travel(depth=90, rate=75)
        .stay(60)
        .travel(depth=0, rate=30)
        .stay(90)
    )
    ours = tissues.tensions(dive, never)
    linear = tissues.tensions(dive, "thalmann_vval18")
    p = equilibrium(never, 101.325)[:, 0]
    for k in range(4):
        one = dive.pieces()
        ends = [0.79 * x[k] - 1.5 * FSW for x in (one.start_pressure, one.end_pressure)]
        p = tissue_pressure.raw(p, *ends, one.duration[k], never.half_time[:, 0])
    np.testing.assert_allclose(ours.final.values[:, 0], p, rtol=1e-12)
    # Uptake is identical, washout slower.
    at_bottom = {"time": 2}
    np.testing.assert_allclose(
        linear.tissue_pressure.isel(at_bottom), ours.tissue_pressure.isel(at_bottom), rtol=1e-12
    )
    assert (linear.final.values >= ours.final.values - 1e-9).all()
    assert (linear.final.values > ours.final.values + 1.0).any()


# -- Serial -----------------------------------------------------------------------------------------


def test_serial_step_as_printed() -> None:
    """10.06 to 40.06 msw for 30 min: 25.65090, 15.41801, 11.33815, 10.32667 msw [computed]."""
    model = tissues.load("kidd_stubbs_1983")
    p = advance(model, equilibrium(model, 100.6), np.array(30.0), np.array(400.6), np.array(400.6), AIR)
    np.testing.assert_allclose(p[:, 0] / 10.0, [25.65090, 15.41801, 11.33815, 10.32667], rtol=0.0, atol=6e-6)


@pytest.mark.parametrize("seed", range(6))
def test_serial_against_an_ode_solver(seed: int) -> None:
    rng = np.random.default_rng(seed)
    dive = random_exposure(rng, "air", pieces=8)
    model = tissues.load("kidd_stubbs_1983")
    a, b = 0.0002596 / 10.0, 836.7
    p = np.full(4, float(dive.surface_pressure))
    pieces = dive.pieces()
    for i in range(pieces.duration.size):
        t, low, high = pieces.duration[i], pieces.start_pressure[i], pieces.end_pressure[i]

        def slope(s: float, y: np.ndarray, t: float = t, low: float = low, high: float = high) -> np.ndarray:
            chain = np.array([low + (high - low) * s, *y])
            flow = a * (b + chain[:-1] + chain[1:]) * (chain[:-1] - chain[1:])
            return t * (flow - np.append(flow[1:], 0.0))

        p = solve_ivp(slope, (0.0, 1.0), p, **SOLVER).y[:, -1]
    ours = tissues.tensions(dive, model)
    np.testing.assert_allclose(ours.final.values[:, 0], p, rtol=1e-9)
    cut = tissues.tensions(dive._split(rng.uniform(0.0, dive.duration, 5)), model)
    np.testing.assert_allclose(cut.final.values, ours.final.values, rtol=1e-10)


def test_serial_properties() -> None:
    model = tissues.load("kidd_stubbs_1983")
    still = np.full((4, 1), 300.0)
    np.testing.assert_allclose(
        advance(model, still, np.array(500.0), np.array(300.0), np.array(300.0), AIR), 300.0, rtol=1e-12
    )
    up = advance(model, equilibrium(model, 100.0), np.array(20.0), np.array(100.0), np.array(500.0), AIR)[
        :, 0
    ]
    assert (np.diff(up) < 0.0).all()
    # Uptake and washout are not mirror images.
    taken = (
        advance(model, np.full((4, 1), 100.0), np.array(20.0), np.array(400.0), np.array(400.0), AIR)[:, 0]
        - 100.0
    )
    given_off = (
        400.0
        - advance(model, np.full((4, 1), 400.0), np.array(20.0), np.array(100.0), np.array(100.0), AIR)[:, 0]
    )
    assert abs(taken[0] - given_off[0]) > 5.0
