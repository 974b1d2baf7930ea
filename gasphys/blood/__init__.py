"""Gases in blood: oxygen, carbon dioxide, carbon monoxide, inert gas."""

from __future__ import annotations

from gasphys.blood import carbon_dioxide, carbon_monoxide, circulation, haldane, inert_gas, krogh, oxygen
from gasphys.blood.carbon_dioxide import *  # noqa: F403
from gasphys.blood.carbon_monoxide import *  # noqa: F403
from gasphys.blood.circulation import *  # noqa: F403
from gasphys.blood.haldane import *  # noqa: F403
from gasphys.blood.inert_gas import *  # noqa: F403
from gasphys.blood.krogh import *  # noqa: F403
from gasphys.blood.oxygen import *  # noqa: F403

__all__ = [
    *oxygen.__all__,
    *carbon_dioxide.__all__,
    *carbon_monoxide.__all__,
    *haldane.__all__,
    *circulation.__all__,
    *inert_gas.__all__,
    *krogh.__all__,
]
