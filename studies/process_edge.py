"""The edges along the channel's width as a person writes them: a closed form, a table, or a geometry to be solved."""

from itertools import pairwise
from typing import Annotated, Literal

from pydantic import Field, model_validator

from studies.ranges import Doping, NotNegative, Positive, Thickness
from studies.validated import Record

ALLOWED = {  # keys that have an effect with each kind
    "none": (),
    "field oxide": ("method", "shape", "field_oxide_nm", "taper_nm", "field_implant_per_cm3", "field_implant_depth_nm"),
    "trench": ("method", "field_oxide_nm", "trench_depth_nm", "divot_nm"),
    "table": ("table_width_um", "table_factor"),
}
NEEDED = {"trench": ("field_oxide_nm",), "table": ("table_width_um", "table_factor")}
GEOMETRY = {"field oxide": "field_oxide_nm", "trench": "trench_depth_nm"}  # the key without which nothing can be solved
DETAILS = ("taper_nm", "field_implant_per_cm3", "field_implant_depth_nm", "divot_nm")  # of that geometry


class Edge(Record):
    """The two edges along the channel's width."""

    kind: Literal["none", "field oxide", "trench", "table"]
    """what bounds the channel"""
    method: Literal["closed form", "solved"] = "closed form"
    """field oxide, trench: "solved" takes the threshold's shift and the dopants' scatter from the channel's cross-section,
    solved numerically; it then needs field_oxide_nm, for a trench trench_depth_nm too"""
    shape: Annotated[float, Field(gt=0, le=4)] | None = None
    """field oxide, closed form: fringe area of both edges over the squared depletion width; 1.5708 two quarter circles"""
    field_oxide_nm: Thickness | None = None
    """trench: oxide between the gate and the silicon beside it; field oxide: its thickness under the gate, for a solution"""
    taper_nm: Annotated[float, Field(ge=0, le=2000)] | None = None
    """field oxide, for a solution: length over which it grows from the gate oxide's thickness; 0 an abrupt step"""
    field_implant_per_cm3: Doping | None = None
    """field oxide, for a solution: doping added beyond the channel's edge"""
    field_implant_depth_nm: Annotated[float, Field(ge=1, le=5000)] | None = None
    """field oxide, for a solution: depth of that implant"""
    trench_depth_nm: Annotated[float, Field(ge=10, le=5000)] | None = None
    """trench, for a solution: its depth below the silicon surface"""
    divot_nm: NotNegative | None = None
    """trench, for a solution: how far its oxide lies below the gate oxide; a deep divot lets the gate wrap the corner"""
    table_width_um: list[Positive] | None = None
    """table: electrical widths, increasing"""
    table_factor: list[Positive] | None = None
    """table: factor on the bulk depletion charge at those widths"""

    @model_validator(mode="after")
    def _consistent(self):
        given = [key for key in self.model_fields_set if key != "kind" and getattr(self, key) is not None]
        for key in type(self).model_fields:
            if key in NEEDED.get(self.kind, ()) and key not in given:
                raise ValueError(f"kind = \"{self.kind}\" needs '{key}'")
            if key in given and key not in ALLOWED[self.kind]:
                raise ValueError(f"'{key}' has no effect with kind = \"{self.kind}\"; remove it")
        if self.kind == "table":
            self._check_table()
        elif self.kind in GEOMETRY:
            self._check_geometry()
        return self

    def _check_table(self):
        widths = self.table_width_um
        if len(widths) != len(self.table_factor) or len(widths) < 2:
            raise ValueError("table_width_um and table_factor need the same number of entries, two or more")
        if any(second <= first for first, second in pairwise(widths)):
            raise ValueError("table_width_um must increase")

    def _check_geometry(self):
        key = GEOMETRY[self.kind]
        if self.method == "solved" and not self.solvable:
            raise ValueError(f'method = "solved" needs \'{key}\' with kind = "{self.kind}"')
        for detail in DETAILS:
            if getattr(self, detail) is not None and not self.solvable:
                raise ValueError(f"'{detail}' has no effect without '{key}'")
        if (self.field_implant_per_cm3 is None) != (self.field_implant_depth_nm is None):
            raise ValueError("'field_implant_per_cm3' and 'field_implant_depth_nm' go together")
        if self.divot_nm is not None and self.divot_nm >= self.trench_depth_nm:
            raise ValueError(
                f"divot_nm = {self.divot_nm:g} must be less than trench_depth_nm, {self.trench_depth_nm:g}"
            )

    @property
    def solvable(self) -> bool:
        """Whether the geometry that a solution needs is given."""
        return self.kind in GEOMETRY and getattr(self, GEOMETRY[self.kind]) is not None
