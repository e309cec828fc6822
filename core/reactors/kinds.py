"""The kinds of reactor: one class each, under the name that a request uses."""

from core.reactors.problem import (
    Batch,
    PackedBed,
    PlugFlow,
    Reactor,
    RecyclePlugFlow,
    StirredTank,
    TanksInSeries,
    Train,
)

REACTOR_KINDS: dict[str, type[Reactor]] = {
    kind.kind: kind
    for kind in (PlugFlow, StirredTank, TanksInSeries, PackedBed, RecyclePlugFlow, Batch, Train)
}
