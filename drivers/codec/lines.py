"""The lines of the serial instruments: a scanner's serials, a handler's words.

PURE. Station → handler: ``READY`` and ``VERDICT PASS <grade or -> | FAIL | HOLD | AGAIN``; handler → station:
``PRESENT``, ``EMPTY``, ``ACK``, ``NAK <sentence>``. Lines end with a newline.
"""

from __future__ import annotations

from dataclasses import dataclass

from drivers.codec.block import shown
from drivers.errors import AnswerError

READY = b"READY\n"
OUTCOMES = ("pass", "fail", "hold", "again")
WORDS = ("PRESENT", "EMPTY", "ACK", "NAK")

_NO_GRADE = "-"


@dataclass(frozen=True, slots=True)
class HandlerLine:
    """A handler's line: one of ``WORDS``, and for NAK the sentence."""

    word: str
    text: str = ""


def encode_verdict(outcome: str, grade: str | None) -> bytes:
    """The line that tells a verdict; blanks in a grade become ``_``, for a line's words are apart by blanks.

    Raises ValueError for an outcome or grade that a line cannot carry.

    >>> encode_verdict("pass", "A"), encode_verdict("again", None)
    (b'VERDICT PASS A\\n', b'VERDICT AGAIN\\n')
    """
    if outcome not in OUTCOMES:
        raise ValueError(f"a handler knows the outcomes {', '.join(OUTCOMES)}, not '{outcome}'.")
    if outcome != "pass":
        return f"VERDICT {outcome.upper()}\n".encode("ascii")
    if grade is not None and not _can_be_sent(grade):
        raise ValueError(f"grade {grade!r} cannot be sent in a handler's line: use printable ASCII, not '-'.")
    word = _NO_GRADE if grade is None else grade.replace(" ", "_")
    return f"VERDICT PASS {word}\n".encode("ascii")


def decode_handler_line(line: bytes) -> HandlerLine:
    """What a handler said; AnswerError for a line it should not say.

    >>> decode_handler_line(b"NAK no such word")
    HandlerLine(word='NAK', text='no such word')
    """
    word, _, text = line.strip().partition(b" ")
    known = word.decode("ascii", "replace")
    if known not in WORDS or (text and known != "NAK"):
        raise AnswerError(f"the handler said {shown(line)}; expected {', '.join(WORDS)}.")
    return HandlerLine(known, text.decode("ascii", "replace").strip())


def decode_serial(line: bytes) -> str:
    """A scanned serial: printable text (UTF-8), blanks around it taken off; AnswerError for anything else."""
    try:
        text = line.decode("utf-8").strip()
    except UnicodeDecodeError:
        text = ""
    if not text or not text.isprintable():
        raise AnswerError(
            f"the scanner sent {shown(line)}, which is not a serial.", hint="Check its baud rate and scan again."
        )
    return text


def _can_be_sent(grade: str) -> bool:
    return grade.isascii() and grade.isprintable() and grade not in ("", _NO_GRADE)
