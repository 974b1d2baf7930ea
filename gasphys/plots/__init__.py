"""One figure for each question; object-oriented matplotlib, legible in black and white."""

from __future__ import annotations

from gasphys.plots.arterial_band import arterial_band_figure
from gasphys.plots.course import course_figure
from gasphys.plots.exposure import exposure_figure
from gasphys.plots.oxygen_cascade import oxygen_cascade_figure
from gasphys.plots.style import save_figure

__all__ = ["arterial_band_figure", "course_figure", "exposure_figure", "oxygen_cascade_figure", "save_figure"]
