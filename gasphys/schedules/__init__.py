"""Treatment schedules as exposures.

Transcriptions to compare with the manual in force, each with edition and provenance; and a unit's own
protocols, written as sentences.
"""

from __future__ import annotations

from gasphys.schedules.attendants import Obligation, attendant_oxygen, surface_intervals
from gasphys.schedules.protocol import constant_ratio_travel, oxygen_session, parse_protocol, read_protocol
from gasphys.schedules.tables import names, treatment

__all__ = [
    "Obligation",
    "attendant_oxygen",
    "constant_ratio_travel",
    "names",
    "oxygen_session",
    "parse_protocol",
    "read_protocol",
    "surface_intervals",
    "treatment",
]
