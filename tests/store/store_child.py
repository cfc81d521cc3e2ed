"""Run as a process of its own: screen parts for ever, and print each record's number and hash once it is committed."""

from __future__ import annotations

import sys

from store_examples import NOW, make_limits, make_opening, make_record

from harness.store import open_store


def main(path: str, name: str, parts: int) -> None:
    with open_store(path, mode="write", now=NOW) as store:
        store.open_lot("L-0301", make_limits(), "operator 3", NOW)
        for written in store.close_interrupted(NOW, {"ringtrue": "0.1.0"}):
            print(written.seq, written.hash, flush=True)
        for count in range(parts):
            opening = make_opening(f"{name}-{count:05d}")
            attempt = store.open_attempt(opening)
            written = store.write_record(make_record(opening, seed=count), attempt)
            print(written.seq, written.hash, flush=True)


if __name__ == "__main__":
    main(sys.argv[1], sys.argv[2], int(sys.argv[3]))
