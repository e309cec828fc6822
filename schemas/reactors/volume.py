"""How big must it be? On the wire."""

from __future__ import annotations

from schemas.reactors.request import ReactorRequest
from schemas.reactors.targets import target


class VolumeRequest(ReactorRequest):
    """A reactor without a size, and the target that it is to meet."""

    target = target(required=True)
