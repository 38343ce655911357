"""The layers of a run as files: names, descriptions, units, tags, colours."""

from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np

from planner import __version__
from planner.coverage import Coverage
from planner.handout.colours import rgb, sector_colours
from planner.io.geotiff import write_layer
from planner.network import Sector
from planner.plan.read import Plan
from planner.sweep import PathField
from planner.terrain import Grid, Terrain

MODEL = (
    "free space ITU-R P.525-4 + delta-Bullington diffraction ITU-R P.526-15, "
    "smooth surface ITU-R P.1812-7"
)


def layer_tags(plan: Plan, sectors: Sequence[Sector]) -> dict[str, str]:
    """What every GeoTIFF says about how it was made."""
    frequencies = sorted({sector.radio.frequency_mhz for sector in sectors})
    return {
        "SOFTWARE": f"ptmp-planner {__version__}",
        "PLAN": plan.name,
        "PLAN_SHA256": plan.hash,
        "MODEL": MODEL,
        "FREQUENCY_MHZ": ", ".join(f"{frequency:g}" for frequency in frequencies),
        "K_FACTOR": f"{plan.k_factor:g}",
        "POLARIZATION": plan.polarization,
        "RECEIVER_HEIGHT_M": f"{plan.terminal.antenna_height_m:g}",
        "RADIUS_M": f"{plan.radius_m:g}",
        "CAUTION": "a prediction, not a licence, a survey or a promise",
    }


def write_coverage_layers(
    folder: Path, plan: Plan, grid: Grid, coverage: Coverage, sectors: Sequence[Sector]
) -> list[str]:
    """Write the coverage layers that the plan asks for; names of the files written."""
    tags = layer_tags(plan, sectors)
    written = []
    if "received_signal" in plan.layers:
        write_layer(
            folder / "received_signal.tif",
            coverage.received_signal_dbm,
            grid,
            description="received signal of the best server at the terminal's port",
            unit="dBm",
            nodata=float("nan"),
            tags=tags,
        )
        written.append("received_signal.tif")
    if "best_server" in plan.layers:
        hues = sector_colours(coverage.best_server, len(sectors))
        colours = {0: (0, 0, 0, 0)}
        for number, colour in enumerate(hues, start=1):
            colours[number] = (*rgb(colour), 255)
        write_layer(
            folder / "best_server.tif",
            coverage.best_server,
            grid,
            description="best server: -1 no data, 0 none above the threshold, sectors from 1",
            unit="",
            nodata=-1,
            tags=tags,
            categories=["none above the threshold", *(sector.id for sector in sectors)],
            colours=colours,
        )
        written.append("best_server.tif")
    if "server_margin" in plan.layers:
        write_layer(
            folder / "server_margin.tif",
            coverage.server_margin_db,
            grid,
            description="best server less second best of another sector, "
            "terminal equally sensitive in all directions",
            unit="dB",
            nodata=float("nan"),
            tags=tags,
        )
        written.append("server_margin.tif")
    return written


def write_path_loss(folder: Path, name: str, plan: Plan, terrain: Terrain, field: PathField) -> str:
    """Write one path field, on the whole grid like the other layers; the file's name."""
    whole = np.full((terrain.grid.rows, terrain.grid.cols), np.nan, dtype=np.float32)
    rows, cols = field.path_loss_db.shape
    whole[field.row_start : field.row_start + rows, field.col_start : field.col_start + cols] = (
        field.path_loss_db
    )
    tags: Mapping[str, str] = {
        **layer_tags(plan, []),
        "FREQUENCY_MHZ": f"{field.frequency_mhz:g}",
        "ANTENNA_HEIGHT_M": f"{field.antenna_height_m:g}",
    }
    write_layer(
        folder / name,
        whole,
        terrain.grid,
        description=f"path loss from an antenna {field.antenna_height_m:g} m above ground "
        f"at {field.frequency_mhz:g} MHz",
        unit="dB",
        nodata=float("nan"),
        tags=tags,
    )
    return name
