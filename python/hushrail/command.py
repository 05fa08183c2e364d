"""The command line: ``hushrail`` and ``python -m hushrail``."""

from __future__ import annotations

import argparse
import csv
import io
import os
import shutil
import sys
import threading
import time
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import Any, NoReturn, Protocol, TextIO, TypeVar

from hushrail import __doc__ as hushrail_doc
from hushrail import __version__, asked, awake, costs, parked, report, study, transition
from hushrail.errors import HushrailError
from hushrail.leakage import Comparison
from hushrail.results import Failure, Note
from hushrail.study import Progress

__all__ = ["interrupted", "main", "terminal_width", "watched"]

OK, LIMIT, FAILED, INTERRUPTED = 0, 1, 2, 130

T = TypeVar("T")


class _Answer(Protocol):
    """What every answer to a study's table can do."""

    def to_json(self, indent: int | None = None) -> str: ...
    def flat(self) -> Iterable[dict[str, Any]]: ...


A = TypeVar("A", bound=_Answer)

EXITS = """exit status:
  0  done
  1  done, and a limit is broken or met by no candidate
  2  could not run, or could not run in full: what failed is listed"""


class _UsageError(Exception):
    """Arguments that do not go together."""


class _Stopped(Exception):
    """Raised from the progress call to end the work."""


def main(argv: Sequence[str] | None = None) -> int:
    """Run a command.

    Parameters
    ----------
    argv : sequence of str, optional
        Words after the command's name; those of this process when left out.

    Returns
    -------
    int
        0 done, 1 a limit is broken, 2 could not run (in full), 130 interrupted.
    """
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")  # a terminal without µ still gets its table
    try:
        args = _parser().parse_args(argv)
        code: int = args.run(args)
        sys.stdout.flush()
    except KeyboardInterrupt:
        interrupted()
    except BrokenPipeError:
        # whoever read our output has gone; Python would complain once more while closing it
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return FAILED
    except _UsageError as e:
        return _error(str(e))
    except HushrailError as e:
        return _error(str(e))
    except OSError as e:
        return _error(f"{e.filename}: {e.strerror}" if e.filename and e.strerror else str(e))
    return code


def _error(text: str, details: Iterable[str] = ()) -> int:
    print("\n  ".join([f"error: {text}", *details]), file=sys.stderr)
    return FAILED


def interrupted() -> NoReturn:
    """Say so and end the process at once, with status 130."""
    print("interrupted", file=sys.stderr, flush=True)
    # a worker may still be at its last state; nothing of it is wanted any more
    os._exit(INTERRUPTED)


