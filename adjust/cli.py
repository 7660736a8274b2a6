"""The command line: parses, calls, prints; nothing is computed here.

Exit codes: 0 done; 1 done, but a test failed or a suspect stands; 2 could not be done; 70 internal error;
130 interrupted.
"""

from __future__ import annotations

import argparse
import os
import sys

from adjust import __version__
from adjust.caution import CAUTION_SHORT

TYPE_CHECKING = False  # typing itself would take longer to load than --help runs; checkers know the name
if TYPE_CHECKING:
    from collections.abc import Sequence
    from typing import Any

DONE, FAILED, REFUSED, INTERNAL, INTERRUPTED = 0, 1, 2, 70, 130
SHELLS = ("bash", "zsh", "fish")


class _Completion(argparse.Action):
    """Print the completion script of a shell and end, as --version does."""

    def __call__(self, parser: argparse.ArgumentParser, given: object, shell: Any, option: object = None) -> None:
        with open(os.path.join(os.path.dirname(__file__), "completion", shell), encoding="utf-8") as script:
            print(script.read(), end="")
        parser.exit()


def parser() -> argparse.ArgumentParser:
    """The commands and their options."""
    top = argparse.ArgumentParser(
        prog="brasscap",
        description="Adjust, test and diagnose a survey network from a folder of plain tables.",
        epilog=CAUTION_SHORT + " Exit: 0 done, 1 a test failed, 2 could not be done.",
    )
    top.add_argument("--version", action="version", version=f"brasscap {__version__}")
    top.add_argument("--completion", action=_Completion, choices=SHELLS, metavar="SHELL",
                     help="print the completion script for bash, zsh or fish")  # fmt: skip
    commands = top.add_subparsers(dest="command", metavar="COMMAND", required=True)
    start = commands.add_parser("start", help="write a small commented job to begin from")
    start.add_argument("dir", metavar="DIR", help="a new folder")
    check = commands.add_parser("check", help="read everything and say what hangs together; writes nothing")
    adjust = commands.add_parser("adjust", help="adjust, test and write the record")
    for command in (check, adjust):
        command.add_argument("job", metavar="JOB", help="the job's folder or its job.toml")
        command.add_argument("--quiet", action="store_true", help="print nothing but faults")
        command.add_argument("--verbose", action="store_true", help="also print the time of each phase")
    adjust.add_argument("--json", action="store_true", help="print the record and write nothing unless --out is given")
    adjust.add_argument("--out", metavar="DIR", help="folder of the record (default JOB/record)")
    adjust.add_argument("--open", action="store_true", help="open the record's page in the browser")
    adjust.add_argument("--without-suspects", action="store_true",
                        help="leave out the suspects at the level of the whole job, each with its reason")  # fmt: skip
    return top


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit code."""
    try:
        given = parser().parse_args(arguments)
    except SystemExit as stop:
        return int(stop.code or 0)
    try:
        code = _COMMANDS[given.command](given)
        sys.stdout.flush()
        return code
    except KeyboardInterrupt:
        print("interrupted; nothing was written", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        # the reader has seen enough; what is still buffered must not fail again when Python closes the stream
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return DONE
    except Exception as error:
        return _explain(error)


def _explain(error: Exception) -> int:
    from adjust.errors import BrasscapError

    if isinstance(error, BrasscapError):
        for sentence in error.sentences:
            print(sentence, file=sys.stderr)
        return error.exit_code
    import tempfile
    import traceback

    with tempfile.NamedTemporaryFile("w", prefix="brasscap-", suffix=".txt", delete=False, encoding="utf-8") as trace:
        traceback.print_exception(error, file=trace)
    print(f"internal error ({type(error).__name__}); the trace lies in {trace.name}", file=sys.stderr)
    return INTERNAL


class _Clock:
    """Times of the phases, printed to standard error with --verbose."""

    def __init__(self, wanted: bool) -> None:
        import time

        self.now, self.wanted = time.perf_counter, wanted
        self.last = self.now()

    def phase(self, name: str) -> None:
        """End a phase."""
        if self.wanted:
            print(f"{name:<8} {self.now() - self.last:8.3f} s", file=sys.stderr)
        self.last = self.now()


def _start(given: argparse.Namespace) -> int:
    from adjust.record.starter import write_starter

    files = write_starter(given.dir)
    print(f"wrote {', '.join(files)} to {given.dir}")
    print(f"next: brasscap adjust {given.dir}")
    print(CAUTION_SHORT)
    return DONE


def _check(given: argparse.Namespace) -> int:
    clock = _Clock(given.verbose)
    from adjust import read
    from adjust.judge.check import look

    job = read(given.job)
    clock.phase("read")
    seen = look(job)
    clock.phase("check")
    if not given.quiet:
        print("\n".join([*seen.lines, CAUTION_SHORT]))
    return FAILED if seen.failed else DONE


def _adjust(given: argparse.Namespace) -> int:
    clock = _Clock(given.verbose)
    from pathlib import Path

    from adjust import assess, read, solve

    job = read(given.job)
    out = Path(given.out) if given.out else None if given.json else job.folder / "record"
    if given.open and not out:
        from adjust.errors import OutputError

        raise OutputError(["--open has no page to open, because --json writes none: add --out DIR"])
    if out:
        from adjust.record.folder import check_out

        check_out(out)
    clock.phase("read")
    solution = solve(job)
    clock.phase("adjust")
    judgement = assess(solution)
    if given.without_suspects:
        from adjust.judge.set_aside import without_suspects

        judgement = assess(solve(without_suspects(judgement)))
    clock.phase("test")
    _deliver(given, judgement, out)
    clock.phase("write")
    return FAILED if judgement.failed else DONE


def _deliver(given: argparse.Namespace, judgement: Any, out: Any) -> None:
    """Write and print what was asked for."""
    from adjust.record.build import build, trimmed

    record = build(judgement)
    if out:
        from adjust.record.folder import write_record
        from adjust.record.write import record_files

        write_record(record_files(record), out)
    if given.json:
        from adjust.record.json_text import json_bytes

        sys.stdout.write(json_bytes(trimmed(record)).decode())
    elif not given.quiet:
        from adjust.record.summary import summary_lines

        print("\n".join(summary_lines(record)))
        print(f"The record is in {out}")
        print(f"Read it in a browser: {out / 'record.html'}")
    if given.open and out:
        import webbrowser

        webbrowser.open((out / "record.html").resolve().as_uri())


_COMMANDS = {"start": _start, "check": _check, "adjust": _adjust}


def run() -> None:
    """Entry point of the command: run and exit."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(encoding="utf-8", errors="replace")
    sys.exit(main())
