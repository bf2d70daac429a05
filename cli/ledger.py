"""What became of every row of every file, in words and as a table."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from reweight.cli import screen

if TYPE_CHECKING:
    from reweight.density_of_states import DensityOfStates
    from reweight.study import Study

__all__ = ["account", "print_inputs", "runs_left_out", "tell_matches"]

# Counts of a ledger entry that are nought for a clean file, and what they say after the number.
UNCLEAN = {
    "replaced": ("row", "written again by a restart, the later ones kept"),
    "dropped": ("row", "left out"),
    "blank_lines": ("blank line", "skipped"),
    "repeated_headers": ("more header", "inside the file"),
    "skipped_lines": ("line", "of a log skipped, since they belong to no table of the declared header"),
}
MOST_FILES = 8
PARTS = ("rows_read", "kept", "transient", "replaced", "dropped")


def tell_matches(study: Study, *, quiet: bool) -> None:
    """Say which files the patterns of a study stand for."""
    for pattern, files in study.matched.items():
        screen.message(f"{pattern} is {screen.counted(len(files), 'file')}: {', '.join(files)}", quiet=quiet)


def _files(combined: DensityOfStates) -> list[dict[str, Any]]:
    """One entry a file, cold to hot; a file with several temperatures has one in each of their runs."""
    found: dict[str, dict[str, Any]] = {}
    for place in combined.cold_to_hot:
        for entry in combined.runs[place].files:
            if (before := found.get(entry["path"])) is None:
                found[entry["path"]] = dict(entry)
            else:
                before |= {part: before[part] + entry[part] for part in PARTS}
    return list(found.values())


def account(combined: DensityOfStates) -> list[str]:
    """Lines that say how many rows were read and what became of them; of files that are not clean, one each."""
    entries = _files(combined)
    if not entries:
        return [f"{screen.counted(sum(run.rows for run in combined.runs), 'row')} in memory, from no file"]
    read, kept, transient, replaced, dropped = (sum(entry[part] for entry in entries) for part in PARTS)
    text = f"{screen.counted(read, 'row')} read from {screen.counted(len(entries), 'file')}"
    text += f": {kept:,} kept, {transient:,} transient"
    text += f", {replaced:,} replaced, {dropped:,} dropped" if replaced or dropped else ", none dropped"
    text += "; one common start for the replica exchange" if combined.description.exchange else ""
    lines = [text]
    unclean = [(entry["path"], said) for entry in entries if (said := _unclean(entry))]
    lines += [f"  {path}: {said}" for path, said in unclean[:MOST_FILES]]
    if len(unclean) > MOST_FILES:
        lines.append(f"  and {screen.counted(len(unclean) - MOST_FILES, 'more file')}; --inputs lists all")
    return lines


def runs_left_out(combined: DensityOfStates) -> list[str]:
    """One line a run left out, with its reason."""
    return [f"left out: {each.name} ({each.reason})" for each in combined.left_out]


def _unclean(entry: dict[str, Any]) -> str:
    """Say what is not clean about a file; nothing for a clean one."""
    parts = [
        f"{screen.counted(entry[count], noun)} {what}"
        for count, (noun, what) in UNCLEAN.items()
        if entry.get(count)
    ]
    if entry.get("dropped") and entry.get("why_dropped"):
        parts.append(f"the reason: {entry['why_dropped']}")
    return "; ".join(parts)


def print_inputs(combined: DensityOfStates) -> None:
    """Print the ledger: what became of every row of every file."""
    counts = (*PARTS, "blank_lines", "repeated_headers", "skipped_lines")
    header = ("file", "rows", *(count.replace("_", " ") for count in counts[1:]))
    header += ("first energy", "last energy", "sha256")
    rows = [
        (
            entry["path"],
            *(f"{entry.get(count, 0):,}" for count in counts),
            f"{entry['first_energy']:.7g}",
            f"{entry['last_energy']:.7g}",
            entry["sha256"],
        )
        for entry in _files(combined)
    ]
    screen.print_table(header, rows)
