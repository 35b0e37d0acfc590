"""The command `geoves`: it parses, calls and says how it went."""

import argparse
import io
import os
import sys
import tempfile
import traceback
import warnings
from collections.abc import Sequence
from importlib import metadata
from pathlib import Path

from geoves.errors import FormatError, GeovesError, InputError

DONE, NOT_DONE, WRONG_INPUTS = 0, 1, 2

_CAUTION = (
    "Resistivity is reconnaissance: it decides no well, yield or potable water. Drill test holes, follow local codes, "
    "and have a licensed professional answer for the result."
)


def main(arguments: Sequence[str] | None = None) -> int:
    """The exit status: 0 done, 1 the job could not be done, 2 the inputs or the call are wrong."""
    if isinstance(sys.stdout, io.TextIOWrapper):
        sys.stdout.reconfigure(errors="replace")  # a name that the terminal cannot show stops nothing
    if not sys.warnoptions:
        warnings.simplefilter("ignore")  # of libraries, to their users; what a person should know is said in words
    parsed = _build_parser().parse_args(arguments)
    try:
        _call(parsed)
    except (Exception, KeyboardInterrupt) as error:  # noqa: BLE001 - the last resort: no traceback reaches a person
        for line in _explain(error):
            print(line, file=sys.stderr)
        return WRONG_INPUTS if isinstance(error, InputError | FormatError) else NOT_DONE
    return DONE


def _explain(error: BaseException) -> Sequence[str]:
    """What to say of the error, line by line."""
    if isinstance(error, InputError):
        return error.lines
    if isinstance(error, GeovesError):
        return [str(error)]
    if isinstance(error, KeyboardInterrupt):
        return ["Stopped before the end; the job was not done."]
    if isinstance(error, MemoryError):
        return ["The machine's memory is not enough; use a larger cell_size."]
    if isinstance(error, BrokenPipeError):
        sys.stdout = Path(os.devnull).open("w", encoding="utf-8")  # noqa: SIM115 - else Python complains at its end
        return ["Nobody reads the output any more; the job was not done."]
    return [f"An error of geoves's own ({type(error).__name__}); it is kept in {_keep(error)}"]


def _build_parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="geoves",
        description="From soundings, wells and a resistivity template to GIS layers of a buried valley.",
        epilog=_CAUTION,
    )
    parser.add_argument("--version", action="version", version=f"geoves {_version()}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")
    run = commands.add_parser("run", help="do the whole job: from the tables to the delivery folder")
    run.add_argument("region", type=Path, metavar="REGION.toml")
    run.add_argument("--out", type=Path, metavar="FOLDER", help="default: delivery, beside REGION.toml")
    where = run.add_mutually_exclusive_group()
    where.add_argument(
        "--workers", type=_count, metavar="N", help="processes on this machine; default: its cores, four at most"
    )
    where.add_argument("--scheduler", metavar="ADDRESS", help="work on the Dask cluster whose scheduler is there")
    run.add_argument("--afresh", action="store_true", help="compute all anew, and remember nothing for a next run")
    check = commands.add_parser(
        "check", help="only check the inputs, and write what was found to check/check.html and check.csv"
    )
    check.add_argument("region", type=Path, metavar="REGION.toml")
    plan = commands.add_parser("plan", help="say where the next sounding or test hole would lower the doubt most")
    plan.add_argument("region", type=Path, metavar="REGION.toml")
    plan.add_argument("--out", type=Path, metavar="FOLDER", help="default: plan, beside REGION.toml")
    plan.add_argument("--places", type=_count, metavar="N", help="how many; default: as [plan] says, or 10")
    for command in (run, check, plan):
        command.add_argument("--quiet", action="store_true", help="say nothing but what is wrong")
    new = commands.add_parser("new", help="write a region folder to begin with")
    new.add_argument("folder", type=Path, metavar="FOLDER")
    return parser


def _count(text: str) -> int:
    """A whole number above 0."""
    if not text.isdecimal() or int(text) < 1:
        raise argparse.ArgumentTypeError(f"{text!r}; expected a whole number above 0")
    return int(text)


def _version() -> str:
    try:
        return metadata.version("geoves")
    except metadata.PackageNotFoundError:
        return "(not installed)"


def _call(parsed: argparse.Namespace) -> None:
    """Do what was asked. The work is imported here: help and version are wanted at once."""
    if parsed.command == "new":
        from geoves.reading.starter_folder import write_starter  # noqa: PLC0415

        for line in write_starter(parsed.folder):
            print(line)
        return
    from geoves.cli.progress import choose_progress  # noqa: PLC0415

    progress = choose_progress(quiet=parsed.quiet)
    if parsed.command == "run":
        from geoves.project.run import run  # noqa: PLC0415

        how = {"workers": parsed.workers, "scheduler": parsed.scheduler, "afresh": parsed.afresh}
        summary = run(parsed.region, parsed.out, progress, **how)
    elif parsed.command == "plan":
        from geoves.project.plan import plan  # noqa: PLC0415

        summary = plan(parsed.region, parsed.out, parsed.places, progress)
    else:
        from geoves.project.check import check  # noqa: PLC0415

        summary = check(parsed.region, progress)
    if not parsed.quiet:
        for line in summary.lines:
            print(line)


def _keep(error: BaseException) -> str:
    """Write the error's traceback to a file that stays; returns its path."""
    trace = "".join(traceback.format_exception(error))
    with tempfile.NamedTemporaryFile("w", encoding="utf-8", prefix="geoves-", suffix=".log", delete=False) as log:
        log.write(f"geoves {_version()}, Python {sys.version}\n{trace}")
    return log.name


if __name__ == "__main__":
    sys.exit(main())
