"""Handler, scanner and nest as pure state machines: who brings parts when, and what is answered."""

from __future__ import annotations

import numpy as np
import pytest

from sim_instruments.bench import Bench, BenchRefusal, Verdict
from sim_instruments.faults import Fault, FaultBook
from sim_instruments.handler import Handler
from sim_instruments.scanner import Scanner

pytest_plugins = ["sim_served"]

F_HZ = np.linspace(1.6e6, 1.7e6, 101)


@pytest.fixture
def faults() -> FaultBook:
    """No trouble yet."""
    return FaultBook()


@pytest.fixture
def handler(bench: Bench, faults: FaultBook) -> Handler:
    """The handler of the bench."""
    return Handler(bench, faults)


@pytest.fixture
def scanner(bench: Bench, faults: FaultBook) -> Scanner:
    """The scanner of the bench."""
    return Scanner(bench, faults)


def sweep(bench: Bench, *faults: str) -> np.ndarray:
    """What the meter sees, told as a share of the open fixture's impedance."""
    struck = {name: Fault(name) for name in faults}
    return bench.impedance(F_HZ, 1.0, struck, np.random.default_rng(1)) / bench.empty(F_HZ, 1.0)


def test_handler_feeds_the_lot_in_order(handler: Handler, scanner: Scanner) -> None:
    """READY, PRESENT, scan, verdict, for each part; EMPTY after the last, as often as asked."""
    for serial in (b"MD-0001\r", b"MD-0002\r", b"MD-0003\r"):
        assert handler.respond(b"READY") == b"PRESENT\n"
        assert scanner.due() == serial
        assert handler.respond(b"VERDICT FAIL") == b"ACK\n"
    assert [handler.respond(b"READY") for _ in range(2)] == [b"EMPTY\n", b"EMPTY\n"]
    assert scanner.due() == b""


def test_repeated_ready_is_the_same_request(handler: Handler, scanner: Scanner, bench: Bench) -> None:
    """No second part and no second scan while one waits to be measured."""
    handler.respond(b"READY")
    assert scanner.due() == b"MD-0001\r"
    assert handler.respond(b"READY") == b"PRESENT\n"
    assert scanner.due() == b""
    assert bench.serial == "MD-0001"


def test_label_is_read_again_for_a_station_that_started_anew(handler: Handler, scanner: Scanner, bench: Bench) -> None:
    """Swept since its scan and asked for without any verdict, the part was forgotten."""
    handler.respond(b"READY")
    scanner.due()
    sweep(bench)
    assert handler.respond(b"READY") == b"PRESENT\n"
    assert scanner.due() == b"MD-0001\r"


def test_again_keeps_the_part_unscanned(handler: Handler, scanner: Scanner, bench: Bench) -> None:
    """AGAIN is acknowledged, and the same part is present without another scan."""
    handler.respond(b"READY")
    scanner.due()
    sweep(bench)
    assert handler.respond(b"VERDICT AGAIN") == b"ACK\n"
    assert handler.respond(b"READY") == b"PRESENT\n"
    assert scanner.due() == b""
    assert bench.serial == "MD-0001"


@pytest.mark.parametrize(
    ("line", "verdict"),
    [
        (b"VERDICT PASS A", Verdict("PASS", "A")),
        (b"VERDICT PASS -", Verdict("PASS", None)),
        (b"VERDICT FAIL", Verdict("FAIL", None)),
        (b"VERDICT HOLD", Verdict("HOLD", None)),
    ],
)
def test_final_verdict_sends_the_part_out(handler: Handler, bench: Bench, line: bytes, verdict: Verdict) -> None:
    """The verdict is kept under the serial, and the fixture is empty."""
    handler.respond(b"READY")
    assert handler.respond(line) == b"ACK\n"
    assert bench.verdicts == {"MD-0001": [verdict]}
    assert bench.serial is None


@pytest.mark.parametrize(
    "line",
    [b"", b"ready", b"VERDICT", b"VERDICT PASS", b"VERDICT MAYBE", b"VERDICT FAIL A", b"VERDICT PASS A B", b"\xe4"],
)
def test_unknown_line_is_refused_in_one_sentence(handler: Handler, bench: Bench, line: bytes) -> None:
    """NAK says what would do; nothing moves."""
    handler.respond(b"READY")
    answer = handler.respond(line)
    assert answer.startswith(b"NAK '")
    assert b"expected READY, VERDICT PASS" in answer
    assert answer.count(b"\n") == 1
    assert bench.serial == "MD-0001"


