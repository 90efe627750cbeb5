"""Raw exports in, one log out."""

from engine.intake.mapping import SiteMap, load_map
from engine.intake.report import LoadReport
from engine.intake.take import take_in

__all__ = ["LoadReport", "SiteMap", "load_map", "take_in"]
