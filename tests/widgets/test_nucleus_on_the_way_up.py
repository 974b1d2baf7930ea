"""The nucleus app: numbers as published, what stands beside them, dives at the edge."""

from __future__ import annotations

import re

import pytest

from gasphys import bubbles, widgets
from gasphys.bubbles import EVIDENCE


def test_an_uncrushed_nucleus_needs_the_published_gradient() -> None:
    """Without a dive 0.8 um needs 41.633 kPa, 0.55 um 60.557 kPa, computed from the constants."""
    for radius, gradient in ((0.8, "41.63"), (0.55, "60.56")):
        app = widgets.NucleusOnTheWayUp(depth=0.0, initial_radius=radius)
        answer = app.answer(app.compute())
        assert answer.startswith(
            f"Crushed from {radius:g} to {radius:g} um, the nucleus needs {gradient} kPa"
        )
        assert answer.endswith("it stays a nucleus.")


def test_the_numbers_are_those_of_the_model() -> None:
    app = widgets.NucleusOnTheWayUp(depth=42.0, bottom_time=25.0, half_time=20.0)
    ds = app.compute()
    dive, left = app.dive()
    model = bubbles.varying_permeability(half_times=[20.0])
    whole = bubbles.nuclei(dive, model).isel(compartment=0, inert_gas=0)
    here = float(ds.nucleus_radius.sel(time=left))
    assert here == pytest.approx(float(whole.nucleus_radius.sel(time=left)), rel=1e-12)
    needed, held = re.findall(r"(?:needs|at most) ([\d.]+) kPa", app.answer(ds))
    assert float(needed) == pytest.approx(bubbles.minimum_gradient(here), rel=5e-4)
    assert float(held) == pytest.approx(float(whole.supersaturation.max()), rel=5e-4)
    assert float(held) > float(needed)
    assert app.answer(ds).endswith("it becomes a bubble.")


def test_deeper_crushes_more_and_slower_tissue_holds_less() -> None:
    def answer(**start: float) -> list[float]:
        app = widgets.NucleusOnTheWayUp(**start)
        return [float(x) for x in re.findall(r"(?:needs|at most) ([\d.]+) kPa", app.answer(app.compute()))]

    shallow, deep = answer(depth=30.0), answer(depth=60.0)
    assert deep[0] > shallow[0]
    assert deep[1] > shallow[1]
    assert answer(half_time=300.0)[1] < answer(half_time=30.0)[1]


def test_the_evidence_stands_beside_the_answer() -> None:
    app = widgets.NucleusOnTheWayUp()
    ds = app.compute()
    assert EVIDENCE in app.notes(ds)[0]
    assert ds.attrs["evidence"] == EVIDENCE
    app.view  # noqa: B018 (built when it is asked for)
    assert "11 of 198" in app._shown.notes.value


def test_a_bottom_time_shorter_than_the_descent_is_the_descent() -> None:
    app = widgets.NucleusOnTheWayUp(depth=100.0, bottom_time=2.0)
    dive, left = app.dive()
    assert left == 2.0
    assert float(dive.duration) == pytest.approx(2.0 + 100.0 / 9.0 + 60.0, rel=1e-12)
    assert "um, the nucleus needs" in app.answer(app.compute())
