"""Published limits as data, and the reader of limit files.

Comparing an exposure with limits is :func:`gasphys.review`'s work.
"""

from __future__ import annotations

from gasphys.limits.reader import Limit, load

__all__ = ["Limit", "load"]
