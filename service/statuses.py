"""The HTTP status of each problem code."""

from __future__ import annotations

from core.problems import BREAKS_CONTRACT, CATALOGUE

_OF_THEIR_OWN = {
    "no-such-route": 404,
    "method-not-allowed": 405,
    "not-acceptable": 406,
    "body-too-large": 413,
    "unsupported-media-type": 415,
    "malformed-http": 400,
    "request-line-too-long": 414,
    "header-too-large": 431,
    "unsupported-transfer-coding": 501,
    "expectation-failed": 417,
    "internal-error": 500,
}

STATUSES: dict[str, int] = {
    code: 400 if code in BREAKS_CONTRACT else _OF_THEIR_OWN.get(code, 422) for code in CATALOGUE
}
"""422 for whatever obeys the contract and cannot be computed."""
