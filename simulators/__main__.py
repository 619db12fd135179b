"""python -m simulators: a simulated detector board, a receiver's server, faults on command."""

from __future__ import annotations

import argparse
import json
import signal
import sys
import time
from collections.abc import Sequence
from contextlib import ExitStack, closing
from datetime import UTC, datetime, timedelta
from pathlib import Path
from types import FrameType

from simulators import control, iq_signals, scenario
from simulators.board import Board
from simulators.faults import KINDS, Faults, scheduled
from simulators.iq_faults import KINDS as IQ_KINDS
from simulators.iq_faults import StreamFault, StreamFaults
from simulators.iq_server import Server
from simulators.line import Line
from simulators.source import Setup, Source


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command; 0 done, 2 wrong input, 3 a device or file cannot be reached."""
    options = _parser().parse_args(argv)
    try:
        if options.command == "fault":
            return _fault(options)
        if options.command == "scenes":
            print("\n".join(scenario.available()))
            return 0
        if options.command == "iq":
            return _iq(options)
        return _board(options)
    except ValueError as error:
        print(f"simulators: {error}", file=sys.stderr)
        return 2
    except OSError as error:
        print(f"simulators: {error.filename or ''} {error.strerror or error}", file=sys.stderr)
        return 3


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="python -m simulators", description="Simulated hardware; all of its data are invented."
    )
    commands = parser.add_subparsers(dest="command", required=True)
    commands.add_parser("scenes", help="names of the board's scenes that are shipped")
    _board_options(commands.add_parser("board", help="a detector board on a pseudo-terminal"))
    _iq_options(commands.add_parser("iq", help="a receiver's samples on a TCP port"))
    fault = commands.add_parser("fault", help="a fault on command")
    fault.add_argument("--control", type=Path, required=True, metavar="SOCKET")
    fault.add_argument("kind", choices=(*KINDS, *IQ_KINDS))
    amount = fault.add_mutually_exclusive_group()
    amount.add_argument("--count", type=float, help="frames, samples, connections, bytes a second")
    amount.add_argument("--seconds", type=float, metavar="S")
    return parser


def _board_options(board: argparse.ArgumentParser) -> None:
    add = board.add_argument
    add("--scenario", default="busy-day", metavar="NAME|FILE.toml")
    add("--seed", type=int, default=1)
    add("--link", type=Path, required=True, help="link to the device")
    add("--rate", type=float, default=1.0, metavar="HZ", help="readings a second")
    add("--channels", type=int, default=3, choices=(1, 2, 3))
    add("--bits", type=int, default=12, help="of the converter; 12 as in its calibration")
    add("--start-utc", metavar="RFC3339", help="board time 0; by default now less the history")
    add("--history", type=float, default=0.0, metavar="SECONDS")
    end = board.add_mutually_exclusive_group()
    end.add_argument("--until-exit", action="store_true", help="until killed (the rule)")
    end.add_argument("--exit-after-history", action="store_true")
    add("--with-parent", action="store_true", help="end when the starter does")
    add("--truth", type=Path, metavar="FILE.csv")
    add("--control", type=Path, metavar="SOCKET")
    add("--errors", type=int, metavar="SEED", help="draw the instrument's errors")
    kinds = ", ".join(KINDS)
    at = "SECONDS:KIND[:AMOUNT]"
    add("--fault", action="append", default=[], metavar=at, help=f"at a board time; {kinds}")


def _iq_options(server: argparse.ArgumentParser) -> None:
    add = server.add_argument
    add("--host", default="127.0.0.1")
    add("--port", type=int, default=1234, help="0: any free one; it is told")
    add("--air", default="town", metavar="NAME|FILE.toml", help="what is on the air")
    add("--seed", type=int, default=1)
    add("--truth", type=Path, metavar="FILE.csv")
    add("--sent", type=Path, metavar="FILE.cu8", help="keeps what the last connection was sent")
    add("--control", type=Path, metavar="SOCKET")
    add("--with-parent", action="store_true", help="end when the starter does")
    kinds, at = ", ".join(IQ_KINDS), "SECONDS:KIND[:AMOUNT]"
    add("--fault", action="append", default=[], metavar=at, help=f"at a device time; {kinds}")


def _fault(options: argparse.Namespace) -> int:
    amount = options.count if options.count is not None else options.seconds
    reply = control.ask(options.control, {"fault": options.kind, "amount": amount})
    print(json.dumps(reply))
    return 0 if reply.get("ok") else 2


def _board(options: argparse.Namespace) -> int:
    started_s = time.monotonic()
    setup = Setup(
        scene=scenario.load(options.scenario),
        seed=options.seed,
        rate_hz=options.rate,
        channels=options.channels,
        bits=options.bits,
        start_utc=_start_utc(options.start_utc, options.history),
        history_s=options.history,
        errors=options.errors,
    )
    faults = Faults(scheduled(text) for text in options.fault)
    signal.signal(signal.SIGTERM, _leave)
    signal.signal(signal.SIGINT, _leave)
    with ExitStack() as opened:
        source = opened.enter_context(closing(Source(setup, options.truth)))
        listening = None
        if options.control:
            listening = opened.enter_context(closing(control.Control(options.control)))
        line = opened.enter_context(closing(Line(options.link)))
        line.open()
        _say(event="ready", device=options.link, truth=options.truth, control=options.control)
        board = Board(source, line, listening, faults, options.with_parent)
        readings = board.history()
        _say(event="history", readings=readings, took_s=round(time.monotonic() - started_s, 3))
        if not options.exit_after_history:
            board.live(started_s)
    return 0


def _iq(options: argparse.Namespace) -> int:
    if options.seed < 0:
        raise ValueError("the seed must be 0 or more")
    air = iq_signals.load(options.air)
    faults = StreamFaults(scheduled(text, StreamFault) for text in options.fault)
    signal.signal(signal.SIGTERM, _leave)
    signal.signal(signal.SIGINT, _leave)
    with ExitStack() as opened:
        listening = None
        if options.control:
            listening = opened.enter_context(closing(control.Control(options.control)))
        server = Server(
            (options.host, options.port),
            air,
            options.seed,
            truth=options.truth,
            sent=options.sent,
            control=listening,
            faults=faults,
            with_parent=options.with_parent,
        )
        opened.enter_context(closing(server))
        host, port = server.address
        _say(event="ready", host=host, port=port, truth=options.truth, control=options.control)
        server.run()
    return 0


def _start_utc(text: str | None, history_s: float) -> datetime:
    if text is None:
        return datetime.now(UTC) - timedelta(seconds=history_s)
    start = datetime.fromisoformat(text)
    if start.tzinfo is None:
        raise ValueError(f"--start-utc {text}: give the zone, for example 2026-03-01T00:00:00Z")
    return start.astimezone(UTC)


def _say(**facts: object) -> None:
    """One line of JSON on standard output, for whoever started us."""
    print(json.dumps({**facts, "simulated": True}, default=str), flush=True)


def _leave(_number: int, _frame: FrameType | None) -> None:
    raise SystemExit(0)


if __name__ == "__main__":
    sys.exit(main())
