"""One figure for each question; object-oriented matplotlib, legible in black and white."""

from __future__ import annotations

from gasphys.plots.exposure import exposure_figure
from gasphys.plots.style import save_figure

__all__ = ["exposure_figure", "save_figure"]