def _parser() -> argparse.ArgumentParser:
    formatter = argparse.RawDescriptionHelpFormatter
    parser = argparse.ArgumentParser(
        prog="hushrail",
        description=(hushrail_doc or "").split("\n")[0],
        epilog=EXITS,
        formatter_class=formatter,
    )
    parser.add_argument("--version", action="version", version=f"hushrail {__version__}")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)

    def command(name: str, run: Callable[[argparse.Namespace], int], text: str) -> argparse.ArgumentParser:
        sub = commands.add_parser(name, help=text, description=text, epilog=EXITS, formatter_class=formatter)
        sub.set_defaults(run=run)
        sub.add_argument("--json", metavar="FILE", help="write the result as JSON; - for standard output")
        sub.add_argument("--csv", metavar="FILE", help="write a table as CSV; - for standard output")
        sub.add_argument("--quiet", action="store_true", help="no tables and no progress")
        return sub

    sub = command("estimate", _estimate, "run a study: domains × schemes × corners")
    sub.add_argument("study", metavar="STUDY.toml", help="the study; paths in it start at its folder")

    for name, run, text in (
        ("awake", _awake, "droop, on-resistance, size and margins that a study's [awake] table asks for"),
        ("keep", _keep, "lowest rails that keep state, as a study's [keep] table asks"),
        ("transitions", _transitions, "falling asleep and waking, as a study's [transition] table asks"),
        ("optimum", _optimum, "best settings of a knob, as a study's [[optimum]] tables ask"),
        ("choose", _choose, "fronts of schemes under limits, as a study's [[choice]] tables ask"),
    ):
        sub = command(name, run, text)
        sub.add_argument("study", metavar="STUDY.toml", help="the study; paths in it start at its folder")

    sub = command("park", _park, "values of a domain's inputs that make it leak least")
    sub.add_argument("study", metavar="STUDY.toml", help="the study; its schemes are not needed")
    sub.add_argument("--domain", metavar="D", help="the domain; the only one when left out")
    sub.add_argument("--corner", metavar="C", help="the corner to judge at (the first)")
    sub.add_argument(
        "--seed", metavar="N", type=int, default=0, help="the same seed gives the same answer (0)"
    )
    sub.add_argument("--flips", metavar="N", type=int, default=2000, help="flips in each of 64 chains (2000)")
    sub.add_argument("--registers", action="store_true", help="choose what registers keep, too")

    sub = command("cells", _cells, "leakage table of a study's cells at its corners")
    sub.add_argument("study", metavar="STUDY.toml", help="the study; its domains and schemes are not needed")
    sub.add_argument(
        "--cell",
        metavar="PATTERN",
        action="append",
        default=[],
        help="cells to take, state by state: a name, * for any run of characters; may be given again",
    )
    _floor(sub)

    sub = command("compare", _compare, "hold predictions against a published leakage table")
    sub.add_argument("study", metavar="STUDY.toml", help="the study; its domains and schemes are not needed")
    sub.add_argument("--table", metavar="T.csv", required=True, help="columns cell, corner, when, leakage_nw")
    sub.add_argument("--corners", metavar="C.csv", help="columns corner, process, temp_c, vdd_v")
    sub.add_argument("--prefix", default="", help="what the netlist puts before the table's cell names")
    sub.add_argument(
        "--worst", metavar="N", type=int, default=10, help="rows to list, furthest off first (10)"
    )
    sub.add_argument(
        "--same-cards",
        metavar="P,Q",
        action="append",
        default=[],
        help="processes of the table made with one card set; may be given again",
    )
    _floor(sub)

    sub = command("count", _count, "instances of a Verilog netlist or DEF layout by master")
    text = "Verilog files or one .def, gzip or not; - for standard input"
    sub.add_argument("netlists", metavar="NETLIST.v", nargs="+", help=text)
    sub.add_argument("--top", metavar="T", help="the top module, where more than one is possible")
    sub.add_argument("--path", metavar="P", default="", help="instance path below the top to count under")
    return parser


def _floor(sub: argparse.ArgumentParser) -> None:
    text = "conductance across every junction, S, to match a table made with one (0)"
    sub.add_argument("--floor", metavar="S", type=float, default=0.0, help=text)


def _estimate(args: argparse.Namespace) -> int:
    _check_outputs(args, [args.study])
    result = watched("points", lambda progress: study.estimate(args.study, progress), quiet=args.quiet)
    _deliver(
        args,
        result.to_json,
        result.rows(),
        notes=result.notes,
        to_text=lambda width: report.of_estimate(result, width, failures=False),
    )
    if result.failures:
        return _error("not every point could be computed", report.of_failures(result.failures))
    return LIMIT if result.broken else OK


def _asked(
    args: argparse.Namespace,
    what: str,
    question: Callable[[str, Progress], A],
    to_text: Callable[[A, int], str],
    notes: Callable[[A], Sequence[Note]] = lambda _: (),
) -> A:
    """Answer a table of the study and deliver what was found."""
    _check_outputs(args, [args.study])
    result = watched(what, lambda progress: question(args.study, progress), quiet=args.quiet)
    _deliver(
        args,
        result.to_json,
        result.flat(),
        notes=notes(result),
        to_text=lambda width: to_text(result, width),
    )
    return result


def _awake(args: argparse.Namespace) -> int:
    def text(result: awake.Report, width: int) -> str:
        return costs.of_awake(result, width, failures=False)

    return _listed_failures(_asked(args, "points", asked.awake, text, lambda r: r.notes).failures)


def _keep(args: argparse.Namespace) -> int:
    def text(result: awake.Kept, width: int) -> str:
        return costs.of_keep(result, width, failures=False)

    return _listed_failures(_asked(args, "cells", asked.keep, text).failures)


