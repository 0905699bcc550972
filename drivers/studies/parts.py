"""A material taken into parts, so that a part of one card can be put into another."""

from __future__ import annotations

import math
from collections.abc import Collection
from dataclasses import dataclass, replace

import numpy as np

from matlib.arrays import FloatArray
from matlib.effective import shear_and_bulk_of_young, uniaxial_stress_modulus
from matlib.errors import ShiftRangeError
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import ShiftLaw
from matlib.shift.difference import chebyshev_temperatures
from matlib.shift.reference import move_reference, time_factor

__all__ = ["PARTS", "Form", "Spectrum", "Split", "differing", "referred", "split", "swapped"]

SHIFT, TIMES, FRACTIONS, TERMS = "shift law", "relaxation times", "fractions", "relaxation terms"
ELASTIC, EXPANSION = "elastic", "expansion"
PARTS = (SHIFT, TIMES, FRACTIONS, TERMS, ELASTIC, EXPANSION)
"""Names of the parts; "relaxation terms" stands for times and fractions together where two cards have not the same number."""

ROUNDING = 1e-9
"""Relative; a card written in another form, with its numbers in full, differs by far less, and no response shows it."""

NO_REST = 1e-12
"""A long-term modulus below this part of the instantaneous one is the rounding of a liquid's zero."""

TEMPERATURES = 400


@dataclass(frozen=True, slots=True, kw_only=True)
class Form:
    """In which terms two materials are taken apart: those in which the recorded card is written.

    Parameters
    ----------
    long_term : bool
        Whether the elastic constants are those of the long-term limit.
    young : bool
        Whether relaxation is that of Young's modulus at constant bulk modulus, rather than shear and bulk.
    """

    long_term: bool = False
    young: bool = False


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Spectrum:
    """One series: its modulus in the stated limit [Pa], fractions of the instantaneous modulus [-], times [s]."""

    modulus: float
    fractions: FloatArray
    times: FloatArray

    def series(self, long_term: bool) -> PronySeries:
        """The series that these make; `ParameterError` where they make none."""
        rest = 1.0 - math.fsum(self.fractions)
        if abs(rest) < NO_REST:
            rest = 0.0
        instantaneous = self.modulus / rest if long_term and rest != 0.0 else self.modulus
        equilibrium = instantaneous * rest
        return PronySeries(equilibrium=equilibrium, moduli=instantaneous * self.fractions, times=self.times)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Split:
    """A material in parts."""

    form: Form
    shift: ShiftLaw
    spectra: tuple[Spectrum, ...]
    bulk: float
    expansion: float

    def material(self) -> Material:
        """Put the parts together; `ParameterError` where they make no material."""
        series = [spectrum.series(self.form.long_term) for spectrum in self.spectra]
        if self.form.young:
            shear, bulk = shear_and_bulk_of_young(series[0], K=self.bulk)
        else:
            shear, bulk = series
        return Material(shear=shear, bulk=bulk, shift=self.shift, expansion=self.expansion)


def split(material: Material, form: Form) -> Split:
    """Take a material apart.

    Parameters
    ----------
    material : Material
    form : Form

    Returns
    -------
    Split
        Whose `material` behaves as `material` does, to rounding.
    """
    parts = (uniaxial_stress_modulus(material.shear, material.bulk),) if form.young else (material.shear, material.bulk)
    spectra = tuple(
        Spectrum(
            modulus=series.equilibrium if form.long_term else series.instantaneous,
            fractions=series.fractions,
            times=series.times,
        )
        for series in parts
    )
    bulk = material.bulk.instantaneous
    return Split(form=form, shift=material.shift, spectra=spectra, bulk=bulk, expansion=material.expansion)


def referred(parts: Split, T_ref: float) -> Split:
    """The same behaviour written about another reference temperature [K].

    Raises
    ------
    ConversionError, ShiftRangeError
        Where the law cannot be written about it.
    """
    factor = time_factor(parts.shift, T_ref)
    spectra = tuple(replace(spectrum, times=spectrum.times * factor) for spectrum in parts.spectra)
    return replace(parts, shift=move_reference(parts.shift, T_ref), spectra=spectra)


def _close(a: FloatArray | float, b: FloatArray | float) -> bool:
    return bool(np.all(np.abs(np.asarray(a) - b) <= ROUNDING * np.abs(a)))


def _same_law(a: ShiftLaw, b: ShiftLaw, T_low: float, T_high: float) -> bool:
    T = chebyshev_temperatures(T_low, T_high, TEMPERATURES, (*a.knots, *b.knots))
    try:
        ln_a, ln_b = a.ln_shift(T), b.ln_shift(T)
    except ShiftRangeError:
        return False
    return bool(np.all(np.abs(ln_a - ln_b) <= ROUNDING * np.maximum(1.0, np.abs(ln_a))))


def differing(a: Split, b: Split, temperatures: tuple[float, float]) -> tuple[str, ...]:
    """Names of the parts that are not the same to rounding.

    Parameters
    ----------
    a, b : Split
        In the same form.
    temperatures : tuple of float
        Where the shift laws matter [K].
    """
    found = [] if _same_law(a.shift, b.shift, *temperatures) else [SHIFT]
    pairs = list(zip(a.spectra, b.spectra, strict=True))
    if any(one.times.size != other.times.size for one, other in pairs):
        found.append(TERMS)
    else:
        found += [] if all(_close(one.times, other.times) for one, other in pairs) else [TIMES]
        found += [] if all(_close(one.fractions, other.fractions) for one, other in pairs) else [FRACTIONS]
    moduli = [(a.bulk, b.bulk)] if a.form.young else []
    moduli += [(one.modulus, other.modulus) for one, other in pairs]
    found += [] if all(_close(one, other) for one, other in moduli) else [ELASTIC]
    found += [] if _close(a.expansion, b.expansion) else [EXPANSION]
    return tuple(found)


def swapped(base: Split, donor: Split, names: Collection[str]) -> Split:
    """`base` with some parts of `donor`."""
    spectra = []
    for own, other in zip(base.spectra, donor.spectra, strict=True):
        times = other.times if TIMES in names or TERMS in names else own.times
        fractions = other.fractions if FRACTIONS in names or TERMS in names else own.fractions
        modulus = other.modulus if ELASTIC in names else own.modulus
        spectra.append(Spectrum(modulus=modulus, fractions=fractions, times=times))
    return replace(
        base,
        shift=donor.shift if SHIFT in names else base.shift,
        spectra=tuple(spectra),
        bulk=donor.bulk if ELASTIC in names else base.bulk,
        expansion=donor.expansion if EXPANSION in names else base.expansion,
    )
