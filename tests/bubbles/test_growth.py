"""Free bubbles: Epstein and Plesset by quadrature and by diffusion, growth by its limits."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad, solve_ivp
from scipy.linalg import solve_banded
from scipy.optimize import brentq

import gasphys as gp
from gasphys import Exposure, bubbles
from gasphys.bubbles import TissueGas, dissolution_time, growth
from gasphys.bubbles.stiff import integrate
from gasphys.errors import ExposureError, RangeError, UnknownNameError, ValidityError

ATM = 101.325
DIVE = Exposure.start("air").travel(depth=30.0, rate=20.0).stay(30.0).travel(depth=0.0, rate=9.0).stay(60.0)


# -- A single bubble in a liquid ---------------------------------------------------------------------


@pytest.mark.parametrize("radius", [0.3, 5.0, 80.0, 1000.0])
@pytest.mark.parametrize("saturation", [0.0, 0.7, 0.9999, 1.0, 1.0001, 1.3])
def test_quasi_steady_life_is_the_integral(radius: float, saturation: float) -> None:
    delta = 2.0 * 0.0729 / ATM * 1000.0
    if saturation > 1.0 and radius >= delta / (saturation - 1.0):
        assert np.isinf(dissolution_time(radius, saturation))
        return
    whole, _ = quad(
        lambda r: r * (r + 2.0 * delta / 3.0) / ((1.0 - saturation) * r + delta), 0.0, radius, epsrel=1e-12
    )
    seconds = whole * 1e-12 / (2e-9 * 0.02)
    assert dissolution_time(radius, saturation) * 60.0 == pytest.approx(seconds, rel=1e-9)


@pytest.mark.parametrize(("radius", "saturation"), [(10.0, 0.5), (3.0, 0.0), (50.0, 0.9), (1.0, 1.0)])
def test_life_with_the_transient_term(radius: float, saturation: float) -> None:
    """The equation in its original form, by an independent solver: R squared against the root of time."""
    delta, kappa, d = 2.0 * 0.0729 / ATM * 1000.0, 2e3, 0.02  # um2/s

    def slope(s: float, y: NDArray[np.float64]) -> list[float]:
        r = np.sqrt(max(y[0], 1e-18))
        g = ((1.0 - saturation) + delta / r) / (1.0 + 2.0 * delta / (3.0 * r))
        return [-4.0 * kappa * d * g * (s + r / np.sqrt(np.pi * kappa))]

    def gone(s: float, y: NDArray[np.float64]) -> float:
        return float(y[0] - 1e-8 * radius**2)

    gone.terminal = True  # type: ignore[attr-defined]
    end = 3.0 * np.sqrt(dissolution_time(radius, saturation) * 60.0)
    found = solve_ivp(slope, (0.0, end), [radius**2], events=gone, rtol=1e-11, atol=1e-12 * radius**2)
    seconds = found.t_events[0][0] ** 2
    assert dissolution_time(radius, saturation, transient=True) * 60.0 == pytest.approx(seconds, rel=1e-6)


def test_the_transient_flux_is_that_of_the_diffusion_equation() -> None:
    """Around a sphere of constant radius: (1/R + 1/sqrt(pi D t)) by an implicit scheme on u = r c."""
    radius, kappa, minutes = 10.0, 1.2e5, 0.002  # um, um2/min
    n, far = 4000, 400.0
    x = np.linspace(radius, far, n + 1)
    h, steps = x[1] - x[0], 4000
    t = minutes / steps
    u = np.zeros(n + 1)
    u[0] = radius
    bands = np.zeros((3, n - 1))
    k = kappa * t / h**2
    bands[0, 1:], bands[1], bands[2, :-1] = -0.5 * k, 1.0 + k, -0.5 * k
    for _ in range(steps):
        right = u[1:-1] + 0.5 * k * (u[2:] - 2.0 * u[1:-1] + u[:-2])
        right[0] += 0.5 * k * radius
        u[1:-1] = solve_banded((1, 1), bands, right)
    c = u / x
    gradient = -(-1.5 * c[0] + 2.0 * c[1] - 0.5 * c[2]) / h
    ours = 1.0 / radius + bubbles.unstirred_boundary(minutes, 2e-9)
    assert gradient == pytest.approx(ours, rel=2e-3)


def test_growth_is_the_same_equation() -> None:
    """In unstirred tissue of constant tension growth gives the lives of Epstein and Plesset."""
    for boundary, transient in (("unstirred", True), ("quasi_steady", False)):
        # Tissue that holds still: 0.79 of what saturates it at the surface, no metabolic gas.
        gas = {"N2": TissueGas(diffusivity=2e-9, solubility=0.02, half_time=np.inf)}
        ds = growth(
            Exposure.start("air").stay(5.0), [5.0, 10.0, 20.0], gases=gas, boundary=boundary, since=0.0,
            surface_tension=0.0729, metabolic_pressure=0.0, tolerance=1e-9,
        )  # fmt: skip
        held = float(ds.tissue_pressure[0, 0, 0]) / ATM
        lives = dissolution_time(np.array([5.0, 10.0, 20.0]), held, transient)
        np.testing.assert_allclose(ds.vanishing_time, lives, rtol=3e-5, atol=0.0)


# -- Growth along an exposure --------------------------------------------------------------------------


def test_without_diffusion_it_is_boyle() -> None:
    """Published arithmetic: 5 um, 0.05 N/m, 1e18 Pa/m3, 17 kPa, 400 to 100 kPa: 8.02424 um."""
    dive = Exposure.start("air", surface_pressure=100.0).travel(pressure=400.0, minutes=1e-3)
    dive = dive.stay(1.0).travel(pressure=100.0, minutes=5.0)
    ds = growth(
        dive, 5.0, gases={"N2": TissueGas(diffusivity=0.0)}, surface_tension=0.05, tissue_modulus=1e-3,
        metabolic_pressure=17.0, since=1.0,
    )  # fmt: skip
    assert float(ds.final_radius[0]) == pytest.approx(8.02424, abs=5e-6)


def test_a_closed_tissue_conserves_gas() -> None:
    """No blood flow: what bubbles gain the tissue loses, both gases, to 1e-8 and better."""
    gases = {
        "N2": TissueGas(half_time=np.inf),
        "He": TissueGas(diffusivity=5e-9, solubility=0.01, half_time=np.inf),
    }
    start = growth(
        Exposure.start("air").stay(1.0), [4.0, 15.0], gases=gases, since=0.0, metabolic_pressure=17.0
    )
    # Tissue at 250 and 60 kPa, bubbles of half each, in 3000 per mL.
    start["final_tissue_pressure"].values[:] = [250.0, 60.0]
    start["final_fraction"].values[:] = 0.5
    start["final_radius"].values[:] = [4.0, 15.0]
    per_ml = 3000.0
    ds = growth(
        Exposure.start("air").stay(120.0), gases=gases, bubbles_per_ml=per_ml, initial=start,
        metabolic_pressure=17.0, at=np.linspace(0.0, 120.0, 25),
    )  # fmt: skip
    volume = per_ml * 1e-12 * 4.0 / 3.0 * np.pi * ds.bubble_radius**3
    solubility = np.array([0.0144, 0.01])[None, :, None]
    whole = (
        solubility * ds.tissue_pressure.values
        + (ds.bubble_pressure * volume).values[:, None, :] * ds.bubble_fraction.values
    )
    assert float(ds.growth_index.min()) > 3.0
    np.testing.assert_allclose(whole, np.repeat(whole[:, :, :1], whole.shape[2], axis=2), rtol=1e-8, atol=0.0)


def test_one_gas_is_the_limit_of_two() -> None:
    one = growth(DIVE, [2.0, 20.0], bubbles_per_ml=500.0)
    gases = {"N2": TissueGas(), "He": TissueGas(diffusivity=6e-9, solubility=0.009, half_time=15.0)}
    two = growth(DIVE, [2.0, 20.0], gases=gases, bubbles_per_ml=500.0)
    np.testing.assert_allclose(two.final_radius, one.final_radius, rtol=1e-6, atol=0.0)
    np.testing.assert_allclose(two.bubble_fraction[:, 0, -1], 1.0, rtol=1e-9, atol=0.0)


def test_two_equal_gases_are_one() -> None:
    """Helium given nitrogen's numbers: the mixture behaves as one gas of the summed pressure."""
    same = TissueGas()
    air = growth(DIVE, [3.0], gases={"N2": same}, bubbles_per_ml=1000.0)
    mix = Exposure.start("air").switch(gp.Gas(oxygen=0.21, helium=0.4))
    mix = mix.travel(depth=30.0, rate=20.0).stay(30.0).travel(depth=0.0, rate=9.0).stay(60.0)
    both = growth(mix, [3.0], gases={"N2": same, "He": same}, bubbles_per_ml=1000.0)
    np.testing.assert_allclose(both.final_radius, air.final_radius, rtol=1e-6, atol=0.0)
    np.testing.assert_allclose(
        both.tissue_pressure.sum("inert_gas")[:, -1], air.tissue_pressure.sum("inert_gas")[:, -1], rtol=1e-7
    )


