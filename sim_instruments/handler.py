"""The part handler's line: ``READY`` brings a part, ``VERDICT …`` sends it out.

PURE. ``respond`` takes one line without its end and returns the bytes to send, none when the answer must wait for a
part: ``placed`` gives it once there is one. A repeated READY is the same request.
"""

from __future__ import annotations

import re

from sim_instruments.bench import Bench, BenchRefusal, Verdict
from sim_instruments.faults import Event, FaultBook

_VERDICT = re.compile(r"VERDICT (?:(?P<grade_of>PASS) (?P<grade>\S+)|(?P<outcome>FAIL|HOLD|AGAIN))")
_KNOWN = "READY, VERDICT PASS <grade or ->, VERDICT FAIL, VERDICT HOLD or VERDICT AGAIN"


class Handler:
    """Shares the bench with the scanner and the meter; remembers only whether READY still waits."""

    def __init__(self, bench: Bench, faults: FaultBook) -> None:
        self._bench = bench
        self._faults = faults
        self._asked = False

    def respond(self, line: bytes) -> bytes:
        """The answer to one line: ``PRESENT``, ``EMPTY``, ``ACK`` or ``NAK`` with a sentence, or nothing yet."""
        text = line.decode("ascii", errors="replace").strip()
        word = text.split(" ")[0]
        if "handler-stuck" in self._faults.strikes(Event(frozenset({"handler"}), {word, text})):
            return b""
        if text == "READY":
            return self._ready()
        return self._verdict(text)

    def placed(self) -> bytes:
        """The answer to a READY that waits, if it can be given now."""
        if not self._asked:
            return b""
        if self._bench.serial is not None:
            self._asked = False
            return b"PRESENT\n"
        if self._bench.next_in_tray() is None:
            self._asked = False
            return b"EMPTY\n"
        return b""

    def _ready(self) -> bytes:
        self._asked = True
        self._bench.asked_again()
        self._bench.feed()
        return self.placed()

    def _verdict(self, text: str) -> bytes:
        found = _VERDICT.fullmatch(text)
        if found is None:
            return f"NAK '{_printable(text)}' is not understood; expected {_KNOWN}\n".encode("ascii")
        grade = None if found["grade"] in (None, "-") else found["grade"]
        try:
            self._bench.judge(Verdict(found["grade_of"] or found["outcome"], grade))
        except BenchRefusal as refusal:
            return f"NAK {refusal}\n".encode("ascii")
        return b"ACK\n"


def _printable(text: str) -> str:
    return "".join(char if " " <= char <= "~" else "?" for char in text[:40])
