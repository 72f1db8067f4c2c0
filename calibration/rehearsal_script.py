"""The order of a session at the bench, as a rehearsal plays it."""

from dataclasses import dataclass, replace

from calibration.errors import CalibrationError
from firmware_bridge.simulated.setup import Setup, Tone, Triangle
from metro.bench import Bench, BenchLine
from metro.drive import peak_factor, point_factor
from metro.plan import load_plan

__all__ = ["LINES_S", "Step", "planned", "session_steps"]

LINES_S = 20.0  # of each lines recording, where no plan says otherwise
SCAN_PERIOD_S = 4.0
SCAN_FRINGES = 5.0  # from end to end of the triangle: whole fringes in both directions


@dataclass(frozen=True)
class Step:
    """One recording of the session: its file, its role for the analysis, the bench's state."""

    name: str
    role: str
    setup: Setup

    @property
    def file(self) -> str:
        """Name of the recording."""
        return f"{self.name}.mfr"


def session_steps(bench: Bench, lines_s: float = LINES_S) -> list[Step]:
    """Return the session: dark, pick-up, one arm alone, scan, lines on both slopes, again.

    Parameters
    ----------
    bench : Bench
        Lines with their drives, and the actuator's drive limit.
    lines_s : float
        Duration of each lines recording [s]; the others keep their proportion to it.

    Returns
    -------
    list of Step
        In the order good laboratories keep.
    """
    tones = tuple(
        Tone(
            line.frequency_hz, _terminals_v(bench, line), 0.7 * number
        )  # phases apart: lower peaks
        for number, line in enumerate(bench.lines)
    )
    scan = Triangle(_scan_amplitude_v(bench), SCAN_PERIOD_S)
    half, tenth = 0.4 * lines_s, 0.1 * lines_s

    def lines(name: str, slope: str, seconds: float, driven: tuple[Tone, ...]) -> Step:
        setup = Setup(seconds, slope=slope, tones=driven)
        return Step(name, f"lines-{slope}", setup)

    def blocked(name: str, role: str, beam: str, seconds: float, *, drive: bool) -> Step:
        driven = tones if drive else ()
        return Step(name, role, Setup(seconds, beam=beam, tones=driven))

    return [
        blocked("01-dark", "dark", "blocked", tenth, drive=False),
        blocked("02-pickup", "pickup", "blocked", half, drive=True),
        blocked("03-blocked-x", "blocked-x", "y", half, drive=True),
        blocked("04-blocked-y", "blocked-y", "x", half, drive=True),
        Step("05-scan", "scan", Setup(half, scan=scan)),
        lines("06-lines-rising", "rising", lines_s, tones),
        lines("07-lines-falling", "falling", lines_s, tones),
        lines("08-first-line-again", "rising", half, tones[:1]),
        Step("09-scan", "scan", Setup(half, scan=scan)),
        blocked("10-dark", "dark", "blocked", tenth, drive=False),
    ]


def planned(bench: Bench, path: str) -> tuple[Bench, float]:
    """Return the bench with a plan's lines, and the plan's duration of a lines recording [s].

    Parameters
    ----------
    bench : Bench
        The bench that the plan was made for.
    path : str
        From ``midfringe plan --out``.

    Returns
    -------
    tuple of (Bench, float)
        Bench and duration.
    """
    plan = load_plan(path)
    return replace(bench, lines=tuple(plan.bench_lines)), plan.duration_s


def _terminals_v(bench: Bench, line: BenchLine) -> float:
    """Return a line's stated drive as it is at the terminals, zero to peak [V]."""
    if line.drive_v is None:
        raise CalibrationError(
            f"a rehearsal needs a drive for every line, got none at {line.frequency_hz:g} Hz"
        )
    return line.drive_v * peak_factor(bench) * point_factor(bench)


def _scan_amplitude_v(bench: Bench) -> float:
    """Return a triangle's amplitude [V] that sweeps some fringes, within the drive limit."""
    fringe_m = bench.magnitude("laser.wavelength") / (2 * bench.magnitude("arms.round_trips", 1.0))
    wanted_v = SCAN_FRINGES * fringe_m / abs(bench.magnitude("actuator.gain")) / 2
    return min(wanted_v, bench.magnitude("actuator.drive_limit", wanted_v))