def _transitions(args: argparse.Namespace) -> int:
    def text(result: transition.Transitions, width: int) -> str:
        return costs.of_transitions(result, width, failures=False)

    result = _asked(args, "points", asked.transitions, text, lambda r: r.notes)
    broken = any(not p.stress.holds for p in result.points)
    return _listed_failures(result.failures) or (LIMIT if broken else OK)


def _optimum(args: argparse.Namespace) -> int:
    def notes(result: asked.Optima) -> Sequence[Note]:
        return [n for each in result.answers for n in each.notes]

    _asked(args, "corners", asked.optima, costs.of_optima, notes)
    return OK


def _choose(args: argparse.Namespace) -> int:
    def notes(result: asked.Choices) -> Sequence[Note]:
        return [n for each in result.answers for n in each.notes]

    result = _asked(args, "candidates", asked.choices, costs.of_choices, notes)
    return LIMIT if any(each.chosen.infeasible is not None for each in result.answers) else OK


def _park(args: argparse.Namespace) -> int:
    _check_outputs(args, [args.study])
    if args.flips < 0 or args.seed < 0:
        raise _UsageError("--flips and --seed want numbers of zero or more")

    def work(progress: Progress) -> parked.Parked:
        return parked.search(
            args.study,
            args.domain,
            corner=args.corner,
            seed=args.seed,
            flips=args.flips,
            registers=args.registers,
            progress=progress,
        )

    result = watched("steps", work, quiet=args.quiet)
    rows = [
        {"kind": kind, "name": name, "value": value}
        for kind, own in (("net", result.nets), ("register", result.registers))
        for name, value in own.items()
    ]
    _deliver(args, result.to_json, rows, to_text=lambda width: costs.of_parked(result, width))
    return OK


def _listed_failures(failures: Sequence[Failure]) -> int:
    if failures:
        return _error("not everything could be computed", report.of_failures(failures))
    return OK


def _cells(args: argparse.Namespace) -> int:
    _check_outputs(args, [args.study])
    result = watched(
        "cells",
        lambda progress: study.cells(args.study, args.cell, floor_s=args.floor, progress=progress),
        quiet=args.quiet,
    )
    states = bool(args.cell)
    _deliver(
        args,
        result.to_json,
        result.flat(),
        notes=result.notes,
        to_text=lambda width: report.of_table(result, width, states=states, failures=False),
    )
    if result.failures:
        return _error("not every cell could be computed", report.of_failures(result.failures))
    return OK


def _compare(args: argparse.Namespace) -> int:
    inputs = [args.study, args.table] + ([args.corners] if args.corners else [])
    _check_outputs(args, inputs)
    if args.worst < 0:
        raise _UsageError(f"--worst is {args.worst}; want zero or more rows")

    def work(progress: Progress) -> Comparison:
        return study.compare(
            args.study,
            args.table,
            corners=args.corners,
            prefix=args.prefix,
            floor_s=args.floor,
            same_cards=[each.split(",") for each in args.same_cards],
            progress=progress,
        )

    result = watched("rows", work, quiet=args.quiet)
    _deliver(
        args,
        result.to_json,
        result.flat(),
        notes=result.compared.notes,
        to_text=lambda width: report.of_comparison(result, width, worst=args.worst, failures=False),
    )
    lost = len(result.compared.unmatched)
    if lost:
        return _error(f"{lost} rows of the table could not be compared", report.of_unmatched(result))
    return OK


def _count(args: argparse.Namespace) -> int:
    _check_outputs(args, args.netlists)
    result = watched("", lambda _: study.count(args.netlists, top=args.top, path=args.path), quiet=args.quiet)
    _deliver(args, result.to_json, result.flat(), to_text=lambda width: report.of_counts(result, width))
    return OK


def _is_silent(args: argparse.Namespace) -> bool:
    """Whether no table goes to the terminal: asked for, or because data takes standard output."""
    return args.quiet or "-" in (args.json, args.csv)


