"""A feed taken as known, however it was metered."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from core.arrays import FloatArray
from core.errors import Amount, Note, Subject, refuse
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.gases import estimate_of_gas, judged_as_ideal, single_substances_metered
from core.outlet_analysis.reconciliation import estimate_feed
from core.outlet_analysis.remarks import ASSUMPTIONS
from core.reactions.reaction_set import ReactionSet
from core.real_gas.equation import KnownGas
from core.streams.known import (
    Conditions,
    direct_flows,
    is_direct,
    join_streams,
    meter_notes,
    solids_taken_as_gas,
)
from core.streams.metered import MeteredStream
from core.streams.stream import Stream


@dataclass(frozen=True)
class KnownFeed:
    """The feed as one stream.

    Attributes
    ----------
    stream : Stream
    estimated : bool
        Its flows are those that fit the readings best, so that the
        uncertainties of the readings had a say.
    per_mole_of_key : bool
        No reading tells how much flows: flows are per mole of key fed.
    assumed, notes : tuple of Note
    weighed : frozenset of Subject
        Readings whose uncertainties had a say in the flows: those that other
        readings check.
    gas : KnownGas or None
        By which Z was found where it was not stated.
    """

    stream: Stream
    estimated: bool
    per_mole_of_key: bool
    assumed: tuple[Note, ...]
    notes: tuple[Note, ...] = ()
    weighed: frozenset[Subject] = frozenset()
    gas: KnownGas | None = None


def known_feed(
    reactions: ReactionSet,
    key: int,
    streams: Sequence[MeteredStream],
    conditions: Conditions,
    *,
    batch: bool,
    gas: KnownGas | None = None,
) -> KnownFeed:
    """Return the stream that metered streams make, its flows read or estimated.

    What Z the streams, their meters and the conditions leave open is found by ``gas``.

    Raises
    ------
    Refused
        As :func:`core.streams.known.join_streams`; where the flows are
        estimated as :func:`core.outlet_analysis.reconciliation.estimate`, and
        ``flow-negative`` where the best estimate of a flow is below zero.
    """
    if all(is_direct(stream) for stream in streams):
        notes: tuple[Note, ...] = ()
        if gas is not None:
            streams, notes = single_substances_metered(streams, gas)
        each = [direct_flows(stream, reactions.molar_masses) for stream in streams]
        flows = each[0] if len(each) == 1 else np.sum(each, axis=0)
        stream, assumed = join_streams(
            reactions, flows, streams, conditions, each=each, batch=batch, gas=gas
        )
        return KnownFeed(
            stream,
            estimated=False,
            per_mole_of_key=False,
            assumed=assumed,
            notes=(
                *solids_taken_as_gas(reactions, conditions.phase),
                *meter_notes(streams, reactions.molar_masses),
                *notes,
            ),
            gas=gas,
        )
    if gas is None:
        found = judged_as_ideal(estimate_feed(reactions, key, tuple(streams), batch))
    else:
        found = estimate_of_gas(AccountProblem(reactions, key, tuple(streams), (), batch), gas)
    return feed_of_account(found, conditions, gas)


def feed_of_account(
    found: Estimate, conditions: Conditions, gas: KnownGas | None = None
) -> KnownFeed:
    """Return the feed of an account that was estimated, with its outlet or alone.

    What Z the conditions leave open is found by ``gas``.

    Raises
    ------
    Refused
        ``flow-negative``, and as :func:`core.streams.known.join_streams`.
    """
    problem = found.account.problem
    reactions, streams = problem.reactions, problem.feed
    each = _stream_flows(reactions, found, conditions)
    stream, assumed = join_streams(
        reactions,
        np.sum(each, axis=0),
        streams,
        conditions,
        each=each,
        batch=problem.batch,
        gas=gas,
    )
    scaled = bool(found.per_mole_of_key)
    told = [note for note in found.notes if note.code != "no-redundancy"]
    told.extend(solids_taken_as_gas(reactions, conditions.phase))
    if found.chi_square > found.limit:
        told.append(
            Note(
                "readings-inconsistent",
                "the readings contradict each other: chi-square {found} against a limit of {limit};"
                " the flows that fit them best are taken",
                "warning",
                conditions.subject,
                {
                    "found": Amount(float(found.chi_square)),
                    "limit": Amount(float(found.limit)),
                },
            )
        )
    return KnownFeed(
        stream,
        estimated=True,
        per_mole_of_key=scaled,
        assumed=(*assumed, *(note for note in told if note.code in ASSUMPTIONS)),
        notes=tuple(note for note in told if note.code not in ASSUMPTIONS),
        weighed=frozenset(
            subject
            for subject, redundancy in zip(
                found.readings.subjects, found.readings.redundancy, strict=True
            )
            if redundancy > 1e-9
        ),
        gas=gas,
    )


def _stream_flows(
    reactions: ReactionSet, found: Estimate, conditions: Conditions
) -> list[FloatArray]:
    """Return the flows of each metered stream, none of them below zero."""
    count = len(reactions.names)
    account = found.account
    each = [
        np.asarray(account.stream_map[g * count : (g + 1) * count] @ found.z)
        for g in range(len(account.problem.feed))
    ]
    total = np.sum(each, axis=0)
    worst = int(np.argmin(total))
    # What rounding leaves of a flow that is nothing is nothing.
    if total[worst] < -1e-12 * total.max():
        raise refuse(
            "flow-negative",
            conditions.subject,
            f"the readings leave {{flow}} of {reactions.names[worst]}, less than nothing; look at"
            " the values that its flow is the rest of",
            flow=Amount(float(total[worst]), "molar_flow"),
        )
    return [np.where(np.abs(flows) <= 1e-12 * total.max(), 0.0, flows) for flows in each]
