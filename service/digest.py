"""The digest by which an auditor finds the request behind an answer."""

from __future__ import annotations

import hashlib
from typing import Any

import orjson
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
            form = canonical(document, body)
        except rfc8785.CanonicalizationError:
            # An integer beyond 2**53 has no canonical form; the body itself has.
            pass
        else:
            return f"sha256:{hashlib.sha256(form).hexdigest()}", "canonical-json"
    return f"sha256:{hashlib.sha256(body).hexdigest()}", "body"


def canonical(document: Any, body: bytes) -> bytes:
    """Return the canonical form of a document, and use the fast way where it is the same.

    Of ASCII text the two orders of names agree (UTF-16 and UTF-8), and so do the
    escapes; of numbers the shortest decimals do, unless they are whole or so
    large or small that an exponent comes in.
    """
    if body.isascii() and _ESCAPE not in body and _plain_numbers(document):
        return orjson.dumps(document, option=orjson.OPT_SORT_KEYS)
    return rfc8785.dumps(document)


_ESCAPE = b"\\"


def _plain_numbers(document: Any) -> bool:
    level = [document]
    while level:
        inner: list[Any] = []
        for value in level:
            kind = type(value)
            if kind is dict:
                inner.extend(value.values())
            elif kind is list:
                inner.extend(value)
            elif kind is float:
                if value.is_integer() or not 1e-4 < abs(value) < 1e15:
                    return False
            elif kind is int and not -(2**53) < value < 2**53:
                return False
        level = inner
    return True
