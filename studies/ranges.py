"""Ranges of numbers that many keys share."""

from typing import Annotated

from pydantic import Field

Positive = Annotated[float, Field(gt=0, le=1e6)]
NotNegative = Annotated[float, Field(ge=0, le=1e6)]
Thickness = Annotated[float, Field(gt=0.2, le=2000)]
Doping = Annotated[float, Field(ge=1e13, le=1e21)]
Percent = Annotated[float, Field(ge=0, le=30)]
