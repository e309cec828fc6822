"""The kinds of reactor: one class each, under the name that a request uses."""

from core.reactors.plug_flow import Batch, PlugFlow
from core.reactors.sizing import ReactorKind
from core.reactors.stirred_tank import StirredTank, TanksInSeries

REACTOR_KINDS: dict[str, type[ReactorKind]] = {
    kind.kind: kind for kind in (PlugFlow, StirredTank, TanksInSeries, Batch)
}
