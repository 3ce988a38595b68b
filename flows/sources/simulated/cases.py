"""What was put into the invented study Tarn: its protocol, and one case a line."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

from flows.sources.simulated import faults, signal_faults
from flows.sources.simulated.faults import Expected, Fault
from flows.sources.simulated.recorded import ORDINARY
from flows.sources.simulated.rhythm import Breathing

SITES = {"harbour": 0, "fell": 0, "quarry": 1, "weir": -4}
"""The sites and their clocks' offset from UTC, in hours, in the month of the study."""

PROTOCOL = """\
# Tarn: an invented study of invented hearts. Nothing in it is or was a patient.
[study]
name = "tarn"
version = "1"

[sites.harbour]
timezone = "Europe/Lisbon"
[sites.fell]
timezone = "Europe/London"
[sites.quarry]
timezone = "Europe/Berlin"
[sites.weir]
timezone = "America/Halifax"

[[visits]]
name = "visit-1"
required_runs = ["steady", "preload-reduction"]
required_stages = ["baseline"]

[limits.pressure-points]
fail_below = 2

[[stages]]
name = "baseline"
reference = true
[[stages]]
name = "infusion"
"""

PRESSURE_OFFSET = (("EDP", "ESP", "Ea", "V0"), ("Ees", "SW", "PRSW", "SV"))
PRESSURE_GAIN = (("ESP", "Ees", "SW", "PRSW"), ("EDV", "SV", "EF"))
VOLUME_GAIN = (("EDV", "SV", "Ea", "Ees"), ("EDP", "PRSW"))
VOLUME_OFFSET = (("EDV", "EF", "V0"), ("SV", "Ea", "Ees", "SW", "PRSW"))
UNTOUCHED = ((), ("EDV", "SV", "ESP", "Ees"))
PRESSURE_PEAK = (("Pmax", "ESP", "SW"), ("EDV", "SV", "EF"))
TIME_SCALE = (("HR", "dPdt_max"), ("EDV", "SV", "EF"))
SLOPES_GONE = (("Ees", "PRSW"), ("EDV", "SV", "ESP"))
"""Indices that a fault must withhold, and indices it cannot touch: what a constant error does to each is arithmetic."""


@dataclass(frozen=True, slots=True)
class TrueIndex:
    """What an index of a stage truly is."""

    stage: str
    index: str
    value: float


@dataclass(frozen=True, slots=True)
class PutIn:
    """One package and what should become of it.

    ``found`` is the name of a check, the status of a package, or empty for a clean one. ``withheld`` and ``published`` are indices.
    Known once the study is made, empty before: ``expected`` holds runs and instants inside the beats truly touched, ``truths`` the
    true indices of a clean acquisition.
    """

    package: str
    site: str
    acquisition: str
    trouble: str
    found: str
    withheld: tuple[str, ...] = ()
    published: tuple[str, ...] = ()
    expected: tuple[Expected, ...] = ()
    truths: tuple[TrueIndex, ...] = ()


@dataclass(frozen=True, slots=True)
class Case:
    """One line of the study: a subject, its heart, the trouble, and how the package was sent.

    ``recipe``, ``at_rest`` and ``in_every_run`` change fields of the recipe, of the steady runs' and of all runs' conditions.
    """

    site: str
    subject: str
    heart: str
    trouble: str = "none"
    found: str = ""
    inject: Fault | None = None
    severity: float = 1.0
    indices: tuple[tuple[str, ...], tuple[str, ...]] = UNTOUCHED
    sent: str = "whole"
    recipe: dict[str, Any] = field(default_factory=dict)
    at_rest: dict[str, Any] = field(default_factory=dict)
    in_every_run: dict[str, Any] = field(default_factory=dict)
    has_infusion: bool = False

    @property
    def acquisition(self) -> str:
        """Return the acquisition's name."""
        return f"{self.subject}-visit-1"

    def packages(self) -> tuple[PutIn, ...]:
        """Return what this case uploads, in the order it was sent, before it is known which beats are touched."""
        withheld, published = self.indices
        first = PutIn(self.acquisition, self.site, self.acquisition, self.trouble, self.found)
        sound = replace(first, withheld=withheld, published=published)
        if self.sent == "again":
            return sound, replace(first, package=f"{first.package}-again", trouble="the same content once more", found="seen again")
        if self.sent == "corrected":
            return first, replace(sound, package=f"{first.package}-corrected", trouble="none; the correction", found="")
        return (sound,) if self.sent == "whole" else (first,)


