"""The command line: arguments, exit statuses, and what is printed. Heavy imports wait until a command needs them."""

import argparse
import shlex
import signal
import sys
from collections.abc import Callable, Sequence
from pathlib import Path

from sweep import __version__
from sweep.base.errors import SweepError
from sweep.cli.terminal import Terminal

DONE, SOME_FAILED, WRONG, INTERRUPTED, SURROUNDINGS = range(5)
_EPILOG = """exit status: 0 done; 1 done, but points failed or a limit does not hold in `batch`; 2 the study or the call is wrong;
3 interrupted, `run` goes on where it stopped; 4 the surroundings failed (disk, lock, damaged store, closed output).

The program screens; it does not approve: figures rest on the kinetics given, hazards need calorimetric testing and a review by qualified
people under local codes."""


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        "sweep", description="Design-space sweep of batch and fed-batch chemical reactors from one study file.", epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )  # fmt: skip
    parser.add_argument("--version", action="version", version=f"sweep {__version__}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")
    new = commands.add_parser("new", help="write a commented starting study that runs as it is")
    new.add_argument("file", metavar="FILE", help="where to write it; an existing file is never overwritten")
    check = commands.add_parser("check", help="read and validate a study, and say what was understood; nothing is marched or written")
    check.add_argument("study", metavar="STUDY", help="a study file (TOML)")
    batch = commands.add_parser("batch", help="one batch: profile, figures, each limit with its margin")
    batch.add_argument("study", metavar="STUDY", help="a study file (TOML)")
    batch.add_argument(
        "--set", action="append", default=[], metavar="NAME=VALUE", dest="settings",
        help='a variable, an uncertain input or a dotted path of the study, with its unit: --set dosing_time="2 h" (repeatable)',
    )  # fmt: skip
    batch.add_argument("--data", metavar="FILE.csv", help="a measured batch, units in the header (time [min], temperature [degC], ...), laid over it")
    batch.add_argument("--no-figures", action="store_true", help="write the tables only")
    run = commands.add_parser("run", help="all that the study asks for; goes on where an interrupted run stopped")
    run.add_argument("study", metavar="STUDY", help="a study file (TOML)")
    run.add_argument("--workers", type=int, metavar="N", help="how many cores (default: all)")
    run.add_argument("--fresh", action="store_true", help="move earlier results aside and start again")
    report = commands.add_parser("report", help="figures and report again, from stored results")
    report.add_argument("folder", metavar="FOLDER", help="a results folder")
    for command in (batch, run):
        command.add_argument("--out", metavar="FOLDER", help="where results go (default: results/<the study file's name>/)")
    for command in (new, check, batch, run, report):
        command.add_argument("--quiet", action="store_true", help="print results and errors only")
    return parser


def _new(options: argparse.Namespace, terminal: Terminal) -> int:
    from sweep.workflow.starter import new_study

    path = new_study(Path(options.file))
    typed = shlex.quote(str(path)) if sys.platform != "win32" else f'"{path}"'
    terminal.line(f"{path} written. Next: sweep check {typed}, then sweep run {typed}")
    return DONE


def _check(options: argparse.Namespace, terminal: Terminal) -> int:
    from sweep.study import read_study
    from sweep.workflow.check import told

    study = read_study(options.study)
    parts = told(study)  # before anything is printed: a list of points may have faults of its own
    terminal.title(study.title)
    for heading, lines in parts:
        terminal.heading(heading)
        for line in lines:
            terminal.item(line)
    terminal.warnings(study)
    terminal.line(f"\nno faults, {len(study.warnings)} warning{'' if len(study.warnings) == 1 else 's'}")
    return DONE


def _settings(texts: Sequence[str]) -> dict[str, str]:
    """Return NAME=VALUE options as a mapping; SweepError where one has no equals sign or comes twice."""
    found: dict[str, str] = {}
    for text in texts:
        name, sign, value = text.partition("=")
        if not sign or not name.strip():
            raise SweepError(f'--set: found {text!r}, expected NAME=VALUE such as dosing_time="2 h"')
        if name.strip() in found:
            raise SweepError(f"--set: {name.strip()} is set twice")
        found[name.strip()] = value.strip()
    return found


def _batch(options: argparse.Namespace, terminal: Terminal) -> int:
    from sweep.cli.tell_batch import tell_batch
    from sweep.study import read_study

    study = read_study(options.study)
    terminal.warnings(study)
    terminal.compiling()
    from sweep.workflow.batch import batch

    found = batch(study, _settings(options.settings), options.out, not options.no_figures, options.data)
    tell_batch(found, terminal)
    return DONE if found.seen.row["status"] == "done" and found.seen.holds else SOME_FAILED


def _run(options: argparse.Namespace, terminal: Terminal) -> int:
    from sweep.cli.tell_run import tell_run
    from sweep.study import read_study

    study = read_study(options.study)
    terminal.warnings(study)
    terminal.compiling()
    from sweep.workflow.run import run

    found = run(study, options.out, options.workers, options.fresh, terminal.progress, terminal.note)
    tell_run(found, study, terminal)
    return SOME_FAILED if found.summary["points"]["failed"] else DONE


def _report(options: argparse.Namespace, terminal: Terminal) -> int:
    from sweep import report

    terminal.line(f"{report.make(Path(options.folder))} written")
    return DONE


_COMMANDS: dict[str, Callable[[argparse.Namespace, Terminal], int]] = {
    "new": _new, "check": _check, "batch": _batch, "run": _run, "report": _report,
}  # fmt: skip


def _stop(number: int, frame: object) -> None:
    """End like Ctrl-C when the process is asked to, or its terminal is gone."""
    raise KeyboardInterrupt


def _listen() -> None:
    for name in ("SIGTERM", "SIGHUP") if sys.platform != "win32" else ():
        if signal.getsignal(getattr(signal, name)) is not signal.SIG_IGN:  # which is how nohup starts a program
            signal.signal(getattr(signal, name), _stop)


def _hush() -> None:
    """Let no further signal disturb the last words of a program that is ending anyway."""
    for name in ("SIGINT", "SIGTERM", "SIGHUP"):
        if hasattr(signal, name):
            signal.signal(getattr(signal, name), signal.SIG_IGN)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command; return its exit status."""
    terminal, command = Terminal(), ""
    try:
        try:
            options = _parser().parse_args(arguments)
            terminal.quiet, command = options.quiet, options.command
            _listen()
            return _COMMANDS[command](options, terminal)
        finally:
            terminal.close()
    except SweepError as error:
        terminal.error(str(error))
        return error.exit_status
    except KeyboardInterrupt:
        _hush()
        again = " The points that are done stay; the same command goes on where it stopped." if command == "run" else ""
        terminal.error(f"interrupted.{again}")
        return INTERRUPTED
    except OSError as error:
        if error.filename is None and error.errno is None:
            raise
        terminal.error(f"{error.filename or 'the system'}: {error.strerror or error}")
        return SURROUNDINGS


if __name__ == "__main__":
    sys.exit(main())
