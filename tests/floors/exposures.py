"""Random exposures for tests."""

from __future__ import annotations

from hypothesis import strategies as st

from gasphys.exposure import Exposure

GASES = ("air", "oxygen", "nitrox 36", "trimix 17/48", "heliox 8/92")


@st.composite
def exposures(draw: st.DrawFn, loops: bool = True) -> Exposure:
    """Draw an exposure of two to seven pieces, with switches and, if asked, loops."""
    exposure = Exposure.start(draw(st.sampled_from(GASES)))
    for _ in range(draw(st.integers(2, 7))):
        kind = draw(
            st.sampled_from(("stay", "travel", "switch", "loop") if loops else ("stay", "travel", "switch"))
        )
        if kind == "switch":
            exposure = exposure.switch(draw(st.sampled_from(GASES)))
        elif kind == "loop":
            exposure = exposure.loop(draw(st.sampled_from((70.0, 130.0))), "heliox 8/92")
        elif kind == "travel":
            exposure = exposure.travel(depth=draw(st.floats(0.0, 60.0)), minutes=draw(st.floats(0.5, 20.0)))
        else:
            exposure = exposure.stay(draw(st.floats(0.5, 60.0)))
    return exposure.stay(1.0)