@pytest.mark.parametrize("boundary", ["shell", "perfused", "quasi_steady"])
def test_against_an_independent_solver(boundary: str) -> None:
    """The ordinary differential equation as printed, in R, by a library's implicit method."""
    sigma, modulus, p_met, d, alpha, tau = 0.05, 1e-5, 18.0, 2e-9 * 6e13, 0.0144, 40.0 / np.log(2.0)
    h, q = 20.0, 0.02
    term = {"shell": 1.0 / h, "perfused": np.sqrt(q / d), "quasi_steady": 0.0}[boundary]
    n = 1000.0e-12 if boundary == "shell" else 0.0
    ds = growth(
        DIVE, [2.0, 6.0], boundary=boundary, shell_thickness=h, perfusion=q, surface_tension=sigma,
        tissue_modulus=modulus, metabolic_pressure=p_met, bubbles_per_ml=n * 1e12,
        at=np.linspace(36.0, 94.0, 7),
    )  # fmt: skip
    times = DIVE.pieces().times
    pressures = [ATM, ATM + 300.0, ATM + 300.0, ATM, ATM]
    vapor = 47.0 * 0.133322387415

    def ambient(t: float) -> tuple[float, float]:
        k = min(int(np.searchsorted(times, t, side="right")) - 1, 3)
        slope = (pressures[k + 1] - pressures[k]) / (times[k + 1] - times[k])
        return pressures[k] + slope * (t - times[k]), slope

    def inside(r: float, p: float) -> float:
        return p + 2000.0 * sigma / r + modulus * 4.0 / 3.0 * np.pi * r**3 - p_met

    for lane in range(2):
        begin = float(ds.appearance_time[lane])
        # Tissue before the bubble, by the same library.
        quiet = solve_ivp(
            lambda t, y: [(0.79 * (ambient(t)[0] - vapor) - y[0]) / tau],
            (0.0, begin), [0.79 * (ATM - vapor)], rtol=1e-11, atol=1e-10, max_step=0.5,
        )  # fmt: skip
        r0 = float(ds.initial_radius[lane])
        assert quiet.y[0][-1] == pytest.approx(inside(r0, ambient(begin)[0]), rel=1e-7)

        def rate(t: float, y: NDArray[np.float64]) -> list[float]:
            r, tissue = y
            p, slope = ambient(t)
            top = alpha * d * (tissue - inside(r, p)) * (term + 1.0 / r) - r / 3.0 * slope
            below = p - p_met + 4000.0 * sigma / (3.0 * r) + modulus * 8.0 / 3.0 * np.pi * r**3
            dr = top / below
            held = (
                4.0
                / 3.0
                * np.pi
                * (
                    3.0 * r**2 * inside(r, p) * dr
                    + r**3 * (slope - 2000.0 * sigma / r**2 * dr + modulus * 4.0 * np.pi * r**2 * dr)
                )
            )
            return [dr, (0.79 * (p - vapor) - tissue) / tau - n / alpha * held]

        y, t0 = [r0, float(quiet.y[0][-1])], begin
        for stop in [times[3], times[4]]:
            step = solve_ivp(rate, (t0, stop), y, method="Radau", rtol=1e-10, atol=1e-9)
            y, t0 = step.y[:, -1].tolist(), stop
        assert float(ds.final_radius[lane]) == pytest.approx(y[0], rel=1e-5)
        assert float(ds.final_tissue_pressure[lane, 0]) == pytest.approx(y[1], rel=1e-6)


