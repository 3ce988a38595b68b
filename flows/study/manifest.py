"""acquisition.json: what a site declares about one acquisition.

Attribute names are the keys of the file. Times are kept in UTC; `Manifest.recorded_at_text` holds the text as it was sent. Parts that
may be absent as a whole (sensors, calibration, subject_facts) are present as empty objects, so ``manifest.sensors.pressure.kind`` is
None rather than an error.
"""

from __future__ import annotations

from collections.abc import Collection
from typing import TYPE_CHECKING, Annotated, Literal, Self

from pydantic import BeforeValidator, Field, PrivateAttr, model_validator

from flows.errors import InputError
from flows.study.calibration import Calibration, Sensors
from flows.study.channels import Channels
from flows.study.json_text import parse_object
from flows.study.names import did_you_mean
from flows.study.strict import DeclaredModel, FilePath, Instant, Label, Name, Positive, combined, fault, not_empty, validated

if TYPE_CHECKING:
    from flows.study.protocol import Protocol

FORMAT = 1
MANIFEST_NAME = "acquisition.json"

Chamber = Literal["LV", "RV"]
RunKind = Literal["steady", "preload-reduction", "saline"]
Manoeuvre = Literal["caval-balloon", "aortic-balloon", "Valsalva", "tilt"]
Rhythm = Literal["sinus", "paced", "atrial-fibrillation"]
Condition = Literal[
    "mitral-regurgitation",
    "tricuspid-regurgitation",
    "aortic-regurgitation",
    "aortic-stenosis",
    "outflow-obstruction",
    "shunt",
    "assist-device",
]
EventKind = Literal["occlusion-on", "occlusion-off", "injection", "cough", "pacing-on", "re-zero", "catheter-moved", "note"]


class SubjectFacts(DeclaredModel):
    """What is known of the subject beside the pseudonym."""

    bsa_m2: Positive | None = None
    conditions: tuple[Condition, ...] = Field(default=(), strict=False)


class Event(DeclaredModel):
    """Something that happened ``at_s`` seconds after the run's first sample."""

    at_s: float
    kind: EventKind


class ManifestRun(DeclaredModel):
    """One recording of the acquisition."""

    run: Name
    kind: RunKind
    file: FilePath
    sampling_rate_hz: Positive
    channels: Channels
    stage: Label | None = None
    manoeuvre: Manoeuvre | None = None
    started_at: Instant | None = None
    ended_at: Instant | None = None
    heart_rate_per_min: Positive | None = None
    respiration: Literal["held", "free", "ventilated"] | None = None
    events: tuple[Event, ...] = Field(default=(), strict=False)
    calibration: Calibration | None = None

    @model_validator(mode="after")
    def _whole(self) -> Self:
        if self.started_at is not None and self.ended_at is not None and self.ended_at <= self.started_at:
            problem = "ended_at is not after started_at"
            raise fault(problem, "Look at both clocks and their offsets.")
        if self.kind != "saline" and self.channels.pressure is None:
            problem = f"a {self.kind} run needs a pressure channel"
            raise fault(problem, "Add channels.pressure.")
        if self.channels.volume is None and not self.channels.segments:
            problem = f"a {self.kind} run needs a volume channel"
            raise fault(problem, "Add channels.volume, or channels.segments.")
        return self

    @model_validator(mode="after")
    def _channels_tell_apart(self) -> Self:
        taken = {} if self.channels.time is None else {(self.file, self.channels.time.column): "time"}
        for name, channel in self.channels.signals().items():
            twin = taken.setdefault((channel.file or self.file, channel.column), name)
            if twin != name:
                problem = f"channels {twin} and {name} name the same column {channel.column!r}"
                raise fault(problem, "Name each channel's own column.")
        segments = self.channels.segments
        if self.channels.volume is None and len({(segment.unit, segment.is_raw, segment.delay_ms) for segment in segments}) > 1:
            problem = "segments whose sum is the volume differ in unit, calibrated or delay_ms"
            raise fault(problem, "Give all segments the same.")
        return self

    def signal_files(self) -> tuple[str, ...]:
        """Return the files this run is read from, its own first."""
        others = {channel.file for channel in self.channels.signals().values() if channel.file is not None}
        return (self.file, *sorted(others - {self.file}))


