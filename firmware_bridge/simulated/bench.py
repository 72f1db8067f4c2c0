"""A simulated bench: the truth of one seed and a new stream of samples for every recording."""

from firmware_bridge.errors import BridgeError
from firmware_bridge.simulated.live_drive import LiveDrive
from firmware_bridge.simulated.setup import Setup
from firmware_bridge.simulated.stream import MAINS_V, Converter, Electronics, SampleStream
from firmware_bridge.simulated.truth import Truth, draw_truth
from metro.bench import Bench
from metro.drive import terminal_factor

__all__ = ["SimulatedBench"]

BITS_MAX = 16  # its frames carry int16


class SimulatedBench:
    """The physical side of a rehearsal: what a bench file describes, with one drawn truth.

    Parameters
    ----------
    bench : Bench
        The bench file: nominal values and their uncertainties.
    seed : int
        Seed of the truth and of all noise.

    Attributes
    ----------
    truth : Truth
        The drawn values; the analysis must never see them.
    rate_hz : float
        Nominal sample rate [Hz].
    transimpedance_v_per_a : float
        Of the photodiode's amplifier [V/A].
    """

    def __init__(self, bench: Bench, seed: int) -> None:
        self.truth: Truth = draw_truth(bench, seed)
        self.rate_hz = bench.magnitude("adc.rate")
        self.converter = _converter(bench)
        self._electronics = Electronics(
            transimpedance_v_per_a=bench.magnitude("photodiode.transimpedance"),
            mains_hz=bench.magnitude("mains.frequency", 50.0),
            mains_v=bench.magnitude("mains.pickup", MAINS_V),
        )
        self.transimpedance_v_per_a = self._electronics.transimpedance_v_per_a
        self.terminal_factor = terminal_factor(bench, recorded=True)
        """Nominal volts at the actuator's terminals per volt of the drive's channel."""
        self._seed = seed

    def start(self, setup: Setup, number: int = 1, drive: LiveDrive | None = None) -> SampleStream:
        """Return the stream of one recording; each ``number`` has noise of its own."""
        return SampleStream(
            setup,
            self.truth,
            self.converter,
            self._electronics,
            self.rate_hz,
            [self._seed, number],
            drive,
        )


def _converter(bench: Bench) -> Converter:
    bits, range_v = int(bench.magnitude("adc.bits")), bench.magnitude("adc.range")
    if bits > BITS_MAX:
        raise BridgeError(f"the simulated board has adc.bits up to {BITS_MAX}, got {bits}")
    step_v = range_v / 2**bits
    noise = bench.get("adc.noise")
    return Converter(bits, range_v, step_v if noise is None else float(noise.magnitude))
