"""One figure for each question; object-oriented matplotlib, legible in black and white."""

from __future__ import annotations

from gasphys.plots.arterial_band import arterial_band_figure
from gasphys.plots.ascents import ascents_figure
from gasphys.plots.atmosphere import atmosphere_figure
from gasphys.plots.breath_hold import breath_hold_figure
from gasphys.plots.bubbles import bubble_figure, nuclei_figure, nucleus_figure
from gasphys.plots.control_path import control_path_figure
from gasphys.plots.course import course_figure
from gasphys.plots.equation_curve import equation_figure
from gasphys.plots.exposure import exposure_figure
from gasphys.plots.limit_chance import limit_chance_figure
from gasphys.plots.oxygen_cascade import oxygen_cascade_figure
from gasphys.plots.risk_bins import risk_bins_figure
from gasphys.plots.room_for_work import room_for_work_figure
from gasphys.plots.sensitivity import sensitivity_figure
from gasphys.plots.style import save_figure
from gasphys.plots.supply import fill_figure, loss_table_figure
from gasphys.plots.worksheet import worksheet_figure

__all__ = [
    "arterial_band_figure",
    "ascents_figure",
    "atmosphere_figure",
    "breath_hold_figure",
    "bubble_figure",
    "control_path_figure",
    "course_figure",
    "equation_figure",
    "exposure_figure",
    "fill_figure",
    "limit_chance_figure",
    "loss_table_figure",
    "nuclei_figure",
    "nucleus_figure",
    "oxygen_cascade_figure",
    "risk_bins_figure",
    "room_for_work_figure",
    "save_figure",
    "sensitivity_figure",
    "worksheet_figure",
]
