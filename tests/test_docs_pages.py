"""Pages of the documentation that a program can check against the project."""

import re
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
PAGES = sorted(p for p in (*ROOT.glob("docs/*.md"), *ROOT.glob("demo_sites/**/*.md")))
LINK = re.compile(r"\]\(([^)\s]+)\)")


def package_name(requirement: str) -> str:
    return re.split(r"[<>=!~\[; ]", requirement, maxsplit=1)[0]


def test_every_dependency_is_explained():
    """docs/dependencies.md has a row for every package that pyproject.toml asks for."""
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    asked = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    page = (ROOT / "docs/dependencies.md").read_text(encoding="utf-8")
    first_cells = re.findall(r"^\| ([^|]+) \|", page, flags=re.MULTILINE)
    explained = {name for cell in first_cells for name in cell.split(", ")}
    assert {package_name(text) for text in asked} - explained == set()


def test_the_changelog_names_this_version():
    """The newest heading of the changelog is the version of pyproject.toml."""
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    page = (ROOT / "docs/changelog.md").read_text(encoding="utf-8")
    assert project["version"] == re.findall(r"^## (\S+)", page, flags=re.MULTILINE)[0]


@pytest.mark.parametrize("page", PAGES, ids=lambda page: str(page.relative_to(ROOT)))
def test_links_between_pages_lead_somewhere(page):
    """Every link to a file of the project finds it."""
    targets = LINK.findall(page.read_text(encoding="utf-8"))
    local = [t.split("#")[0] for t in targets if not re.match(r"[a-z]+:|#", t)]
    assert [target for target in local if not (page.parent / target).exists()] == []


def test_the_page_of_antenna_figures_names_every_setting_and_limit():
    """What --set takes beside the antenna's own keys, and the limits as the program has them."""
    from planner.physics.exposure_limits import EXPOSURE_LIMITS
    from planner.plan.antenna_source import SETTABLE
    from planner.plan.schema import AntennaTable

    page = (ROOT / "docs/antenna-figures.md").read_text(encoding="utf-8")
    own = set(SETTABLE) - set(AntennaTable.model_fields) | {"gain_dbi", "largest_dimension_m"}
    assert {key for key in own if f"`{key}`" not in page} == set()
    for limit in EXPOSURE_LIMITS:
        cells = []
        for (mhz, fixed, slope), unit in zip(limit.bands, (1.0, 1e3, 1e3), strict=True):
            level = f"f/{round(1.0 / slope)}" if slope else f"{fixed:g}"
            cells.append(f"{level}, to {mhz / unit:g} {'MHz' if unit == 1.0 else 'GHz'}")
        row = f"| {limit.guideline}, {limit.people} | {' | '.join(cells)} | "
        assert row + f"{limit.averaging_minutes:g} min |" in page
