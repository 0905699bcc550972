"""What the example routines are handed, worked out from a material; ``python -m drivers.demo.constants CARD`` shows it.

Order: G_inf, K_inf [Pa], number of shear terms, number of bulk terms, G_i [Pa] and tau_i [s] of each shear term, K_j and tau_j of each
bulk term, C1 (base 10), C2 [K], T_ref [K], alpha [1/K].
"""

from __future__ import annotations

import math
import sys

from matlib.card import read_card
from matlib.errors import ParameterError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import WLF, MeasuredRange, ShiftLaw, as_vft

__all__ = ["example_constants", "example_memory"]


def _terms(series: PronySeries) -> list[float]:
    return [value for pair in zip(series.moduli.tolist(), series.times.tolist(), strict=True) for value in pair]


def _wlf(law: ShiftLaw) -> tuple[float, float, float]:
    """C1 (base 10), C2 and T_ref."""
    if isinstance(law, MeasuredRange) and law.outside == "extrapolate":
        law = law.law
    if isinstance(law, WLF):
        return (law.C1 if law.base == 10 else law.C1 / math.log(10.0)), law.C2, law.T_ref
    same = as_vft(law)
    if same is None:
        raise ParameterError("shift", "WLF, VFT or Arrhenius, extrapolated beyond its measured range", law.name)
    C2 = same.T_ref - same.T_inf
    return same.B / (math.log(10.0) * C2), C2, same.T_ref


def example_constants(material: Material) -> list[float]:
    """Constants of `material` in the order of the example routines.

    Parameters
    ----------
    material : Material
        With a WLF, VFT or Arrhenius law.

    Returns
    -------
    constants : list of float

    Raises
    ------
    ParameterError
        If the shift law is another one.
    """
    shear, bulk = material.shear, material.bulk
    sizes = [float(shear.times.size), float(bulk.times.size)]
    head = [shear.equilibrium, bulk.equilibrium, *sizes]
    return [*head, *_terms(shear), *_terms(bulk), *_wlf(material.shift), material.expansion]


def example_memory(material: Material) -> int:
    """Numbers that a point remembers in the compiled example routines."""
    return 1 + material.bulk.times.size + 6 * material.shear.times.size


def main(card_file: str) -> None:
    """Print what a routine file needs."""
    material = read_card(card_file).material()
    constants = "".join(f"    {value!r},\n" for value in example_constants(material))
    print(f"n_memory = {example_memory(material)}\nconstants = [\n{constants}]")


if __name__ == "__main__":
    main(sys.argv[1])
