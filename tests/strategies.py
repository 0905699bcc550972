"""Hypothesis strategies shared by all tests: series, shift laws, materials, card documents and paths that are valid."""

from __future__ import annotations

import math
from typing import Any, Literal

import numpy as np
from hypothesis import strategies as st
from hypothesis.strategies import DrawFn, SearchStrategy

from drivers.path import MODES, Cycle, Path, Segment
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.shift import (
    OUTSIDE,
    VFT,
    WLF,
    Arrhenius,
    Crossover,
    MeasuredRange,
    NoShift,
    Polynomial,
    ShiftLaw,
    Table,
)

LN10 = math.log(10.0)
COLD, HOT = 233.15, 398.15  # K: what parts see; where the strategies below want laws to hold unless told otherwise

STRESS_IN_PA = {"Pa": 1.0, "kPa": 1e3, "MPa": 1e6, "GPa": 1e9, "psi": 6894.757293168361, "ksi": 6894757.293168361}
TIME_IN_S = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "min": 60.0, "h": 3600.0, "d": 86400.0}
DEGREE_IN_K = {"K": 1.0, "degC": 1.0, "degF": 5.0 / 9.0}
ENERGY_IN_J_PER_MOL = {"J/mol": 1.0, "kJ/mol": 1e3, "kcal/mol": 4184.0, "eV": 96485.33212}


def in_unit(T: float, unit: str) -> float:
    """A temperature in kelvin as a number of `unit`, written here once more so that no test takes it from the code."""
    return {"K": T, "degC": T - 273.15, "degF": T * 1.8 - 459.67}[unit]


def decades(low: float, high: float) -> SearchStrategy[float]:
    """Numbers from 10^low to 10^high, even in their logarithm."""
    return st.floats(low, high).map(lambda x: float(10.0**x))


@st.composite
def fractions_and_times(
    draw: DrawFn,
    min_terms: int = 1,
    max_terms: int = 6,
    largest_sum: float = 0.95,
    times: tuple[float, float] = (-6, 6),
) -> tuple[list[float], list[float]]:
    """Fractions that sum to at most `largest_sum`, and relaxation times [s] within the given decades, all apart."""
    exponents = draw(
        st.lists(st.floats(*times), min_size=min_terms, max_size=max_terms, unique_by=lambda x: round(x, 2))
    )
    shares = [draw(st.floats(0.01, 1.0)) for _ in exponents]
    total = draw(st.floats(0.1, 1.0)) * largest_sum
    return [total * share / math.fsum(shares) for share in shares], [float(10.0**x) for x in sorted(exponents)]


@st.composite
def prony_series(
    draw: DrawFn,
    min_terms: int = 0,
    max_terms: int = 6,
    instantaneous: tuple[float, float] = (6, 10),
    times: tuple[float, float] = (-6, 6),
    largest_sum: float = 0.95,
) -> PronySeries:
    """Relaxation of solids, a modulus [Pa] and times [s] within the given decades; elastic without terms."""
    modulus = draw(decades(*instantaneous))
    shares, tau = draw(fractions_and_times(min_terms, max_terms, largest_sum, times))
    return PronySeries.from_fractions(modulus, shares, tau)


@st.composite
def offset_constants(draw: DrawFn, T_low: float, T_high: float) -> tuple[float, float, float]:
    """B, T_inf and T_ref [K] of the family of WLF and VFT; 0.1 to 20 decades of a_T over the range, pole below it."""
    T_ref = draw(st.floats(T_low, T_high))
    T_inf = T_low - draw(st.floats(10.0, 400.0))
    span = 1.0 / (T_low - T_inf) - 1.0 / (T_high - T_inf)
    return draw(st.floats(0.1, 20.0)) * LN10 / span, T_inf, T_ref


@st.composite
def wlf_laws(draw: DrawFn, T_low: float, T_high: float) -> WLF:
    """WLF laws in either base."""
    B, T_inf, T_ref = draw(offset_constants(T_low, T_high))
    bases: tuple[Literal[10, "e"], ...] = (10, "e")
    base, C2 = draw(st.sampled_from(bases)), T_ref - T_inf
    return WLF(C1=B / C2 / (LN10 if base == 10 else 1.0), C2=C2, T_ref=T_ref, base=base)


@st.composite
def vft_laws(draw: DrawFn, T_low: float, T_high: float) -> VFT:
    """VFT laws; the pole may lie below absolute zero."""
    B, T_inf, T_ref = draw(offset_constants(T_low, T_high))
    return VFT(B=B, T_inf=T_inf, T_ref=T_ref)


