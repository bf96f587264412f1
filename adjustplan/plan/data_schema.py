"""The plan's ``[data]``: who is eligible, what counts as missing, and which columns are derived from others.

::

    [data.where]                       # one expression, or named steps, which tell the flow why people were left out
    1_adult    = "age >= 18"
    2_at_risk  = "not prior_diabetes and enrolled < date(2015, 1, 1)"
    [data.missing]
    bmi        = [999, -1]
    [data.derive.age_group]
    from       = "age"
    cut        = [30, 45, 60]
    [data.derive.shift]
    from       = "rota"
    recode     = { nights = ["N1", "N2"], days = ["D"] }
    otherwise  = "other"
    [data.derive.follow_up]
    years      = { from = "entry_date", to = 2020-12-31 }
    [data.derive.body_mass]
    equals     = "weight / (height * height)"

The order is fixed: missing codes first, then derived columns (one may use another), then eligibility. Within each, the
order of the file means nothing. Steps of eligibility are taken in the order of their names, numbers in names counting
as numbers, so a number in front decides: ``2_at_risk`` comes before ``10_consent``.
"""

from __future__ import annotations

import datetime
from typing import Annotated, Any

from pydantic import BeforeValidator, Field
from pydantic_core import PydanticCustomError

from adjustplan.plan.table import Name, Table

_LARGEST = 2**63
"""What the engines can hold as a whole number."""


def _value(given: Any) -> Any:
    if isinstance(given, datetime.datetime) or not isinstance(given, (bool, int, float, str, datetime.date)):
        raise PydanticCustomError("data_value", "Write a number, a text in quotes, true, false or a date")
    if isinstance(given, (int, float)) and not abs(given) < _LARGEST:
        raise PydanticCustomError("data_value", "Write a number below 9e18")
    return given


def _cut(given: Any) -> Any:
    if isinstance(given, bool) or not isinstance(given, (int, float, datetime.date)):
        raise PydanticCustomError("data_cut", "Write a number or a date")
    return _value(given)


def _moment(given: Any) -> Any:
    if isinstance(given, datetime.datetime) or not isinstance(given, (str, datetime.date)) or given == "":
        raise PydanticCustomError("data_moment", "Write the name of a column, or a date such as 2020-12-31")
    return given


def _where(given: Any) -> Any:
    named = isinstance(given, dict) and given and all(isinstance(told, str) for told in given.values())
    if not isinstance(given, str) and not named:
        raise PydanticCustomError("data_where", 'Write an expression in quotes, or named ones: adult = "age >= 18"')
    return given


Value = Annotated[bool | int | float | str | datetime.date, BeforeValidator(_value)]
"""A value as the data hold it."""

Cut = Annotated[float | datetime.date, BeforeValidator(_cut)]
Moment = Annotated[datetime.date | str, BeforeValidator(_moment)]
Values = Annotated[list[Value], Field(min_length=1)]


class Span(Table):
    """The time between two days."""

    begins: Moment = Field(alias="from", description="The column with the first day, or a date for everybody.")
    ends: Moment = Field(alias="to", description="The column with the last day, or a date for everybody.")


class Derivation(Table):
    """How one new column comes about: by exactly one of cut, recode, days, years and equals."""

    source: Name | None = Field(None, alias="from", description="The column that is cut or recoded.")
    cut: Annotated[list[Cut], Field(min_length=1)] | None = Field(
        None, description="Lower limits of groups; [30, 45] gives “below 30”, “30 to below 45” and “45 or more”."
    )
    recode: Annotated[dict[str, Values], Field(min_length=1)] | None = Field(
        None, description="new value = [old values]; an old value without a new one becomes missing, and is counted."
    )
    otherwise: Name | None = Field(None, description="Recode: the new value of old values that are not listed.")
    days: Span | None = Field(None, description="Days from one date to another; missing where they are out of order.")
    years: Span | None = Field(None, description="The same in years of 365.25 days.")
    equals: Name | None = Field(
        None, description="A number or a condition worked out from columns, such as weight / (height * height)."
    )


class Data(Table):
    """What becomes of the rows before any model sees them."""

    table: Name | None = Field(
        None, description="The table of a database, or the sheet of a workbook, that [analysis] data names."
    )
    where: Annotated[str | dict[str, str], BeforeValidator(_where)] | None = Field(
        None, description="Whose rows are eligible: one expression, or named ones in the order of their names."
    )
    missing: dict[str, Values] = Field({}, description="column = [values] that stand for a missing one.")
    derive: dict[Name, Derivation] = Field({}, description="New columns, each worked out from others.")
