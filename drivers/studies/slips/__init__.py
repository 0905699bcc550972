"""Name the likely mistake where two cards should agree and do not."""

from drivers.studies.slips.catalogue import CATALOGUE
from drivers.studies.slips.search import Slip, find_slips

__all__ = ["CATALOGUE", "Slip", "find_slips"]
