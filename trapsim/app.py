"""The command line: the only place that prints, draws bars and chooses exit codes."""

from __future__ import annotations

import argparse
import json
import logging
import os
import signal
import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO

from trapsim import __version__
from trapsim.errors import FileTrouble, Interrupted, PhysicsRefused, PlanError, TrapsimError

if TYPE_CHECKING:
    from trapsim.plan.plan import Plan
    from trapsim.record.summary import Run

DESCRIPTION = (
    "What trapped cold atoms do when the trap changes: releases, kicks, ramps and lens pulses, from lab settings."
)


def entry_point() -> None:
    """What the installed command calls."""
    sys.exit(main(sys.argv[1:]))


def main(argv: Sequence[str]) -> int:
    """Run one command; returns the exit code.

    0 done, 2 plan or command line wrong, 3 physics refused, 4 a file could not be read or written, 130 interrupted;
    1 is a fault of trapsim itself.
    """
    # matrix products here are small: more than one thread makes them slower
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")
    options = _parser().parse_args(argv)
    for stream in (sys.stdout, sys.stderr):
        stream.reconfigure(errors="backslashreplace")  # what a terminal cannot show must not end a run
    if options.debug:
        logging.basicConfig(level=logging.DEBUG, stream=sys.stderr)
    try:
        code = options.command(options)
        sys.stdout.flush()
    except BrokenPipeError:
        _let_go(sys.stdout)
        return 0
    except Exception as error:
        if options.debug:
            raise
        explained = _explained(error)
        _let_go(sys.stdout)
        print(f"trapsim: {explained}", file=sys.stderr)
        return explained.exit_code
    except KeyboardInterrupt as error:
        print(f"trapsim: {error or 'interrupted'}", file=sys.stderr)
        return Interrupted.exit_code
    return code


def _let_go(stream: TextIO) -> None:
    """Write out what can still be written, and forget the rest, so that Python does not trip over it at its end."""
    try:
        stream.flush()
    except OSError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


def _explained(error: Exception) -> TrapsimError:
    """Whatever went wrong, with its way out."""
    if isinstance(error, TrapsimError):
        return error
    if isinstance(error, MemoryError):
        way_out = 'take fewer numerics.points or numerics.accuracy = "draft"'
        return PhysicsRefused.at("numerics", "", "there is not enough memory", way_out)
    if isinstance(error, OSError):
        got, rule = error.strerror or str(error), "trapsim must be able to read and write here"
        return FileTrouble.at(str(error.filename or "output"), got, rule, "check the place, its space and your leave")
    return TrapsimError(
        f"a fault of trapsim, not of yours: {type(error).__name__}: {error}\n"
        "    -> run it again with --debug, and report what it shows together with the plan"
    )


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="trapsim", description=DESCRIPTION, allow_abbrev=False)
    parser.add_argument("--version", action="version", version=f"trapsim {__version__}")
    commands = parser.add_subparsers(metavar="COMMAND", required=True)

    def command(name: str, about: str, does: Callable[[argparse.Namespace], int]) -> argparse.ArgumentParser:
        sub = commands.add_parser(name, help=about, description=about, allow_abbrev=False)
        sub.set_defaults(command=does)
        sub.add_argument("--debug", action="store_true", help="show a traceback and the log")
        return sub

    check = command("check", "look a plan over: derived quantities, instant prediction, validity, cost", _check)
    run = command("run", "play a plan and write the result folder", _run)
    show = command("show", "print a result, and draw its figures and its page again", _show)
    keys = command("keys", "the plan file's reference", _keys)
    for sub in (check, run):
        sub.add_argument("plan", metavar="PLAN", help="a plan file (TOML)")
        sub.add_argument("--set", metavar="PATH=VALUE", action="append", default=[], dest="changes",
                         help="replace a value of the plan, such as --set \"atoms.number=2e5\"; may be repeated")
        sub.add_argument("--threads", type=int, metavar="N", help="for the transforms")
    run.add_argument("--out", metavar="DIR", help="the result folder (default: results/<plan name>-<key>)")
    run.add_argument("--quiet", action="store_true", help="no progress, no summary")
    run.add_argument("--certify", action="store_true",
                     help="play it once more on a finer grid with shorter steps, and report the true differences beside "
                     "the estimated errors; a result that is there is not computed anew")
    run.add_argument("--force", action="store_true", help="begin anew, and overwrite the result in the folder")
    show.add_argument("result", metavar="RESULT", help="a result folder")
    for sub in (run, show):
        sub.add_argument("--json", action="store_true", help="the summary as JSON on standard output, nothing else")
        sub.add_argument("--no-figures", action="store_true", help="draw no figures and no page")
    keys.add_argument("path", metavar="PATH", nargs="?", help="a table or an entry, such as trap or sequence.ramp")
    keys.add_argument("--schema", action="store_true", help="the JSON schema, for editors")
    return parser


