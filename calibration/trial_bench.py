"""The benches that trials play: a good one, and the same with one thing gone bad.

What is bad is in the bench file as well, as the owner of such a bench would have it; the analysis
sees the file only. Where it cannot give a result it must say so, which trials count.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from calibration.rehearsal_script import LINES_S
from metro.bench import Bench
from metro.measured import Measured

__all__ = ["NOT_MODELLED", "TRIAL_BENCHES", "TrialBench"]

NOT_MODELLED = (
    "ghost beams and light fed back into the laser",
    "mode hops and a wavelength that drifts within a session",
    "hysteresis, creep and depolarisation of the actuator",
    "polarisation, and non-linearity of the photodiode",
    "sound and air that move both arms",
    "the return of the beams after a realignment",
    "missing codes, and jitter of the converter's clock",
    "samples lost on the way, unless a test asks for it",
)
"""What the simulated bench leaves out: coverage on it says nothing about these."""


@dataclass(frozen=True)
class TrialBench:
    """One kind of bench for trials.

    Parameters
    ----------
    name : str
        Such as ``"poor-contrast"``.
    text : str
        What is bad about it, for people.
    values : mapping of str to Measured
        What its bench file says differently, by ``section.key``.
    shorter : float
        Duration of its recordings as a share of the usual one.
    lean_rad : float
        How far from mid-fringe it is held, towards the fringe's top [rad].
    """

    name: str
    text: str
    values: Mapping[str, Callable[[Bench], Measured]]
    shorter: float = 1.0
    lean_rad: float = 0.0

    def of(self, bench: Bench) -> Bench:
        """Return the bench with what is bad about this kind."""
        return bench.replace({key: value(bench) for key, value in self.values.items()})

    def lines_s(self, usual_s: float = LINES_S) -> float:
        """Return the duration of a lines recording [s]."""
        return self.shorter * usual_s


def _set(value: float, unit: str, u: float | None = None) -> Callable[[Bench], Measured]:
    return lambda _bench: Measured.of(value, unit, u)


def _range_that_clips(bench: Bench) -> Measured:
    """Return a converter's range whose end lies at three quarters of the fringe's top."""
    mid_v = bench.magnitude("laser.power") * bench.magnitude("photodiode.responsivity")
    mid_v *= bench.magnitude("photodiode.transimpedance")
    return Measured.of(2 * 0.75 * mid_v * (1.0 + bench.magnitude("arms.contrast")), "V")


TRIAL_BENCHES = {
    kind.name: kind
    for kind in (
        TrialBench("good", "the bench as its file describes it", {}),
        TrialBench("poor-contrast", "contrast 0.25", {"arms.contrast": _set(0.25, "1")}),
        TrialBench(
            "clipped",
            "the converter's range ends at 75 % of the fringe's top",
            {"adc.range": _range_that_clips},
        ),
        TrialBench(
            "drifting",
            "power drift of 0.5 % between recordings, held 0.3 rad off mid-fringe",
            {"fringe.drift": _set(0.0, "1", 0.005)},
            lean_rad=0.3,
        ),
        TrialBench(
            "mains-ridden", "20 mV of mains on the photodiode", {"mains.pickup": _set(0.02, "V")}
        ),
        TrialBench("short", "recordings of a fifth of the usual duration", {}, shorter=0.2),
        TrialBench(
            "8-bit",
            "8 bits with noise of 0.4 codes, no divider before the drive's channel",
            {
                "adc.bits": _set(8.0, "1"),
                "adc.noise": lambda bench: Measured.of(
                    0.4 * bench.magnitude("adc.range") / 2**8, "V"
                ),
                "drive.divider": _set(1.0, "1", 0.0015),
            },
        ),
    )
}
"""By name, in the order they are played."""
