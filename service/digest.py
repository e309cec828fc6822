"""The digest by which an auditor finds the request behind an answer."""

from __future__ import annotations

import hashlib
from typing import Any

import rfc8785

CANONICAL_LIMIT = 64 * 1024
"""Bytes of body up to which JSON is put into its canonical form first."""


def digest(document: Any, body: bytes) -> tuple[str, str]:
    """Return ``sha256:…`` of a JSON request, and what it was taken of.

    Up to 64 kB of the canonical form (RFC 8785), so that white space and the
    order of members do not matter; beyond that of the body as received.
    """
    if len(body) <= CANONICAL_LIMIT:
        try:
            canonical = rfc8785.dumps(document)
        except rfc8785.CanonicalizationError:
            # An integer beyond 2**53 has no canonical form; the body itself has.
            pass
        else:
            return f"sha256:{hashlib.sha256(canonical).hexdigest()}", "canonical-json"
    return f"sha256:{hashlib.sha256(body).hexdigest()}", "body"