@st.composite
def arrhenius_laws(draw: DrawFn, T_low: float, T_high: float) -> Arrhenius:
    """Arrhenius laws; 0.1 to 20 decades over the range, now and then with a gas constant of their own."""
    B = draw(st.floats(0.1, 20.0)) * LN10 / (1.0 / T_low - 1.0 / T_high)
    R = draw(st.sampled_from([8.314462618, 8.314, 8.31]))
    return Arrhenius(activation_energy=B * R, T_ref=draw(st.floats(T_low, T_high)), gas_constant=R)


@st.composite
def polynomial_laws(draw: DrawFn, T_low: float, T_high: float) -> Polynomial:
    """Polynomials of degree 1 to 3 that fall over the whole range."""
    T_ref = draw(st.floats(T_low, T_high))
    reach = max(T_ref - T_low, T_high - T_ref)
    slope = draw(st.floats(0.1, 10.0)) / (T_high - T_low)  # decades per kelvin
    bends = draw(
        st.lists(st.floats(-0.4, 0.4).map(lambda x: round(x, 9)), max_size=2)
    )  # parts of the slope at the far end; they never sum to 1
    coefficients = [-slope] + [slope * bend / (k * reach ** (k - 1)) for k, bend in enumerate(bends, start=2)]
    return Polynomial(coefficients=np.array(coefficients), T_ref=T_ref)


@st.composite
def table_laws(draw: DrawFn, T_low: float, T_high: float) -> Table:
    """Tables that fall from point to point, cover the range and are zero at T_ref, which is one of the points."""
    gaps = draw(st.lists(st.floats(0.2, 1.0), min_size=1, max_size=8))
    falls = [draw(st.floats(0.05, 2.0)) for _ in gaps]
    T = T_low + (T_high - T_low) * np.concatenate([[0.0], np.cumsum(gaps) / math.fsum(gaps)])
    T[-1] = T_high
    log10_a = -np.concatenate([[0.0], np.cumsum(falls)])
    k = draw(st.integers(0, len(gaps)))
    return Table(T=T, log10_a=log10_a - log10_a[k], T_ref=float(T[k]))


@st.composite
def crossover_laws(draw: DrawFn, T_low: float, T_high: float) -> Crossover:
    """Two simple laws that meet inside the range."""
    below, above = draw(simple_laws(T_low, T_high)), draw(simple_laws(T_low, T_high))
    at = T_low + draw(st.floats(0.1, 0.9)) * (T_high - T_low)
    return Crossover(below=below, above=above, at=at, T_ref=draw(st.floats(T_low, T_high)))


def simple_laws(T_low: float, T_high: float) -> SearchStrategy[ShiftLaw]:
    """All laws but crossover and measured range."""
    return st.one_of(
        st.builds(NoShift, T_ref=st.floats(T_low, T_high)),
        *(kind(T_low, T_high) for kind in (wlf_laws, arrhenius_laws, vft_laws, polynomial_laws, table_laws)),
    )


@st.composite
def measured_laws(draw: DrawFn, T_low: float, T_high: float) -> MeasuredRange:
    """Laws with a measured range, which covers the whole range only where the law refuses beyond it."""
    outside = draw(st.sampled_from(OUTSIDE))
    width = T_high - T_low
    inset = (0.0, 0.4) if outside != "refuse" else (-0.2, 0.0)
    low = T_low + draw(st.floats(*inset)) * width
    high = T_high - draw(st.floats(*inset)) * width
    law = draw(st.one_of(simple_laws(T_low, T_high), crossover_laws(T_low, T_high)))
    return MeasuredRange(law=law, low=low, high=high, outside=outside)


def shift_laws(T_low: float = COLD, T_high: float = HOT) -> SearchStrategy[ShiftLaw]:
    """All seven laws, with and without a measured range; every one answers from `T_low` to `T_high` [K].

    ``ln a_T`` is finite there and above -690, T_ref lies within, and ``a_T`` never rises with temperature.
    """
    return st.one_of(simple_laws(T_low, T_high), crossover_laws(T_low, T_high), measured_laws(T_low, T_high))


@st.composite
def materials(
    draw: DrawFn,
    T_low: float = COLD,
    T_high: float = HOT,
    min_terms: int = 1,
    max_terms: int = 4,
    times: tuple[float, float] = (-4, 4),
    laws: SearchStrategy[ShiftLaw] | None = None,
) -> Material:
    """Solids with a shift law that holds from `T_low` to `T_high` [K]; the bulk may be elastic, the expansion zero."""
    shear = draw(prony_series(min_terms, max_terms, (6, 9.5), times))
    shares, tau = draw(fractions_and_times(0, max_terms, 0.6, times))
    bulk = PronySeries.from_fractions(shear.instantaneous * draw(st.floats(0.7, 50.0)), shares, tau)
    shift = draw(shift_laws(T_low, T_high) if laws is None else laws)
    return Material(shear=shear, bulk=bulk, shift=shift, expansion=draw(st.sampled_from([0.0, 1.2e-5, 6.8e-5])))


