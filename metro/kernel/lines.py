"""Lines on a fringe: what its curve leaves of each, and the harmonics it adds."""

from math import cos, exp, sin

from .bessel import bessel, jinc

__all__ = ["harmonic_amplitude", "line_responses"]


def line_responses(
    depths_rad: list[float], working_phase_rad: float, background_rad: float = 0.0
) -> list[float]:
    """Return what is left of each line's small-signal response when all move at once.

    Parameters
    ----------
    depths_rad : list of float
        Phase amplitude m_i of each line [rad].
    working_phase_rad : float
        Mean phase φ0 [rad].
    background_rad : float, default 0
        Root-mean-square σφ of all other phase motion [rad], taken as Gaussian.

    Returns
    -------
    list of float
        S_i = sin φ0 · 2J1(m_i)/m_i · Π_{j≠i} J0(m_j) · exp(−σφ²/2): the signal at line i is
        −(high−low)/2 · S_i · m_i.

    Notes
    -----
    The frequencies must not be harmonics or sums of each other.
    """
    common = sin(working_phase_rad) * exp(-0.5 * background_rad * background_rad)
    zeroth = [bessel(0, m) for m in depths_rad]
    responses = []
    for i, depth in enumerate(depths_rad):
        left = common * jinc(depth)
        for j, other in enumerate(zeroth):
            if j != i:
                left *= other
        responses.append(left)
    return responses


def harmonic_amplitude(order: int, depth_rad: float, working_phase_rad: float) -> float:
    """Return a harmonic of a sinusoidally driven fringe, over half the fringe's height.

    Parameters
    ----------
    order : int
        Harmonic, 1 or above; 1 is the line itself.
    depth_rad : float
        Phase amplitude m of the line [rad].
    working_phase_rad : float
        Mean phase φ0 [rad].

    Returns
    -------
    float
        Amplitude of harmonic n for a drive m·cos ωt: 2·J_n(m) times ±sin φ0 (odd n) or
        ±cos φ0 (even n), with the sign of its cosine.

    References
    ----------
    Abramowitz and Stegun 9.1.42 to 9.1.45.
    """
    sign = -1.0 if (order + 1) // 2 % 2 else 1.0
    quadrature = sin(working_phase_rad) if order % 2 else cos(working_phase_rad)
    return 2.0 * sign * bessel(order, depth_rad) * quadrature
