"""Treatment schedules as exposures.

Transcriptions to compare with the manual in force, each with edition and provenance.
"""

from __future__ import annotations

from gasphys.schedules.tables import names, treatment

__all__ = ["names", "treatment"]
