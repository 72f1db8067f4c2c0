"""Values to try properties with, in the ranges of a bench."""

from hypothesis import strategies as st

__all__ = ["arm_m", "contrast", "depth_rad", "displacement_m", "extremes_v", "index", "round_trips"]
__all__ += ["strain", "wavelength_m", "working_phase_rad"]


def _sized(smallest, largest):
    """Return magnitudes spread evenly over decades, of either sign."""
    sizes = st.floats(smallest, largest).map(lambda exponent: 10.0**exponent)
    return st.builds(lambda size, sign: sign * size, sizes, st.sampled_from([-1.0, 1.0]))


strain = _sized(-24, -1)
displacement_m = _sized(-21, -3)
arm_m = st.floats(0.05, 4000.0)
wavelength_m = st.floats(300e-9, 1700e-9)
index = st.floats(1.0, 1.6)
round_trips = st.integers(1, 40)
contrast = st.floats(0.01, 1.0)
depth_rad = st.floats(1e-6, 3.0)
# well on a slope, where the linear inverse means something
working_phase_rad = st.one_of(st.floats(0.3, 2.8), st.floats(-2.8, -0.3))
extremes_v = st.tuples(st.floats(-5.0, 5.0), st.floats(0.01, 10.0)).map(
    lambda p: (p[0], p[0] + p[1])
)
