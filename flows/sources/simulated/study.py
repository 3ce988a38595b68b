"""The invented study Tarn: four sites, their uploads, and what was put into each.

Everything follows from fixed seeds and fixed clocks, so that the same folder comes out byte for byte each time.
"""

from __future__ import annotations

import zlib
from dataclasses import replace
from datetime import datetime, timedelta, timezone
from pathlib import Path

import numpy as np

from flows.errors import InputError
from flows.sources.simulated.acquisition import RECORDING_HOUR, Acquisition, Identity, Recipe, RunPlan, made, rest_and_ramp
from flows.sources.simulated.cases import CASES, PROTOCOL, SITES, Case, PutIn, TrueIndex
from flows.sources.simulated.faults import Injected
from flows.sources.simulated.heart import Heart, heart_named, inotrope
from flows.sources.simulated.package import date_package, write_package
from flows.sources.simulated.rhythm import Conditions

PUT_IN: tuple[PutIn, ...] = tuple(put_in for case in CASES for put_in in case.packages())


def make_study(folder: Path) -> list[PutIn]:
    """Make the study in ``folder`` and return what was put in, package by package, with the beats that it touches.

    A folder that holds the study already is made again, byte for byte; what the program keeps beside the inbox is left alone.
    Raises InputError for a folder that holds anything else.
    """
    protocol = folder / "protocol.toml"
    if folder.exists() and not folder.is_dir():
        problem = "is not a folder"
        raise InputError(problem, file=str(folder), remedy="Name a new or an empty folder.")
    if folder.is_dir() and any(folder.iterdir()) and not (protocol.is_file() and protocol.read_text(encoding="utf-8") == PROTOCOL):
        problem = "is not empty and does not hold the study Tarn"
        raise InputError(problem, file=str(folder), remedy="Name a new or an empty folder.")
    folder.mkdir(parents=True, exist_ok=True)
    protocol.write_bytes(PROTOCOL.encode())
    return [put_in for case in CASES for put_in in _upload(folder / "inbox" / case.site, case)]


def _upload(inbox: Path, case: Case) -> list[PutIn]:
    """Write a case's packages and return them, in the order they were sent."""
    sound = made(_recipe(case))
    injected = Injected(sound, ()) if case.inject is None else case.inject(sound, case.severity)
    sent_at = sound.recipe.identity.recorded_at + timedelta(hours=7)
    first, *later = case.packages()
    write_package(inbox / first.package, injected.acquisition, sent_at, complete=case.sent != "arriving")
    if case.sent == "altered":
        _alter(inbox / first.package / injected.acquisition.manifest["runs"][0]["file"])
        date_package(inbox / first.package, sent_at)
    for put_in in later:
        write_package(inbox / put_in.package, sound, sent_at + timedelta(days=1))
    # What a superseded version held is no longer in the tables, so nothing of it can be looked for there.
    sent = [replace(first, expected=() if case.sent == "corrected" else injected.expected), *later]
    return [put_in if put_in.found else replace(put_in, truths=_truths(sound)) for put_in in sent]


def _truths(acquisition: Acquisition) -> tuple[TrueIndex, ...]:
    """Return the true indices of each stage: the end-systolic line from its occlusion, the rest from its steady run.

    Stroke work recruits along a line that is not quite straight, so its slope has no one truth and is left out.
    """
    truths = []
    for plan in acquisition.recipe.runs:
        truth = acquisition.truth[plan.run]
        if plan.conditions.occlusion is not None:
            values = {"Ees": truth.ees_mmhg_per_ml, "V0": truth.v0_ml}
        else:
            values = {"EDV": truth.edv_ml, "SV": truth.sv_ml, "EDP": truth.edp_mmhg, "ESP": truth.esp_mmhg, "Ea": truth.ea_mmhg_per_ml}
            values |= {"SW": truth.sw_mmhg_ml, "HR": truth.heart_rate_per_min}
        truths += [TrueIndex(plan.stage, index, value) for index, value in values.items()]
    return tuple(truths)


def _alter(path: Path) -> None:
    """Change one digit in the middle of a file."""
    content = bytearray(path.read_bytes())
    place = next(at for at in range(len(content) // 2, len(content)) if chr(content[at]) in "12345678")
    content[place] += 1
    path.write_bytes(bytes(content))


def _recipe(case: Case) -> Recipe:
    # Numbers come from the name, so that a case added to the list changes no other.
    number = zlib.crc32(case.subject.encode())
    clock = timezone(timedelta(hours=SITES[case.site]))
    recorded_at = datetime(2026, 2, 2 + number % 20, 9, number % 60, tzinfo=clock)
    identity = Identity("tarn", case.site, case.subject, "visit-1", case.acquisition, recorded_at)
    heart = _individual(heart_named(case.heart), number)
    plans: tuple[RunPlan, ...] = rest_and_ramp()
    if case.has_infusion:
        plans += rest_and_ramp("infusion", RECORDING_HOUR + 0.4, inotrope(heart))
    runs = tuple(replace(plan, conditions=_conditions(case, plan)) for plan in plans)
    return Recipe(identity, heart, runs, seed=number, **case.recipe)


def _conditions(case: Case, plan: RunPlan) -> Conditions:
    at_rest = case.at_rest if plan.conditions.occlusion is None else {}
    return replace(plan.conditions, **{**case.in_every_run, **at_rest})


def _individual(heart: Heart, number: int) -> Heart:
    """Return a heart a little different from its kind, as subjects are."""
    spread = 1.0 + 0.05 * np.clip(np.random.default_rng([number, 3]).standard_normal(3), -1.5, 1.5)
    return replace(
        heart,
        ees_mmhg_per_ml=round(heart.ees_mmhg_per_ml * float(spread[0]), 3),
        peripheral_resistance=round(heart.peripheral_resistance * float(spread[1]), 4),
        heart_rate_per_min=round(heart.heart_rate_per_min * float(spread[2]), 1),
    )
