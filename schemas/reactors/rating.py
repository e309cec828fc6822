"""What comes out of this one? On the wire."""

from __future__ import annotations

from schemas.reactors.request import ReactorRequest


class RatingRequest(ReactorRequest):
    """A reactor with its size."""
