"""How the replicas of an exchange wandered, as tables and for machines."""

from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import screen

if TYPE_CHECKING:
    from reweight.density_of_states import DensityOfStates
    from reweight.reading import ReplicaRecord

__all__ = ["print_replicas", "replicas_record"]


def replicas_record(combined: DensityOfStates) -> dict[str, Any] | None:
    """Replicas for machines; None if the files did not follow any."""
    return None if combined.replicas is None else dataclasses.asdict(combined.replicas)


def print_replicas(combined: DensityOfStates) -> None:
    """Print acceptance between neighbours, then round trips and residence of every replica."""
    record = combined.replicas
    if record is None:
        return
    unit = combined.description.temperature_label
    in_unit = f" [{unit}]" if unit else ""
    click.echo(f"\nreplica exchange, {screen.counted(record.rows, 'row')} of every replica:")
    screen.print_table(
        (f"neighbours{in_unit}", "acceptance", "exchanged from row to row"),
        [
            (f"{cold:.6g} - {hot:.6g}", f"{acceptance:.1%}", f"{exchanged:.1%}")
            for cold, hot, acceptance, exchanged in zip(
                record.temperatures[:-1],
                record.temperatures[1:],
                record.acceptance,
                record.exchanged,
                strict=True,
            )
        ],
        indent=2,
    )
    screen.print_table(
        ("replica", "round trips", f"least time at{in_unit}", f"most time at{in_unit}"),
        [_walk(record, place) for place in range(len(record.names))],
        indent=2,
    )
    click.echo(
        f"  evenly shared would be {1 / len(record.names):.1%} at every temperature; --json has all shares"
    )


def _walk(record: ReplicaRecord, place: int) -> tuple[str, ...]:
    shares = record.residence[place]
    ends = (
        f"{record.temperatures[shares.index(share)]:.6g} ({share:.1%})"
        for share in (min(shares), max(shares))
    )
    return (record.names[place], str(record.round_trips[place]), *ends)
