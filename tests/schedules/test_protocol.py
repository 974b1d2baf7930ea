"""A unit's own protocol in sentences: what it means, and where each mistake is found."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gasphys import schedules
from gasphys.errors import InputFileError
from gasphys.schedules.protocol import parse_protocol, sentences

O24 = """\
# protocol O-24 of the unit
start on air
travel to 2.4 atm abs in 10 min
stay 30 min on oxygen
repeat 3 times, break between: stay 5 min on air
travel to surface in 10 min on oxygen
"""


def test_the_session_of_common_practice() -> None:
    ours, shipped = parse_protocol(O24), schedules.treatment("clinical_2_4_atm")
    for name, values in shipped.columns.items():
        np.testing.assert_allclose(ours.columns[name], values, rtol=1e-14)
    for gas, values in shipped.fractions.items():
        np.testing.assert_allclose(ours.fractions[gas], values, rtol=1e-14)
    assert ours.part == shipped.part
    assert ours.attrs["edition"] == "the unit's own, as written"


@pytest.mark.parametrize(
    ("sentence", "kilopascals", "minutes"),
    [
        ("travel to 60 fsw at 20 fsw/min", 101.0 + 60 * 101.325 / 33, 3.0),
        ("travel to 18 msw in 90 s", 281.0, 1.5),
        ("travel to 1.4 bar gauge in 10 min", 241.0, 10.0),
        ("travel to 240 kPa abs at 10 kPa/min", 240.0, 13.9),
        ("travel to 2.4 ata in 1 h 10 min", 243.18, 70.0),
        ("travel to 2.4 atm absolute on oxygen in 10min", 243.18, 10.0),
        ("travel to 35 psi abs in 10 min at constant ratio", 35 * 6.894757293168361, 10.0),
    ],
)
def test_every_way_to_say_a_pressure(sentence: str, kilopascals: float, minutes: float) -> None:
    text = f"start on air\n{sentence}\ntravel to surface in 7 min\n"
    found = parse_protocol(text, surface_pressure="101.0 kPa")
    assert found.columns["end_pressure"].max() == pytest.approx(kilopascals, rel=1e-12)
    assert found.duration == pytest.approx(minutes + 7.0, rel=1e-12)


@given(st.floats(1.2, 6.0), st.floats(1.0, 30.0), st.floats(0.0, 1.0))
def test_constant_ratio_is_an_exponential(ratio: float, minutes: float, share: float) -> None:
    text = f"start on air\ntravel to {ratio:.6f} atm abs in {minutes:.6f} min at constant ratio\n"
    found = parse_protocol(f"{text}travel to surface in 10 min at constant ratio\n")
    ratio, minutes = float(f"{ratio:.6f}"), float(f"{minutes:.6f}")
    at = share * minutes
    ds = found.to_dataset(at=[at])
    pressure = float(ds.ambient_pressure.sel(time=at, method="nearest"))
    assert pressure == pytest.approx(101.325 * math.exp(share * math.log(ratio)), rel=6e-5)
    assert "constant ratio" in found.history[0]


#: Line, column and a word of the message of 20 malformed protocols.
MALFORMED = [
    ("", 1, 1, "no sentence"),
    ("start on air", 1, 1, "nothing follows"),
    ("stay 30 min on oxygen", 1, 1, "expected 'start'"),
    ("start on unobtainium", 1, 10, "unobtainium"),
    ("start on air now\n", 1, 10, "air now"),
    ("start on air\nstart on air", 2, 1, "starts once"),
    ("start on air\ngo to 2.4 atm abs in 10 min", 2, 1, "'go' is no verb"),
    ("start on air\ntravel 2.4 atm abs in 10 min", 2, 8, "expected 'to'"),
    ("start on air\ntravel to 2,4 atm abs in 10 min", 2, 11, "decimal point"),
    ("start on air\ntravel to 2.4 atm in 10 min", 2, 19, "absolute or gauge"),
    ("start on air\ntravel to 18 msw abs in 10 min", 2, 11, "never an absolute"),
    ("start on air\ntravel to 2.4 parsec abs in 10 min", 2, 15, "parsec"),
    ("start on air\ntravel to 2.4 atm abs", 2, 22, "the end of the line"),
    ("start on air\ntravel to 2.4 atm abs in ten min", 2, 26, "'ten'"),
    ("start on air\ntravel to 2.4 atm abs in 10 fathoms", 2, 29, "expected min, h or s"),
    ("start on air\ntravel to 2.4 atm abs in 10 min at constant speed", 2, 45, "expected 'ratio'"),
    ("start on air\n\n  stay -5 min", 3, 8, "more than zero"),
    ("start on air\nstay 30 min on oxygen please", 2, 16, "oxygen please"),
    ("start on air\nrepeat 3 times", 2, 1, "only a stay can be repeated"),
    ("start on air\nstay 5 min\nrepeat 1 times", 3, 8, "2 or more"),
    ("start on air\nstay 5 min\nrepeat 3 times, break: stay 5 min", 3, 22, "expected 'between'"),
    ("start on air\ntravel to 0.9 atm abs in 10 min", 2, 1, "below the surface"),
    ("start on air\ntravel to 2.4 atm abs in 10 min\nstay 30 min", 3, 1, "not at the surface"),
    ("start on air\ntravel to 999 bar abs in 10 min\ntravel to surface in 1 min", 2, 1, "possible range"),
    ("start on air\ntravel to surface in 10 min", 2, 11, "already"),
]


@pytest.mark.parametrize(("text", "line", "column", "words"), MALFORMED)
def test_a_mistake_is_told_with_its_place(text: str, line: int, column: int, words: str, tmp_path) -> None:
    file = tmp_path / "protocol.txt"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(InputFileError) as caught:
        schedules.read_protocol(file)
    error = caught.value
    assert (error.line, error.column) == (line, column), str(error)
    assert words in str(error)
    assert error.path == str(file)
    # The sentence expected is one that the parser takes.
    assert any(repr(s) in error.remedy for s in sentences()), error.remedy


def test_the_sentences_shown_are_sentences() -> None:
    start, travel, stay, repeat, breathe, rate, surface = sentences()
    text = "\n".join([start, travel, stay, repeat, breathe, "stay 1 min", rate.replace("60", "40"), surface])
    assert parse_protocol(text).duration > 120.0
