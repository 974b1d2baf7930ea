"""Doses that accumulate along an exposure, narcosis, carbon dioxide and contaminants."""

from __future__ import annotations

from gasphys.doses import equations as _equations
from gasphys.doses.cns import clinic_seizure_rates
from gasphys.doses.contaminants import purity
from gasphys.doses.course import Course, Session, course_doses
from gasphys.doses.course_file import read_course
from gasphys.doses.equations import *  # noqa: F403
from gasphys.doses.ladder import course_text, ladder_text, sessions_left
from gasphys.doses.model import MEASURES, dose_text, oxygen
from gasphys.doses.published_tables import published, tables

__all__ = [
    "MEASURES",
    "Course",
    "Session",
    "clinic_seizure_rates",
    "course_doses",
    "course_text",
    "dose_text",
    "ladder_text",
    "oxygen",
    "published",
    "purity",
    "read_course",
    "sessions_left",
    "tables",
    *_equations.__all__,
]
