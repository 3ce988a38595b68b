"""Sensors and their calibration as a site declares them."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, WithJsonSchema, model_validator

from flows.study.strict import DeclaredModel, Instant, Label, NotNegative, Positive, fault
from metrics.signals.calibrate import two_point_line

VolumeMethod = Literal["saline", "imaging", "stroke-volume-ratio", "two-point", "cuvette", "none"]
Segment = Annotated[object, WithJsonSchema({"anyOf": [{"type": "integer", "minimum": 1}, {"type": "string"}]})]
ReferenceSource = Literal["CMR", "echocardiography", "ventriculography", "thermodilution", "Fick", "flow-probe"]


class PressureSensor(DeclaredModel):
    """The pressure sensor; every field may be absent."""

    kind: Literal["tip-manometer", "fluid-filled"] | None = None
    serial: Label | None = None


class VolumeSensor(DeclaredModel):
    """The volume sensor; spacing and resistivity are what Baan's equation needs for a channel in mS or S."""

    kind: Literal["conductance", "admittance", "imaging"] | None = None
    serial: Label | None = None
    electrode_spacing_cm: Positive | None = None
    blood_resistivity_ohm_cm: Positive | None = None


class Sensors(DeclaredModel):
    """Both sensors, always present as objects, so that nobody need ask."""

    pressure: PressureSensor = PressureSensor()
    volume: VolumeSensor = VolumeSensor()


class Zero(DeclaredModel):
    """A pressure zero as shown by the recorder."""

    mmhg: float
    at: Instant | None = None


class Point(DeclaredModel):
    """An applied pressure and what the recorder showed."""

    applied_mmhg: float
    read_mmhg: float


class PressureCalibration(DeclaredModel):
    """Zero readings and the points of the line read = k x applied + b."""

    zero_before: Zero | None = None
    zero_after: Zero | None = None
    zeros: tuple[Zero, ...] = Field(default=(), strict=False)
    zero_sd_mmhg: NotNegative | None = None
    points: tuple[Point, ...] = Field(default=(), strict=False)

    @model_validator(mode="after")
    def _line_can_be_drawn(self) -> Self:
        if self.points and len({point.applied_mmhg for point in self.points}) < 2:
            problem = "calibration points at one applied pressure give no line"
            raise fault(problem, "Add a point at another applied pressure, or leave points out.")
        try:
            two_point_line(tuple((point.applied_mmhg, point.read_mmhg) for point in self.points))
        except ValueError as trouble:
            raise fault(str(trouble), "Give what was read at each applied pressure, or leave points out.") from None
        return self

    def readings(self) -> tuple[Zero, ...]:
        """Return every zero reading: before, those in between, after."""
        before = () if self.zero_before is None else (self.zero_before,)
        after = () if self.zero_after is None else (self.zero_after,)
        return before + self.zeros + after


class Reference(DeclaredModel):
    """Volumes another method measured."""

    source: ReferenceSource
    edv_ml: Positive | None = None
    esv_ml: Positive | None = None
    sv_ml: Positive | None = None
    sv_sd_ml: NotNegative | None = None

    @model_validator(mode="after")
    def _heart_empties(self) -> Self:
        if self.edv_ml is not None and self.esv_ml is not None and self.esv_ml >= self.edv_ml:
            problem = "esv_ml is not below edv_ml"
            raise fault(problem, "Look whether the two were swapped.")
        return self


class VolumeCalibration(DeclaredModel):
    """Gain and parallel volume. ``segments_used`` holds segment numbers from 1, or the columns' names."""

    method: VolumeMethod | None = None
    alpha: Positive | None = None
    alpha_sd: NotNegative | None = None
    alpha_vc_ml: float | None = None
    alpha_vc_sd_ml: NotNegative | None = None
    at: Instant | None = None
    reference: Reference | None = None
    segments_used: tuple[Segment, ...] = Field(default=(), strict=False)

    @model_validator(mode="after")
    def _segments_can_be_found(self) -> Self:
        for segment in self.segments_used:
            if isinstance(segment, bool) or not isinstance(segment, int | str):
                problem = "segments_used holds something that is neither a number nor a column name"
                raise fault(problem, "List segment numbers counted from 1, or the names of their columns.")
        if len(set(self.segments_used)) < len(self.segments_used):
            problem = "segments_used names a segment twice"
            raise fault(problem, "Name each segment once; the volume is their sum.")
        return self


class Calibration(DeclaredModel):
    """Both calibrations, always present as objects, so that nobody need ask."""

    pressure: PressureCalibration = PressureCalibration()
    volume: VolumeCalibration = VolumeCalibration()
