"""The shape of a balance file: which tables and keys it has, and of what type."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, FiniteFloat

Number = Annotated[FiniteFloat, Field(strict=False)]
Count = Annotated[int, Field(ge=1)]
Name = Annotated[str, Field(min_length=1)]


class Table(BaseModel):
    """A table whose keys are all known and whose types are taken as written."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, populate_by_name=True)


class NodeTable(Table):
    """A unit or stock place."""

    name: Name
    conserves: list[str] | None = Field(default=None, description="default: every quantity")
    same_composition: bool = False
    stock: bool = False


class StreamTable(Table):
    """A flow; a missing end is the site boundary."""

    name: Name
    source: str | None = Field(default=None, alias="from")
    target: str | None = Field(default=None, alias="to")
    carries: list[str] | None = Field(default=None, description="default: every quantity")


class SummandTable(Table):
    """A stream within a sum."""

    name: Name
    factor: Number = 1.0


class SharedTable(Table):
    """How a shared error source enters a reading."""

    source: Name
    factor: Number = 1.0


class MeasuredTable(Table):
    """One measurement."""

    name: Name | None = None
    stream: str | None = None
    streams: list[SummandTable] | None = None
    node: str | None = None
    at: Literal["opening", "closing"] | None = None
    quantity: str
    period: Count | None = None
    periods: list[Count] | None = None
    shares: list[Number] | None = None
    basis: Literal["amount", "fraction"] | None = None
    unit: str | None = None
    value: Number
    u: Annotated[FiniteFloat, Field(gt=0, strict=False)] | None = None
    held: bool = False
    shared: list[str | SharedTable] = []
    sampler: str | None = None


class SourceTable(Table):
    """A shared error."""

    name: Name
    u: Annotated[FiniteFloat, Field(gt=0, strict=False)]
    relative: bool
    lasts: Literal["all", "period"] | list[list[Count]] = "all"


class TermTable(Table):
    """An amount in a relation or figure."""

    stream: Name
    quantity: str
    factor: Number = 1.0


class RelationTable(Table):
    """A linear relation between amounts, stated for each period."""

    name: Name
    terms: Annotated[list[TermTable], Field(min_length=1)]
    equals: Number = 0.0


class FigureTable(Table):
    """A ratio of sums of amounts to report."""

    name: Name
    of: Annotated[list[TermTable], Field(min_length=1)]
    over: Annotated[list[TermTable], Field(min_length=1)]


class HeadTable(Table):
    """What stands before the tables."""

    title: str = ""
    quantities: Annotated[list[Name], Field(min_length=1)]
    periods: Count = 1


class BalanceShape(HeadTable):
    """A whole balance file, for editors."""

    node: list[NodeTable] = []
    stream: list[StreamTable] = []
    measured: list[MeasuredTable] = []
    source: list[SourceTable] = []
    relation: list[RelationTable] = []
    figure: list[FigureTable] = []
