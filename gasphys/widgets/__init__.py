"""Apps for notebooks: a sentence with blanks, the answer, the picture, the working."""

from __future__ import annotations

from gasphys.widgets.ascents_compared import AscentsCompared
from gasphys.widgets.base import App, Name, Number
from gasphys.widgets.cylinder_fill import CylinderFill
from gasphys.widgets.equation_page import EquationPage
from gasphys.widgets.nucleus_on_the_way_up import NucleusOnTheWayUp
from gasphys.widgets.oxygen_at_pressure import OxygenAtPressure
from gasphys.widgets.oxygen_course import OxygenCourse
from gasphys.widgets.patient_at_pressure import PatientAtPressure
from gasphys.widgets.room_for_work import RoomForWork

__all__ = [
    "App",
    "AscentsCompared",
    "CylinderFill",
    "EquationPage",
    "Name",
    "NucleusOnTheWayUp",
    "Number",
    "OxygenAtPressure",
    "OxygenCourse",
    "PatientAtPressure",
    "RoomForWork",
]
