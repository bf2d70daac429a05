"""Which column is the energy, of which kind, in which unit, and of how much of the system."""

from __future__ import annotations

import re
from collections.abc import Sequence

from reweight import units
from reweight.drafting.consistency import (
    HOTTEST_REDUCED,
    LARGEST_FACTOR,
    Point,
    excess_of_rise,
    fitting_units,
)
from reweight.drafting.guess import Guess, certain, doubtful, likely
from reweight.drafting.look import ColumnLook, FileLook
from reweight.drafting.words import Role, energy_unit_of

__all__ = [
    "column_key",
    "guess_energy_column",
    "guess_kind",
    "guess_unit_and_share",
    "is_counter",
    "remark_unit",
]

_UNIT_REMARK = re.compile(
    r"\b(?:energ(?:y|ies)|potential|E)\b[^=:()\[\]]{0,30}?(?:\bin\b|\bunits?\b\s*[=:]?|[=:(\[])\s*([A-Za-z][A-Za-z^/*0-9.-]*)",
    re.IGNORECASE,
)
_UNITS_REMARK = re.compile(r"\bunits?\s*[=:]\s*([A-Za-z][A-Za-z^/*0-9.-]*)", re.IGNORECASE)
_COUPLING_OR_JOULE = "J"
_CLOSE = 1.5


def column_key(look: FileLook, column: ColumnLook) -> str | int:
    """What a study calls a column: its name if it has one of its own, otherwise its position."""
    name = column.heading.name if look.named else ""
    same = [each for each in look.columns if each.heading.name == name]
    if not name.strip() or len(same) > 1 or name.startswith("?") or look.names.count(name) > 1:
        return column.position
    return name


def guess_energy_column(look: FileLook) -> tuple[Guess, ColumnLook | None]:
    """Guess the column of energies from the names; the column itself if there is no doubt."""
    by_role = {role: [each for each in look.columns if each.heading.role is role] for role in Role}
    for role in (Role.POTENTIAL, Role.ENERGY, Role.TOTAL):
        found = by_role[role]
        rivals = by_role[Role.TOTAL] if role is Role.ENERGY else []
        if len(found) == 1 and not rivals:
            return certain(column_key(look, found[0]), "by its name"), found[0]
        if found:
            candidates = tuple(column_key(look, each) for each in (*found, *rivals))
            return doubtful(candidates, "several columns are named like energies"), None
    others = [each for each in by_role[Role.OTHER] if not each.constant and not is_counter(each)]
    if len(others) == 1:
        return likely(column_key(look, others[0]), "the only column that can be"), others[0]
    candidates = tuple(column_key(look, each) for each in others)
    return doubtful(candidates, "no column is named like an energy"), None


def is_counter(column: ColumnLook) -> bool:
    """Whether a column merely counts rows."""
    return column.position == 1 and column.whole and not column.goes_back and column.rows > 1


def guess_kind(looks: Sequence[FileLook], column: ColumnLook | None) -> Guess:
    """Guess whether the energies are potential or total."""
    if column is not None and column.heading.role is Role.POTENTIAL:
        return certain("potential", "by the name of the column")
    if column is not None and column.heading.role is Role.TOTAL:
        return likely("total", "by the name of the column; a model without momenta has only potential energy")
    remarks = " ".join(remark.lower() for look in looks for remark in look.remarks)
    said = [kind for kind in ("potential", "total") if f"{kind} energ" in remarks]
    if len(said) == 1:
        return likely(said[0], "by a line of remarks")
    columns = [
        each for look in looks for each in look.columns if column and each.heading.name == column.heading.name
    ]
    if columns and all(each.whole for each in columns):
        return likely("potential", "whole numbers: a model with discrete levels")
    return doubtful(("potential", "total"), "nothing tells whether kinetic energy is in it")


