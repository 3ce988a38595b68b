"""protocol.toml: what the study demands of its sites.

Choices of this file, beyond the contract's: ``required_runs`` lists run kinds and a kind listed twice is needed twice;
``[subjects] expected`` holds the pseudonyms by site, and a site with a list takes no other subject; ``[study.lock]`` holds the
revision of each check or index the study was frozen at, ``loop-closure = 1``.
"""

from __future__ import annotations

import hashlib
import tomllib
from collections.abc import Collection, Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal, Self
from zoneinfo import ZoneInfo, available_timezones

from pydantic import BeforeValidator, Field, PrivateAttr, field_validator, model_validator

from flows.errors import InputError
from flows.study.channels import Channels
from flows.study.manifest import Chamber, RunKind
from flows.study.names import NAME_RULE, did_you_mean, is_name
from flows.study.strict import Label, Name, StrictModel, combined, fault, not_empty, validated

if TYPE_CHECKING:
    from checks.check import Check

PROTOCOL_NAME = "protocol.toml"
_LARGEST_BYTES = 4 * 1024 * 1024


def _checked_timezone(name: str) -> str:
    try:
        ZoneInfo(name)
    except (ValueError, OSError, LookupError):
        problem = "is not the IANA name of a time zone"
        raise fault(problem, did_you_mean(name, available_timezones()) if name else "Write it like Europe/Lisbon.") from None
    return name


class Study(StrictModel):
    """The study itself. ``lock`` maps the name of a check or index to the revision the study was frozen at."""

    name: Name
    version: Label
    timezone: str = "UTC"
    chambers: Annotated[tuple[Chamber, ...], BeforeValidator(not_empty)] = Field(default=("LV", "RV"), strict=False)
    lock: dict[str, int] = Field(default_factory=dict)

    _timezone = field_validator("timezone")(_checked_timezone)


class Site(StrictModel):
    """A site. ``profile`` gives the channels of runs that declare none."""

    timezone: str
    profile: Channels | None = None

    _timezone = field_validator("timezone")(_checked_timezone)


class Visit(StrictModel):
    """A visit and what an acquisition of it must hold."""

    name: Name
    required_runs: tuple[RunKind, ...] = Field(default=(), strict=False)
    required_stages: tuple[Label, ...] = Field(default=(), strict=False)


class Stage(StrictModel):
    """A stage of the study, in the order of the file; changes are counted from the one that is ``reference``."""

    name: Label
    reference: bool = False


class Policy(StrictModel):
    """How strictly findings act."""

    suspect: Literal["accept", "reject"] = "accept"
    required_checks: tuple[str, ...] = Field(default=("landmarks", "missing-samples"), strict=False)
    correct_estimated_delay: bool = False
    alpha_from_reference: bool = False
    repeat_visit: Literal["query", "accept"] = "query"


class Review(StrictModel):
    """What people look at: the share of acquisitions that a second reviewer reads."""

    second_reading_share: float = Field(default=0.0, ge=0.0, le=1.0)


class Subjects(StrictModel):
    """The pseudonyms each site is expected to send."""

    expected: dict[str, tuple[Name, ...]] = Field(default_factory=dict)

    @field_validator("expected", mode="before")
    @classmethod
    def _lists_to_tuples(cls, value: object) -> object:
        if not isinstance(value, dict):
            return value
        return {site: tuple(subjects) if isinstance(subjects, list) else subjects for site, subjects in value.items()}


class Protocol(StrictModel):
    """The whole protocol; frozen, its attributes are the keys of the file."""

    study: Study
    sites: Annotated[dict[str, Site], BeforeValidator(not_empty)]
    visits: tuple[Visit, ...] = Field(default=(), strict=False)
    stages: tuple[Stage, ...] = Field(default=(), strict=False)
    limits: dict[str, dict[str, float]] = Field(default_factory=dict)
    policy: Policy = Policy()
    review: Review = Review()
    subjects: Subjects = Subjects()
    _sha256: str = PrivateAttr(default="")

    @property
    def sha256(self) -> str:
        """SHA-256 of the file's bytes."""
        return self._sha256

    @property
    def reference_stage(self) -> str | None:
        """The stage changes are counted from: the marked one, else the first, else None."""
        marked = [stage.name for stage in self.stages if stage.reference]
        named = marked or [stage.name for stage in self.stages]
        return named[0] if named else None

    @model_validator(mode="after")
    def _names_fit_together(self) -> Self:
        _refuse_twins("visits", [visit.name for visit in self.visits])
        stages = [stage.name for stage in self.stages]
        _refuse_twins("stages", stages)
        if sum(stage.reference for stage in self.stages) > 1:
            problem = "two stages are marked reference = true"
            raise fault(problem, "Mark one.")
        for visit in self.visits:
            for stage in visit.required_stages:
                if stages and stage not in stages:
                    problem = f"visit {visit.name!r} requires stage {stage!r}, which [[stages]] does not list"
                    raise fault(problem, did_you_mean(stage, stages))
        for site in self.sites:
            if not is_name(site):
                problem = f"site {site!r} is not a name that can be used"
                raise fault(problem, f"Use {NAME_RULE}.")
        for site in self.subjects.expected:
            if site not in self.sites:
                problem = f"[subjects] expected names the unknown site {site!r}"
                raise fault(problem, did_you_mean(site, self.sites))
        return self


