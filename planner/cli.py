"""The command line: options, progress, messages and exit codes; no arithmetic.

Exit codes: 0 done; 1 an input is wrong; 2 the command line is wrong; 3 done, but something demanded
is not met; 130 interrupted. Results go to files or stdout, everything else to stderr.
"""

import json
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Annotated, Any

import typer
from rich.console import Console
from rich.progress import BarColumn, Progress, TaskID, TextColumn, TimeElapsedColumn

from planner import __version__
from planner.errors import InputError, PlannerError, Problem

DONE, INPUT_WRONG, COMMAND_LINE_WRONG, DEMAND_NOT_MET, INTERRUPTED = 0, 1, 2, 3, 130

app = typer.Typer(
    name="planner",
    help="Coverage maps for point-to-multipoint wireless: one plan file in, maps and tables out.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)

PlanArgument = Annotated[Path, typer.Argument(metavar="PLAN", help="The plan file (TOML).")]
JsonOption = Annotated[
    bool, typer.Option("--json", help="Print the same facts as one JSON object.")
]
QuietOption = Annotated[bool, typer.Option("--quiet", help="No progress bar.")]


def _version(value: bool) -> None:
    if value:
        typer.echo(f"ptmp-planner {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    pass


@app.command()
def run(
    plan: PlanArgument,
    out: Annotated[
        Path | None, typer.Option("--out", metavar="DIR", help="Write here, not where PLAN says.")
    ] = None,
    as_json: JsonOption = False,
    quiet: QuietOption = False,
) -> None:
    """Compute the plan and write layers, customer table, map and record.

    Example: planner run demo_sites/harrow_vale/plan.toml
    """
    _run(plan, out, as_json=as_json, quiet=quiet)


@app.command()
def check(plan: PlanArgument, as_json: JsonOption = False) -> None:
    """Read and validate everything, say what a run would compute, compute nothing.

    Example: planner check demo_sites/harrow_vale/plan.toml
    """
    from planner.plan.estimate import run_estimate
    from planner.plan.read import read_plan
    from planner.report import check_record, check_text

    the_plan = read_plan(plan)
    record = check_record(the_plan, run_estimate(the_plan))
    _print(record, check_text, as_json=as_json)
    if record["eirp_above_limit"]:
        raise typer.Exit(DEMAND_NOT_MET)


@app.command()
def profile(
    plan: PlanArgument,
    tower: Annotated[str, typer.Option("--tower", metavar="ID", help="The tower to start from.")],
    to: Annotated[
        str | None, typer.Option("--to", metavar="LAT,LON", help="The far end, WGS 84 degrees.")
    ] = None,
    to_tower: Annotated[
        str | None, typer.Option("--to-tower", metavar="ID", help="The far end is another tower.")
    ] = None,
    height_m: Annotated[
        float | None,
        typer.Option(
            "--height-m",
            min=0.5,
            max=1000.0,
            help="Antenna above ground at the far end; default: the terminal's, or the tower's.",
        ),
    ] = None,
    picture: Annotated[
        Path | None, typer.Option("--picture", metavar="FILE.png", help="Draw the path.")
    ] = None,
    as_json: JsonOption = False,
) -> None:
    """One path: distance, bearings, angles, losses, clearance, received signal.

    Example: planner profile PLAN --tower west --to=-46.21,-121.42 --picture path.png
    """
    from planner.plan.profile import path_report
    from planner.plan.read import read_plan
    from planner.report import profile_text

    if (to is None) == (to_tower is None):
        raise typer.BadParameter("give either --to LAT,LON or --to-tower ID")
    place = None if to is None else _place(to)
    record = path_report(
        read_plan(plan),
        tower_id=tower,
        to_place=place,
        to_tower_id=to_tower,
        height_m=height_m,
        picture=picture,
    )
    _print(record, profile_text, as_json=as_json)
    if record["reason"]:
        _error(f"not computed: {record['reason']}")
        raise typer.Exit(INPUT_WRONG)


@app.command()
def antenna(
    source: Annotated[
        str,
        typer.Argument(
            metavar="FILE|FORMULA|PLAN",
            help="A pattern file, the name of a formula, or a plan (.toml) with --sector.",
        ),
    ],
    settings: Annotated[
        list[str] | None,
        typer.Option("--set", metavar="KEY=VALUE", help="A value, named as in the plan file."),
    ] = None,
    sector: Annotated[
        str | None, typer.Option("--sector", metavar="ID", help="The sector of the plan.")
    ] = None,
    height_m: Annotated[
        float | None,
        typer.Option(
            "--height-m", min=0.5, max=1000.0, help="Antenna above flat ground: where beams land."
        ),
    ] = None,
    downtilt_deg: Annotated[
        float | None,
        typer.Option(
            "--downtilt-deg", min=-45.0, max=45.0, help="Mechanical downtilt; needs --height-m."
        ),
    ] = None,
    picture: Annotated[
        Path | None,
        typer.Option(
            "--picture", metavar="FILE.png", help="Draw the pattern; with a height, the ground."
        ),
    ] = None,
    as_json: JsonOption = False,
) -> None:
    """One antenna: gain, beam, lobes, directivity, field regions, exposure; where its beam lands.

    Example: planner antenna panel.csv --set gain_dbi=17 --height-m 30 --downtilt-deg 4
    """
    from planner.plan.antenna_report import antenna_report
    from planner.plan.antenna_source import settings_from, studied_antenna
    from planner.report_antenna import antenna_text

    for pair in settings or ():
        if "=" not in pair:
            raise typer.BadParameter(f"--set is {pair!r}; needed: KEY=VALUE")
    from_plan = source.lower().endswith(".toml")
    if downtilt_deg is not None and height_m is None and not from_plan:
        raise typer.BadParameter("--downtilt-deg needs --height-m")
    study = studied_antenna(
        source,
        settings_from(settings or ()),
        sector_id=sector,
        antenna_height_m=height_m,
        mechanical_downtilt_deg=downtilt_deg,
    )
    record = antenna_report(study, picture=picture)
    _print(record, antenna_text, as_json=as_json)


@app.command()
def demo(
    out: Annotated[
        Path, typer.Option("--out", metavar="DIR", help="The folder for results.")
    ] = Path("planner_demo"),
    as_json: JsonOption = False,
    quiet: QuietOption = False,
) -> None:
    """Run the demo site that comes with the package; all of it is invented.

    Example: planner demo --out planner_demo
    """
    from planner.plan.demo import demo_plan_path

    _run(demo_plan_path(), out, as_json=as_json, quiet=quiet)


def main() -> None:
    """Run the command line; every error that is the user's to mend becomes a message."""
    try:
        app(standalone_mode=True)
    except InputError as error:
        for problem in error.problems:
            _error(str(problem))
        if len(error.problems) > 1:
            _error(f"{len(error.problems)} problems; nothing was written")
        sys.exit(INPUT_WRONG)
    except PlannerError as error:
        _error(str(error))
        sys.exit(INPUT_WRONG)
    except KeyboardInterrupt:
        _error("interrupted; no file was left half-written")
        sys.exit(INTERRUPTED)


def _run(plan: Path, out: Path | None, *, as_json: bool, quiet: bool) -> None:
    from planner.plan.read import read_plan

    the_plan = read_plan(plan)
    _notice("loading the compiled kernels (the first run after installing compiles them)", quiet)
    from planner.plan.run import run_plan
    from planner.report import run_text

    with _progress(quiet) as report:
        result = run_plan(the_plan, folder=out, progress=report)
    record = {**result.record, "folder": str(result.folder)}
    _print(record, run_text, as_json=as_json)
    for warning in record["warnings"]:
        _error(f"warning: {warning}", prefix="")
    if not result.demands_met:
        _error("a sector is above its EIRP limit: " + ", ".join(record["eirp_above_limit"]))
        raise typer.Exit(DEMAND_NOT_MET)


def _place(text: str) -> tuple[float, float]:
    """Latitude and longitude from "LAT,LON"."""
    parts = text.split(",")
    try:
        latitude, longitude = (float(part) for part in parts)
    except ValueError:
        raise typer.BadParameter(f"--to is {text!r}; needed: LAT,LON in degrees") from None
    problems = []
    if not -90.0 <= latitude <= 90.0:
        advice = "Latitude and longitude swapped?" if abs(longitude) <= 90.0 else ""
        problems.append(
            Problem(
                where="--to", found=f"latitude {latitude:g}", allowed="-90 to 90", advice=advice
            )
        )
    if not -180.0 <= longitude <= 180.0:
        problems.append(
            Problem(where="--to", found=f"longitude {longitude:g}", allowed="-180 to 180")
        )
    if problems:
        raise InputError(problems)
    return latitude, longitude


def _print(record: dict[str, Any], text: Callable[[dict[str, Any]], str], *, as_json: bool) -> None:
    if as_json:
        typer.echo(json.dumps(record, indent=2, ensure_ascii=False, allow_nan=False))
    else:
        typer.echo(text(record))


def _error(message: str, prefix: str = "error: ") -> None:
    typer.echo(prefix + message, err=True)


def _notice(message: str, quiet: bool) -> None:
    if not quiet:
        typer.echo(message, err=True)


@contextmanager
def _progress(quiet: bool) -> Iterator[Callable[[str, float], None] | None]:
    """A bar on stderr for the stage at work; nothing when quiet."""
    if quiet:
        yield None
        return
    columns = (
        TextColumn("{task.description:<24}"),
        BarColumn(bar_width=32),
        TextColumn("{task.percentage:>3.0f} %"),
        TimeElapsedColumn(),
    )
    tasks: dict[str, TaskID] = {}
    with Progress(*columns, console=Console(stderr=True)) as bars:

        def report(stage: str, share: float) -> None:
            if stage not in tasks:
                tasks[stage] = bars.add_task(stage, total=1.0)
            bars.update(tasks[stage], completed=share)

        yield report


if __name__ == "__main__":
    main()
