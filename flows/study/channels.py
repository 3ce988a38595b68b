"""How the columns of a signal file become channels; the same shape in acquisition.json and in a site's profile."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from flows.study.strict import DeclaredModel, FilePath, Positive

Column = Annotated[str, Field(min_length=1, max_length=200)]

PressureUnit = Literal["mm[Hg]", "kPa", "cm[H2O]"]
VolumeUnit = Literal["mL", "L", "mS", "S"]
VoltageUnit = Literal["mV", "uV", "V"]


class SignalColumn(DeclaredModel):
    """What every channel may say: its column, how late it is, and a file and rate of its own."""

    column: Column
    unit: str
    delay_ms: float = 0.0
    file: FilePath | None = None
    sampling_rate_hz: Positive | None = None


class TimeColumn(DeclaredModel):
    """The column of time stamps in the run's file; another file of the run is timed by it too where it holds a column of this name."""

    column: Column
    unit: Literal["s", "ms"]


class PressureColumn(SignalColumn):
    """A pressure channel."""

    unit: PressureUnit


class VolumeColumn(SignalColumn):
    """A volume or conductance channel; ``calibrated`` false means raw mL still to be corrected by alpha and alpha_vc_ml.

    A conductance (mS, S) is never calibrated, whatever is declared.
    """

    unit: VolumeUnit
    calibrated: bool = True

    @property
    def is_raw(self) -> bool:
        """Whether gain and parallel volume still have to be taken out."""
        return not self.calibrated or self.unit in {"mS", "S"}


class EcgColumn(SignalColumn):
    """An electrocardiogram."""

    unit: VoltageUnit


class RespirationColumn(SignalColumn):
    """A breathing signal: an airway pressure, a volume, or a voltage."""

    unit: Literal["mm[Hg]", "kPa", "cm[H2O]", "mL", "L", "mV", "uV", "V"]


class Channels(DeclaredModel):
    """The channels of one run."""

    time: TimeColumn | None = None
    pressure: PressureColumn | None = None
    volume: VolumeColumn | None = None
    ecg: EcgColumn | None = None
    aortic_pressure: PressureColumn | None = None
    respiration: RespirationColumn | None = None
    segments: tuple[VolumeColumn, ...] = Field(default=(), strict=False)

    def signals(self) -> dict[str, SignalColumn]:
        """Return every channel but time by its name in a Recording; segments are ``segment-1`` upward in the order given."""
        named: dict[str, SignalColumn | None] = {
            "pressure": self.pressure,
            "volume": self.volume,
            "ecg": self.ecg,
            "aortic_pressure": self.aortic_pressure,
            "respiration": self.respiration,
        }
        present = {name: channel for name, channel in named.items() if channel is not None}
        return present | {f"segment-{number}": segment for number, segment in enumerate(self.segments, start=1)}
