"""What all questions about widths have in common."""

from itertools import pairwise
from typing import Annotated

from pydantic import Field, field_validator

from studies.validated import Record

Width = Annotated[float, Field(gt=0, le=1000)]


class WidthQuestion(Record):
    """A question asked at several drawn widths of one drawn length."""

    width_um: Annotated[list[Width], Field(min_length=1, max_length=200)]
    """drawn widths, increasing"""
    length_um: Annotated[float, Field(gt=0, le=1000)]
    """drawn length"""
    temperature_c: Annotated[float, Field(ge=-70, le=200)] | None = None
    """instead of the process file's"""

    @field_validator("width_um")
    @classmethod
    def _increasing(cls, widths):
        if any(second <= first for first, second in pairwise(widths)):
            raise ValueError("widths must increase, each given once")
        return widths
