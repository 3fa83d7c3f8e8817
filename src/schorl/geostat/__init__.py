"""Ordinary kriging of field-sized soil data: arrays in, frozen values out, no files."""

from schorl.geostat.kriging import krige
from schorl.geostat.leave_one_out import leave_one_out
from schorl.geostat.reml import best_transform, fit_reml
from schorl.model.variogram import Support, Variogram, VariogramFit

__all__ = [
    "Support",
    "Variogram",
    "VariogramFit",
    "best_transform",
    "fit_reml",
    "krige",
    "leave_one_out",
]
