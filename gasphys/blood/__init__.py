"""Gases in blood: oxygen, carbon dioxide, carbon monoxide, inert gas."""

from __future__ import annotations

from gasphys.blood.oxygen import *  # noqa: F403
from gasphys.blood.carbon_dioxide import *  # noqa: F403