def read_protocol(study: Path) -> Protocol:
    """Return the protocol of the study folder ``study``.

    Raises InputError for a folder without one, text that is not TOML, and every unknown table, key, check or limit ("did you mean").
    """
    path = study / PROTOCOL_NAME
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        problem = "does not exist" if study.is_dir() else "does not exist, nor does its folder"
        remedy = 'Write one; the smallest is [study] name = "...", version = "..." and [sites.<site>] timezone = "...".'
        raise InputError(problem, file=str(path), remedy=remedy) from None
    except OSError as failure:
        problem = f"cannot be read: {failure.strerror}"
        raise InputError(problem, file=str(path), remedy="Look at the path and its permissions.") from None
    return parse_protocol(content, file=str(path))


def parse_protocol(content: bytes, *, file: str) -> Protocol:
    """Return the bytes of a protocol.toml as a Protocol; raises InputError as `read_protocol` does."""
    if len(content) > _LARGEST_BYTES:
        problem = "is larger than 4 MB"
        raise InputError(problem, file=file, value=f"{len(content)} bytes", remedy="A protocol holds names and limits only.")
    try:
        data = tomllib.loads(content.decode("utf-8-sig"))
    except UnicodeDecodeError as failure:
        problem = f"is not UTF-8 at byte {failure.start + 1}"
        raise InputError(problem, file=file, remedy="Save it as UTF-8.") from None
    except (ValueError, RecursionError) as failure:  # a number of thousands of digits is a bare ValueError
        problem = f"is not TOML: {failure}"
        raise InputError(problem, file=file, remedy="Mend the text there.") from None
    protocol = validated(Protocol, data, file=file)
    problems = _check_problems(protocol, file)
    if problems:
        raise combined(problems)
    protocol._sha256 = hashlib.sha256(content).hexdigest()  # noqa: SLF001  (filled here and nowhere else)
    return protocol


def bare_protocol(manifest_study: str, site: str) -> Protocol:
    """Return the smallest protocol that takes a package of ``site``, all else default: for looking at a package without a study."""
    text = f'[study]\nname = "{manifest_study}"\nversion = "none"\n\n[sites."{site}"]\ntimezone = "UTC"\n'
    return parse_protocol(text.encode(), file="(no protocol)")


def lock_breaches(protocol: Protocol, revisions: dict[str, int]) -> list[str]:
    """Return, as sentences, where ``revisions`` (of checks and indices by name) differ from the study's lock; empty when none do."""
    return [
        f"{name} is locked at revision {locked} and stands at {revisions.get(name, 'none')}"
        for name, locked in sorted(protocol.study.lock.items())
        if revisions.get(name) != locked
    ]


def _refuse_twins(table: str, names: Sequence[str]) -> None:
    for name in names:
        if names.count(name) > 1:
            problem = f"[[{table}]] lists {name!r} twice"
            raise fault(problem, "Keep one.")


def _check_problems(protocol: Protocol, file: str) -> list[InputError]:
    """Return what is wrong with the names of checks, of their limits and of what is locked."""
    if not protocol.limits and not protocol.study.lock and protocol.policy.required_checks == Policy().required_checks:
        return []
    from checks import ALL as CHECKS  # noqa: PLC0415  (the cards pull in numpy and scipy, which most protocols do not need)
    from metrics.indices import ALL as INDICES  # noqa: PLC0415

    checks = {check.name: check for check in CHECKS}
    of_beats = [check.name for check in CHECKS if check.level == "beat"]
    lockable = [*checks, *dict.fromkeys(index.name for index in INDICES)]
    problems = [
        *_unknown_names("study.lock", protocol.study.lock, lockable, file, "is neither a check nor an index"),
        *_unknown_names("policy.required_checks", protocol.policy.required_checks, of_beats, file, "is not a check of beats"),
        *_unknown_names("limits", protocol.limits, checks, file, "is not a check"),
    ]
    for name, bounds in protocol.limits.items():
        problems += _limit_problems(name, bounds, checks[name], file) if name in checks else []
    return problems


def _unknown_names(field: str, names: Iterable[str], known: Collection[str], file: str, problem: str) -> list[InputError]:
    return [
        InputError(problem, file=file, field=field, value=name, remedy=did_you_mean(name, known)) for name in names if name not in known
    ]


def _limit_problems(name: str, bounds: dict[str, float], check: Check, file: str) -> list[InputError]:
    declared = sorted({*check.limits.declared(), *(check.limits_rv.declared() if check.limits_rv is not None else ())})
    problems = []
    for bound in bounds:
        if bound not in declared:
            remedy = did_you_mean(bound, declared) or "This check states a fact and has no limits."
            problems.append(InputError("is not a limit of this check", file=file, field=f"limits.{name}.{bound}", remedy=remedy))
    above = (bounds.get("suspect_above"), bounds.get("fail_above"))
    below = (bounds.get("fail_below"), bounds.get("suspect_below"))
    for milder, harder in (above, below):
        if milder is not None and harder is not None and milder > harder:
            problem = "fails before it suspects"
            problems.append(InputError(problem, file=file, field=f"limits.{name}", value=bounds, remedy="Swap the two limits."))
    return problems