def test_a_bubble_below_the_critical_radius_goes_and_one_above_grows() -> None:
    gas = {"N2": TissueGas(half_time=np.inf)}
    start = growth(Exposure.start("air").stay(1.0), [1.0], gases=gas, since=0.0, metabolic_pressure=0.0)
    start["final_tissue_pressure"].values[:] = 1.5 * ATM
    edge = bubbles.critical_radius(0.5, 0.05)
    for share, grows in ((0.99, False), (1.01, True)):
        start["final_radius"].values[:] = share * edge
        start["initial_radius"].values[:] = share * edge
        ds = growth(Exposure.start("air").stay(30.0), gases=gas, initial=start, metabolic_pressure=0.0)
        assert bool(np.isnan(ds.vanishing_time[0])) is grows
        assert (float(ds.growth_index[0]) > 2.0) is grows


def test_joined_is_chained() -> None:
    late = Exposure.start("air").stay(45.0)
    first = growth(DIVE, [2.0, 8.0], bubbles_per_ml=1000.0)
    chained = growth(late, bubbles_per_ml=1000.0, initial=first)
    joined = growth(DIVE.stay(45.0), [2.0, 8.0], bubbles_per_ml=1000.0)
    np.testing.assert_allclose(chained.final_radius, joined.final_radius, rtol=1e-6, atol=0.0)
    np.testing.assert_allclose(
        chained.final_tissue_pressure, joined.final_tissue_pressure, rtol=1e-6, atol=0.0
    )