@st.composite
def law_constants(draw: DrawFn, law: ShiftLaw, unit: str) -> dict[str, Any]:
    """The ``[shift]`` table of `law` in a temperature unit, by the definition of the format, not by the code."""
    degree = DEGREE_IN_K[unit]
    match law:
        case MeasuredRange():
            table = draw(law_constants(law.law, unit))
            measured = [in_unit(law.low, unit), in_unit(law.high, unit)]
            return {**table, "measured": measured, "outside": law.outside}
        case NoShift():
            return {"law": "none"} | draw(st.sampled_from([{}, {"T_ref": in_unit(law.T_ref, unit)}]))
        case Crossover():
            below, above = draw(law_constants(law.below, unit)), draw(law_constants(law.above, unit))
            return {
                "law": "crossover",
                "at": in_unit(law.at, unit),
                "T_ref": in_unit(law.T_ref, unit),
                "below": below,
                "above": above,
            }
    table = {"law": law.name, "T_ref": in_unit(law.T_ref, unit)}
    match law:
        case WLF():
            return table | {"C1": law.C1, "C2": law.C2 / degree, "base": law.base}
        case Arrhenius():
            return table | draw(energies(law.activation_energy)) | {"gas_constant": law.gas_constant}
        case VFT():
            table["T_inf"] = in_unit(law.T_inf, unit)
            return table | draw(st.one_of(st.just({"B": law.B / degree}), energies(law.B * 8.314462618)))
        case Polynomial():
            return table | {"coefficients": [c * degree**k for k, c in enumerate(law.coefficients.tolist(), start=1)]}
        case Table():
            T, log10_a = law.T.tolist(), law.log10_a.tolist()
            return table | {"points": [[in_unit(x, unit), y] for x, y in zip(T, log10_a, strict=True)]}
    raise AssertionError(law)


@st.composite
def energies(draw: DrawFn, joule_per_mol: float) -> dict[str, Any]:
    """An activation energy in one of the units; the unit is left out now and then where it is kJ/mol."""
    unit = draw(st.sampled_from(["", *ENERGY_IN_J_PER_MOL]))
    value = {"activation_energy": joule_per_mol / ENERGY_IN_J_PER_MOL[unit or "kJ/mol"]}
    return value | ({"energy_unit": unit} if unit else {})


@st.composite
def elastic_tables(draw: DrawFn, E: float, nu: float) -> dict[str, Any]:
    """Two of the four constants of a solid, `E` in the card's stress unit."""
    values = {"E": E, "G": E / (2.0 * (1.0 + nu)), "K": E / (3.0 * (1.0 - 2.0 * nu)), "nu": nu}
    names = draw(st.lists(st.sampled_from(sorted(values)), min_size=2, max_size=2, unique=True))
    return {name: values[name] for name in names}


@st.composite
def prony_tables(draw: DrawFn, relative_to: str, moduli: dict[str, float], time_unit: str) -> dict[str, Any]:
    """A ``[prony]`` table; fractions stay well below 1 whatever they are fractions of, `moduli` are E, G and K."""
    table: dict[str, Any] = {"relative_to": relative_to}
    if draw(st.booleans()):
        kinds = {"young": "E"}
        table["lateral"] = draw(st.sampled_from(["constant nu", "constant K"]))
    else:
        kinds = draw(st.sampled_from([{"shear": "G"}, {"bulk": "K"}, {"shear": "G", "bulk": "K"}]))
    for name, modulus in kinds.items():
        shares, tau = draw(fractions_and_times(1, 5, 0.6))
        scale = moduli[modulus] if relative_to == "absolute" else 1.0
        table[name] = [[t / TIME_IN_S[time_unit], scale * g] for t, g in zip(tau, shares, strict=True)]
    return table


