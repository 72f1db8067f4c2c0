"""Clock: the common frequency error of all lines, found from their phases and followed.

Clock errors destroy amplitude before they show as phase: 5 ppm at 1 kHz over 100 s turn the line by half a
cycle. The phase is followed with a polynomial in time, as long as its terms can be told from zero.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import ChannelFit, fit_channel
from calibration.phase_course import PhaseCourse
from calibration.phasors import BlockPhasors
from metro.kernel.student import t_quantile

__all__ = ["Followed", "combine_steps", "follow_phases"]

# A term of the phase is followed from 4.8 standard deviations on, more where they are known from few
# degrees of freedom: by chance once in 500 000 records. One that is followed by chance puts a phase at
# t = 0 off by eight of its u: followed from 4 on, one in 3000 records, that made the scatter of all 2 %
# larger. Between 2 and that the frequencies are taken as given and the phase it might be is added to
# its u.
_FOLLOWED = 1.0 - 2e-6
_DOUBTFUL = 2.0
_ROUNDS = 12
_SMALL_TURN = 1e-3
_GROUPS = 32
_IN_PHASE = 0.9
_FEWEST_BLOCKS = 4


@dataclass(frozen=True, slots=True)
class Followed:
    """The phase course that was found.

    Parameters
    ----------
    course : PhaseCourse
        With all its parameters as estimated.
    covariance : ndarray, shape (n_parameters, n_parameters)
        Of the parameters.
    dof : float
        Degrees of freedom of the covariance.
    kept : ndarray of bool, shape (n_parameters,)
        Those that are followed; the others are taken as zero.
    """

    course: PhaseCourse
    covariance: NDArray[np.float64]
    dof: float
    kept: NDArray[np.bool_]

    @property
    def applied(self) -> PhaseCourse:
        """The course with the parameters that are followed."""
        return self.course.only(self.kept)

    def left_covariance(self) -> NDArray[np.float64]:
        """Return the covariance of what the applied course may be wrong by."""
        u2 = np.diag(self.covariance)
        doubtful = ~self.kept & (self.course.theta**2 > _DOUBTFUL**2 * u2)
        left = self.covariance * np.outer(self.kept, self.kept)
        return np.asarray(left + np.diag(np.where(doubtful, self.course.theta**2, 0.0)))


def combine_steps(fits: Sequence[ChannelFit]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the step of the phase parameters that all channels agree on best.

    Parameters
    ----------
    fits : sequence of ChannelFit
        Each with its own step and covariance.

    Returns
    -------
    tuple of ndarray
        Step, shape (n_parameters,), and its covariance: means weighted by information.
    """
    first = 2 * len(fits[0].coefficients)
    size = len(fits[0].steps)
    joint = np.zeros((len(fits) * size, len(fits) * size))
    parts = [fit.covariance[first:, first:] for fit in fits]
    roots = [_root(part) for part in parts]
    for i, own in enumerate(parts):
        for j in range(len(parts)):
            # Between roots, what is shared leaves the whole a covariance, however the terms of a
            # channel of which only a part is there hang together.
            shared = own if i == j else _coherence(fits[i], fits[j]) * roots[i] @ roots[j].T
            joint[i * size : (i + 1) * size, j * size : (j + 1) * size] = shared
    information = _inverse(joint)
    both = np.tile(np.eye(size), (len(fits), 1))
    covariance = _inverse(both.T @ information @ both)
    steps = np.concatenate([fit.steps for fit in fits])
    return covariance @ (both.T @ information @ steps), covariance


