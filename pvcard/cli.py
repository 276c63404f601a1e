"""The command line: parse, call the public front, print.

Nothing heavy is imported before the words of the command are understood, so that ``--help``
answers at once.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from pvcard import __version__

if TYPE_CHECKING:
    from pvcard.results import Analysis

DONE, WITH_FINDINGS, UNUSABLE = 0, 1, 2
_SEVERITIES = ("note", "watch", "act")
_CSV_PARTS = ("cylinders", "totals", "findings", "repairs")

_EXAMPLES = """examples:
  pvcard analyse reading.csv --machine machine.toml
  pvcard analyse reading.csv --machine machine.toml --format json --output result.json
  pvcard report *.csv --machine machines/ --output report --units us
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command.

    Parameters
    ----------
    arguments : words of the command, those of the process if left out

    Returns
    -------
    status : int
        0 done; 1 done, with findings at or above ``--fail-on``; 2 the input cannot be used.
    """
    options = _parser().parse_args(arguments)
    from pvcard.errors import InputError

    try:
        status: int = options.run(options)
    except InputError as error:
        print(f"pvcard: {error.message()}", file=sys.stderr)
        return UNUSABLE
    except BrokenPipeError:
        sys.stderr.close()
        return DONE
    except KeyboardInterrupt:
        print("pvcard: stopped; nothing more was written", file=sys.stderr)
        return UNUSABLE
    except MemoryError:
        print(
            "pvcard: not enough memory for this input; try fewer exports at once", file=sys.stderr
        )
        return UNUSABLE
    return status


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="pvcard",
        description="Measured cylinder pressure of reciprocating compressors, "
        "turned into decisions.",
        epilog=_EXAMPLES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"pvcard {__version__}")
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    analyse = commands.add_parser(
        "analyse",
        help="compute every quantity of one or more exports",
        description="Compute every quantity of one or more exports, as a table, CSV or JSON.",
    )
    _common(analyse)
    analyse.add_argument(
        "--format",
        choices=("table", "csv", "json"),
        default="table",
        help="form of the result (default: table)",
    )
    analyse.add_argument(
        "--output", metavar="PATH", help="file to write instead of standard output"
    )
    analyse.add_argument(
        "--fail-on",
        choices=(*_SEVERITIES, "never"),
        default="never",
        help="exit with 1 if a finding is at least this severe (default: never)",
    )
    analyse.set_defaults(run=_analyse)
    report = commands.add_parser(
        "report",
        help="write pages and plots a person reads",
        description="Write a folder with one page per recording, and its plots.",
    )
    _common(report)
    report.add_argument("--output", metavar="FOLDER", required=True, help="folder to write")
    report.set_defaults(run=_report)
    return parser


def _common(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("exports", metavar="EXPORT", nargs="+", help="file with measured readings")
    parser.add_argument(
        "--machine",
        required=True,
        metavar="PATH",
        help="machine description, or a folder of them matched by the key 'machine' of the exports",
    )
    parser.add_argument(
        "--columns", metavar="PATH", help="columns.toml, where columns do not describe themselves"
    )
    parser.add_argument(
        "--units",
        choices=("si", "us"),
        default="si",
        help="units of tables and pages; CSV and JSON are always SI (default: si)",
    )


def _analysed(options: argparse.Namespace, *, with_views: bool) -> Analysis:
    from pvcard.analysis import analyse
    from pvcard.analysis.reading import read_with_machines
    from pvcard.progress import Meter

    with Meter() as meter:
        pairs = read_with_machines(
            options.exports, options.machine, columns=options.columns, progress=meter
        )
        return analyse(
            [recording for recording, _ in pairs],
            [machine for _, machine in pairs],
            with_views=with_views,
            progress=meter,
        )


def _analyse(options: argparse.Namespace) -> int:
    from pvcard.tables import as_csv_files, as_json, as_table, write_text

    path = Path(options.output) if options.output else None
    _spare_inputs(options, path)
    analysis = _analysed(options, with_views=False)
    if options.format == "csv":
        files = as_csv_files(analysis)
        if path is None:
            sys.stdout.write(files[""])
        else:
            write_text({_beside(path, suffix): text for suffix, text in files.items()})
    else:
        text = as_json(analysis) if options.format == "json" else as_table(analysis, options.units)
        if path is None:
            sys.stdout.write(text)
        else:
            write_text({path: text})
    _messages(analysis)
    return _status(analysis, options.fail_on)


def _spare_inputs(options: argparse.Namespace, path: Path | None) -> None:
    """Refuse to write the result over one of the files it is made from."""
    from pvcard.errors import InputError

    if path is None:
        return
    targets = [path]
    if getattr(options, "format", "") == "csv":
        targets += [_beside(path, part) for part in _CSV_PARTS]
    inputs = [*options.exports, options.machine, *([options.columns] if options.columns else [])]
    read = {Path(one).resolve() for one in inputs}
    for target in targets:
        if target.resolve() in read:
            raise InputError(
                "the result would overwrite an input",
                file=str(target),
                expected="another file behind --output",
            )


def _beside(path: Path, suffix: str) -> Path:
    if not suffix:
        return path
    stem = path.name.removesuffix(".csv")
    return path.with_name(f"{stem}.{suffix}.csv")


def _messages(analysis: Analysis) -> None:
    """What a reader should know beside the figures, each once."""
    for note in dict.fromkeys(note for one in analysis.recordings for note in one.notes):
        print(f"note: {note}", file=sys.stderr)


def _status(analysis: Analysis, fail_on: str) -> int:
    if fail_on == "never":
        return DONE
    least = _SEVERITIES.index(fail_on)
    found = [finding for one in analysis.recordings for finding in one.findings]
    severe = any(_SEVERITIES.index(finding["severity"]) >= least for finding in found)
    return WITH_FINDINGS if severe else DONE


def _report(options: argparse.Namespace) -> int:
    from pvcard.progress import Meter
    from pvcard.report import write_report

    analysis = _analysed(options, with_views=True)
    with Meter() as meter:
        pages = write_report(
            analysis.recordings, Path(options.output), units=options.units, progress=meter
        )
    _messages(analysis)
    print(f"wrote {len(pages)} page{'s' if len(pages) != 1 else ''}; open {pages[0]}")
    return DONE
