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


def _several_tag(value: Any) -> str | None:
    return "<list>" if isinstance(value, list) else _species_tag(value)


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
SpeciesValues = Annotated[
    Annotated[str, Tag("<name>")]
    | Annotated[SpeciesTable, Tag("<table>")]
    | Annotated[list[SpeciesValue], Tag("<list>")],
    Discriminator(_several_tag),
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


class SpanTable(Table):
    """``{ from, to }``: local times, eastward."""

    from_: float = Field(alias="from", ge=0.0, le=24.0, examples=["18.0"])
    to: float = Field(ge=0.0, le=24.0, examples=["6.0"])


class SourceTable(Table):
    """``{ r_re, mlt_h }``: the piece of the outer boundary from which particles come."""

    r_re: float | None = None
    mlt_h: SpanTable | None = Field(default=None, examples=["{ from = 18.0, to = 6.0 }"])


class AccessTable(Table):
    """``[access]``: what is asked to be reached, and from where."""

    species: SpeciesValues = Field(examples=['["H+", "e-"]'])
    energy_keV: QuantityValue = Field(examples=["[1.0, 10.0, 100.0]"])
    pitch_deg: QuantityValue = Field(examples=["90.0"])
    r_re: QuantityValue | None = None
    mlt_h: QuantityValue | None = None
    time_h: QuantityValue | None = None
    back_hours: float = Field(default=24.0, gt=0.0, le=LONGEST_H)
    source: SourceTable | None = Field(default=None, examples=["{ mlt_h = { from = 18.0, to = 6.0 } }"])


class ElementsTable(Table):
    """``elements = { ... }``: Keplerian elements of an orbit."""

    epoch: datetime = Field(examples=["2027-03-04T00:00:00Z"])
    a_re: float = Field(gt=0.0, le=100.0, examples=["4.0"])
    e: float = Field(ge=0.0, lt=1.0, examples=["0.7"])
    i_deg: float = Field(ge=0.0, le=180.0, examples=["7.0"])
    raan_deg: float = Field(ge=-360.0, le=360.0, examples=["0.0"])
    argp_deg: float = Field(ge=-360.0, le=360.0, examples=["180.0"])
    m_deg: float = Field(ge=-360.0, le=360.0, examples=["0.0"])


class OrbitTable(Table):
    """``[[orbit]]``: a spacecraft, and where it is."""

    name: str = Field(min_length=1, max_length=64, examples=['"transfer"'])
    every_min: float = Field(default=5.0, gt=0.0, le=60.0 * LONGEST_H)
    elements: ElementsTable | None = Field(default=None, examples=["{ epoch = 2027-03-04T00:00:00Z, a_re = 4.0, ... }"])
    tle: str | None = Field(default=None, min_length=1, examples=['"satellite.tle"'])
    oem: str | None = Field(default=None, min_length=1, examples=['"satellite.oem"'])
    csv: str | None = Field(default=None, min_length=1, examples=['"satellite.csv"'])
    frame: Literal["SM", "GEO", "ITRF", "GCRS", "TEME"] | None = None


class RunTables(Table):
    """The whole run file. Field models stay plain tables here: their cards say what they take."""

    title: str = Field(default="", max_length=200)
    time: TimeTable
    domain: DomainTable = DomainTable()
    series: dict[str, SeriesValue] = Field(default_factory=dict)
    magnetic: dict[str, Any]
    electric: list[dict[str, Any]] = Field(default_factory=list)
    population: list[PopulationTable] = Field(default_factory=list)
    access: AccessTable | None = None
    orbit: list[OrbitTable] = Field(default_factory=list)
    losses: LossesTable = LossesTable()
    output: OutputTable = OutputTable()


QUANTITIES = ("r_re", "mlt_h", "energy_keV", "pitch_deg", "release_h")
ACCESS_AXES = ("energy_keV", "pitch_deg", "r_re", "mlt_h", "time_h")
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
    ("access",): AccessTable,
    ("access", "species"): SpeciesTable,
    ("access", "source"): SourceTable,
    ("access", "source", "mlt_h"): SpanTable,
    **{("access", name): RangeTable for name in ACCESS_AXES},
    ("orbit",): OrbitTable,
    ("orbit", "elements"): ElementsTable,
}


def keys_of(table: type[Table]) -> list[str]:
    """The keys as written in a run file."""
    return [info.alias or name for name, info in table.model_fields.items()]
