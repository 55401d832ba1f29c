"""Every kind of fault, in the order of the table that evidence prints."""

from __future__ import annotations

from tests.fuzz import bomb_faults, cell_faults, companion_faults, text_faults, workbook_faults
from tests.fuzz.faults import FAULTS, case

MODULES = (cell_faults, text_faults, workbook_faults, bomb_faults, companion_faults)
"""The modules that register kinds when they are imported."""

__all__ = ["FAULTS", "MODULES", "case"]
