"""A part handler on a serial line: brings parts to the fixture and takes them away by verdict.

The words are in ``codec.lines``. The line keeps its order, and that is what tells late answers from fresh ones.
"""

from __future__ import annotations

from collections.abc import Callable

from drivers.codec.lines import READY, HandlerLine, decode_handler_line, encode_verdict
from drivers.errors import AnswerError, NoAnswer, ResourceError
from drivers.wire.deadline import Deadline
from drivers.wire.opening import open_serial
from drivers.wire.protocol import Wire

DEFAULT_BAUD = 9600


class SerialHandler:
    """Fulfils ``roles.Handler``. Opening the port throws away what the handler said before."""

    def __init__(
        self,
        port: str,
        baud: int = DEFAULT_BAUD,
        *,
        ack_timeout_s: float = 5.0,
        open_port: Callable[[str, int], Wire] = open_serial,
    ) -> None:
        self._wire = open_port(port, baud)
        self._ack_timeout_s = ack_timeout_s
        self._asked = 0  # READYs sent for the part that is to come, or has come
        self._waiting = False  # for an answer to READY
        self._owed = 0  # verdicts sent whose ACK has not come

    def next_part(self, timeout_s: float) -> bool | None:
        """Ask for a part: True when it sits in the fixture, False when there is no more, None when nothing was said
        in time (ask again: it is the same request). Raises AnswerError when the handler refuses or talks nonsense."""
        deadline = Deadline(timeout_s)
        if not self._waiting:
            self._wire.clear()  # nobody asked: not an answer
            self._asked = 0
            self._waiting = True
        elif (late := self._arrived(0.0)) is not None:
            return late
        self._wire.write(READY)
        self._asked += 1
        return self._arrived(deadline.left_s)

    def signal(self, outcome: str, grade: str | None) -> None:
        """Tell the verdict: ``pass`` (with a grade or None), ``fail`` or ``hold`` are final, ``again`` keeps the part.

        Returns once acknowledged. Raises NoAnswer when it was not, AnswerError when it was refused, ResourceError
        for an outcome or grade that cannot be told.
        """
        try:
            line = encode_verdict(outcome, grade)
        except ValueError as exc:
            raise ResourceError(str(exc), resource=self._wire.resource) from exc
        self._wire.write(line)
        self._owed += 1
        deadline = Deadline(self._ack_timeout_s)
        while self._owed:
            self._take_ack(self._heard(deadline), outcome)

    def close(self) -> None:
        self._wire.close()

    def _arrived(self, timeout_s: float) -> bool | None:
        deadline = Deadline(timeout_s)
        while True:
            try:
                said = decode_handler_line(self._wire.read_line(deadline.left_s))
            except NoAnswer:
                return None
            if said.word == "ACK" and self._owed:
                self._owed -= 1  # late, of a verdict already reported as not acknowledged
                continue
            self._waiting = False
            if said.word not in ("PRESENT", "EMPTY"):
                raise self._refused("a part was asked for", said)
            self._owed = 0  # the line keeps its order: an ACK that has not come by now was never sent
            return said.word == "PRESENT"

    def _heard(self, deadline: Deadline) -> HandlerLine:
        try:
            return decode_handler_line(self._wire.read_line(deadline.left_s))
        except NoAnswer as exc:
            raise NoAnswer(
                f"the handler did not acknowledge the verdict within {self._ack_timeout_s:g} s.",
                resource=self._wire.resource,
                hint="Where it put the part is not known: put the part on hold.",
            ) from exc

    def _take_ack(self, said: HandlerLine, outcome: str) -> None:
        if said.word == "ACK":
            self._owed -= 1
        elif said.word == "PRESENT" and self._asked > 1:
            self._asked -= 1  # the answer to a READY sent again while the first answer was on its way
        else:
            self._owed -= 1
            raise self._refused(f"it was told {outcome}", said)

    def _refused(self, when: str, said: HandlerLine) -> AnswerError:
        answer = f"it cannot: {said.text or 'no reason given'}" if said.word == "NAK" else said.word
        return AnswerError(
            f"when {when}, the handler answered {answer}.",
            resource=self._wire.resource,
            hint="Look at the handler; a part whose outcome it did not take goes on hold.",
        )
