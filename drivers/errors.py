"""Every error a driver raises on purpose.

::

    DriverError
    ├── ResourceError      a resource string, dialect or option is wrong        (set-up)
    ├── WireError          the connection
    │   ├── NoAnswer           nothing, or not all, came in time
    │   ├── ConnectionLost     refused, closed, gone
    │   └── OutOfStep          what comes next may answer an earlier question: reopen first
    └── AnswerError        something came, and it is not right
        ├── InstrumentError    the instrument's own error queue
        └── NotUsable          NaN, infinity or overload where a number should be; a frequency read back different

Each says one sentence, the resource it is about, and a hint. Foreign exceptions become these in ``wire`` alone.
"""

from __future__ import annotations


class DriverError(Exception):
    """The root: ``text`` a sentence, ``resource`` what it is about, ``hint`` what to try."""

    def __init__(self, text: str, *, resource: str = "", hint: str = "") -> None:
        self.text = text
        self.resource = resource
        self.hint = hint
        head = f"{resource}: {text}" if resource else text
        super().__init__(f"{head} {hint}".rstrip())


class ResourceError(DriverError):
    """A resource string, a dialect or an option is wrong."""


class WireError(DriverError):
    """The connection failed."""


class NoAnswer(WireError):
    """No answer, or only part of one, within the timeout."""


class ConnectionLost(WireError):
    """Refused, closed by the other side, or gone."""


class OutOfStep(WireError):
    """Question and answer no longer belong together: unread bytes, or use after a timeout without reopening."""


class AnswerError(DriverError):
    """An answer came that cannot be right."""


class InstrumentError(AnswerError):
    """The instrument reported errors in its own queue."""


class NotUsable(AnswerError):
    """A reading that is not a number, an overload, or a setting that was not taken."""
