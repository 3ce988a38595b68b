"""Clock agreement: begin, end and heart rate do not say together that the time base runs wrong.

Either alone may be off for its own reason: an export cut short, a heart that wandered. Where both are off in the same direction and by as
much as each other, within what each can tell, it is the clock of the samples, and all that is counted by it is off by as much. Begin and
end are often written in whole seconds, so the duration must be off by more than one; heart rate wanders by some 10 % in health. Wrong by
5 % is wrong by what matters for an index. House default.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.run.duration import WHOLE_SECOND_S, duration_ratio
from checks.run.heart_rate_agreement import heart_rate_ratio
from checks.spoils import TIME_SCALE
from checks.subject import RunSubject

WANDER = 0.10
"""How far a sound heart's rate may be from the declared one; house default, as for heart-rate-agreement."""


def clock_error(subject: RunSubject) -> Measured:
    """Return by how much duration and heart rate both say the clock is wrong, as a fraction, shape (); NaN unless both are declared.

    The smaller of the two; 0 where they do not agree that it is.
    """
    fast, beats = np.log(duration_ratio(subject)), np.log(heart_rate_ratio(subject))
    if not np.isfinite(fast + beats):
        return single(np.nan)
    declared_s = float(subject.facts.duration_s or np.nan)
    beyond_a_second = abs(np.exp(-fast) - 1.0) * declared_s > WHOLE_SECOND_S
    alike = fast * beats > 0.0 and abs(fast - beats) <= WANDER + WHOLE_SECOND_S / declared_s
    return single(float(np.expm1(min(abs(fast), abs(beats)))) if beyond_a_second and alike else 0.0)


CHECK = Check(
    name="clock-agreement",
    title="Duration and heart rate against the clock of the samples",
    level=Level.RUN,
    measure=clock_error,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.05, basis="5 % is what matters for an index; house default"),
    reason="duration and heart rate both say that the samples' clock is wrong by {value:.0%} (limit {limit:.0%})",
    remedy="confirm the sampling rate, the time column's unit and the clock times",
    spoils=TIME_SCALE,
)
