"""What a file says in words: the lines of a text file that are no rows, the attributes of a NetCDF file."""

from __future__ import annotations

from pathlib import Path

from reweight.reading.blocks import opened
from reweight.reading.netcdf import NETCDF_LOCK, NETCDF_MAGICS
from reweight.reading.source import first_bytes, refusal
from reweight.study import Format

__all__ = ["attributes_of", "remarks_of"]

MOST_REMARKS = 200  # lines
LONGEST_REMARK = 400  # characters


def remarks_of(path: Path) -> tuple[str, ...]:
    """Lines from the beginning of a text file that hold anything but numbers."""
    found = []
    with opened(path, Format()) as lines:
        for line in range(1, MOST_REMARKS + 1):
            data = lines.read(0, line)
            if not data:
                break
            text = data[:LONGEST_REMARK].decode("utf-8", errors="replace").strip()
            if any(letter.isalpha() and letter not in "eEdD" for letter in text):
                found.append(text)
    return tuple(found)


def attributes_of(path: Path) -> tuple[dict[str, str], dict[str, str]]:
    """Attributes of a NetCDF file, and the units of its columns."""
    if not first_bytes(path, 4).startswith(NETCDF_MAGICS):
        return {}, {}
    import netCDF4

    found: dict[str, str] = {}
    units: dict[str, str] = {}
    try:
        with NETCDF_LOCK, netCDF4.Dataset(path, "r") as dataset:
            groups = [("", dataset)]
            for prefix, group in groups:
                groups += [(f"{prefix}{name}/", inner) for name, inner in group.groups.items()]
                found |= {name: str(group.getncattr(name))[:LONGEST_REMARK] for name in group.ncattrs()}
                units |= {
                    f"{prefix}{name}": str(variable.getncattr("units"))
                    for name, variable in group.variables.items()
                    if "units" in variable.ncattrs()
                }
    except (OSError, RuntimeError, UnicodeError) as error:
        raise refusal(
            path, f"attributes must be readable; NetCDF says: {error}. Copy the file again."
        ) from error
    return found, units