def test_verdict_on_an_empty_fixture_is_refused(handler: Handler, bench: Bench) -> None:
    """There is nothing to judge before a part came or after it went."""
    assert handler.respond(b"VERDICT FAIL") == b"NAK there is no part in the fixture to judge\n"
    assert bench.verdicts == {}


def test_by_hand_ready_waits_for_a_part(handler: Handler, bench: Bench) -> None:
    """In hand mode nothing comes by itself; two READYs that wait get one PRESENT."""
    bench.by_hand = True
    assert handler.respond(b"READY") == handler.respond(b"READY") == b""
    bench.place(bench.find("MD-0002"), scan=True)
    assert [handler.placed(), handler.placed()] == [b"PRESENT\n", b""]


def test_by_hand_empty_comes_after_every_final_verdict(handler: Handler, bench: Bench) -> None:
    """AGAIN is not final; a part judged long ago may come back all the same."""
    bench.by_hand = True
    for serial in ("MD-0003", "MD-0001", "MD-0002"):
        bench.place(bench.find(serial), scan=True)
        assert handler.respond(b"READY") == b"PRESENT\n"
        handler.respond(b"VERDICT AGAIN")
        handler.respond(b"VERDICT HOLD")
    assert handler.respond(b"READY") == b"EMPTY\n"
    bench.place(bench.find("MD-0003"), scan=True)
    assert handler.respond(b"READY") == b"PRESENT\n"


def test_part_that_sits_there_is_placed_and_scanned_once(bench: Bench, scanner: Scanner) -> None:
    """A second present is no second part; a loaded one is still scanned on present."""
    part = bench.find("MD-0002")
    bench.place(part, scan=False)
    assert scanner.due() == b""
    bench.place(part, scan=True)
    assert scanner.due() == b"MD-0002\r"
    bench.place(part, scan=True)
    assert scanner.due() == b""


def test_occupied_fixture_takes_no_other_part(bench: Bench) -> None:
    """Two parts do not go into one nest."""
    bench.place(bench.find("MD-0002"), scan=False)
    with pytest.raises(BenchRefusal, match="MD-0002 sits in the fixture"):
        bench.place(bench.find("MD-0001"), scan=False)


def test_ejected_part_comes_again(handler: Handler, bench: Bench) -> None:
    """Taken out unjudged, it is still in the tray."""
    handler.respond(b"READY")
    assert [bench.eject(), bench.eject()] == ["MD-0001", None]
    assert handler.respond(b"READY") == b"PRESENT\n"
    assert bench.serial == "MD-0001"


def test_trigger_without_a_part_is_refused(scanner: Scanner) -> None:
    """The scanner reads labels, not air."""
    with pytest.raises(BenchRefusal):
        scanner.scan()


def test_contact_bounce_lifts_a_few_points(bench: Bench) -> None:
    """Short stretches read open, the rest the part; the next sweep is whole."""
    bench.feed()
    lifted = np.isclose(sweep(bench, "contact-bounce"), 1)
    assert 1 <= np.count_nonzero(lifted) <= 6
    assert not np.any(np.isclose(sweep(bench), 1))


def test_pulled_part_is_open_until_a_verdict(bench: Bench) -> None:
    """From the middle of its sweep on, over the next, until the station has signalled and it is put back."""
    bench.feed()
    lifted = np.isclose(sweep(bench, "part-pulled-out"), 1)
    assert not lifted[:50].any()
    assert lifted[50:].all()
    assert np.allclose(sweep(bench), 1)
    bench.judge(Verdict("AGAIN", None))
    assert not np.any(np.isclose(sweep(bench), 1))


def test_stuck_handler_does_and_says_nothing(handler: Handler, faults: FaultBook, bench: Bench) -> None:
    """The line is lost whole, and the next one works."""
    handler.respond(b"READY")
    faults.arm(Fault("handler-stuck"))
    assert handler.respond(b"VERDICT FAIL") == b""
    assert bench.serial == "MD-0001"
    assert handler.respond(b"VERDICT FAIL") == b"ACK\n"


def test_lost_scan(handler: Handler, scanner: Scanner, faults: FaultBook) -> None:
    """The label was not read; pulling the trigger again helps."""
    faults.arm(Fault("scan-lost"))
    handler.respond(b"READY")
    assert [scanner.due(), scanner.due(), scanner.scan()] == [b"", b"", b"MD-0001\r"]
