"""Ventricles by their parameters, and the published physics that turns volume and activation into pressure.

Pressure is ``e Ees (V - V0) + (1 - e) EDPVR(V)`` with the activation ``e`` between 0 and 1: the time-varying elastance of Suga and
Sagawa 1974 (Circ Res 35:117, from memory), made so that at e = 1 the end-systolic relation is the straight line ``Ees (V - V0)``.
The passive curve ``A (exp(B (V - V0)) - 1)`` and the parameter values are house choices that keep each heart inside the ranges
published for its kind. A bent end-systolic relation is ``a (V - V0)^2 + b (V - V0)`` (Kass 1989, Circulation 79:167, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace


@dataclass(frozen=True, slots=True)
class VenousReturn:
    """What closes the loop from the arteries back to the ventricle: a venous reservoir, its outlet's resistance, an atrium.

    ``stressed_volume_ml`` is all blood beyond what the vessels, the atrium and the ventricle hold unstretched; it fills the loop and
    is conserved. Compliance in mL/mmHg, resistance in mmHg s/mL, atrial elastances in mmHg/mL. Values are house choices in the order
    of what is known of the systemic veins: about 100 mL/mmHg and 2.5 L unstressed (from memory).
    """

    stressed_volume_ml: float
    resistance: float
    compliance_ml_per_mmhg: float = 100.0
    unstressed_ml: float = 2500.0
    atrial_elastance: float = 0.16
    atrial_elastance_contracted: float = 0.4
    atrial_unstressed_ml: float = 10.0


@dataclass(frozen=True, slots=True)
class Heart:
    """One ventricle, what fills it and what it ejects into.

    Resistances in mmHg s/mL, inertances in mmHg s2/mL, compliance in mL/mmHg. ``activation_scale`` multiplies the published time
    scale of activation; ``atrial_kick_mmhg`` is what the atrium adds to the filling pressure before a beat; contraction begins
    ``electromechanical_delay_s`` after the R wave. ``espvr_bend_mmhg_per_ml2`` is the a of a bent end-systolic relation (below 0: the
    slope falls with volume; ``ees_mmhg_per_ml`` is then the slope at V0). The leaks are what passes a shut valve backwards, in mL/s
    at 1 mmHg, growing with the root of the gradient as through an orifice. ``conditions`` are what a site would declare.

    With ``veins`` the ventricle is part of a closed loop: then ``filling_pressure_mmhg`` is only where the atrium begins and by what
    breath swings; the kick is not used, and the downstream pressure only to begin with.
    """

    name: str
    chamber: str
    heart_rate_per_min: float
    ees_mmhg_per_ml: float
    v0_ml: float
    filling_pressure_mmhg: float
    peripheral_resistance: float
    compliance_ml_per_mmhg: float
    passive_pressure_mmhg: float = 1.0
    passive_exponent_per_ml: float = 0.02
    activation_scale: float = 0.85
    relaxation_exponent: float = 16.0
    filling_resistance: float = 0.025
    filling_inertance: float = 0.0004
    atrial_kick_mmhg: float = 5.0
    outflow_resistance: float = 0.008
    outflow_inertance: float = 0.0005
    characteristic_resistance: float = 0.05
    downstream_pressure_mmhg: float = 4.0
    electromechanical_delay_s: float = 0.04
    espvr_bend_mmhg_per_ml2: float = 0.0
    inlet_leak: float = 0.0
    outlet_leak: float = 0.0
    conditions: tuple[str, ...] = ()
    veins: VenousReturn | None = None

    @property
    def rr_s(self) -> float:
        """Return the heart's own cycle length in seconds."""
        return 60.0 / self.heart_rate_per_min


LEFT_HEARTS = (
    Heart("normal", "LV", 68.0, 2.4, 8.0, 8.0, 1.20, 1.5),
    Heart("small", "LV", 76.0, 3.4, 6.0, 8.0, 1.55, 1.1, passive_exponent_per_ml=0.027),
    Heart("large", "LV", 58.0, 1.7, 12.0, 9.0, 1.00, 1.9, passive_exponent_per_ml=0.0145),
    Heart("fast", "LV", 98.0, 2.9, 8.0, 9.0, 0.95, 1.4, activation_scale=0.8, passive_exponent_per_ml=0.021),
    Heart("failing", "LV", 80.0, 1.05, 25.0, 15.0, 1.00, 1.5, passive_exponent_per_ml=0.0165, relaxation_exponent=12.0),
    Heart("stiff", "LV", 70.0, 3.2, 5.0, 14.0, 1.35, 1.0, passive_exponent_per_ml=0.029, relaxation_exponent=12.0),
    Heart("high-afterload", "LV", 66.0, 2.8, 8.0, 10.0, 1.75, 1.1),
)

RIGHT = Heart(
    "right",
    "RV",
    72.0,
    0.55,
    25.0,
    6.0,
    0.13,
    3.2,
    passive_exponent_per_ml=0.0125,
    relaxation_exponent=21.9,
    atrial_kick_mmhg=3.0,
    characteristic_resistance=0.02,
    downstream_pressure_mmhg=7.0,
)

