"""What a bench should show: one stage given, every stage, the noise and what is left out."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.cautions import bench_cautions, wave_cautions
from metro.conventions import conventions
from metro.corrections import Correction, Direction, corrections
from metro.kernel.noise import averaging_time_s, signal_to_noise
from metro.measured import Measured
from metro.notebook import NotebookPage
from metro.sensitivity import Sensitivity, displacement_noise, strain_scale
from metro.stages import STAGES, UNITS

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from metro.chain import Chain

__all__ = ["Expectation", "expect"]

DENSITY = "m/Hz**0.5"
STRAIN_DENSITY = "1/Hz**0.5"


@dataclass(frozen=True, slots=True)
class Expectation(NotebookPage):
    """Everything that ``midfringe expect`` prints.

    Parameters
    ----------
    stages : dict of str to Measured or None
        Change at every stage; None where unknown.
    working_point : dict of str to Measured or None
        ``phase``, ``power``, ``current``, ``voltage``, ``slope`` [V/rad] and ``slope_per_metre`` [V/m].
    noise : dict of str to Measured or None
        Displacement density of each source, and ``total`` of those known.
    noise_strain : dict of str to Measured or None
        The same as strain density at normal incidence; None without an arm length.
    snr : dict of str to Measured or None
        ``value``, ``duration``, ``noise``, ``frequency``; ``wanted`` ratio, the amplitudes that reach it in
        that duration (``detectable_displacement``, ``detectable_strain``), and the ``time_wanted`` for
        the motion asked for to reach it.
    conventions : dict of str to str
        What the numbers mean.
    corrections : dict of str to Correction
        What they leave out.
    cautions : list of str
        What to beware of, and how to make unknown stages known.
    sources : dict of str to dict
        Every value of the bench and where it came from.
    """

    stages: dict[str, Measured | None]
    working_point: dict[str, Measured | None]
    noise: dict[str, Measured | None]
    noise_strain: dict[str, Measured | None]
    snr: dict[str, Measured | None]
    conventions: dict[str, str]
    corrections: dict[str, Correction]
    cautions: list[str]
    sources: dict[str, dict[str, str]]

    def notebook_tables(self) -> list[tuple[Sequence[str], Iterable[Sequence[Any]]]]:
        """Return the stages, the working point, the noise and the signal-to-noise ratio."""
        parts = (
            ("stage", self.stages),
            ("working point", self.working_point),
            ("noise", self.noise),
            ("signal to noise", self.snr),
        )
        return [((name, ""), list(values.items())) for name, values in parts]

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            One key an attribute.
        """
        return {name: getattr(self, name) for name in self.__slots__}


def expect(
    chain: Chain,
    stage: str,
    value: float,
    *,
    frequency_hz: float | None = None,
    duration_s: float = 1.0,
    wanted_snr: float = 1.0,
    direction: Direction | None = None,
    lines: int = 1,
    background_rad: float = 0.0,
) -> Expectation:
    """Return what a change at one stage should look like at every other.

    Parameters
    ----------
    chain : Chain
        The signal chain at its working point.
    stage : str
        Name of the stage given.
    value : float
        Change there, in its SI unit.
    frequency_hz : float, optional
        Frequency at which noise and corrections are evaluated [Hz]; without it at low frequency.
    duration_s : float, default 1
        Averaging time for the signal-to-noise ratio [s].
    wanted_snr : float, default 1
        Ratio for which amplitude and time are told.
    direction : Direction, optional
        Direction and polarisation of the wave.
    lines : int, default 1
        Lines driven at once with the same amplitude.
    background_rad : float, default 0
        Root-mean-square phase of all other motion [rad].

    Returns
    -------
    Expectation
        Stages, working point, noise, detectability, conventions, corrections, cautions.

    Raises
    ------
    MetroError
        If the bench contradicts itself, as an incomplete air entry does.
    """
    stages = {name: _stage(chain, stage, value, name) for name in STAGES}
    plain = {name: None if m is None else float(m.magnitude) for name, m in stages.items()}
    noise = displacement_noise(chain, frequency_hz or 0.0)
    found = corrections(
        chain,
        plain,
        frequency_hz=frequency_hz,
        direction=direction,
        lines=lines,
        background_rad=background_rad,
    )
    return Expectation(
        stages=stages,
        working_point=_working_point(chain),
        noise=_noise(noise, 1.0, DENSITY),
        noise_strain=_noise(noise, strain_scale(chain, noise.frequency_hz), STRAIN_DENSITY),
        snr=_snr(chain, plain["displacement"], noise, duration_s, wanted_snr),
        conventions=conventions(chain),
        corrections=found,
        cautions=[*_cautions(chain, stage, plain, noise), *wave_cautions(found)],
        sources={
            key: {"value": text, "source": source} for key, text, source in chain.bench.provenance()
        },
    )


