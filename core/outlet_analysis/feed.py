"""A feed taken as known, however it was metered."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from core.errors import Note
from core.reactions.reaction_set import ReactionSet
from core.streams.known import Conditions, direct_flows, is_direct, join_streams
from core.streams.metered import MeteredStream
from core.streams.stream import Stream


@dataclass(frozen=True)
class KnownFeed:
    """The feed as one stream.

    ``estimated`` says that its flows are those that fit the readings best, so
    that the uncertainties of the readings had a say.
    """

    stream: Stream
    estimated: bool
    assumed: tuple[Note, ...]
    notes: tuple[Note, ...] = ()


def known_feed(
    reactions: ReactionSet,
    streams: Sequence[MeteredStream],
    conditions: Conditions,
    *,
    batch: bool,
) -> KnownFeed:
    """Return the stream that metered streams make, its flows read or estimated.

    Raises
    ------
    Refused
        As :func:`core.streams.known.join_streams`, and where the readings do
        not settle the flows, as the estimation.
    """
    estimated = not all(is_direct(stream) for stream in streams)
    if estimated:
        raise NotImplementedError
    flows = np.sum([direct_flows(s, reactions.molar_masses) for s in streams], axis=0)
    stream, assumed = join_streams(reactions, flows, streams, conditions, batch=batch)
    return KnownFeed(stream, estimated, assumed)
