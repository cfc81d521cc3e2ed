"""Does every record follow the one before it? Told from the documents' own words, which moved rows keep."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Row

from harness.store import canonical
from harness.store.checks.findings import Finding

Claims = Callable[[], Counter[int]]


@dataclass(frozen=True, slots=True)
class Examined:
    """A row of ``record``, and its document if that is intact and readable, else what is wrong."""

    row: Row[Any]
    document: Mapping[str, Any] | None
    link: canonical.Link | None
    kind: str = ""
    problem: str = ""

    def finding(self, kind: str, text: str) -> Finding:
        return Finding(kind, self.row.chain, self.row.seq, self.row.serial, text)


def examine(row: Row[Any]) -> Examined:
    """Recompute the document's hash and read it."""
    if canonical.hash_of(row.document) != row.hash:
        return Examined(row, None, None, "changed", "does not match its hash")
    try:
        document = canonical.parse_document(row.document)
        return Examined(row, document, canonical.link_of(document))
    except canonical.DocumentError as exc:
        return Examined(row, None, None, "unreadable", str(exc))


class Walk:
    """Along one chain in the order of its rows. Feed every row to ``step``; then ``records`` and ``head`` are known.

    A record's place is the number its document claims. ``_place`` and ``_hash`` are those of the last record in its
    place (hash None: not trusted); ``_offset`` is how far rows are numbered beyond their documents, so that one row
    put in between is one finding. ``claims`` counts, on the first doubt only, how many documents of the chain claim
    each number.
    """

    def __init__(self, chain: str, claims: Claims) -> None:
        self.chain = chain
        self.records = 0
        self.head: str | None = None
        self._claims = claims
        self._place = 0
        self._hash: str | None = canonical.NO_HASH
        self._offset = 0
        self._last: Examined | None = None

    def step(self, one: Examined) -> Iterator[Finding]:
        """What is wrong with this record's place."""
        self.records += 1
        self.head = one.row.hash
        if one.link is None:
            yield one.finding(one.kind, f"the document of record {one.row.seq} {one.problem}")
            place = one.row.seq - self._offset
        elif one.link.chain != self.chain:
            yield one.finding("inserted", f"record {one.row.seq} belongs to another chain, {one.link.chain}")
            return
        else:
            place = one.link.seq
        if place <= self._place:
            yield self._out_of_place(one, place)
            return
        yield from self._between(one, place)
        self._place, self._last = place, one
        self._hash = None if one.link is None else one.row.hash
        self._offset = one.row.seq - place

    def _out_of_place(self, one: Examined, place: int) -> Finding:
        if self._claims()[place] > 1 or place < 1:
            return one.finding("inserted", f"record {one.row.seq} was put in: another is record {place}")
        return one.finding("reordered", f"record {place} stands at place {one.row.seq}")

    def _between(self, one: Examined, place: int) -> Iterator[Finding]:
        """From the last record in its place to this one: nothing missing, nothing rehashed, nothing renumbered."""
        due = self._place + 1
        if place > due:
            elsewhere = sum(1 for claimed in self._claims() if due <= claimed < place)
            if elsewhere:
                yield one.finding("reordered", f"record {place} stands at place {one.row.seq}")
            if absent := place - due - elsewhere:
                what = f"record {due} is" if place - due == 1 else f"{absent} of the records {due} to {place - 1} are"
                yield Finding("missing", self.chain, due, None, f"{what} missing")
        elif one.link is not None and self._hash not in (None, one.link.prev):
            before = self._last.row.serial if self._last else None
            text = f"record {one.row.seq} does not follow the one that is there: that was changed and hashed again"
            yield Finding("changed", self.chain, self._place or one.row.seq, before, text)
        elif one.row.seq - place != self._offset:
            yield one.finding("changed", f"record {place} is numbered {one.row.seq}")


def count_claims(rows: Iterator[Row[Any]]) -> Counter[int]:
    """How many records of a chain claim each number; one whose document is not intact claims its row's."""
    found: Counter[int] = Counter()
    for row in rows:
        one = examine(row)
        found[row.seq if one.link is None else one.link.seq] += 1
    return found