RIGHT_HEARTS = (
    RIGHT,
    Heart(
        "right-loaded",
        "RV",
        78.0,
        0.85,
        22.0,
        7.0,
        0.34,
        1.5,
        passive_exponent_per_ml=0.0135,
        relaxation_exponent=18.0,
        atrial_kick_mmhg=4.0,
        characteristic_resistance=0.04,
        downstream_pressure_mmhg=8.0,
    ),
    replace(
        RIGHT,
        name="right-small",
        heart_rate_per_min=80.0,
        ees_mmhg_per_ml=0.75,
        v0_ml=16.0,
        filling_pressure_mmhg=5.5,
        peripheral_resistance=0.16,
        compliance_ml_per_mmhg=2.4,
        passive_exponent_per_ml=0.0165,
    ),
    replace(
        RIGHT,
        name="right-large",
        heart_rate_per_min=60.0,
        ees_mmhg_per_ml=0.40,
        v0_ml=35.0,
        filling_pressure_mmhg=7.0,
        peripheral_resistance=0.12,
        compliance_ml_per_mmhg=3.8,
        passive_exponent_per_ml=0.0095,
    ),
    replace(
        RIGHT,
        name="right-fast",
        heart_rate_per_min=104.0,
        ees_mmhg_per_ml=0.7,
        v0_ml=22.0,
        filling_pressure_mmhg=7.5,
        peripheral_resistance=0.11,
        compliance_ml_per_mmhg=3.0,
        activation_scale=0.8,
        passive_exponent_per_ml=0.0135,
    ),
    replace(
        RIGHT,
        name="right-failing",
        heart_rate_per_min=84.0,
        ees_mmhg_per_ml=0.36,
        v0_ml=36.0,
        filling_pressure_mmhg=10.5,
        peripheral_resistance=0.19,
        compliance_ml_per_mmhg=2.4,
        relaxation_exponent=16.0,
    ),
    replace(
        RIGHT,
        name="right-stiff",
        heart_rate_per_min=74.0,
        ees_mmhg_per_ml=0.7,
        v0_ml=18.0,
        filling_pressure_mmhg=10.0,
        peripheral_resistance=0.20,
        compliance_ml_per_mmhg=2.2,
        passive_exponent_per_ml=0.0195,
        relaxation_exponent=16.0,
    ),
)

HEARTS = LEFT_HEARTS + RIGHT_HEARTS
"""Ventricles with straight end-systolic relations and tight valves."""

UNUSUAL_HEARTS = (
    replace(LEFT_HEARTS[0], name="bent", ees_mmhg_per_ml=3.6, espvr_bend_mmhg_per_ml2=-0.012),
    replace(LEFT_HEARTS[0], name="mitral-leak", filling_pressure_mmhg=11.0, inlet_leak=10.0, conditions=("mitral-regurgitation",)),
    replace(LEFT_HEARTS[0], name="aortic-leak", filling_pressure_mmhg=10.0, outlet_leak=4.5, conditions=("aortic-regurgitation",)),
    replace(RIGHT, name="tricuspid-leak", filling_pressure_mmhg=7.5, inlet_leak=14.0, conditions=("tricuspid-regurgitation",)),
)
"""Ventricles in which a rule of thumb does not hold: a bent end-systolic relation, or a valve that leaks while it should be shut."""


LEFT_ATRIUM = VenousReturn(1500.0, 0.055)
LARGE_LEFT_ATRIUM = replace(LEFT_ATRIUM, atrial_elastance=0.18, atrial_elastance_contracted=0.36)
RIGHT_ATRIUM = VenousReturn(1250.0, 0.055, atrial_elastance=0.12, atrial_elastance_contracted=0.28)

_CLOSED = (
    ("normal", LEFT_ATRIUM, 1500.0, 0.055, 1.20),
    ("small", LEFT_ATRIUM, 1450.0, 0.075, 1.55),
    ("large", LEFT_ATRIUM, 1550.0, 0.050, 1.00),
    ("fast", LEFT_ATRIUM, 1550.0, 0.045, 0.95),
    ("failing", LARGE_LEFT_ATRIUM, 2200.0, 0.055, 0.90),
    ("stiff", LEFT_ATRIUM, 1750.0, 0.060, 1.35),
    ("high-afterload", LEFT_ATRIUM, 1750.0, 0.065, 1.75),
    ("right", RIGHT_ATRIUM, 1250.0, 0.055, 0.10),
    ("right-loaded", RIGHT_ATRIUM, 1400.0, 0.060, 0.30),
    ("right-small", RIGHT_ATRIUM, 1300.0, 0.065, 0.12),
    ("right-large", RIGHT_ATRIUM, 1350.0, 0.055, 0.09),
    ("right-fast", RIGHT_ATRIUM, 1450.0, 0.050, 0.085),
    ("right-failing", RIGHT_ATRIUM, 1750.0, 0.055, 0.13),
    ("right-stiff", RIGHT_ATRIUM, 1550.0, 0.060, 0.15),
)
"""Twin, atrium, stressed volume, venous resistance, peripheral resistance: blood runs off into veins fuller than what a source's does."""

CLOSED_HEARTS = tuple(
    replace(
        next(heart for heart in HEARTS if heart.name == name),
        name=f"closed-{name}",
        peripheral_resistance=peripheral,
        veins=replace(atrium, stressed_volume_ml=stressed_ml, resistance=venous),
    )
    for name, atrium, stressed_ml, venous, peripheral in _CLOSED
)
"""The ventricles of `HEARTS`, in their order, each in a closed loop."""


def inotrope(heart: Heart, force: float = 1.45, rate: float = 1.15) -> Heart:
    """Return the heart under an inotrope: its end-systolic relation steeper and its rate higher by these factors."""
    return replace(heart, ees_mmhg_per_ml=force * heart.ees_mmhg_per_ml, heart_rate_per_min=rate * heart.heart_rate_per_min)


def heart_named(name: str) -> Heart:
    """Return the heart of that name.

    Raises KeyError for a name that neither `HEARTS`, `UNUSUAL_HEARTS` nor `CLOSED_HEARTS` holds.
    """
    return {heart.name: heart for heart in HEARTS + UNUSUAL_HEARTS + CLOSED_HEARTS}[name]
