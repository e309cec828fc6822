"""The conversion at which one reaction meets a target stated otherwise."""

from __future__ import annotations

from typing import Literal

from core.errors import Subject, refuse
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import Stream

TargetKind = Literal["flow", "mole_fraction", "concentration", "yield"]

DIMENSIONS: dict[TargetKind, str] = {
    "flow": "molar_flow",
    "mole_fraction": "dimensionless",
    "concentration": "concentration",
    "yield": "dimensionless",
}


def conversion_for(
    reactions: ReactionSet,
    key: int,
    feed: Stream,
    substance: int,
    kind: TargetKind,
    value: float,
    *,
    constant_volume: bool,
    subject: Subject,
) -> float:
    """Return the conversion of the key at which a substance meets its target.

    With one reaction every flow is linear in the conversion, and so are the
    total and, at constant T, P and Z, the volume: each target is the root of a
    linear equation ``a + b X = value (c + d X)``.

    Parameters
    ----------
    reactions : ReactionSet
        One reaction.
    key, substance : int
    feed : Stream
    kind : TargetKind
        ``yield`` is on key basis: key turned into the substance over key fed.
    value : float
        mol/s (batch: mol), -, mol/m3 or -.
    constant_volume : bool
        Liquids, and a batch of gas that holds its volume.
    subject : Subject
        Names the target in a refusal.

    Raises
    ------
    Refused
        ``target-does-not-move``: the quantity does not change with the
        conversion; ``target-not-defined``: the substance is outside the phase,
        or the feed's volume is not known.
    """
    name = reactions.names[substance]
    nu = reactions.nu[0]
    key_flow = float(feed.flows[key])
    start, rise = float(feed.flows[substance]), float(nu[substance] / -nu[key]) * key_flow
    total, change = 1.0, 0.0
    if kind == "yield":
        if rise <= 0:
            raise _still(name, kind, subject)
        return value
    if kind != "flow":
        if not feed.in_phase[substance]:
            raise refuse(
                "target-not-defined",
                subject,
                f"{name} is not in the {feed.phase}, where its {kind.replace('_', ' ')} would be;"
                " state its flow instead",
            )
        if kind == "mole_fraction" and feed.solvent_unknown:
            raise refuse(
                "mole-fractions-not-known",
                subject,
                "the liquid is given by concentrations, beside which a solvent may be in it: state"
                " its density too, flows of everything in it, or a concentration as the target",
            )
        total = float(feed.phase_total)
        change = float(nu[feed.in_phase].sum() / -nu[key]) * key_flow
    if kind == "concentration":
        volume = feed.volumetric_flow
        if volume is None:
            raise refuse(
                "target-not-defined",
                subject,
                "the feed's volume is not known, so that no concentration is; state temperature"
                " and pressure of a gas, or volumetric flow or density of a liquid",
            )
        change = 0.0 if constant_volume else change / total * float(volume)
        total = float(volume)
    slope = rise - value * change
    if abs(slope) <= 1e-12 * (abs(rise) + abs(value * change)):
        raise _still(name, kind, subject)
    return (value * total - start) / slope


def _still(name: str, kind: TargetKind, subject: Subject) -> Exception:
    return refuse(
        "target-does-not-move",
        subject,
        f"the {kind.replace('_', ' ')} of {name} does not change with the conversion; name a"
        " substance that the reaction makes or consumes",
    )