class Manifest(DeclaredModel):
    """One acquisition as declared."""

    format: Literal[1]
    study: Name
    site: Name
    subject: Name
    visit: Name
    acquisition: Name
    recorded_at: Instant
    chamber: Chamber
    runs: Annotated[tuple[ManifestRun, ...], BeforeValidator(not_empty)] = Field(strict=False, json_schema_extra={"minItems": 1})
    session: Name | None = None
    rhythm: Rhythm | None = None
    subject_facts: SubjectFacts = SubjectFacts()
    sensors: Sensors = Sensors()
    calibration: Calibration = Calibration()
    _recorded_at_text: str = PrivateAttr(default="")

    @model_validator(mode="after")
    def _runs_tell_apart(self) -> Self:
        names = [run.run for run in self.runs]
        for name in names:
            if names.count(name) > 1:
                problem = f"two runs are called {name!r}"
                raise fault(problem, "Give each run of the acquisition a name of its own.")
        seen: dict[tuple[str, Channels], str] = {}
        for run in self.runs:
            twin = seen.setdefault((run.file, run.channels), run.run)
            if twin != run.run:
                problem = f"runs {twin!r} and {run.run!r} name the same columns of the same file"
                raise fault(problem, "Name each run's own file.")
        return self

    @property
    def recorded_at_text(self) -> str:
        """The recording time as the site wrote it, with its offset."""
        return self._recorded_at_text

    def calibration_of(self, run: ManifestRun) -> Calibration:
        """Return the calibration that holds for ``run``: its own where it has one, else the acquisition's."""
        return self.calibration if run.calibration is None else run.calibration

    def segments_used(self, run: ManifestRun) -> tuple[int, ...]:
        """Return the numbers (from 1) of the segments whose sum is the volume of ``run``; empty when none are named."""
        columns = [segment.column for segment in run.channels.segments]
        used = self.calibration_of(run).volume.segments_used
        return tuple(columns.index(one) + 1 if isinstance(one, str) else int(str(one)) for one in used)


def read_manifest(
    text: bytes,
    *,
    file: str,
    protocol: Protocol | None,
    site: str | None = None,
    files: Collection[str] | None = None,
) -> Manifest:
    """Return the bytes of an acquisition.json as a Manifest.

    With a ``protocol`` study, site, chamber, visit, stages and subject must be known to it, and runs without ``channels`` take those
    of the site's profile. ``site`` is the folder the package came in; ``files`` are the payload paths of the package, which every
    file named by a run must be among. Raises InputError that lists every problem.
    """
    data = parse_object(text, file=file)
    _refuse_other_formats(data, file)
    if protocol is not None:
        data = _with_profile(data, protocol)
    manifest = validated(Manifest, data, file=file, own_keys=True)
    manifest._recorded_at_text = str(data["recorded_at"])  # noqa: SLF001  (filled here and nowhere else)
    problems = _segment_problems(manifest, file) + _calibrated_problems(manifest, file)
    problems += [] if protocol is None else _protocol_problems(manifest, protocol, file)
    problems += [] if site is None else _folder_problems(manifest, site, file)
    problems += [] if files is None else _file_problems(manifest, files, file)
    if problems:
        raise combined(problems)
    return manifest


def _refuse_other_formats(data: dict[str, object], file: str) -> None:
    number = data.get("format", FORMAT)
    if not isinstance(number, int) or isinstance(number, bool) or number < 1:
        problem = "is not the number of a format"
        raise InputError(problem, file=file, field="format", value=number, remedy=f"Write {FORMAT}, without quotes.")
    if number > FORMAT:
        problem = f"is newer than this program reads (1 to {FORMAT})"
        raise InputError(problem, file=file, field="format", value=number, remedy="Update the program, or send the older format.")


