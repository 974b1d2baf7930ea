"""Gas supply: what is used, what is left, what is kept in reserve, and how cylinders are filled."""

from __future__ import annotations

from gasphys.supply import equations as _equations
from gasphys.supply.bank import Cylinder, Demand
from gasphys.supply.equations import *  # noqa: F403
from gasphys.supply.judging import stock_review
from gasphys.supply.losses import loss_table
from gasphys.supply.partial_pressure import mix_from_pressures, partial_pressure_fill
from gasphys.supply.reserve_rules import Reserve
from gasphys.supply.stock_left import consumption, stock
from gasphys.supply.supply_file import SupplyFile, read_supply
from gasphys.supply.texts import fill_text, loss_text, stock_text
from gasphys.supply.transfer import booster_fill, cascade_fill

__all__ = [
    "Cylinder",
    "Demand",
    "Reserve",
    "SupplyFile",
    "booster_fill",
    "cascade_fill",
    "consumption",
    "fill_text",
    "loss_table",
    "loss_text",
    "mix_from_pressures",
    "partial_pressure_fill",
    "read_supply",
    "stock",
    "stock_review",
    "stock_text",
    *_equations.__all__,
]
