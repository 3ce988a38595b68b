"""Standstill: how much of a run a channel repeats its last value for.

A beating heart never leaves a channel at one value: noise alone moves it. A plug that came out leaves a channel flat for good; a
transmitter out of reach leaves pieces of a held value. Both are the same measure over stretches of different length, and beats that
hold such a piece are rejected one by one; the run fails where most of it is gone and fewer than five beats are left.

A coarse converter draws plateaus in health, and a volume without noise stands still while the valves are shut, but both arrive and
leave gently: a short stretch counts only when it begins or ends with a jump of more than three steps of the converter and 3 % of what the
channel moves by, lies at an edge of the run, or outlasts any diastole.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.run.beats_accepted import LEAST_BEATS
from checks.spoils import EVERYTHING, VOLUME_SHAPE
from checks.subject import RunSubject

FLAT_S = 3.0
"""No heart that is being measured stands still for so long; house default."""


def still_share(subject: RunSubject, name: str, *, flat: bool) -> Measured:
    """Return the share of a channel's samples in still stretches, and when the first begins, shape ().

    Stretches of 3 s and more where ``flat``, else shorter ones that are broken off or outlast a diastole. Borne out where fewer beats
    than make a median are free of any.
    """
    channel = subject.channel(name)
    first, stop = subject.standing[name]
    chosen = (stop - first >= FLAT_S * channel.sampling_rate_hz) == flat
    first, stop = first[chosen], stop[chosen]
    share = float(np.sum(stop - first)) / max(channel.samples.size, 1)
    left = 0 if subject.beats is None or subject.signals is None else int(np.sum(subject.longest_standing(name)[0] == 0.0))
    return Measured(
        np.array(share),
        np.array(float(first[0]) / channel.sampling_rate_hz if first.size else np.nan),
        np.array(left < LEAST_BEATS),
    )


def flat_pressure(subject: RunSubject) -> Measured:
    """Return the share of the pressure in stretches of 3 s and more at one value, and when the first begins, shape ()."""
    return still_share(subject, "pressure", flat=True)


def flat_volume(subject: RunSubject) -> Measured:
    """Return the share of the volume in stretches of 3 s and more at one value, and when the first begins, shape ()."""
    return still_share(subject, "volume", flat=True)


def held_pressure(subject: RunSubject) -> Measured:
    """Return the share of the pressure in broken-off stretches of 0.1 to 3 s at one value, and when the first begins, shape ()."""
    return still_share(subject, "pressure", flat=False)


def held_volume(subject: RunSubject) -> Measured:
    """Return the share of the volume in broken-off stretches of 0.1 to 3 s at one value, and when the first begins, shape ()."""
    return still_share(subject, "volume", flat=False)


_FLAT = Limits(suspect_above=0.02, fail_above=0.50, basis="house default; beats that stand still are rejected one by one")
_HELD = Limits(suspect_above=0.01, fail_above=0.25, basis="house default, as for missing samples")

FLAT_PRESSURE = Check(
    name="pressure-flat",
    title="Pressure does not stand still",
    level=Level.RUN,
    measure=flat_pressure,
    unit="1",
    limits=_FLAT,
    reason="pressure stands still for {value:.0%} of the run (limit {limit:.0%})",
    remedy="check the plug and the cable of the pressure sensor",
    spoils=EVERYTHING,
)
FLAT_VOLUME = Check(
    name="volume-flat",
    title="Volume does not stand still",
    level=Level.RUN,
    measure=flat_volume,
    unit="1",
    limits=_FLAT,
    reason="volume stands still for {value:.0%} of the run (limit {limit:.0%})",
    remedy="check the plug and the cable of the volume sensor",
    spoils=VOLUME_SHAPE,
)
HELD_PRESSURE = Check(
    name="pressure-dropout",
    title="Pressure does not drop out",
    level=Level.RUN,
    measure=held_pressure,
    unit="1",
    limits=_HELD,
    reason="pressure repeats its last value for {value:.1%} of the run, in pieces (limit {limit:.0%})",
    remedy="look for a loose contact or lost packets of the pressure channel",
    spoils=EVERYTHING,
)
HELD_VOLUME = Check(
    name="volume-dropout",
    title="Volume does not drop out",
    level=Level.RUN,
    measure=held_volume,
    unit="1",
    limits=_HELD,
    reason="volume repeats its last value for {value:.1%} of the run, in pieces (limit {limit:.0%})",
    remedy="look for a loose contact or lost packets of the volume channel",
    spoils=VOLUME_SHAPE,
)
