"""The sentences of a checked list: why a customer is not served or not computed, and notes."""

from collections.abc import Sequence

from planner.network import Customer

Reasons = dict[str, str]  # tower id: why no path to it could be computed; nearest tower first

_WORTH_NAMING_DB = 3.0  # losses below this are not given as a cause
_ROWS_NAMED = 10  # in a message about many rows


def length_text(length_m: float) -> str:
    """A length as people say it: 850 m, 2.10 km, 1,234 km."""
    if round(length_m) < 1000:
        return f"{length_m:.0f} m"
    if length_m < 99_950.0:
        return f"{length_m / 1000.0:.2f} km"
    return f"{length_m / 1000.0:,.0f} km"


def radius_text(radius_m: float) -> str:
    """The plan's radius without digits that nobody gave: 8.4 km."""
    return f"{radius_m / 1000.0:g} km"


def rows_text(rows: Sequence[int]) -> str:
    """Line numbers, the first ones of many: rows 2, 3, 4 and 120 more."""
    named = ", ".join(str(row) for row in rows[:_ROWS_NAMED])
    more = len(rows) - _ROWS_NAMED
    return f"{'row' if len(rows) == 1 else 'rows'} {named}" + (
        f" and {more:,} more" if more > 0 else ""
    )


def out_of_radius_reason(tower_id: str, distance_m: float, radius_m: float) -> str:
    """Further than the radius from every tower."""
    return (
        f"{length_text(distance_m)} from tower {tower_id}, the nearest; "
        f"paths are computed up to the plan's radius of {radius_text(radius_m)}"
    )


def swapped_reason(
    tower_id: str, distance_m: float, swapped_tower_id: str, swapped_distance_m: float
) -> str:
    """Far from every tower as given, close to one the other way round."""
    return (
        f"latitude and longitude seem to be swapped: as given the place is "
        f"{length_text(distance_m)} from tower {tower_id}, the nearest; swapped it is "
        f"{length_text(swapped_distance_m)} from tower {swapped_tower_id}. "
        "Swap the two in the list"
    )


def no_path_reason(missing: Reasons) -> str:
    """No path to any tower in range could be computed; the nearest tower stands first."""
    tower_id, reason = next(iter(missing.items()))
    if len(missing) == 1:
        return f"to tower {tower_id}, the only one within the radius: {reason}"
    return (
        f"no path to any of the {len(missing)} towers within the radius could be computed; "
        f"to tower {tower_id}, the nearest: {reason}"
    )


def left_out_note(missing: Reasons) -> str:
    """Some towers in range were left out of the comparison; empty where none was."""
    return "; ".join(f"tower {tower_id} is left out: {why}" for tower_id, why in missing.items())


def not_served_reason(
    *,
    fade_margin_db: float,
    threshold_dbm: float,
    distance_m: float,
    line_of_sight: bool,
    blocking_distance_m: float,
    blocking_excess_m: float,
    diffraction_loss_db: float,
    gain_below_peak_db: float,
) -> str:
    """How far the signal is below the threshold, and what takes most of it away."""
    parts = [f"{-fade_margin_db:.1f} dB below the threshold of {threshold_dbm:g} dBm"]
    if not line_of_sight:
        parts.append(
            f"blocked {length_text(blocking_distance_m)} away, {blocking_excess_m:.1f} m above "
            f"the direct ray (diffraction {diffraction_loss_db:.1f} dB)"
        )
    elif diffraction_loss_db >= _WORTH_NAMING_DB:
        parts.append(
            f"in sight {length_text(distance_m)} away, but the Fresnel zone is obstructed "
            f"(diffraction {diffraction_loss_db:.1f} dB)"
        )
    else:
        parts.append(f"in sight {length_text(distance_m)} away")
    if gain_below_peak_db >= _WORTH_NAMING_DB:
        parts.append(f"the sector's gain here is {gain_below_peak_db:.1f} dB below its peak")
    return "; ".join(parts)


def id_notes(customers: Sequence[Customer]) -> list[str]:
    """For each customer: that its id is missing or stands in other rows too; else empty."""
    rows_by_id: dict[str, list[int]] = {}
    for customer in customers:
        rows_by_id.setdefault(customer.id, []).append(customer.row)
    notes = []
    for customer in customers:
        rows = rows_by_id[customer.id]
        if not customer.id:
            notes.append("the row has no id")
        elif len(rows) > 1:
            first = rows[: _ROWS_NAMED + 1]
            others = [row for row in first if row != customer.row][:_ROWS_NAMED]
            more = len(rows) - 1 - len(others)
            named = ", ".join(str(row) for row in others)
            notes.append(
                f"the same id also stands in row{'s' if len(rows) > 2 else ''} {named}"
                + (f" and {more:,} more" if more > 0 else "")
            )
        else:
            notes.append("")
    return notes


def joined(*parts: str) -> str:
    """Notes in one cell."""
    return "; ".join(part for part in parts if part)
