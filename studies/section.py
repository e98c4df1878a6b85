"""The cross-section of a process file's device, as its edge keys describe it."""

from physics.device import Device
from physics.section_geometry import FieldStep, Section, TrenchWall
from studies.errors import InputError
from studies.process_edge import Edge
from studies.process_file import Device as DeviceRecord
from studies.units import si

ANY_WIDTH = 1e-6  # [m]; of a section whose width is chosen later
WIDE_FIELD = 1e-3  # [m]; neighbours so far away that they do not count


def edge_section(nominal: Device, record: DeviceRecord, where: str) -> Section | None:
    """Section of a nominal device, ANY_WIDTH wide; None where the file gives no geometry to solve.

    where : file and device, for messages
    Raises InputError for what cannot be built.
    """
    if not record.edge.solvable:
        return None
    try:
        return Section(
            width=ANY_WIDTH,
            oxide_thickness=float(nominal.oxide_thickness),
            profile=nominal.profile,
            temperature=float(nominal.temperature),
            edge=_shape(record.edge),
            body_bias=float(nominal.body_bias),
            intrinsic_density=float(nominal.intrinsic_density),
        )
    except ValueError as error:
        raise InputError(f"{where}.edge: {error}") from None


def _shape(edge: Edge) -> FieldStep | TrenchWall:
    """What is solved; a key that is not given is zero."""
    if edge.kind == "trench":
        return TrenchWall(
            trench_depth=si(edge, "trench_depth_nm"), divot=_given(edge, "divot_nm"), field_width=WIDE_FIELD
        )
    return FieldStep(
        field_oxide_thickness=si(edge, "field_oxide_nm"),
        taper_length=_given(edge, "taper_nm"),
        implant_doping=_given(edge, "field_implant_per_cm3"),
        implant_depth=_given(edge, "field_implant_depth_nm"),
        field_width=WIDE_FIELD,
    )


def _given(edge: Edge, key: str) -> float:
    return 0.0 if getattr(edge, key) is None else si(edge, key)
