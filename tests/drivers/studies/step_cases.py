"""Cards and paths drawn from a seed: several laws, ramps, dwells, quenches, cycles and jumps under strain and stress."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from drivers.path import MODES, Cycle, Path, Segment
from drivers.studies.steps import Rule
from matlib.material import Material
from matlib.prony import PronySeries
from matlib.recursion import RECURSIONS
from matlib.shift import SHIFT_RULES, VFT, WLF, Arrhenius, Polynomial, ShiftLaw, Table

COLD, HOT = 250.0, 400.0  # K
T_REF = 340.0
NAMED = [name for name, mode in MODES.items() if mode.driven]


@dataclass(frozen=True)
class Case:
    """What one study of increments is asked."""

    material: Material
    path: Path
    rule: Rule
    tolerance: float


def segment(mode: str, *, by: str = "strain", value: float = 0.01, **changes: object) -> Segment:
    """One segment of a named mode, one second long, at constant temperature, unless told otherwise."""
    driven, free = list(MODES[mode].driven), list(MODES[mode].free)
    controlled, targets = np.zeros(6, dtype=np.bool_), np.zeros((1, 6))
    controlled[free] = True
    controlled[driven] = by == "stress"
    targets[0, driven] = value
    given: dict[str, object] = {
        "label": "pull",
        "durations": np.ones(1),
        "temperatures": None,
        "targets": targets,
        "stress_controlled": controlled,
        "held": np.zeros(6, dtype=np.bool_),
        "increments": 8,
    }
    return Segment(**(given | changes))  # type: ignore[arg-type]


def path_of(*parts: Segment | Cycle, mode: str = "uniaxial strain", T: float = T_REF) -> Path:
    """A path that starts at `T` [K]."""
    return Path(name="p", mode=MODES[mode], start_temperature=T, parts=parts)


def solid(times: tuple[float, ...], shares: tuple[float, ...], law: ShiftLaw | None = None) -> Material:
    """Relaxing shear of 1 GPa, elastic bulk, no expansion; a WLF law unless another is given."""
    return Material(
        shear=PronySeries.from_fractions(1e9, shares, times),
        bulk=PronySeries.elastic(3e9),
        shift=WLF(C1=8.0, C2=120.0, T_ref=T_REF) if law is None else law,
    )


def draw_case(seed: int) -> Case:
    """One case; the tolerance lies between 1e-2 and 1e-5, the rule is the default in every second one."""
    rng = np.random.default_rng(seed)
    rule = Rule(shift_rule="integrated", recursion="exponential")
    if seed % 2:
        rule = Rule(shift_rule=str(rng.choice(list(SHIFT_RULES))), recursion=str(rng.choice(list(RECURSIONS))))
    exponent = rng.uniform(2.0, 5.0 if rule.recursion == "exponential" else 3.5)
    return Case(material=_material(rng), path=_path(rng), rule=rule, tolerance=float(10.0**-exponent))


def _law(rng: np.random.Generator) -> ShiftLaw:
    decades = rng.uniform(1.0, 12.0)  # over the whole range of temperature
    slope = decades / (HOT - COLD)
    match rng.integers(5):
        case 0:
            C2 = T_REF - COLD + rng.uniform(30.0, 200.0)
            return WLF(C1=decades / (C2 / (C2 + COLD - T_REF) - C2 / (C2 + HOT - T_REF)), C2=C2, T_ref=T_REF)
        case 1:
            T_inf = COLD - rng.uniform(30.0, 200.0)
            span = 1.0 / (COLD - T_inf) - 1.0 / (HOT - T_inf)
            return VFT(B=decades * np.log(10.0) / span, T_inf=T_inf, T_ref=T_REF)
        case 2:
            energy = 8.314462618 * decades * np.log(10.0) / (1.0 / COLD - 1.0 / HOT)
            return Arrhenius(activation_energy=energy, T_ref=T_REF)
        case 3:
            return Polynomial(coefficients=np.array([-slope, 0.3 * slope / (HOT - COLD)]), T_ref=T_REF)
        case _:
            T = np.array([COLD, 290.0, T_REF, 370.0, HOT])
            falls = np.concatenate([[0.0], np.cumsum(rng.uniform(0.3, 1.0, 4))]) * decades / 3.0
            return Table(T=T, log10_a=falls[2] - falls, T_ref=T_REF)


def _series(rng: np.random.Generator, modulus: float, terms: int, largest: float) -> PronySeries:
    shares = rng.uniform(0.1, 1.0, terms)
    shares *= rng.uniform(0.3, largest) / shares.sum() if terms else 1.0
    return PronySeries.from_fractions(modulus, shares, np.sort(10.0 ** rng.uniform(-4.0, 4.0, terms)))


def _material(rng: np.random.Generator) -> Material:
    return Material(
        shear=_series(rng, 1e9, int(rng.integers(1, 8)), 0.95),
        bulk=_series(rng, 10.0 ** rng.uniform(9.1, 10.0), int(rng.integers(0, 3)), 0.5),
        shift=_law(rng),
        expansion=float(rng.choice([0.0, 2e-5, 7e-5])),
    )


def _path(rng: np.random.Generator) -> Path:
    mode = MODES[str(rng.choice(NAMED))]
    by_stress = bool(rng.integers(2))
    parts: list[Segment | Cycle] = []
    for _ in range(int(rng.integers(1, 4))):
        kind = rng.choice(["ramp", "dwell", "quench", "cycle", "jump"])
        if kind == "cycle":
            segments = (_segment(rng, mode.name, "ramp", by_stress), _segment(rng, mode.name, "ramp", by_stress))
            parts.append(Cycle(repeat=int(rng.integers(2, 6)), segments=segments))
        else:
            parts.append(_segment(rng, mode.name, str(kind), by_stress))
    parts.append(_segment(rng, mode.name, "ramp", by_stress))
    return Path(name="drawn", mode=mode, start_temperature=float(rng.uniform(COLD, HOT)), parts=tuple(parts))


def _segment(rng: np.random.Generator, mode: str, kind: str, by_stress: bool) -> Segment:
    driven, free = list(MODES[mode].driven), list(MODES[mode].free)
    controlled, targets = np.zeros(6, dtype=np.bool_), np.zeros((1, 6))
    controlled[free] = True
    controlled[driven] = by_stress
    targets[0, driven] = rng.uniform(-1.0, 1.0) * (1e6 if by_stress else 0.01)
    held = np.zeros(6, dtype=np.bool_)
    held[driven] = kind in ("dwell", "quench")
    duration = {"jump": 0.0, "dwell": 10.0 ** rng.uniform(2.0, 5.0), "quench": 10.0 ** rng.uniform(0.0, 2.0)}
    temperature = None if kind == "dwell" else np.array([rng.uniform(COLD, HOT)])
    return Segment(
        label=kind,
        durations=np.array([duration.get(kind, 10.0 ** rng.uniform(0.0, 4.0))]),
        temperatures=temperature,
        targets=targets,
        stress_controlled=controlled,
        held=held,
        increments=int(rng.integers(2, 40)),
        spacing="log" if kind == "dwell" else "even",
    )
