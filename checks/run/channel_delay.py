"""Channel delay: volume and pressure are of the same instant, once the declared delay is taken out.

Filters of the conditioner delay a channel by 0-20 ms (from memory). 10 ms move stroke work by 2 %, 25 ms by 6-8 %, and 50 ms the slope
Ees by 12 % (computed on simulated hearts). The onset of ejection against dP/dt maximum shows what is left (`metrics.signals.delay`); it
judges and corrects nothing, because valves, not wires, set that onset in the right ventricle and in regurgitation: neither is evaluated.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import DELAY, LONG_DELAY
from checks.subject import REGURGITATION, RunSubject
from metrics.signals.delay import volume_delay_s

USUAL_S = 0.003
"""How long after dP/dt maximum ejection begins in a sound left ventricle: 0-10 ms (from memory, and -2 to 5 ms on simulated hearts)."""


def residual_delay_ms(subject: RunSubject) -> Measured:
    """Return by how much volume and pressure are apart, ms without sign, shape (); NaN for a right ventricle or with regurgitation."""
    if subject.facts.chamber != "LV" or subject.facts.conditions & REGURGITATION:
        return single(np.nan)
    beats = subject.known_beats()
    chosen = np.ones(len(beats), dtype=bool) if subject.accepted is None else subject.accepted
    return single(1000.0 * abs(volume_delay_s(subject.known_signals(), beats, chosen) - USUAL_S))


CHECK = Check(
    name="channel-delay",
    title="Pressure and volume at one instant",
    level=Level.RUN,
    measure=residual_delay_ms,
    unit="ms",
    limits=Limits(
        suspect_above=10.0, fail_above=15.0, basis="15 ms move stroke work by 4-5 % (computed); valves open within 10 ms (from memory)"
    ),
    reason="volume and pressure are {value:.0f} ms apart beyond the declared delay (limit {limit:g} ms)",
    remedy="send the conditioner's delay of each channel in delay_ms, or record both through the same filter",
    spoils=DELAY,
    after_beats=True,
)
GROSS = Check(
    name="channel-delay-gross",
    title="Pressure and volume not far apart",
    level=Level.RUN,
    measure=residual_delay_ms,
    unit="ms",
    limits=Limits(fail_above=20.0, basis="above 20 ms Ees moves by 5 % and more (computed)"),
    reason="volume and pressure are {value:.0f} ms apart, too far for any value read from both at one instant (limit {limit:g} ms)",
    remedy="send the conditioner's delay of each channel in delay_ms, or record both through the same filter",
    spoils=LONG_DELAY,
    after_beats=True,
)