def _root(covariance: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the matrix that times its own transpose is the covariance, nearest to its diagonal."""
    u = np.sqrt(np.maximum(np.diag(covariance), np.finfo(float).tiny))
    values, vectors = np.linalg.eigh(covariance / np.outer(u, u))
    root = (vectors * np.sqrt(np.maximum(values, 0.0))) @ vectors.T
    return np.asarray(u[:, None] * root)


def _coherence(one: ChannelFit, other: ChannelFit) -> float:
    """Return how much the phase noise of two channels has in common, −0.95 to 0.95."""
    shared, weights = [0.0], [0.0]
    for line, (a, b) in enumerate(zip(one.noise, other.noise, strict=True)):
        if a.used.size != b.used.size:
            continue  # one channel is too broken for bins of its own
        used = a.used & b.used
        first = a.bins[used] * np.conj(one.coefficients[line])
        second = b.bins[used] * np.conj(other.coefficients[line])
        size = float(np.linalg.norm(first) * np.linalg.norm(second))
        if size > 0:
            shared.append(float((first * np.conj(second)).real.sum()) / size)
            # A line counts by the squares of both amplitudes over their noise.
            weights.append(
                float(abs(one.coefficients[line] * other.coefficients[line])) ** 2 / size
            )
    top = max(weights)
    mean = np.average(shared, weights=np.array(weights) / top) if top > 0 else 0.0
    return float(np.clip(mean, -0.95, 0.95))


def _inverse(matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    # Scaled first: a noise-free record has a covariance of 1e-30 that is as good as any other.
    scale = np.sqrt(np.maximum(np.diag(matrix), np.finfo(float).tiny))
    inverse = np.linalg.pinv(matrix / np.outer(scale, scale), rcond=1e-12, hermitian=True)
    return np.asarray(inverse / np.outer(scale, scale))


def follow_phases(
    channels: Sequence[BlockPhasors], lines: int, course: PhaseCourse, stretch: float = np.inf
) -> Followed:
    """Refine the phase course until it stands still.

    Parameters
    ----------
    channels : sequence of BlockPhasors
        Of the same recording; their carriers begin with the same lines.
    lines : int
        Number of lines.
    course : PhaseCourse
        Where to begin.
    stretch : float
        Samples over which the frequencies are known to a fraction of a cycle. Where the lines do not
        add up over the whole recording, the phase is followed from such a stretch outwards.

    Returns
    -------
    Followed
        Parameters common to all channels.
    """
    if not len(course.theta):
        return Followed(course, np.zeros((0, 0)), np.inf, np.zeros(0, dtype=bool))
    if 2 * course.half > 2 * stretch and not _adds_up(channels, lines, course):
        course = _outwards(channels, lines, course, stretch)
    for _ in range(_ROUNDS):
        fits = [fit_channel(phasors, lines, course) for phasors in channels]
        step, covariance = combine_steps(fits)
        course = course.moved(course.theta + step)
        u = np.sqrt(np.maximum(np.diag(covariance), 0.0))
        # A step that turns no phase by a thousandth of a radian leaves a millionth behind.
        turned = np.abs(step) * np.abs(course.scales).max(axis=1)
        if (np.abs(step) <= 1e-3 * u).all() or (turned < _SMALL_TURN).all():
            break
    dof = float(max(noise.dof for fit in fits for noise in fit.noise))
    return Followed(course, covariance, dof, np.abs(course.theta) > t_quantile(_FOLLOWED, dof) * u)


def _adds_up(channels: Sequence[BlockPhasors], lines: int, course: PhaseCourse) -> bool:
    """Return whether the line that says most about the clock keeps its phase over the recording."""
    best, ratio = 0.0, 1.0
    for phasors in channels:
        turned = phasors.sums[:, :lines] * np.exp(-1j * course.phase(phasors.middles))
        edges = np.linspace(0, len(turned), _GROUPS, endpoint=False).astype(np.int64)
        groups = np.add.reduceat(turned, edges)
        whole = np.maximum(np.abs(groups).sum(axis=0), np.finfo(float).tiny)
        says = whole / np.sqrt(phasors.used) * phasors.cycles[:lines]
        line = int(says.argmax())
        if says[line] > best:
            best, ratio = float(says[line]), float(np.abs(groups[:, line].sum()) / whole[line])
    return ratio > _IN_PHASE


def _outwards(
    channels: Sequence[BlockPhasors], lines: int, course: PhaseCourse, stretch: float
) -> PhaseCourse:
    """Follow the offset over stretches about the middle, each twice as long as the one before."""
    offset_only = np.array([degree == 1 for degree in course.degrees])
    while stretch < 2 * course.half:
        ends = course.middle - 0.5 * stretch, course.middle + 0.5 * stretch
        parts = [phasors.part(*ends) for phasors in channels]
        parts = [part for part in parts if len(part.numbers) >= _FEWEST_BLOCKS]
        simple = course.only(offset_only)
        for _ in range(_ROUNDS if parts else 0):
            step, _ = combine_steps([fit_channel(part, lines, simple) for part in parts])
            # A quarter of a cycle over the stretch: beyond, the linearisation means nothing.
            most = 0.25 / (
                float(np.abs(course.scales).max()) / (2 * np.pi) * stretch / course.half / 2
            )
            simple = simple.moved(simple.theta + np.clip(step, -most, most))
            if (np.abs(step) < 0.01 * most).all():
                break
        course = course.moved(np.where(offset_only, simple.theta.sum(), course.theta))
        stretch *= 2
    return course
