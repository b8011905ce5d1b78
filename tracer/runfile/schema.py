"""The tables and keys of a run file, their types and fixed bounds, in user units.

Types are strict: true is no number, nor is "3"; a whole number will do where a real one is asked. What depends on
more than one key is checked where the scenario is put together.
"""

from __future__ import annotations

from datetime import datetime
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Discriminator, Field, Tag

from fields.series import Series

LONGEST_H = 24.0 * 36525.0  # a century
SHORTEST_H = 1e-6  # 4 ms: less than a gyration of any ion here


class Table(BaseModel):
    """A table of a run file."""

    model_config = ConfigDict(
        strict=True, extra="forbid", allow_inf_nan=False, frozen=True, arbitrary_types_allowed=True
    )


class TimeTable(Table):
    """``[time]``: when the run starts and how long it lasts."""

    start: datetime = Field(examples=["2027-03-04T00:00:00Z"])
    hours: float = Field(ge=SHORTEST_H, le=LONGEST_H, examples=["24.0"])
    backward: bool = False


class DomainTable(Table):
    """``[domain]``: where particles live."""

    outer_re: float = Field(default=10.0, gt=1.0, le=100.0)
    inner_re: float = Field(default=1.02, ge=1.0, le=100.0)
    foot_altitude_km: float = Field(default=100.0, ge=0.0, le=50000.0)


class SeriesTable(Table):
    """``[series.NAME]``: a history, from a file or written out as `time` and `value`."""

    file: str | None = Field(default=None, min_length=1, examples=['"kp.csv"'])
    time: list[datetime] | None = None
    value: list[float] | None = None
    column: str | None = None
    interval_h: float | None = Field(default=None, gt=0.0, le=LONGEST_H)
    hold: Literal["step", "linear"] = "step"


class RangeTable(Table):
    """``{ from, to, spacing, n }``."""

    from_: float = Field(alias="from", examples=["1.0"])
    to: float = Field(examples=["2.0"])
    spacing: Literal["linear", "area", "log", "isotropic"] = "linear"
    n: int | None = None


class SpeciesTable(Table):
    """``{ mass_u, charge }``: a particle that has no name here."""

    mass_u: float = Field(ge=1e-4, le=1000.0, examples=["16.0"])
    charge: int = Field(ge=-100, le=100, examples=["1"])


def _quantity_tag(value: Any) -> str | None:
    if isinstance(value, bool):
        return None
    if isinstance(value, (int, float)):
        return "<number>"
    if isinstance(value, list):
        return "<list>"
    return "<range>" if isinstance(value, (dict, RangeTable)) else None


def _species_tag(value: Any) -> str | None:
    if isinstance(value, str):
        return "<name>"
    return "<table>" if isinstance(value, (dict, SpeciesTable)) else None


def _series_tag(value: Any) -> str | None:
    if isinstance(value, Series):
        return "<object>"
    return "<table>" if isinstance(value, (dict, SeriesTable)) else None


QuantityValue = Annotated[
    Annotated[float, Tag("<number>")] | Annotated[list[float], Tag("<list>")] | Annotated[RangeTable, Tag("<range>")],
    Discriminator(_quantity_tag),
]
SpeciesValue = Annotated[
    Annotated[str, Tag("<name>")] | Annotated[SpeciesTable, Tag("<table>")], Discriminator(_species_tag)
]
SeriesValue = Annotated[
    Annotated[SeriesTable, Tag("<table>")] | Annotated[Series, Tag("<object>")], Discriminator(_series_tag)
]


class PopulationTable(Table):
    """``[[population]]``: particles of one species and how they are drawn."""

    name: str | None = Field(default=None, min_length=1, max_length=64, examples=['"protons"'])
    species: SpeciesValue = Field(examples=['"H+"'])
    count: int | None = Field(default=None, ge=1, examples=["1000"])
    draw: Literal["sobol", "random", "grid"] = "sobol"
    seed: int | None = Field(default=None, ge=0, le=2**63 - 1)
    r_re: QuantityValue = Field(examples=["6.6"])
    mlt_h: QuantityValue = Field(examples=["0.0"])
    energy_keV: QuantityValue = Field(examples=["10.0"])
    pitch_deg: QuantityValue = Field(examples=["90.0"])
    release_h: QuantityValue = 0.0


class LossesTable(Table):
    """``[losses]``."""

    loss_cone: Literal["off", "flag", "stop"] = "flag"


class OutputTable(Table):
    """``[output]``: what is saved and how well."""

    every_min: float = Field(default=5.0, ge=0.0)
    tolerance_re: float = Field(default=1e-6, ge=1e-8, le=1e-2)
    tracks: Literal["double", "single"] = "double"


class RunTables(Table):
    """The whole run file. Field models stay plain tables here: their cards say what they take."""

    title: str = Field(default="", max_length=200)
    time: TimeTable
    domain: DomainTable = DomainTable()
    series: dict[str, SeriesValue] = Field(default_factory=dict)
    magnetic: dict[str, Any]
    electric: list[dict[str, Any]] = Field(default_factory=list)
    population: list[PopulationTable] = Field(min_length=1)
    losses: LossesTable = LossesTable()
    output: OutputTable = OutputTable()


QUANTITIES = ("r_re", "mlt_h", "energy_keV", "pitch_deg", "release_h")
TABLES: dict[tuple[str, ...], type[Table]] = {
    (): RunTables,
    ("time",): TimeTable,
    ("domain",): DomainTable,
    ("series", "*"): SeriesTable,
    ("population",): PopulationTable,
    ("population", "species"): SpeciesTable,
    ("losses",): LossesTable,
    ("output",): OutputTable,
    **{("population", name): RangeTable for name in QUANTITIES},
}


def keys_of(table: type[Table]) -> list[str]:
    """The keys as written in a run file."""
    return [info.alias or name for name, info in table.model_fields.items()]