def remark_unit(looks: Sequence[FileLook]) -> str | None:
    """Unit of energy that the lines of remarks state; None if they state none, or several."""
    found = set()
    for look in looks:
        for remark in look.remarks:
            words = [*_UNIT_REMARK.findall(remark), *_UNITS_REMARK.findall(remark)]
            found |= {energy_unit_of(word.rstrip(".,;")) for word in words}
    found.discard(None)
    return found.pop() if len(found) == 1 else None


def guess_unit_and_share(
    looks: Sequence[FileLook], columns: Sequence[ColumnLook], points: Sequence[Point], count: Guess | None
) -> tuple[Guess, Guess]:
    """Guess the unit of the energies, and whether they are of the whole system or per atom.

    Parameters
    ----------
    looks : sequence of FileLook
    columns : sequence of ColumnLook
        The column of energies of every file, or all that it may be.
    points : sequence of Point
        Runs whose temperature and energies are known.
    count : Guess or None
        Number of atoms or sites, if anything tells it.
    """
    pers = {column.heading.per for column in columns} - {""}
    stated = {column.heading.unit for column in columns} - {""}
    whole = _scaled(points, count) if pers else list(points)
    unit, misfit = _unit(looks, stated, whole)
    if pers:
        return unit, certain(f"per {sorted(pers)[0]}", "by the heading of the column")
    if misfit is not None and misfit > LARGEST_FACTOR:
        why = (
            f"energies rise with temperature {misfit:.3g} times as much as their fluctuations allow: as if per atom, "
            f"of about {misfit:.0f}; or the unit or the temperatures are others"
        )
        return unit, doubtful(("total", "per atom"), why)
    if misfit is None:
        return unit, likely("total", "nothing says otherwise")
    return unit, likely("total", "nothing says otherwise, and the fluctuations agree")


def _scaled(points: Sequence[Point], count: Guess | None) -> list[Point]:
    """Points of the whole system from those per atom."""
    if count is None or not isinstance(count.value, int):
        return []
    return [
        Point(
            key=point.key,
            value=point.value,
            temperature_unit=point.temperature_unit,
            mean=point.mean * count.value,
            variance=point.variance * count.value**2,
        )
        for point in points
    ]


def _close(points: Sequence[Point], unit: str) -> bool:
    """Whether energies agree so well in a unit that it is worth a question against what the file says."""
    excess = excess_of_rise(points, unit)
    return excess is not None and 1 / _CLOSE < excess < _CLOSE


def _unit(looks: Sequence[FileLook], stated: set[str], points: Sequence[Point]) -> tuple[Guess, float | None]:
    """Guess the unit, and by which factor the energies rise too much in it, if that is doubtful."""
    known = {unit for text in stated if (unit := energy_unit_of(text)) is not None}
    fitting, others = fitting_units(points)
    if len(known) == 1 and len(stated) == 1:
        unit, where, make = known.pop(), "in the heading of the column", certain
    elif not stated and (told := remark_unit(looks)) is not None:
        unit, where, make = told, "in a line of remarks", likely
    elif stated:
        return doubtful((*sorted(stated), *fitting), f"the files say {' and '.join(sorted(stated))}"), None
    else:
        why = "no unit is stated"
        if fitting:
            why += f"; rise and fluctuations of the energies fit {' or '.join(fitting)}"
        return doubtful((*fitting, *others), why), None
    excess = excess_of_rise(points, unit)
    if excess is None:
        if unit == _COUPLING_OR_JOULE and all(0 < point.value < HOTTEST_REDUCED for point in points):
            return doubtful((units.REDUCED, unit), "J may be joule or a coupling constant"), None
        return make(unit, where), None
    if 1 / LARGEST_FACTOR < excess < LARGEST_FACTOR:
        return make(unit, f"{where}; fluctuations agree"), excess
    better = tuple(each for each in fitting if each != unit and _close(points, each))
    if better or excess < 1:
        why = (
            f"{unit} {where}, but the energies rise with temperature {excess:.3g} times as much as their fluctuations "
            "allow in that unit"
        )
        return doubtful((*better, unit), why), excess
    return make(unit, where), excess
