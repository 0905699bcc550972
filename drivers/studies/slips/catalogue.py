"""The known slips, the simplest first."""

from __future__ import annotations

from drivers.studies.slips import modulus_slips, shift_slips
from drivers.studies.slips.proposal import SlipKind

__all__ = ["CATALOGUE"]

CATALOGUE: tuple[SlipKind, ...] = (
    SlipKind(id="log-base", proposals=shift_slips.log_base),
    SlipKind(id="temperature-unit", proposals=shift_slips.temperature_unit),
    SlipKind(id="reference-temperature", proposals=shift_slips.reference_temperature),
    SlipKind(id="times-not-moved", proposals=shift_slips.times_not_moved),
    SlipKind(id="modulus-state", proposals=modulus_slips.modulus_state),
    SlipKind(id="fraction-base", proposals=modulus_slips.fraction_base),
    SlipKind(id="modulus-kind", proposals=modulus_slips.modulus_kind),
    SlipKind(id="time-unit", proposals=modulus_slips.time_unit),
    SlipKind(id="stress-unit", proposals=modulus_slips.stress_unit),
    SlipKind(id="energy-unit", proposals=shift_slips.energy_unit),
    SlipKind(id="shift-direction", proposals=shift_slips.shift_direction),
    SlipKind(id="offset-dropped", proposals=shift_slips.offset_dropped),
    SlipKind(id="bulk-relaxation", proposals=modulus_slips.bulk_relaxation),
)
