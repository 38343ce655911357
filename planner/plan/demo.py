"""The demo site that comes with the package."""

from pathlib import Path

from planner.errors import PlanError, Problem

SITE = "harrow_vale"


def demo_plan_path() -> Path:
    """Plan file of the demo site: beside the modules when installed, else in the source tree."""
    package = Path(__file__).resolve().parents[1]
    for sites in (package / "demo_sites", package.parent / "demo_sites"):
        plan = sites / SITE / "plan.toml"
        if plan.is_file():
            return plan
    raise PlanError(
        Problem(
            where=str(package / "demo_sites" / SITE / "plan.toml"),
            found="no such file",
            advice="Install the package again; the demo site is part of it",
        )
    )
