"""Gravitational-wave strain to arm length, to first order and exactly.

A wave of amplitude ``h`` along the arms gives them the proper lengths ∫√(1+h) dx and
∫√(1−h) dx: to first order the x arm grows by hL/2 and the y arm shrinks by as much. A one-arm
length strain ΔL/L is another quantity and has functions of its own.

The plain products take arrays as well as floats.
"""

from math import sqrt

__all__ = [
    "arm_change_m",
    "arm_excess",
    "differential_excess",
    "differential_m",
    "exact_arm_change_m",
    "exact_differential_m",
    "length_change_m",
    "length_strain",
    "strain",
    "strain_exact",
]


def arm_change_m(strain: float, arm_length_m: float) -> float:
    """Return the first-order change of one arm, hL/2; the y arm changes by the opposite.

    Parameters
    ----------
    strain : float
        Strain amplitude h along the arm.
    arm_length_m : float
        Arm length [m].

    Returns
    -------
    float
        Change of the x arm [m].
    """
    return 0.5 * strain * arm_length_m


def differential_m(strain: float, arm_length_m: float) -> float:
    """Return the first-order differential displacement hL.

    Parameters
    ----------
    strain : float
        Strain amplitude h.
    arm_length_m : float
        Length of each arm [m].

    Returns
    -------
    float
        Length of the x arm less that of the y arm [m].
    """
    return strain * arm_length_m


def exact_arm_change_m(strain: float, arm_length_m: float) -> float:
    """Return the exact change of one arm, L(√(1+h) − 1).

    Parameters
    ----------
    strain : float
        Strain along this arm, h for the x arm and −h for the y arm; at least −1.
    arm_length_m : float
        Arm length [m].

    Returns
    -------
    float
        Change of the arm [m].

    Notes
    -----
    Written h/(√(1+h) + 1): the difference √(1+h) − 1 has no digits left below h = 1e-16, this
    form loses none.
    """
    return arm_length_m * strain / (sqrt(1.0 + strain) + 1.0)


def exact_differential_m(strain: float, arm_length_m: float) -> float:
    """Return the exact differential displacement L(√(1+h) − √(1−h)).

    Parameters
    ----------
    strain : float
        Strain amplitude h, −1 ≤ h ≤ 1.
    arm_length_m : float
        Length of each arm [m].

    Returns
    -------
    float
        Length of the x arm less that of the y arm [m].
    """
    return 2.0 * arm_length_m * strain / (sqrt(1.0 + strain) + sqrt(1.0 - strain))


def arm_excess(strain: float) -> float:
    """Return what first order leaves out in one arm: exact change over hL/2, minus one.

    Parameters
    ----------
    strain : float
        Strain along the arm, at least −1.

    Returns
    -------
    float
        Relative excess; −h/4 for small h.
    """
    root = 1.0 + sqrt(1.0 + strain)
    return -strain / (root * root)


def differential_excess(strain: float) -> float:
    """Return what first order leaves out of the differential: exact over hL, minus one.

    Parameters
    ----------
    strain : float
        Strain amplitude h, −1 ≤ h ≤ 1.

    Returns
    -------
    float
        Relative excess; h²/8 for small h, since the even orders cancel between the arms.
    """
    both = sqrt(1.0 + strain) + sqrt(1.0 - strain)
    squared = strain * strain
    return 2.0 * squared / ((1.0 + sqrt(1.0 - squared)) * (2.0 + both) * both)


def strain(differential_m: float, arm_length_m: float) -> float:
    """Return the strain that to first order gives a differential displacement.

    Parameters
    ----------
    differential_m : float
        Length of the x arm less that of the y arm [m].
    arm_length_m : float
        Length of each arm [m].

    Returns
    -------
    float
        Strain amplitude h.
    """
    return differential_m / arm_length_m


def strain_exact(differential_m: float, arm_length_m: float) -> float:
    """Return the strain whose exact differential displacement is given.

    Parameters
    ----------
    differential_m : float
        Length of the x arm less that of the y arm [m]; at most √2 arm lengths.
    arm_length_m : float
        Length of each arm [m].

    Returns
    -------
    float
        Strain amplitude h.

    Notes
    -----
    From d = √(1+h) − √(1−h) follows d² = 2 − 2√(1−h²), hence h = d√(1 − d²/4).
    """
    d = differential_m / arm_length_m
    return d * sqrt(1.0 - 0.25 * d * d)


def length_change_m(length_strain: float, arm_length_m: float) -> float:
    """Return the change of one arm under a length strain ΔL/L of that arm alone.

    Parameters
    ----------
    length_strain : float
        ΔL/L of the one arm.
    arm_length_m : float
        Arm length [m].

    Returns
    -------
    float
        Change of that arm [m]; the differential displacement if the other arm stays.
    """
    return length_strain * arm_length_m


def length_strain(change_m: float, arm_length_m: float) -> float:
    """Return the one-arm length strain ΔL/L.

    Parameters
    ----------
    change_m : float
        Change of one arm [m].
    arm_length_m : float
        Arm length [m].

    Returns
    -------
    float
        ΔL/L; a wave along the arms gives each of them half its amplitude h.
    """
    return change_m / arm_length_m
