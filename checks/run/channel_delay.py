"""Channel delay: volume and pressure are of the same instant, once the declared delay is taken out.

Filters of the conditioner delay a channel by 0-20 ms (from memory). The onset of ejection against dP/dt maximum shows what is left
(`metrics.signals.delay`). It judges and corrects nothing, because valves, not wires, set that onset. What a delay moves depends on its
sign: volume 25 ms late moves Ees by 5-10 % and stroke work hardly, 60 ms late every volume; volume early, which is pressure late, moves
stroke work by 6-9 % at 25 ms and no volume even at 60 (computed on simulated hearts): that side is `damping`'s, since a slow line is a
late line. With regurgitation, which leaves no isovolumic phase, nothing is said; in the right ventricle, whose volume may begin to fall
before its valve opens, only of a gross delay.
"""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import DELAY, VOLUME_LATE
from checks.subject import REGURGITATION, RunSubject
from metrics.arrays import median_of_known

USUAL_S = {"LV": 0.003, "RV": -0.010}
"""How long after dP/dt maximum ejection begins: in a sound left ventricle 0-10 ms (from memory; -4 to 7 ms on simulated hearts with
activation, relaxation, inertance and resistance varied by half and more), in the right one at `USUAL_CYCLE_S`."""

USUAL_CYCLE_S = 0.8
EARLIER_BY_CYCLE = {"LV": 0.01, "RV": 0.04}
"""The longer the diastole, the lower the pressure an artery has fallen to and the earlier its valve opens (windkessel). The right
ventricle hardly exceeds that pressure, so that there each second of cycle length makes 40 ms (computed: 0 ms at 120 a minute, -20 at 55,
hearts apart from each other by 10 to either side)."""

REMEDY = "send the conditioner's delay of each channel in delay_ms, or record both through the same filter"


def volume_late_ms(subject: RunSubject) -> float:
    """Return by how much volume comes later than usual after pressure, ms, below 0 where pressure is late; NaN with regurgitation."""
    if subject.facts.conditions & REGURGITATION:
        return float("nan")
    chamber = subject.facts.chamber
    longer_s = median_of_known(subject.known_beats().rr_s) - USUAL_CYCLE_S
    return 1000.0 * (subject.volume_delay_s - USUAL_S[chamber] + EARLIER_BY_CYCLE[chamber] * longer_s)


def apart_ms(subject: RunSubject) -> Measured:
    """Return by how much volume and pressure are apart, ms without sign, shape ()."""
    return single(abs(volume_late_ms(subject)))


def late_ms(subject: RunSubject) -> Measured:
    """Return by how much volume is late, ms, below 0 where it is early; shape ()."""
    return single(volume_late_ms(subject))


CHECK = Check(
    name="channel-delay",
    title="Pressure and volume at one instant",
    level=Level.RUN,
    measure=apart_ms,
    unit="ms",
    limits=Limits(suspect_above=12.0, fail_above=20.0, basis="20 ms move Ees by 5 % (computed); valves open within 10 ms (from memory)"),
    limits_rv=Limits(
        suspect_above=20.0,
        fail_above=25.0,
        basis="a stiff right ventricle fills to near its artery's pressure and ejects as it begins to contract, 20 ms early (computed)",
    ),
    reason="volume and pressure are {value:.0f} ms apart beyond the declared delay (limit {limit:g} ms)",
    remedy=REMEDY,
    spoils=DELAY,
    after_beats=True,
)
GROSS = Check(
    name="channel-delay-gross",
    title="Volume not far behind pressure",
    level=Level.RUN,
    measure=late_ms,
    unit="ms",
    limits=Limits(fail_above=32.0, basis="a volume read 30 ms late at a landmark of pressure moves stroke volume by 5 % (computed)"),
    limits_rv=Limits(fail_above=28.0, basis="without an isovolumic plateau 28 ms move stroke volume by 5 % (computed)"),
    reason="volume is {value:.0f} ms late, too far for any volume read at an instant that pressure tells (limit {limit:g} ms)",
    remedy=REMEDY,
    spoils=VOLUME_LATE,
    after_beats=True,
)