def _with_profile(data: dict[str, object], protocol: Protocol) -> dict[str, object]:
    """Return the data with the site's profile as the channels of every run that declares none."""
    site, runs = data.get("site"), data.get("runs")
    known = protocol.sites.get(site) if isinstance(site, str) else None
    if known is None or known.profile is None or not isinstance(runs, list):
        return data
    channels = known.profile.model_dump(exclude_unset=True)
    filled = [run | {"channels": channels} if isinstance(run, dict) and "channels" not in run else run for run in runs]
    return data | {"runs": filled}


def _segment_problems(manifest: Manifest, file: str) -> list[InputError]:
    problems = []
    for position, run in enumerate(manifest.runs):
        columns = [segment.column for segment in run.channels.segments]
        used = manifest.calibration_of(run).volume.segments_used if columns else ()
        numbers = range(1, len(columns) + 1)
        problems += [
            InputError(
                f"run {run.run!r} has no such segment",
                file=file,
                field=f"runs[{position}].channels.segments"
                if run.calibration is None
                else f"runs[{position}].calibration.volume.segments_used",
                value=one,
                remedy=did_you_mean(str(one), [*columns, *map(str, numbers)]),
            )
            for one in used
            if (one not in columns if isinstance(one, str) else one not in numbers)
        ]
    return problems


def _calibrated_problems(manifest: Manifest, file: str) -> list[InputError]:
    """Refuse to guess: with a gain on record and a volume in mL, only the site knows whether the gain has been applied."""
    problems = []
    for position, run in enumerate(manifest.runs):
        volume, calibration = run.channels.volume, manifest.calibration_of(run).volume
        if volume is None or "calibrated" in volume.model_fields_set or volume.unit in {"mS", "S"}:
            continue
        if calibration.alpha is not None or calibration.alpha_vc_ml is not None:
            problem = "is missing, and alpha or alpha_vc_ml is on record"
            field = f"runs[{position}].channels.volume.calibrated"
            remedy = "Say true if the column holds corrected mL, false if alpha and alpha_vc_ml still have to be applied."
            problems.append(InputError(problem, file=file, field=field, remedy=remedy))
    return problems


def _protocol_problems(manifest: Manifest, protocol: Protocol, file: str) -> list[InputError]:
    stages = [stage.name for stage in protocol.stages]
    asked: list[tuple[str, str | None, Collection[str]]] = [
        ("study", manifest.study, [protocol.study.name]),
        ("site", manifest.site, list(protocol.sites)),
        ("chamber", manifest.chamber, list(protocol.study.chambers)),
        ("visit", manifest.visit, [visit.name for visit in protocol.visits]),
        ("subject", manifest.subject, protocol.subjects.expected.get(manifest.site, ())),
        *((f"runs[{position}].stage", run.stage, stages) for position, run in enumerate(manifest.runs)),
    ]
    return [
        InputError("is not in the study protocol", file=file, field=field, value=value, remedy=did_you_mean(value, known))
        for field, value, known in asked
        if value is not None and known and value not in known
    ]


def _folder_problems(manifest: Manifest, site: str, file: str) -> list[InputError]:
    if manifest.site == site:
        return []
    problem = f"does not match the inbox folder {site!r} it came in"
    return [InputError(problem, file=file, field="site", value=manifest.site, remedy="Correct the field or move the package.")]


def _file_problems(manifest: Manifest, files: Collection[str], file: str) -> list[InputError]:
    signals = sorted(set(files) - {MANIFEST_NAME})
    named: list[tuple[str, str]] = []
    for position, run in enumerate(manifest.runs):
        named.append((f"runs[{position}].file", run.file))
        for name, channel in run.channels.signals().items():
            where = name if not name.startswith("segment-") else f"segments[{int(name.removeprefix('segment-')) - 1}]"
            named += [] if channel.file is None else [(f"runs[{position}].channels.{where}.file", channel.file)]
    return [
        InputError("names a file that is not in the package", file=file, field=field, value=path, remedy=did_you_mean(path, signals))
        for field, path in named
        if path not in signals
    ]