def _stage(chain: Chain, given: str, value: float, name: str) -> Measured | None:
    if chain.maybe_way(given, name) is None:
        return None
    relative = sum(e * e for e in chain.effects(given, name).values()) ** 0.5
    number = float(chain.convert(value, given, name))
    return Measured.of(number, UNITS[name], abs(number) * relative if relative else None)


def _maybe(value: float | None, unit: str) -> Measured | None:
    return None if value is None else Measured.of(value, unit)


def _working_point(chain: Chain) -> dict[str, Measured | None]:
    here = chain.working_point()
    return {
        "phase": Measured.of(here.phase_rad, "rad"),
        "power": _maybe(here.power_w, "W"),
        "current": _maybe(here.current_a, "A"),
        "voltage": _maybe(here.voltage_v, "V"),
        "slope": _maybe(here.slope_v_rad, "V/rad"),
        "slope_per_metre": _maybe(here.slope_v_m, "V/m"),
    }


def _noise(noise: Sensitivity, scale: float | None, unit: str) -> dict[str, Measured | None]:
    everything = {**noise.densities, "total": noise.total}
    return {
        name: None if density is None or scale is None else Measured.of(scale * density, unit)
        for name, density in everything.items()
    }


def _snr(
    chain: Chain,
    amplitude_m: float | None,
    noise: Sensitivity,
    duration_s: float,
    wanted: float,
) -> dict[str, Measured | None]:
    density, scale = noise.total, strain_scale(chain, noise.frequency_hz)
    floor_m = None if density is None else wanted * density / duration_s**0.5
    ratio = time_s = None
    if density is not None and amplitude_m is not None:
        ratio = signal_to_noise(amplitude_m, density, duration_s)
        time_s = averaging_time_s(amplitude_m, density, wanted) if amplitude_m else None
    return {
        "value": _maybe(ratio, "1"),
        "duration": Measured.of(duration_s, "s"),
        "noise": _maybe(density, DENSITY),
        "frequency": Measured.of(noise.frequency_hz, "Hz"),
        "wanted": Measured.of(wanted, "1"),
        "detectable_displacement": _maybe(floor_m, "m"),
        "detectable_strain": _maybe(
            None if scale is None or floor_m is None else scale * floor_m, "1"
        ),
        "time_wanted": _maybe(time_s, "s"),
    }


def _cautions(
    chain: Chain, given: str, plain: dict[str, float | None], noise: Sensitivity
) -> list[str]:
    cautions = bench_cautions(chain.bench)
    cautions += [
        f"{name} is unknown: give {chain.what_is_missing(given, name)}"
        for name, value in plain.items()
        if value is None
    ]
    cautions += chain.links.remarks
    if noise.missing:
        wanted = "; ".join(f"{name}: {what}" for name, what in noise.missing.items())
        cautions.append(f"the total noise leaves out what is not given ({wanted})")
    cautions += noise.remarks
    phase = plain["phase"]
    if phase is not None and abs(phase) > 0.3:
        cautions.append(
            f"phase {phase:.3g} rad is beyond the linear range of the fringe; see the compression"
        )
    return cautions
