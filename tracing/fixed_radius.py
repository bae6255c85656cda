"""Calculated fixed radius: the circle whose ground holds, or whose recharge gives, what a well pumps.

The rules below know no flow field. They serve as the plain figure to set a traced zone against. Those of the US
Environmental Protection Agency are in "Guidelines for Delineation of Wellhead Protection Areas", EPA 440/6-87-010
(1987), chapter 4; those with rounded constants in 35 Illinois Administrative Code 671, appendices A and C.
"""

import math

MINUTES_A_DAY_TIMES_PI = 4524.0  # 1440 pi as the code prints it
GALLONS_A_CUBIC_FOOT = 7.48
X_ROUNDED = 1.19  # 7.48 / (2 pi) as the code prints it


def volume_radius(rate: float, days: float, porosity: float, thickness: float) -> float:
    """Radius (m) of the cylinder that holds what a well pumps: sqrt(Q t / (pi n H)) (US EPA 1987).

    rate Q (m3/d) and time t (d) not negative, porosity n (0 to 1), thickness H (m); ValueError otherwise. Any
    consistent set of units serves as well.
    """
    _check(rate=(rate, True), time=(days, True), porosity=(porosity, False), thickness=(thickness, False))
    return math.sqrt(rate * days / (math.pi * porosity * thickness))


def recharge_radius(rate: float, recharge: float) -> float:
    """Radius (m) of the circle whose recharge N (m/d) equals the rate Q (m3/d): sqrt(Q / (pi N)).

    ValueError for a negative rate or a recharge that is not positive. Source: water balance, US EPA 1987.
    """
    _check(rate=(rate, True), recharge=(recharge, False))
    return math.sqrt(rate / (math.pi * recharge))


def filling_radius(rate: float, days: float, porosity: float, thickness: float, recharge: float) -> float:
    """Radius (m) from which water arrives within t days when recharge N (m/d) feeds the cylinder too.

    sqrt(Q / (pi N) (1 - exp(-N t / (n H)))), derived here from continuity: flow through the cylinder wall at r is
    Q - pi N r^2. It tends to ``volume_radius`` for small N t and to ``recharge_radius`` for long times. Units and
    errors as there.
    """
    _check(rate=(rate, True), time=(days, True), porosity=(porosity, False), thickness=(thickness, False))
    _check(recharge=(recharge, False))
    share = -math.expm1(-recharge * days / (porosity * thickness))
    return math.sqrt(rate / (math.pi * recharge) * share)


def volume_radius_illinois(rate: float, minutes: float, porosity: float, thickness: float) -> float:
    """Radius (ft) by the printed rule sqrt(Q t / (4524 n H)) (35 Ill. Adm. Code 671, appendix A).

    rate Q (ft3/d), time t in minutes, thickness H (ft), porosity n (0 to 1); ValueError for values out of range.
    The constant is 1440 pi, rounded: the radius differs from ``volume_radius`` by 1.2e-5 of itself.
    """
    _check(rate=(rate, True), time=(minutes, True), porosity=(porosity, False), thickness=(thickness, False))
    return math.sqrt(rate * minutes / (MINUTES_A_DAY_TIMES_PI * porosity * thickness))


def uniform_flow_reach_illinois(rate: float, transmissivity: float, gradient: float) -> tuple[float, float]:
    """Downstream reach X and full width Y (ft) in uniform flow: 1.19 Q / (T i) and 7.48 Q / (T i).

    rate Q (ft3/d), transmissivity T (gallons a day a foot), gradient i (-), the last two positive; ValueError
    otherwise. Rounded forms of Q / (2 pi T i) and Q / (T i) (35 Ill. Adm. Code 671, appendix C; Todd 1980).
    """
    _check(rate=(rate, True), transmissivity=(transmissivity, False), gradient=(gradient, False))
    per_foot = rate / (transmissivity * gradient)
    return X_ROUNDED * per_foot, GALLONS_A_CUBIC_FOOT * per_foot


def _check(**values: tuple[float, bool]) -> None:
    """Refuse values that are not finite, negative, or zero where zero is not allowed."""
    for name, (value, zero_allowed) in values.items():
        if not math.isfinite(value) or value < 0 or (value == 0 and not zero_allowed):
            bound = "not be negative" if zero_allowed else "be positive"
            raise ValueError(f"{name} must be finite and {bound}; instead received {value}")
        if name == "porosity" and value >= 1:
            raise ValueError(f"porosity must lie between 0 and 1; instead received {value}")