def test_many_radii_are_each_as_if_alone() -> None:
    radii = np.array([1.0, 2.0, 4.0, 8.0, 30.0])
    many = growth(DIVE, radii, bubbles_per_ml=200.0)
    for k, one in enumerate(radii):
        alone = growth(DIVE, one, bubbles_per_ml=200.0)
        np.testing.assert_allclose(many.final_radius[k], alone.final_radius[0], rtol=1e-9, atol=0.0)


def test_tissue_goes_on_when_its_bubble_is_gone() -> None:
    ds = growth(DIVE, [1.5], since=20.0)
    assert float(ds.bubble_radius[0, -1]) == 0.0
    plain = gp.tissues.tensions(DIVE, bubbles.varying_permeability().tissues)
    expected = plain.final.sel(compartment="40", inert_gas="N2").item()
    # The bubble of 1.5 um held next to nothing.
    assert float(ds.final_tissue_pressure[0, 0]) == pytest.approx(expected, rel=1e-9)


def test_a_number_can_be_worked_again() -> None:
    ds = growth(DIVE, [5.0], bubbles_per_ml=1000.0)
    inputs = json.loads(ds.bubble_pressure.attrs["inputs"])
    values = {k: float(ds[v[1:]].values.ravel()[-1]) if isinstance(v, str) else v for k, v in inputs.items()}
    assert bubbles.bubble_pressure(**values) == pytest.approx(float(ds.bubble_pressure[0, -1]), rel=1e-12)


