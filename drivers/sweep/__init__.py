"""Many cards, paths, rules and sampled constants: the overnight job before a release of a card library."""

from drivers.sweep.plan import Case, Plan, plan_of
from drivers.sweep.store import Store
from drivers.sweep.sweep_file import SweepFile, read_sweep

__all__ = ["Case", "Plan", "Store", "SweepFile", "plan_of", "read_sweep"]
