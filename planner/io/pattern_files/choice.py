"""Which cuts of a file are used: by polarization and kind of cut, and by the radio's frequency."""

from dataclasses import dataclass

from planner.errors import PatternError, Problem
from planner.io.pattern_files.model import FrequencyBlock, PatternCut, PatternFile
from planner.io.pattern_files.text import Faults

FEWEST_SPHERE_CUTS = 12  # 30 degrees apart, the widest gap
_OF_WAVE = {"vertical": "V/V", "horizontal": "H/H"}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ChosenCuts:
    """The cuts of one frequency that make a pattern: two, or many vertical ones."""

    polarization: str
    plane: tuple[PatternCut, PatternCut] | None = None  # horizontal and vertical
    sphere: tuple[PatternCut, ...] = ()  # if plane is None

    def all(self) -> tuple[PatternCut, ...]:
        """Every cut of the pattern."""
        return self.sphere if self.plane is None else self.plane


def candidates(block: FrequencyBlock) -> list[ChosenCuts]:
    """One for each co-polar polarization that has all it takes, in the order of the file."""
    found = []
    with_points = [cut for cut in block.cuts if cut.is_copolar and cut.angle_deg.size]
    for polarization in dict.fromkeys(cut.polarization for cut in with_points):
        cuts = {cut.name: cut for cut in with_points if cut.polarization == polarization}
        sphere = tuple(
            cut for cut in with_points if cut.name == "SPHERE" and cut.polarization == polarization
        )
        # the cuts through the peak before those through the plain planes
        horizontal, vertical = cuts.get("AZ", cuts.get("H")), cuts.get("EL", cuts.get("V"))
        if len(sphere) >= FEWEST_SPHERE_CUTS:
            found.append(ChosenCuts(polarization=polarization, sphere=sphere))
        elif horizontal is not None and vertical is not None:
            found.append(ChosenCuts(polarization=polarization, plane=(horizontal, vertical)))
    return found


def check_cuts(block: FrequencyBlock, faults: Faults, *, standard: bool) -> None:
    """Tell cuts that stand twice or are missing; in the standard's words or in those of CSV."""
    seen: dict[tuple[object, ...], PatternCut] = {}
    for cut in block.cuts:
        key = (cut.name, cut.azimuth_deg, cut.polarization)
        if key in seen and not (cut.name == "SPHERE" and cut.azimuth_deg is None):
            found = f"cut {_title(cut)} again, first in line {seen[key].first_line}"
            faults.add(cut.first_line, found, "each cut once at each frequency")
        seen.setdefault(key, cut)
    if candidates(block) or any(cut.angle_deg.size == 0 for cut in block.cuts):
        return  # an empty cut is told already
    copolar = [cut for cut in block.cuts if cut.is_copolar]
    if not standard:
        names = {"AZ": "horizontal", "H": "horizontal", "EL": "vertical", "V": "vertical"}
        there = {names.get(cut.name, "grid") for cut in block.cuts if cut.angle_deg.size}
        if "grid" in there:
            found, allowed = "a grid that does not go around", "azimuths at most 30 deg apart"
        else:
            lacking = [which for which in ("horizontal", "vertical") if which not in there]
            found, allowed = f"no {' and no '.join(lacking)} cut", "a horizontal and a vertical cut"
        faults.add(block.first_line, found, allowed)
        return
    allowed = (
        "with the same polarization of antenna and illumination: H or AZ, and V or EL; or at "
        f"least {FEWEST_SPHERE_CUTS} cuts all around"
    )
    if not copolar:
        faults.add(block.first_line, "no co-polar cut", f"two cuts {allowed}")
        return
    there_too = ", ".join(dict.fromkeys(_title(cut) for cut in copolar[:12]))
    missing = [
        word
        for word, of in (("horizontal", ("H", "AZ")), ("vertical", ("V", "EL")))
        if not any(cut.name in of for cut in copolar)
    ]
    found = f"no {' and no '.join(missing)} cut" if missing else "cuts that do not go together"
    faults.add(block.first_line, f"{found} beside {there_too}", f"two cuts {allowed}")


def chosen_block(
    file: PatternFile, *, name: str, frequency_mhz: float | None
) -> tuple[FrequencyBlock, tuple[str, ...]]:
    """The block nearest to a frequency within the file's band, and what to say about it.

    Without a frequency, the block in the middle of the file's. Raises ``PatternError`` where the
    frequency lies outside the band that the file states.
    """
    low, high = file.header.lowest_frequency_mhz, file.header.highest_frequency_mhz
    known = [block for block in file.blocks if block.frequency_mhz is not None]
    if frequency_mhz is not None and low is not None and high is not None:
        inside = low <= frequency_mhz <= high
        at_a_block = any(block.frequency_mhz == frequency_mhz for block in known)
        if not inside and not at_a_block:
            found = f"{frequency_mhz:g} MHz"
            allowed = f"{low:g} to {high:g} MHz, the band that {file.file_name} states"
            where = f"antenna.{name}.frequency_mhz"
            raise PatternError(Problem(where=where, found=found, allowed=allowed))
    if not known:
        return file.blocks[0], ()
    if frequency_mhz is None:
        order = sorted(known, key=lambda block: block.frequency_mhz or 0.0)
        block = order[(len(order) - 1) // 2]
        if len(known) == 1:
            return block, ()
        return block, (
            f"{file.file_name}: no frequency was asked for; of {_frequencies(order)} the pattern "
            f"at {block.frequency_mhz:g} MHz is used.",
        )
    block = min(known, key=lambda one: abs((one.frequency_mhz or 0.0) - frequency_mhz))
    if block.frequency_mhz == frequency_mhz and len(known) == 1:
        return block, ()
    of = f" of {_frequencies(known)}" if len(known) > 1 else ""
    text = (
        f"{file.file_name}: for {frequency_mhz:g} MHz the pattern at {block.frequency_mhz:g} MHz "
        f"is used{', the nearest' if of else ''}{of}."
    )
    return block, (text,)


def chosen_cuts(
    file: PatternFile, block: FrequencyBlock, polarization: str | None
) -> tuple[ChosenCuts, tuple[str, ...]]:
    """The cuts of a block for a wave ("vertical" or "horizontal"), and what to say about it."""
    found = candidates(block)
    wanted = _OF_WAVE.get(polarization or "", "")
    chosen = next((cuts for cuts in found if cuts.polarization == wanted), found[0])
    said = []
    if len(found) > 1:
        others = ", ".join(cuts.polarization or "none stated" for cuts in found)
        said.append(
            f"{file.file_name}: of the polarizations {others} the cuts "
            f"{chosen.polarization or 'without one'} are used."
        )
    return chosen, tuple(said)


def _title(cut: PatternCut) -> str:
    which = cut.name if cut.azimuth_deg is None else f"{cut.azimuth_deg:g} deg"
    return f"{which} {cut.polarization}".rstrip()


def _frequencies(blocks: list[FrequencyBlock]) -> str:
    shown = [f"{block.frequency_mhz:g}" for block in blocks[:6]]
    if len(blocks) > 6:
        shown = [*shown[:3], "…", f"{blocks[-1].frequency_mhz:g}"]
    return ", ".join(shown) + " MHz"