@pytest.mark.parametrize(
    ("wrong", "error", "match"),
    [
        ({"radius": 0.0}, RangeError, "radius"),
        ({"radius": [1.0, float("nan")]}, RangeError, "radius"),
        ({"boundary": "shells"}, UnknownNameError, "shell"),
        ({"boundary": "perfused", "bubbles_per_ml": 1.0}, ValidityError, "endless tissue"),
        ({"gases": {"He": TissueGas()}}, ValidityError, "N2 is breathed"),
        ({"gases": {"Ne": TissueGas()}}, UnknownNameError, "Ne"),
        ({"metabolic_pressure": 150.0}, ValidityError, "metabolism"),
        ({"shell_thickness": 0.0}, RangeError, "shell_thickness"),
        ({"surface_tension": -1.0}, RangeError, "tension"),
        ({"since": 1e6}, RangeError, "since"),
    ],
)
def test_what_cannot_be(wrong: dict[str, Any], error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        growth(DIVE, **wrong)


def test_empty_exposures_and_batches_are_refused() -> None:
    import xarray as xr

    with pytest.raises(ExposureError, match="no piece"):
        growth(Exposure.start("air"))
    depth = xr.DataArray([10.0, 20.0], dims="d", attrs={"units": "msw"})
    with pytest.raises(ExposureError, match="one scenario"):
        growth(Exposure.start("air").travel(depth=depth, minutes=1.0))
    for wrong in ({"solubility": 0.0}, {"half_time": -1.0}, {"diffusivity": float("nan")}):
        with pytest.raises(RangeError, match=next(iter(wrong))):
            TissueGas(**wrong)


# -- The integrator --------------------------------------------------------------------------------------


def test_the_integrator_on_a_stiff_problem_with_a_known_answer() -> None:
    """y' = -k (y - cos t) - sin t has the answer cos t whatever k; k from mild to very stiff."""
    stiff = np.array([1.0, 1e2, 1e4, 1e6])

    def rate(t: NDArray[np.float64], y: NDArray[np.float64], lanes: NDArray[np.int64]) -> NDArray[np.float64]:
        return np.stack([-stiff[lanes] * (y[:, 0] - np.cos(t)) - np.sin(t)], axis=1)

    start = np.ones((4, 1))
    end, _, _ = integrate(
        rate, start, np.zeros(4), 1.2, np.ones(4, dtype=bool), gone=np.zeros(4), tolerance=1e-7
    )
    np.testing.assert_allclose(end[:, 0], np.cos(1.2), rtol=1e-5, atol=0.0)


def test_the_integrator_has_its_order() -> None:
    """Ten times the tolerance to the fifth power apart: the error follows the tolerance."""

    def rate(t: NDArray[np.float64], y: NDArray[np.float64], lanes: NDArray[np.int64]) -> NDArray[np.float64]:
        return np.stack([y[:, 1], -y[:, 0] + 3.0 * 0.0 * t], axis=1)

    errors = []
    for tolerance in (1e-5, 1e-9):
        end, _, _ = integrate(
            rate, np.array([[2.0, 0.0]]), np.zeros(1), 1.0, np.ones(1, dtype=bool), gone=np.zeros(1),
            tolerance=tolerance,
        )  # fmt: skip
        errors.append(abs(float(end[0, 0]) - 2.0 * np.cos(1.0)))
    assert errors[0] < 1e-4
    assert errors[1] < 1e-8
    assert errors[1] < 1e-3 * errors[0]


def test_root_of_the_cubic_against_a_polynomial_solver() -> None:
    """Nuclei closed at 9.2 atm: numpy's roots of the scaled cubic, one of them positive."""
    for atm in (9.3, 12.0, 30.0, 80.0):
        skin, star, tau, p0 = 478.2, 0.33473, ATM, 9.2 * ATM
        a, b = atm * ATM - p0 + tau + skin / star, skin / star
        roots = np.roots([a, -b, 0.0, -tau])
        (x,) = [r.real for r in roots if abs(r.imag) < 1e-9 and r.real > 0.0]
        assert bubbles.closed_nucleus_radius(atm * ATM, star, p0, tau) == pytest.approx(x * star, rel=1e-12)
        again = brentq(lambda y, a=a, b=b, c=tau: a * y**3 - b * y**2 - c, b / a, 1.0 + 1e-9)
        assert x == pytest.approx(again, rel=1e-9)