def _check_outputs(args: argparse.Namespace, inputs: Sequence[str]) -> None:
    """Refuse outputs that cannot be before any long work."""
    wanted = [path for path in (args.json, args.csv) if path is not None]
    if len(wanted) == 2 and wanted[0] == wanted[1]:
        raise _UsageError(f"--json and --csv both write to {wanted[0]}; want two places")
    for path in wanted:
        if path == "-":
            continue
        folder = Path(path).absolute().parent
        if not folder.is_dir():
            raise _UsageError(f"{path}: the folder {folder} does not exist; want a folder that does")
        if Path(path).is_dir():
            raise _UsageError(f"{path}: is a folder; want the name of a file")
        for each in inputs:
            if Path(path).exists() and Path(each).exists() and Path(path).samefile(each):
                raise _UsageError(f"{path}: is an input of this command; want another name to write to")


def _deliver(
    args: argparse.Namespace,
    to_json: Callable[[int], str],
    rows: Iterable[dict[str, Any]],
    *,
    to_text: Callable[[int], str],
    notes: Sequence[Note] = (),
) -> None:
    if args.json is not None:
        _write(args.json, to_json(1) + "\n")
    if args.csv is not None:
        text = io.StringIO()
        _write_csv(text, rows)
        _write(args.csv, text.getvalue())
    if not _is_silent(args):
        print(to_text(terminal_width()))
    elif args.csv is not None and notes:
        # a table of numbers has no place for them
        print(report.of_notes(notes, terminal_width()), file=sys.stderr)


def terminal_width() -> int:
    """Width to lay out for: the terminal's, or COLUMNS, or room enough when a file takes the output."""
    return max(shutil.get_terminal_size((132, 24)).columns, 40)


def _write(path: str, text: str) -> None:
    if path == "-":
        sys.stdout.write(text)
    else:
        Path(path).write_text(text, encoding="utf-8", newline="")


def _write_csv(stream: TextIO, rows: Iterable[dict[str, Any]]) -> None:
    writer = None
    for row in rows:
        if writer is None:
            writer = csv.DictWriter(stream, list(row), lineterminator="\n")
            writer.writeheader()
        writer.writerow(row)


def watched(what: str, work: Callable[[Progress], T], *, quiet: bool = False) -> T:
    """Run work beside this thread and show its progress; Ctrl-C is heard at once whatever the work is at.

    Parameters
    ----------
    what : str
        What is counted, such as ``"points"``.
    work : callable
        Called with a progress call.
    quiet : bool
        No progress; there is none anyway unless standard error is a terminal.
    """
    line = _Line(what) if not quiet and sys.stderr.isatty() else None
    stop = threading.Event()
    kept: list[T] = []
    raised: list[BaseException] = []

    def progress(done: int, total: int) -> None:
        if stop.is_set():
            raise _Stopped
        if line is not None:
            line.show(done, total)

    def body() -> None:
        try:
            kept.append(work(progress))
        except BaseException as e:
            raised.append(e)

    thread = threading.Thread(target=body, daemon=True)
    thread.start()
    try:
        while thread.is_alive():
            thread.join(0.05)
    except KeyboardInterrupt:
        stop.set()
        thread.join(0.3)
        raise
    finally:
        if line is not None:
            line.clear()
    if raised:
        raise raised[0]
    return kept[0]


class _Line:
    """One line on the terminal that is written over."""

    def __init__(self, what: str) -> None:
        self.what = what
        self.start = time.monotonic()
        self.last = self.start
        self.size = 0

    def show(self, done: int, total: int) -> None:
        now = time.monotonic()
        if now - self.last < 0.1 or not total:
            return
        self.last = now
        passed = now - self.start
        text = f"{done} of {total} {self.what}, {passed:.0f} s"
        if 0 < done < total and passed > 2.0:
            text += f", about {passed * (total - done) / done:.0f} s to go"
        self._put(text)

    def clear(self) -> None:
        if self.size:
            self._put("")
            sys.stderr.write("\r")
            sys.stderr.flush()

    def _put(self, text: str) -> None:
        sys.stderr.write("\r" + text.ljust(self.size))
        sys.stderr.flush()
        self.size = len(text)


if __name__ == "__main__":
    sys.exit(main())