def _plan(options: argparse.Namespace) -> Plan:
    from trapsim.corridor.bounds import ordinary_numbers
    from trapsim.plan.reader import read_plan, settings

    changes = settings(options.changes)
    if options.threads is not None:
        if options.threads < 1:
            raise PlanError.at("--threads", str(options.threads), "a whole number from 1 on", "such as --threads 2")
        changes["numerics.threads"] = options.threads
    with ordinary_numbers(options.plan):
        return read_plan(options.plan, changes)


def _check(options: argparse.Namespace) -> int:
    from trapsim.corridor.bounds import ordinary_numbers, set_up
    from trapsim.estimate.law import scaling_law
    from trapsim.estimate.validity import validity
    from trapsim.prepare.cost import predict
    from trapsim.show.card import check_text

    plan = _plan(options)
    setup = set_up(plan)
    with ordinary_numbers(options.plan):
        law = scaling_law(setup)
        text = check_text(setup, law, validity(setup, law), predict(setup))
    print(text, end="")
    return 0


def _run(options: argparse.Namespace) -> int:
    from trapsim.corridor.folder import default_folder, is_finished
    from trapsim.corridor.run import Silent, run

    if options.out is not None and not options.out.strip():
        raise PlanError.at("--out", '""', "this is the name of a folder", "leave --out out, or name one")
    plan = _plan(options)
    folder = Path(options.out) if options.out else default_folder(plan)
    again = not options.force and is_finished(folder, plan)
    quiet = options.quiet or options.json
    with _Stopper(talk=not options.quiet) as stopper:
        progress = Silent() if quiet else _Bar()
        finished = run(plan, folder, progress=progress, stop=stopper.asked, force=options.force,
                       certify=options.certify)
    if again and not options.quiet:
        print(f"{folder} already holds this plan's result\n", file=sys.stderr if options.json else sys.stdout)
    return _present(finished, options)


def _show(options: argparse.Namespace) -> int:
    from trapsim.corridor.run import open_run

    options.quiet = False
    return _present(open_run(options.result), options)


def _present(run: Run, options: argparse.Namespace) -> int:
    """Print the summary, draw the figures and the page, say where everything is."""
    if options.json:
        print(json.dumps(run.summary.as_dict(), indent=2, allow_nan=False))
    elif not options.quiet:
        from trapsim.show.text import summary_text

        print(summary_text(run.summary), end="")
    where = [str(run.folder)]
    if not options.no_figures:
        from trapsim.record.store import read_run
        from trapsim.show.figures import figures_of, png, write_figures
        from trapsim.show.page import write_page

        kept = read_run(run.folder)
        figures = {name: png(figure) for name, figure in figures_of(kept).items()}
        where += [str(path) for path in write_figures(run.folder, figures)]
        where.append(str(write_page(run.folder, kept, figures)))
    if not options.quiet:
        print("\nResults are in\n  " + "\n  ".join(where), file=sys.stderr if options.json else sys.stdout)
    return 0


def _keys(options: argparse.Namespace) -> int:
    from trapsim.plan.keys import reference, schema

    print(json.dumps(schema(), indent=2) if options.schema else reference(options.path))
    return 0


class _Bar:
    """A progress bar with the stage and the time left."""

    def begin(self, total: float) -> None:
        from tqdm import tqdm

        self._told = False
        self._bar = tqdm(
            total=round(1e3 * total, 9), unit="ms", file=sys.stderr, disable=not sys.stderr.isatty(), leave=False,
            bar_format="{desc:<14} {percentage:3.0f} % |{bar:30}| {n:.2f} of {total:.2f} ms, {remaining} left",
        )  # fmt: skip

    def at(self, time: float, stage: str) -> None:
        now = round(1e3 * time, 9)
        if not self._told:
            self._told = True
            self._bar.initial = self._bar.n = now  # the time left is reckoned from where the run was taken up
        self._bar.set_description_str(stage, refresh=False)
        self._bar.update(now - self._bar.n)

    def end(self) -> None:
        self._bar.close()


class _Stopper:
    """Turns the first Ctrl-C or termination signal into a polite question; a second Ctrl-C is not polite.

    Before anybody asks, nothing has been done that could be saved, and a signal ends the run at once.
    """

    def __init__(self, *, talk: bool) -> None:
        self._talk = talk
        self._asked = False
        self._questioned = False
        self._before: dict[int, Any] = {}

    def asked(self) -> bool:
        self._questioned = True
        return self._asked

    def __enter__(self) -> _Stopper:
        for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
            if number != signal.SIGHUP or signal.getsignal(number) is not signal.SIG_IGN:  # nohup ignores it
                self._before[number] = signal.signal(number, self._hear)
        return self

    def __exit__(self, *exception: object) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)

    def _hear(self, number: int, frame: object) -> None:
        if not self._questioned:
            raise KeyboardInterrupt("interrupted before its first step; the same command begins it again, or goes on")
        if self._asked and number == signal.SIGINT:
            raise KeyboardInterrupt("interrupted at once; the same command goes on from the last state that was saved")
        if self._talk and not self._asked:
            os.write(2, b"\ntrapsim: saving after this step; Ctrl-C again stops at once\n")
        self._asked = True


if __name__ == "__main__":
    entry_point()
