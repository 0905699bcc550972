"""What a card file may hold, key by key. Numbers stay in the file's own units here."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import AfterValidator, Field

from matlib.documents import Document
from matlib.units import ENERGY, STRESS, TEMPERATURE, TIME

__all__ = [
    "LARGEST_NUMBER",
    "SMALLEST_NUMBER",
    "CardDocument",
    "Coefficient",
    "Number",
    "Pair",
    "UnitsTable",
    "not_lost",
]

LARGEST_NUMBER = 1e60
"""Larger than any number of the trade in any unit, small enough that no product of a few of them overflows."""

SMALLEST_NUMBER = 1e-60
"""Smaller than any number of the trade but 0, large enough that no product of a few of them underflows."""


def not_lost(value: float) -> float:
    """Refuse a number that is not 0 and yet too small to reckon with."""
    if value != 0.0 and abs(value) < SMALLEST_NUMBER:
        raise ValueError(f"0, or a number of at least {SMALLEST_NUMBER:g} in size")
    return value


Coefficient = Annotated[float, Field(ge=-LARGEST_NUMBER, le=LARGEST_NUMBER)]
"""Of a sum, where it may be as small as it likes."""

Number = Annotated[Coefficient, AfterValidator(not_lost)]
Pair = Annotated[list[Number], Field(min_length=2, max_length=2)]
Terms = Annotated[list[Pair], Field(min_length=1, max_length=1000)]

StressUnit = Annotated[
    Literal["Pa", "kPa", "MPa", "GPa", "psi", "ksi"], Field(description="a stress unit: " + ", ".join(STRESS))
]
TimeUnit = Annotated[Literal["s", "ms", "us", "min", "h", "d"], Field(description="a time unit: " + ", ".join(TIME))]
TemperatureUnit = Annotated[
    Literal["K", "degC", "degF"], Field(description="a temperature unit: " + ", ".join(TEMPERATURE))
]
EnergyUnit = Annotated[
    Literal["J/mol", "kJ/mol", "kcal/mol", "eV"], Field(description="an energy unit: " + ", ".join(ENERGY))
]


class UnitsTable(Document):
    """``[units]`` of a card."""

    stress: StressUnit
    time: TimeUnit
    temperature: TemperatureUnit


class ElasticTable(Document):
    """``[elastic]``: two of the four constants."""

    E: Number | None = None
    G: Number | None = None
    K: Number | None = None
    nu: Number | None = None
    state: Literal["instantaneous", "long-term"] = Field(
        description='"instantaneous" or "long-term": the limit that these constants describe'
    )

    @property
    def given(self) -> dict[str, float]:
        """The constants that are written."""
        values = {"E": self.E, "G": self.G, "K": self.K, "nu": self.nu}
        return {name: value for name, value in values.items() if value is not None}


class PronyTable(Document):
    """``[prony]``: shear and bulk, or Young's modulus."""

    relative_to: Literal["instantaneous", "long-term", "absolute"] = Field(
        description='"instantaneous", "long-term" or "absolute": what each fraction is a fraction of'
    )
    shear: Terms | None = None
    bulk: Terms | None = None
    young: Terms | None = None
    lateral: Literal["constant nu", "constant K"] | None = None


class ExpansionTable(Document):
    """``[expansion]``."""

    alpha: Number = Field(description="the linear expansion coefficient per temperature unit")


class ServiceTable(Document):
    """``[service]``: what the part sees."""

    temperature: Pair = Field(description="[lowest, highest] temperature")
    time: Pair = Field(description="[shortest, longest] time")


class MadeFromTable(Document):
    """``[made_from]``: where a converted card comes from."""

    card: str
    revision: str = ""
    law: str
    exact: bool
    method: Literal["", "least-squares", "minimax", "sampled"] = ""
    largest_error_decades: Number | None = None
    error_at: Number | None = None
    range: Pair | None = None
    note: str = ""


class CardDocument(Document):
    """A card file."""

    name: Annotated[str, Field(min_length=1, max_length=200, description="the card's name")]
    revision: Annotated[str, Field(max_length=200)] = ""
    note: Annotated[str, Field(max_length=20_000)] = ""
    units: UnitsTable = Field(description="a table [units] with stress, time and temperature")
    elastic: ElasticTable = Field(description="a table [elastic] with two of E, G, K, nu, and state")
    prony: PronyTable | None = None
    shift: dict[str, Any] = Field(description='a table [shift]; law = "none" where temperature does not matter')
    expansion: ExpansionTable | None = None
    service: ServiceTable | None = None
    made_from: MadeFromTable | None = None
