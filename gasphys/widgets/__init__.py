"""Apps for notebooks: a sentence with blanks, the answer, the picture, the working."""

from __future__ import annotations

from gasphys.widgets.base import App, Name, Number
from gasphys.widgets.oxygen_at_pressure import OxygenAtPressure

__all__ = ["App", "Name", "Number", "OxygenAtPressure"]
