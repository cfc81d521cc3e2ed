"""``python -m sim_instruments serve``: a simulated bench for anyone."""

from __future__ import annotations

import argparse
import asyncio
import sys
from collections.abc import Callable, Sequence
from pathlib import Path

from sim_instruments.faults import TARGETS, Fault, FaultMistake, read_faults
from sim_instruments.physics.families import FAMILIES
from sim_instruments.physics.lots import LotError, make_lot, read_lot
from sim_instruments.serve import Options, serve
from sim_instruments.tray import Tray, tray_of

_EPILOG = """\
example:
  python -m sim_instruments serve --parts 12 --seed 7

prints one line of JSON once all listen, and serves until SIGTERM or Ctrl-C:
  {{"ready": true, "hislip": "TCPIP::127.0.0.1::hislip0,PORT::INSTR",
   "socket": "TCPIP::127.0.0.1::PORT::SOCKET", "scanner": "/dev/pts/N", "handler": "/dev/pts/M",
   "control": "127.0.0.1:PORT", "station": "PATH"}}

a faults file holds tables such as
  [[fault]]
  name = "half-block"
  when = "sweep 3"      # or "at once", or "command *IDN? 2"
  times = 1
names: {faults}

the part handler brings part after part, the next one after a final verdict. the control port takes one JSON
object a line and answers one; from the first part put in by hand on, the handler brings nothing by itself:
  {{"command": "present", "serial": "MD-0001"}}   part into the fixture, then its serial from the scanner
  {{"command": "load", "serial": "MD-0001"}}      the same without a scan
  {{"command": "eject"}}  {{"command": "scan"}}  {{"command": "lot"}}  {{"command": "status"}}
  {{"command": "truth", "serial": "MD-0001"}}     what the part is; all parts without a serial
  {{"command": "fault", "name": "half-block", "when": "sweep 3"}}  {{"command": "clear-faults"}}
""".format(faults=", ".join(TARGETS))


class _Refused(Exception):
    """A wrong option or file; the message is a sentence with its place."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; the exit code: 0 after a clean end, 2 for a wrong option or file."""
    options = _parser().parse_args(arguments)
    try:
        asyncio.run(serve(_tray(options), _options(options)))
    except _Refused as refusal:
        print(f"sim_instruments: {refusal}", file=sys.stderr)
        return 2
    return 0


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="python -m sim_instruments", description="Simulated instruments.")
    serve_ = parser.add_subparsers(dest="command", required=True).add_parser(
        "serve",
        help="a bench on the loopback: analyser, scanner, part handler",
        description="A simulated bench on the loopback: impedance analyser (HiSLIP, TCP), scanner, part handler.",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    serve_.add_argument("--seed", type=_whole(0), default=0, help="decides parts, errors and noise (0)")
    serve_.add_argument("--parts", type=_whole(1), default=12, help="parts in the lot (12)")
    serve_.add_argument("--family", choices=list(FAMILIES), default="MD-1650", help="part number (MD-1650)")
    serve_.add_argument("--lot", type=Path, metavar="FILE", help="a lot description, instead of --parts and --family")
    serve_.add_argument("--faults", type=Path, metavar="FILE", help="scripted trouble")
    serve_.add_argument("--ms-per-point", type=_ms, default=0.02, help="time of one reading (0.02)")
    serve_.add_argument("--by-hand", action="store_true", help="the handler brings nothing; present parts yourself")
    serve_.add_argument("--dir", type=Path, help="where to write the station file (a temporary directory)")
    return parser


def _whole(least: int) -> Callable[[str], int]:
    def number(text: str) -> int:
        if not text.isdecimal() or int(text) < least:
            raise argparse.ArgumentTypeError(f"'{text}' is not a whole number from {least} up")
        return int(text)

    return number


def _ms(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = -1.0
    if not 0 <= value <= 10_000:
        raise argparse.ArgumentTypeError(f"'{text}' is not a number of milliseconds from 0 to 10000")
    return value


def _tray(options: argparse.Namespace) -> Tray:
    try:
        if options.lot is not None:
            return tray_of(read_lot(_text(options.lot), str(options.lot)))
        return tray_of(make_lot(options.family, options.parts, options.seed))
    except LotError as mistake:
        raise _Refused(str(mistake)) from None


def _options(options: argparse.Namespace) -> Options:
    if options.dir is not None and not options.dir.is_dir():
        raise _Refused(f"{options.dir}: there is no such directory for the station file; make it first")
    return Options(options.seed, _faults(options.faults), options.ms_per_point, options.dir, options.by_hand)


def _faults(path: Path | None) -> Sequence[Fault]:
    try:
        return () if path is None else read_faults(_text(path))
    except FaultMistake as mistake:
        raise _Refused(f"{path}: {mistake}") from None


def _text(path: Path) -> str:
    try:
        return path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as trouble:
        raise _Refused(f"{path}: cannot be read: {trouble}") from None


if __name__ == "__main__":
    sys.exit(main())