@st.composite
def card_tables(draw: DrawFn, T_low: float = COLD, T_high: float = HOT) -> dict[str, Any]:
    """Card documents as plain tables that are a material from `T_low` to `T_high` [K], in any units and forms.

    The unit of every number, the pair of elastic constants, their state, what fractions are relative to, shear and bulk
    or Young's modulus, the law and its measured range, the service window and the optional tables are all drawn.
    """
    stress, time = draw(st.sampled_from(sorted(STRESS_IN_PA))), draw(st.sampled_from(sorted(TIME_IN_S)))
    temperature = draw(st.sampled_from(sorted(DEGREE_IN_K)))
    # Poisson ratio and fractions such that E < 9 K and E < 3 G hold after any reading of the state: with a sum of 0.6
    # the instantaneous Young's modulus is at most 2.5 times the long-term one, and E/(9 K) = (1 - 2 nu)/3 <= 0.2.
    nu = draw(st.floats(0.2, 0.48))
    E = draw(decades(6.0, 10.0)) / STRESS_IN_PA[stress]
    moduli = {"E": E, "G": E / (2.0 * (1.0 + nu)), "K": E / (3.0 * (1.0 - 2.0 * nu))}
    names = st.text(st.characters(min_codepoint=32, max_codepoint=0x24F, exclude_categories=["Cc"]), max_size=20)
    card: dict[str, Any] = {
        "name": "x" + draw(names),
        "units": {"stress": stress, "time": time, "temperature": temperature},
        "elastic": draw(elastic_tables(E, nu)) | {"state": draw(st.sampled_from(["instantaneous", "long-term"]))},
    }
    for key in ("revision", "note"):
        if draw(st.booleans()):
            card[key] = draw(names)
    if draw(st.integers(0, 9)):
        relative_to = draw(st.sampled_from(["instantaneous", "long-term", "absolute"]))
        card["prony"] = draw(prony_tables(relative_to, moduli, time))
    card["shift"] = draw(law_constants(draw(shift_laws(T_low, T_high)), temperature))
    if draw(st.booleans()):
        card["expansion"] = {"alpha": draw(st.one_of(st.just(0.0), st.floats(1e-9, 2e-4))) * DEGREE_IN_K[temperature]}
    if draw(st.booleans()):
        window = sorted(draw(st.tuples(st.floats(T_low, T_high), st.floats(T_low, T_high))))
        span = sorted(draw(st.tuples(decades(-6, 9), decades(-6, 9))))
        card["service"] = {
            "temperature": [in_unit(T, temperature) for T in window],
            "time": [t / TIME_IN_S[time] for t in span],
        }
    return card


def control_masks() -> SearchStrategy[np.ndarray]:
    """Which of the six components follow a stress; all the others follow a strain."""
    return st.lists(st.booleans(), min_size=6, max_size=6).map(np.array)


@st.composite
def segments(
    draw: DrawFn,
    stress_controlled: np.ndarray,
    driven: tuple[int, ...],
    T_low: float = COLD,
    T_high: float = HOT,
    max_increments: int = 6,
) -> Segment:
    """One straight stretch or jump; the `driven` components move or are held, all others stay at zero."""
    held, targets = np.zeros(6, dtype=np.bool_), np.zeros(6)
    if draw(st.integers(0, 3)) == 0:
        held[list(driven)] = True
    for c in driven if len(driven) == 6 else driven[:1]:
        part = draw(st.floats(-1.0, 1.0).map(lambda x: round(x, 9)))  # nothing that underflows
        targets[c] = part * (1e6 if stress_controlled[c] else 0.02)
    if len(driven) < 6:
        targets[list(driven)] = targets[driven[0]]
    return Segment(
        label=draw(st.sampled_from(["pull", "dwell", "cool"])),
        durations=np.array([draw(st.one_of(st.just(0.0), decades(-3, 5)))]),
        temperatures=draw(st.one_of(st.none(), st.floats(T_low, T_high).map(lambda T: np.array([T])))),
        targets=targets[np.newaxis],
        stress_controlled=stress_controlled,
        held=held,
        increments=draw(st.integers(1, max_increments)),
        spacing=draw(st.sampled_from(["even", "log"])),
    )


@st.composite
def paths(
    draw: DrawFn,
    T_low: float = COLD,
    T_high: float = HOT,
    max_segments: int = 4,
    max_increments: int = 6,
    modes: tuple[str, ...] = tuple(MODES),
) -> Path:
    """Paths of every mode, driven by strain or by stress, with jumps, cycles and changes of temperature.

    Temperatures stay between `T_low` and `T_high` [K], strains within 0.02, stresses within 1 MPa.
    """
    mode = MODES[draw(st.sampled_from(modes))]
    driven, mask = mode.driven or tuple(range(6)), draw(control_masks())
    if mode.driven:
        by_stress = bool(mask[0])
        mask = np.isin(np.arange(6), mode.free + (driven if by_stress else ()))
    one = segments(mask, driven, T_low, T_high, max_increments)
    cycles = st.builds(
        lambda repeat, inner: Cycle(repeat=repeat, segments=tuple(inner)),
        st.integers(1, 3),
        st.lists(one, min_size=1, max_size=2),
    )
    parts = draw(st.lists(st.one_of(one, one, cycles), min_size=1, max_size=max_segments))
    return Path(name="drawn", mode=mode, start_temperature=draw(st.floats(T_low, T_high)), parts=tuple(parts))
