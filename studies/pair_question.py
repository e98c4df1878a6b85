"""What is asked of a matched pair."""

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, model_validator

from studies.units import SUFFIXES
from studies.validated import Record

BIASES = ("drain_current_ua", "current_per_square_ua", "gm_over_i_per_v")
LIMITS = {"differential pair": "limit_mv", "current mirror": "limit_percent"}


def _listed(value):
    return [value] if isinstance(value, (int, float)) and not isinstance(value, bool) else value


class Question(Record):
    """Smallest width of matched pairs that keeps their offset or current error inside a limit on enough chips."""

    device: str
    """device of the process file"""
    kind: Literal["differential pair", "current mirror"]
    """"differential pair" has an offset limit in mV, "current mirror" an error limit in percent"""
    limit_mv: Annotated[float, Field(gt=0, le=1000)] | None = None
    """differential pair: largest offset"""
    limit_percent: Annotated[float, Field(gt=0, le=100)] | None = None
    """current mirror: largest error"""
    pairs: Annotated[int, Field(ge=1, le=10000)]
    """pairs per chip, all of which must stay inside"""
    target_yield: Annotated[float, Field(gt=0, lt=1, alias="yield")]
    """share of chips wanted"""
    length_um: Annotated[
        list[Annotated[float, Field(gt=0, le=1000)]], Field(min_length=1, max_length=50), BeforeValidator(_listed)
    ]
    """drawn length, or several to choose from"""
    drain_current_ua: Annotated[float, Field(gt=0, le=1e6)] | None = None
    """bias: drain current of one device"""
    current_per_square_ua: Annotated[float, Field(gt=0, le=1e6)] | None = None
    """bias: drain current times L/W"""
    gm_over_i_per_v: Annotated[float, Field(gt=0.1, le=60)] | None = None
    """bias: transconductance over current"""
    drain_v: Annotated[float, Field(gt=0, le=100)] = 0.6
    """drain voltage, a magnitude; the devices are saturated"""
    body_bias_v: Annotated[float, Field(ge=0, le=20)] = 0.0
    """reverse body bias, a magnitude"""
    fingers: Annotated[int, Field(ge=1, le=256)] = 1
    """fingers in parallel that make one device, each with its own two edges"""
    layout: Literal["side by side", "common centroid"] = "side by side"
    """"common centroid" cancels the die's linear gradient"""
    distance_um: Annotated[float, Field(ge=0, le=1e5)] = 0.0
    """between the two devices' centers, for the distance term and the gradient"""
    grid_nm: Annotated[float, Field(gt=0, le=1000)] = 5.0
    """layout grid of a finger's width"""
    width_min_um: Annotated[float, Field(gt=0, le=10000)] = 0.2
    """narrowest device considered"""
    width_max_um: Annotated[float, Field(gt=0, le=10000)] = 100.0
    """widest device considered"""
    temperature_c: Annotated[float, Field(ge=-70, le=200)] | None = None
    """instead of the process file's"""

    @model_validator(mode="after")
    def _consistent(self):
        needed = LIMITS[self.kind]
        for limit in LIMITS.values():
            given = getattr(self, limit) is not None
            if limit == needed and not given:
                raise ValueError(f"kind = \"{self.kind}\" needs '{needed}'")
            if limit != needed and given:
                raise ValueError(f"'{limit}' is the wrong unit for kind = \"{self.kind}\"; give '{needed}'")
        biases = [bias for bias in BIASES if getattr(self, bias) is not None]
        if len(biases) != 1:
            raise ValueError(f"exactly one bias is needed: {', '.join(BIASES)}")
        if self.width_max_um <= 2 * self.width_min_um:
            raise ValueError("width_max_um must be more than twice width_min_um")
        if self.width_min_um / self.fingers < self.grid_nm * 1e-3:
            raise ValueError(
                f"fingers = {self.fingers}: makes fingers of width_min_um = {self.width_min_um:g} narrower than grid_nm"
            )
        return self

    @property
    def limit(self) -> float:
        """The limit [V] or [1]."""
        key = LIMITS[self.kind]
        return getattr(self, key) * SUFFIXES[key.rsplit("_", 1)[1]]

    @property
    def error_words(self) -> tuple[str, str, float]:
        """Name, unit and scale of the error in tables."""
        return ("offset", "mv", 1e3) if self.kind == "differential pair" else ("error", "percent", 1e2)
