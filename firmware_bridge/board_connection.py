"""What becomes of a recording whose port goes away, comes back, or brings nothing valid."""

from firmware_bridge.board_answers import BoardAnswers
from firmware_bridge.byte_queue import Arrival
from firmware_bridge.errors import DeviceFailedError
from firmware_bridge.hearing import Hearing
from firmware_bridge.lock_in_start import LockInStart, result_every_s
from firmware_bridge.port_watch import PortWatch
from firmware_bridge.silence import Silence
from firmware_bridge.sink import Sink

__all__ = ["BoardConnection"]


class BoardConnection:
    """Take arrivals one by one, and watch that they come.

    Parameters
    ----------
    intake : Sink
        Where messages go.
    hearing : Hearing
        Finds them in the bytes.
    answers : BoardAnswers
        Has the drive looked after when the port is back.
    silence : Silence
        Says when nothing valid has come for too long.
    watch : PortWatch
        Who is told.
    is_patient : bool
        Wait for a port that is gone.
    lock_in : LockInStart, optional
        What the board was asked for instead of samples.
    """

    def __init__(
        self,
        intake: Sink,
        hearing: Hearing,
        answers: BoardAnswers,
        silence: Silence,
        watch: PortWatch,
        is_patient: bool,
        lock_in: LockInStart | None,
    ) -> None:
        self._intake, self._hearing, self._answers = intake, hearing, answers
        self._silence, self._watch = silence, watch
        self._is_patient, self._lock_in = is_patient, lock_in
        self.is_lost = False
        """Whether the port is gone and waited for."""

    def take(self, arrival: Arrival) -> None:
        """Hand one arrival on.

        Parameters
        ----------
        arrival : Arrival
            Bytes, or what happened to the port.

        Raises
        ------
        DeviceFailedError
            If the port is gone and not waited for.
        """
        if arrival.lost:
            self._lost(arrival.lost)
        elif arrival.is_back:
            self._back()
        else:
            self._silence.note(arrival.data, *self._hearing.take(arrival))

    def check_silence(self) -> None:
        """Tell of a silence that is too long.

        Raises
        ------
        DeviceFailedError
            If nobody is there to be told.
        """
        if self.is_lost:
            return
        intake = self._intake
        every_s = result_every_s(self._lock_in, intake.every_s)
        complaint = self._silence.maybe_complaint(
            intake.is_known, bool(intake.files), self._is_patient, every_s
        )
        if complaint and not self._watch.maybe_silent(complaint):
            if self._is_patient and self._silence.waits_for_a_first_line():
                return
            self._hearing.finish()
            raise DeviceFailedError(f"{complaint}; {_kept(intake)}")

    def _lost(self, reason: str) -> None:
        self._hearing.lost()
        if not self._is_patient:
            self._hearing.finish()
        self._intake.remark(f"{self._watch.name} is gone: {reason}")
        if not self._is_patient:
            raise DeviceFailedError(f"{self._watch.name} failed: {reason}; {_kept(self._intake)}")
        self.is_lost = True
        self._watch.gone(reason)

    def _back(self) -> None:
        self.is_lost = False
        self._answers.away()
        self._hearing.back()
        self._silence.reset()
        self._intake.away()
        self._intake.remark(f"{self._watch.name} is back")
        self._watch.back()


def _kept(intake: Sink) -> str:
    if not intake.files:
        return "nothing was recorded"
    rate_hz = intake.rate_hz or 1.0
    names = ", ".join(str(path) for path in intake.files)
    return f"kept {intake.reached} samples ({intake.reached / rate_hz:.4g} s) in {names}"