DRIFTED = replace(ORDINARY, zero_error_mmhg=0.4, drift_mmhg_per_hour=0.9)
RAW = replace(ORDINARY, pressure_gain=0.99, pressure_shift_mmhg=0.4, volume_gain=0.82, volume_shift_ml=46.0, volume_delay_s=0.012)

CASES = (
    Case("harbour", "H-001", "normal", "none; baseline and infusion", recipe={"catheter": DRIFTED}, has_infusion=True),
    Case(
        "harbour",
        "H-002",
        "large",
        "none; raw volume with gain, parallel volume and a declared delay",
        recipe={"catheter": RAW, "raw_volume": True},
    ),
    Case("harbour", "H-003", "normal", "pressure zero drifts by 7 mmHg", "zero-drift", faults.zero_drift, 7.0, PRESSURE_OFFSET),
    Case("harbour", "H-004", "fast", "two premature beats", "cycle-length", faults.premature_beats, 0.6),
    Case(
        "harbour",
        "H-005",
        "stiff",
        "pressure in kPa called mm[Hg], corrected a day later",
        "superseded",
        signal_faults.pressure_in_kpa,
        sent="corrected",
    ),
    Case("fell", "F-001", "large", "none; breathing freely", at_rest={"breathing": Breathing()}),
    Case("fell", "F-002", "right", "none; right ventricle at 1 kHz", recipe={"rate_hz": 1000.0}),
    Case("fell", "F-003", "small", "no zero was read", "pressure-zero", faults.zero_missing, 4.0, PRESSURE_OFFSET),
    Case("fell", "F-004", "normal", "signals stand still for 2 s", "flat-line", signal_faults.flat_line, 2.0),
    Case("fell", "F-005", "failing", "volume jumps by 25 mL and back", "loop-closure", signal_faults.volume_stepped, 25.0),
    Case("fell", "F-006", "normal", "checksums not there yet", "waiting", sent="arriving"),
    Case(
        "quarry", "Q-001", "high-afterload", "pressure sensor shows 28 % too much", "pressure-gain", faults.gain_shown, 0.28, PRESSURE_GAIN
    ),
    Case("quarry", "Q-002", "large", "volume gain 45 % too high", "reference-stroke-volume", faults.volume_gain_wrong, 0.45, VOLUME_GAIN),
    Case(
        "quarry",
        "Q-003",
        "normal",
        "parallel volume of 60 mL left in",
        "reference-volumes",
        faults.parallel_volume_wrong,
        60.0,
        VOLUME_OFFSET,
    ),
    Case(
        "quarry",
        "Q-004",
        "normal",
        "pressure cut off at the recorder's rail",
        "pressure-clipping",
        signal_faults.pressure_clipped,
        0.2,
        PRESSURE_PEAK,
    ),
    Case("quarry", "Q-005", "stiff", "1.2 s of samples lost", "missing-samples", signal_faults.samples_lost, 1.2),
    Case("quarry", "Q-006", "normal", "a byte altered after the checksums were made", "quarantined", sent="altered"),
    Case("weir", "W-001", "stiff", "none; declared atrial fibrillation", sent="again", in_every_run={"fibrillating": True}),
    Case(
        "weir",
        "W-002",
        "normal",
        "rate declared twice too high, no time stamps",
        "heart-rate-agreement",
        faults.clock_misdeclared,
        2.0,
        TIME_SCALE,
    ),
    Case("weir", "W-003", "right-loaded", "occlusion too shallow", "preload-adequacy", faults.occlusion_shallow, 0.92, SLOPES_GONE),
    Case("weir", "W-004", "normal", "no preload-reduction run", "required-runs", faults.ramp_missing, 1.0, ((), ("EDV", "SV", "ESP"))),
    Case("weir", "W-005", "fast", "time stamps stand twice for 0.6 s", "duplicated-samples", signal_faults.stamps_repeated, 0.6),
)
