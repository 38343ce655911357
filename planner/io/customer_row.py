"""One row of a customer list: text to numbers, and in words what is wrong with it."""

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass

from planner.network import Customer

HEIGHT_RANGE_M = (0.5, 1000.0)  # of a customer's antenna above ground, as for a plan's terminal
_NUMBER = re.compile(r"[-+]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][-+]?[0-9]+)?", re.ASCII)
_NUMBER_WITH_COMMA = re.compile(r"[-+]?[0-9]+,[0-9]+", re.ASCII)


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadRow:
    """A customer and what its row says about the list as a whole."""

    customer: Customer
    numeric: bool  # both coordinates are numbers, in range or not
    swapped: bool  # the latitude can only be a longitude, and the other way round
    decimal_comma: bool


def shown(text: str, most: int = 30) -> str:
    """Text from a file for a message: in quotes, short, control characters escaped."""
    return repr(text if len(text) <= most else text[:most] + "…")


def read_row(
    line: int,
    needed: Sequence[str],
    height_text: str | None,
    extra: tuple[tuple[str, str], ...],
    *,
    shape_trouble: str,
    decimal_comma: bool,
) -> ReadRow:
    """The customer in a row.

    ``needed`` are the texts of id, address, latitude and longitude; ``height_text`` is None where
    the list has no heights; ``shape_trouble`` says what is wrong with the row's cells as such.
    With ``decimal_comma`` a comma counts as the decimal sign.
    """
    identity, address, *coordinate_texts = (text.strip() for text in needed)
    latitude, longitude = (_number(text, decimal_comma) for text in coordinate_texts)
    if shape_trouble:  # what stands in the cells of the coordinates may be something else
        latitude = longitude = math.nan
    numeric = math.isfinite(latitude) and math.isfinite(longitude)
    swapped = numeric and 90.0 < abs(latitude) <= 180.0 and abs(longitude) <= 90.0
    unknown = numeric and latitude == 0.0 and longitude == 0.0
    if shape_trouble:
        troubles = [shape_trouble]
    elif swapped:
        troubles = [
            f"latitude {coordinate_texts[0]} is outside -90 to 90: latitude and longitude "
            f"({coordinate_texts[1]}) seem to be swapped. Swap the two in the list"
        ]
    elif unknown:
        troubles = ["latitude and longitude are both 0, which stands for a place that is not known"]
        latitude = longitude = math.nan
    elif not any(coordinate_texts):
        troubles = ["latitude and longitude are missing"]
    else:
        troubles = [
            *_coordinate_troubles("latitude", coordinate_texts[0], latitude, 90.0),
            *_coordinate_troubles("longitude", coordinate_texts[1], longitude, 180.0),
        ]
    height_m: float | None = None
    if height_text is not None and height_text.strip():
        height_m = _number(height_text.strip(), decimal_comma)
        lowest, highest = HEIGHT_RANGE_M
        if not lowest <= height_m <= highest:
            troubles.append(
                f"the height {shown(height_text.strip())} is not a number of metres from "
                f"{lowest:g} to {highest:g}"
            )
            height_m = None
    texts = [*coordinate_texts, (height_text or "").strip()]
    return ReadRow(
        customer=Customer(
            row=line,
            id=identity,
            address=address,
            latitude=latitude if abs(latitude) <= 90.0 else math.nan,
            longitude=longitude if abs(longitude) <= 180.0 else math.nan,
            antenna_height_m=height_m,
            trouble="; ".join(troubles),
            extra=extra,
        ),
        numeric=numeric,
        swapped=swapped,
        decimal_comma=decimal_comma
        and any(_NUMBER_WITH_COMMA.fullmatch(text) is not None for text in texts),
    )


def _number(text: str, decimal_comma: bool) -> float:
    """The number that a text is; NaN where it is none, infinite where it is too large."""
    text = text.replace("\N{MINUS SIGN}", "-")
    if decimal_comma and _NUMBER_WITH_COMMA.fullmatch(text):
        text = text.replace(",", ".")
    return float(text) if _NUMBER.fullmatch(text) else math.nan


def _coordinate_troubles(name: str, text: str, value: float, limit: float) -> list[str]:
    if not text:
        return [f"{name} is missing"]
    if not math.isfinite(value):
        return [f"{name} {shown(text)} is not a number of decimal degrees"]
    if abs(value) <= limit:
        return []
    trouble = f"{name} {text[:30]} is outside {-limit:g} to {limit:g}"
    if abs(value) >= 1000.0:
        trouble += "; it looks like metres of a projected grid, decimal degrees are needed"
    return [trouble]
