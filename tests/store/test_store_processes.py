"""Processes: a reader beside the writer, several threads on one store, and a writer killed at any moment."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path

import numpy as np
from store_examples import NOW, make_limits, new_store, screen

from harness.errors import SetupError
from harness.store import Store, open_store, verify

HERE = Path(__file__).parent
KILLS = 10


@contextmanager
def child(path: Path, name: str, parts: int) -> Iterator[subprocess.Popen[str]]:
    command = [sys.executable, str(HERE / "store_child.py"), str(path), name, str(parts)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True, cwd=HERE)
    try:
        yield process
    finally:
        process.kill()
        process.wait()
        assert process.stdout is not None
        process.stdout.close()


def acknowledged(text: str) -> dict[int, str]:
    """Whole lines only: a line cut by the kill was never said."""
    lines = text.splitlines(keepends=True)
    return {int(line.split()[0]): line.split()[1] for line in lines if line.endswith("\n")}


def kept(store: Store) -> dict[int, str]:
    return {one.seq: one.hash for one in store.records_of_lot("L-0301", sweeps=False)}


def killed_once(path: Path, name: str, after: int, delay_s: float) -> dict[int, str]:
    """Let a writer acknowledge ``after`` records, kill it a moment later, and say what it had acknowledged by then."""
    with child(path, name, 10_000) as writer:
        assert writer.stdout is not None
        said = "".join(writer.stdout.readline() for _ in range(after))
        time.sleep(delay_s)  # the moment of the kill is what is drawn by lot
        writer.send_signal(signal.SIGKILL)
        rest = writer.stdout.read()
    assert writer.returncode == -signal.SIGKILL
    return acknowledged(said + rest)


def test_a_killed_writer_loses_nothing_it_acknowledged(tmp_path: Path, rng: np.random.Generator) -> None:
    """Killed ten times at moments drawn by lot: every acknowledged record is there, the chain sound."""
    path = tmp_path / "ringtrue.db"
    said: dict[int, str] = {}
    for kill in range(KILLS):
        said |= killed_once(path, f"K{kill}", int(rng.integers(1, 8)), float(rng.uniform(0, 0.004)))
        with open_store(str(path), mode="read", now=NOW) as store:
            found = verify(store)
            there = kept(store)
        assert found.sound, found.findings
        assert found.open_attempts <= 1
        assert there.items() >= said.items()
        assert len(there) <= len(said) + 1
        said = there
    with open_store(str(path), mode="write", now=NOW) as store:
        store.close_interrupted(NOW, {})
        assert (verify(store).sound, store.interrupted()) == (True, ())


def readable(path: Path) -> str:
    try:
        open_store(str(path), mode="read", now=NOW).close()
    except SetupError as error:
        return error.text
    return "a store"


def test_a_writer_killed_while_it_creates_leaves_a_store_or_none(tmp_path: Path, rng: np.random.Generator) -> None:
    """Killed around the creation of the store: the next one opens it, whatever was there."""
    for kill in range(3):
        path = tmp_path / f"new-{kill}" / "ringtrue.db"
        with child(path, "N", 1) as writer:
            while not path.parent.exists() and writer.poll() is None:
                os.sched_yield()
            time.sleep(float(rng.uniform(0, 0.02)))
            writer.send_signal(signal.SIGKILL)
        assert readable(path) in ("a store", f"there is no store at {path}.")
        with open_store(str(path), mode="write", now=NOW) as store:
            store.open_lot("L-0301", make_limits(), "operator 3", NOW)
            screen(store, "FH-0001")
            assert verify(store).sound


def test_readers_work_beside_the_writer(tmp_path: Path) -> None:
    """While another process screens, a reader finds every acknowledged record at once, and the store sound."""
    path = tmp_path / "ringtrue.db"
    new_store(path).close()
    with open_store(str(path), mode="read", now=NOW) as store, child(path, "W", 60) as writer:
        assert writer.stdout is not None
        for line in writer.stdout:
            found = verify(store)
            assert found.sound, found.findings
            assert found.chains[0].records >= int(line.split()[0])
        assert writer.wait() == 0
        assert len(kept(store)) == 60


def test_threads_share_a_store(tmp_path: Path) -> None:
    """The page's thread and the run's thread on one store: calls wait for each other and the chain stays whole."""
    with new_store(tmp_path / "ringtrue.db") as store:
        with ThreadPoolExecutor(4) as pool:
            done = list(pool.map(lambda n: screen(store, f"FH-{n:04d}", seed=n), range(40)))
        assert sorted(one.seq for one in done) == list(range(1, 41))
        assert verify(store).sound


def test_two_writers_in_turn_make_one_chain(tmp_path: Path) -> None:
    """The station's lock allows one writer; should two ever meet, the chain's head is read inside the transaction."""
    path = tmp_path / "ringtrue.db"
    with new_store(path) as one, open_store(str(path), mode="write", now=NOW) as two:
        for n in range(6):
            screen((one, two)[n % 2], f"FH-{n:04d}", seed=n)
        assert [found.seq for found in two.records_of_lot("L-0301")] == [1, 2, 3, 4, 5, 6]
        assert verify(one).sound
