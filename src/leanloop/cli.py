"""The command line: arguments, files, exit status."""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import NoReturn

from leanloop import __version__, limits
from leanloop.errors import Fault, InputError, LeanloopError, MissingExtra
from leanloop.output import catalogue, content_limits, html, json, tables, text
from leanloop.output.progress import Progress
from leanloop.pictures import gather
from leanloop.sizing.scan import size
from leanloop.studies.read import study as declared
from leanloop.textfile.reader import read
from leanloop.textfile.writer import with_inputs

LONG = "looking for the limits; where there is no plain curve this solves with more and more stages"
REACHED, NOT_REACHED, WRONG_INPUT = 0, 1, 2


class _Parser(argparse.ArgumentParser):
    """A parser that says what is wrong in the same form as everything else."""

    def error(self, message: str) -> NoReturn:
        raise InputError([Fault("command line", message, f"see {self.prog} --help")])


def _parser() -> argparse.ArgumentParser:
    parser = _Parser(prog="leanloop", description="Absorber and stripper on one circulating solvent.")
    parser.add_argument("--version", action="version", version=f"leanloop {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True, parser_class=_Parser)
    solve = _command(commands, "solve", "solve a flowsheet and report it")
    solve.add_argument("--json", metavar="PATH", help="write the result as JSON; - for standard output, and nothing else there")
    solve.add_argument("--tables", metavar="DIR", help="write streams, profiles, units and balance as CSV files into a directory")
    solve.add_argument("--pictures", metavar="DIR", help="draw flowsheet, stages, profiles, window, convergence into a directory")
    solve.add_argument("--report", metavar="FILE.html", help="write report, limits and pictures as one page that can be printed")
    check = _command(commands, "check", "read a flowsheet and show its order, loops and tears; solve nothing", changes=False)
    check.add_argument("--json", metavar="PATH", help="write what was found as JSON; - for standard output")
    limited = _command(commands, "limits", "least and most solvent, least stripping gas, where each column pinches and how")
    limited.add_argument("--json", metavar="PATH", help="write the limits as JSON; - for standard output, and nothing else there")
    study = _command(commands, "study", "carry out a study that the file declares; run again, it goes on where it stopped")
    study.add_argument("name", metavar="NAME", nargs="?", help="the study; all of them by default")
    study.add_argument("--out", metavar="DIR", required=True, help="directory that keeps every batch, for tables and pictures too")
    study.add_argument("--workers", metavar="N", type=int, default=1, help="processes that calculate")
    study.add_argument("--cluster", metavar="ADDRESS", help="scheduler of a dask.distributed cluster that calculates")
    sized = _command(commands, "size", "size absorber and stripper together over a scan of designs")
    sized.add_argument("--json", metavar="PATH", help="write all designs as JSON; - for standard output, and nothing else there")
    sized.add_argument("--tables", metavar="DIR", help="write all designs as a CSV file into a directory")
    sized.add_argument("--pictures", metavar="DIR", help="draw contours over the stages and the Pareto set into a directory")
    sized.add_argument("--write", metavar="FILE", help="write the design chosen as a flowsheet file")
    draw = _command(commands, "draw", "solve a flowsheet and draw its pictures")
    draw.add_argument("--out", metavar="DIR", required=True, help="directory for the pictures, SVG and PNG")
    commands.add_parser("catalogue", help="list installed unit kinds, equilibrium models and recycle methods")
    return parser


def _command(commands: argparse._SubParsersAction, name: str, what: str, changes: bool = True) -> argparse.ArgumentParser:
    """Add a command that reads a flowsheet."""
    command = commands.add_parser(name, help=what, description=what[:1].upper() + what[1:] + ".")
    command.add_argument("file", metavar="FILE", help="flowsheet file (TOML)")
    if changes:
        command.add_argument(
            "--set", dest="settings", action="append", default=[], metavar="ADDRESS=VALUE", help="change an entry of the file"
        )
    return command


def _solve(arguments: argparse.Namespace) -> int:
    result = read(arguments.file, arguments.settings).solve()
    written = text.report(result)
    files = tables.texts(result.to_dict(), arguments.tables) if arguments.tables else {}
    if arguments.json and arguments.json != "-":
        files[Path(arguments.json)] = json.text(result.to_dict())
    if arguments.pictures or arguments.report:
        _tell(LONG)
    found = limits(result) if arguments.pictures or arguments.report else None
    shown = []
    if arguments.pictures:
        shown = gather.pictures(result, found)
        files.update(gather.files(shown, arguments.pictures))
    if arguments.report:
        missing = ""
        try:
            shown = shown or gather.pictures(result, found)
        except MissingExtra as error:
            missing = f"No pictures: {error}."
            sys.stderr.write(f"{arguments.report}: without pictures: {error}\n")
        extra = content_limits.limits_sections(found, alone=False)
        files[Path(arguments.report)] = html.page(result, extra, gather.inline(shown), missing, __version__)
    tables.put(files, arguments.tables, arguments.pictures)
    sys.stdout.write(json.text(result.to_dict()) if arguments.json == "-" else written)
    return REACHED if result.converged else NOT_REACHED


def _tell(words: str) -> None:
    """Say on a terminal, and nowhere else, what takes long."""
    if sys.stderr.isatty():
        sys.stderr.write(f"{words}\n")


def _limits(arguments: argparse.Namespace) -> int:
    result = read(arguments.file, arguments.settings).solve()
    _tell(LONG)
    found = limits(result)
    written = text.limits(found)
    if arguments.json and arguments.json != "-":
        tables.put({Path(arguments.json): json.text(found.to_dict())})
    sys.stdout.write(json.text(found.to_dict()) if arguments.json == "-" else written)
    return REACHED if result.converged else NOT_REACHED


def _draw(arguments: argparse.Namespace) -> int:
    result = read(arguments.file, arguments.settings).solve()
    _tell(LONG)
    files = gather.files(gather.pictures(result), arguments.out)
    tables.put(files, arguments.out)
    sys.stdout.write(f"{result.sheet.title or 'Flowsheet'}: {result.status}. {result.status_text}\n")
    sys.stdout.write("".join(f"  {path}\n" for path in files))
    return REACHED if result.converged else NOT_REACHED


def _size(arguments: argparse.Namespace) -> int:
    sheet = read(arguments.file, arguments.settings)
    progress = Progress("designs", sys.stderr)
    try:
        found = size(sheet, progress=progress.counted)
    finally:
        progress.end()
    written = text.designs(found)
    files: dict[Path, str | bytes] = dict(tables.of_designs(found, arguments.tables)) if arguments.tables else {}
    if arguments.json and arguments.json != "-":
        files[Path(arguments.json)] = json.text(found.to_dict())
    if arguments.pictures:
        files.update(gather.files(gather.of_designs(found), arguments.pictures))
    if arguments.write and found.chosen is None:
        sys.stderr.write(f"{arguments.file}: no design could be chosen: {arguments.write} is not written\n")
    elif arguments.write:
        inputs = {key: (value, sheet.sorts[key]) for key, value in found.settings(found.chosen).items()}
        title = f"design {found.chosen}"
        files[Path(arguments.write)] = with_inputs(arguments.file, arguments.settings, inputs, title, found.sheet.requirements)
    tables.put(files, arguments.tables, arguments.pictures)
    sys.stdout.write(json.text(found.to_dict()) if arguments.json == "-" else written)
    return REACHED if found.good.any() and found.chosen is not None else NOT_REACHED


def _study(arguments: argparse.Namespace) -> int:
    if arguments.workers < 1:
        raise InputError([Fault("--workers", f"{arguments.workers} is no number of processes", "write 1 or more")])
    if arguments.cluster and arguments.workers > 1:
        raise InputError([Fault("--workers", "stands beside --cluster", "keep one of the two")])
    sheet = read(arguments.file, arguments.settings)
    names = [arguments.name] if arguments.name else list(sheet.given["studies"] or {})
    if not names:
        raise InputError([Fault("studies", "the file declares no study", "add [studies.NAME] with change = { ... }")])
    studies = [declared(sheet, name) for name in names]  # all are read before any is begun
    reached = True
    for place, item in enumerate(studies):
        progress = Progress(item.name, sys.stderr)
        try:
            found = item.run(arguments.out, workers=arguments.workers, cluster=arguments.cluster, progress=progress)
        except KeyboardInterrupt:
            progress.end()
            sys.stderr.write(f"{arguments.file}: interrupted; finished batches are kept, the same command goes on from there\n")
            return NOT_REACHED
        finally:
            progress.end()
        written = text.findings(found)
        files: dict[Path, str | bytes] = dict(tables.of_study(found, arguments.out))
        files[Path(arguments.out) / f"{item.name}.txt"] = written
        try:
            files.update(gather.files(gather.of_study(found), arguments.out))
        except MissingExtra as error:
            sys.stderr.write(f"{arguments.file}: without pictures: {error}\n")
        tables.put(files, arguments.out)
        sys.stdout.write(("\n" if place else "") + written)
        reached = reached and found.reached
    return REACHED if reached else NOT_REACHED


def _check(arguments: argparse.Namespace) -> int:
    sheet = read(arguments.file)
    found = sheet.check()
    written = text.structure(sheet, found)
    if arguments.json and arguments.json != "-":
        tables.put({Path(arguments.json): json.text(found)})
    sys.stdout.write(json.text(found) if arguments.json == "-" else written)
    return REACHED


def _catalogue(arguments: argparse.Namespace) -> int:
    sys.stdout.write(catalogue.catalogue())
    return REACHED


COMMANDS = {
    "solve": _solve,
    "check": _check,
    "limits": _limits,
    "size": _size,
    "study": _study,
    "draw": _draw,
    "catalogue": _catalogue,
}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the process by default.

    Returns
    -------
    int
        0 everything was reached, 1 the numbers did not get there, 2 the input is wrong.
    """
    source = "leanloop"
    if sys.stdout is None or sys.stderr is None:  # closed by the shell: nobody reads
        silent = open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115 - lives as long as the process
        sys.stdout, sys.stderr = sys.stdout or silent, sys.stderr or silent
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):  # a terminal that lacks a letter shows its code
            stream.reconfigure(errors="backslashreplace")
    try:
        parsed = _parser().parse_args(arguments)
        source = getattr(parsed, "file", source)
        code = COMMANDS[parsed.command](parsed)
        sys.stdout.flush()
        return code
    except InputError as error:
        for fault in error.faults:
            sys.stderr.write(f"{error.source or source}: {_one_line(str(fault))}\n")
        return WRONG_INPUT
    except LeanloopError as error:
        sys.stderr.write(f"{source}: {_one_line(str(error))}\n")
        return WRONG_INPUT
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return NOT_REACHED
    except OSError as error:
        name = error.filename if error.filename is not None else "output"
        sys.stderr.write(f"{source}: {name}: cannot be written: {error.strerror}; name a place that can\n")
        return WRONG_INPUT
    except KeyboardInterrupt:
        sys.stderr.write(f"{source}: interrupted\n")
        return NOT_REACHED


def _one_line(message: str) -> str:
    return " ".join(message.split())
