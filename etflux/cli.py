"""The ``etflux`` command: reads arguments, calls the package, turns exceptions into exit codes; nothing else.

Exit codes: 0 good, 1 problems found in the input, 2 usage, 3 cannot read or write, 130 interrupted, 70 a fault of
ours (a report is saved).
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path
from typing import Annotated, Any, Literal

import typer

from etflux import __version__

GOOD, PROBLEMS, USAGE, NO_FILE, FAULT, INTERRUPTED = 0, 1, 2, 3, 70, 130

app = typer.Typer(
    name="etflux",
    help="Crop evapotranspiration by county, and the moisture it adds to the air.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
)


@app.callback(invoke_without_command=True)
def _about(
    version: Annotated[bool, typer.Option("--version", help="Print the version and leave.")] = False,
) -> None:
    if version:
        print(__version__)
        raise typer.Exit(GOOD)


@app.command()
def template(
    file: Annotated[Path, typer.Argument(help="Workbook to make (.xlsx).")],
    units: Annotated[Literal["si", "us"], typer.Option(help="Units of the headings.")] = "si",
    replace: Annotated[bool, typer.Option("--replace", help="Replace FILE if it is there already.")] = False,
) -> None:
    """Make an empty workbook to fill in."""
    from etflux.workbook import write_template

    write_template(file, system=units, replace=replace)
    print(f"Made {file}. Start with its first sheet; then: etflux check {file}")


@app.command()
def check(
    file: Annotated[Path, typer.Argument(help="Filled workbook.")],
    as_json: Annotated[bool, typer.Option("--json", help="Every finding as JSON.")] = False,
) -> None:
    """Look for everything that is wrong or doubtful in a filled workbook, at once."""
    from etflux.findings import has_errors, report
    from etflux.workbook import check as check_workbook

    findings = check_workbook(file)
    if as_json:
        import json

        print(json.dumps([finding.record() for finding in findings], indent=1, ensure_ascii=False))
    else:
        print(report(findings))
    raise typer.Exit(PROBLEMS if has_errors(findings) else GOOD)


@app.command()
def run(
    file: Annotated[Path, typer.Argument(help="Filled workbook.")],
    output: Annotated[Path | None, typer.Option("-o", "--output", help="Folder for the results.")] = None,
    on: Annotated[str | None, typer.Option("--on", help="Day of the brief, as 2031-07-26.")] = None,
    draws: Annotated[
        int | None,
        typer.Option("--draws", min=0, max=10000, help="Random draws for 10, 50 and 90 % bands of what crops added."),
    ] = None,
    quiet: Annotated[bool, typer.Option("-q", "--quiet", help="Print nothing unless something is wrong.")] = False,
) -> None:
    """Compute crop water use and its moisture in the air, and write the brief and the tables."""
    from etflux.job import results_folder, run_workbook, summary_text

    with _progress(quiet) as progress:
        results = run_workbook(file, output=output, on=on, progress=progress, draws=draws)
    if not quiet:
        print(summary_text(results, on=on, folder=results_folder(file, output)))


@app.command()
def draw(
    results: Annotated[Path, typer.Argument(help="Folder of results that etflux run wrote.")],
    show: Annotated[str | None, typer.Option("--show", help="What to show; --list prints the names.")] = None,
    on: Annotated[str | None, typer.Option("--on", help="Day, as 2031-07-26; else the day of the brief.")] = None,
    until: Annotated[str | None, typer.Option("--until", help="Last day, for a sum or mean of days.")] = None,
    county: Annotated[str | None, typer.Option("--county", help="Id of a county.")] = None,
    stand: Annotated[str | None, typer.Option("--stand", help="Id of a stand, for its season.")] = None,
    cover: Annotated[str | None, typer.Option("--cover", help="One cover alone, as corn.")] = None,
    units: Annotated[Literal["si", "us"] | None, typer.Option(help="Units; the run's own if not given.")] = None,
    size: Annotated[Literal["slide", "page"], typer.Option(help="For a screen, or for an upright page.")] = "slide",
    output: Annotated[Path | None, typer.Option("-o", "--output", help="File to write, .svg or .png.")] = None,
    names: Annotated[bool, typer.Option("--list", help="Print what can be shown and leave.")] = False,
) -> None:
    """Draw a map or a figure of results, as SVG or PNG."""
    from etflux.brief.figures import draw_file, names_text

    if names or show is None:
        print(names_text())
        raise typer.Exit(GOOD if names else USAGE)
    look: dict[str, Any] = {"county": county, "stand": stand, "cover": cover, "units": units, "size": size}
    print(f"Drew {draw_file(results, show, on, until=until, output=output, **look)}")


@app.command()
def compare(
    results: Annotated[Path, typer.Argument(help="Folder that a run has written.")],
    measurements: Annotated[
        Path, typer.Argument(help="CSV with place, date, quantity, value, unit; optional uncertainty, series.")
    ],
    output: Annotated[Path | None, typer.Option("-o", "--output", help="Folder for the comparison.")] = None,
) -> None:
    """Hold a run against measurements: agreement by month, growth stage and season, tables and figures."""
    from etflux.compare import compare as compare_run
    from etflux.compare import read_measurements, summary_text, write_comparison
    from etflux.results import read_folder

    run_results = read_folder(results)
    found = compare_run(run_results, read_measurements(measurements))
    folder = write_comparison(run_results, found, output or results / "comparison")
    print(summary_text(found, folder))


class _progress:  # noqa: N801 - reads as a statement: with _progress(quiet) as progress
    """Show how far the work is on standard error; on a terminal as one moving line, else nothing."""

    def __init__(self, quiet: bool) -> None:
        self.quiet = quiet or not sys.stderr.isatty()

    def __enter__(self) -> Callable[[str, float], None]:
        if self.quiet:
            return lambda step, share: None
        from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

        self._bar = Progress(
            TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn(), transient=True, console=_stderr()
        )
        self._bar.start()
        task = self._bar.add_task("reading", total=1.0)
        return lambda step, share: self._bar.update(task, description=step, completed=share)

    def __exit__(self, *error: object) -> None:
        if not self.quiet:
            self._bar.stop()


def _stderr() -> Any:
    from rich.console import Console

    return Console(stderr=True)


def main(arguments: list[str] | None = None) -> None:
    """Entry point of the command: run it and leave with its exit code."""
    sys.exit(_exit_code(sys.argv[1:] if arguments is None else arguments))


def _exit_code(arguments: list[str]) -> int:
    from etflux.findings import CannotRead, CannotWrite, ProblemsFound

    try:
        code = app(args=arguments, prog_name="etflux", standalone_mode=False)
    except typer.TyperException as error:
        if error.format_message():
            print(f"etflux: {error.format_message()}", file=sys.stderr)
        print("etflux --help lists the commands, etflux COMMAND --help their options.", file=sys.stderr)
        return USAGE
    except ProblemsFound as problems:
        print(problems, file=sys.stderr)
        return PROBLEMS
    except (CannotRead, CannotWrite) as error:
        print(f"etflux: {error}", file=sys.stderr)
        return NO_FILE
    except (KeyboardInterrupt, typer.Abort):
        print("etflux: interrupted; nothing half-written is left", file=sys.stderr)
        return INTERRUPTED
    except Exception:
        print(f"etflux: a fault of ours, not of your file. Report saved: {_save_report(arguments)}", file=sys.stderr)
        return FAULT
    return code if isinstance(code, int) else GOOD


def _save_report(arguments: list[str]) -> str:
    import platform
    import tempfile
    import traceback

    with tempfile.NamedTemporaryFile(
        "w", prefix="etflux-report-", suffix=".txt", delete=False, encoding="utf-8"
    ) as report:
        report.write(f"etflux {__version__}, Python {platform.python_version()}, {platform.platform()}\n")
        report.write(f"arguments: {arguments}\n\n{traceback.format_exc()}")
    return report.name


if __name__ == "__main__":
    main()
