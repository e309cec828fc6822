"""The packaged examples, asked again: what this release answers to each."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from schemas.contract import operation
from schemas.examples import EXAMPLES, Example
from service.app import create_app


def answers() -> Iterator[tuple[Example, Any]]:
    """Yield each example with the answer of the application as it is now."""
    client = create_app(logged=False).test_client()
    for example in EXAMPLES:
        # Not through the client's own JSON, which would sort the names.
        body = json.dumps(example.request).encode()
        path = operation(example.operation).path
        response = client.post(path, data=body, content_type="application/json")
        document = response.get_json()
        if response.status_code != example.status:
            raise RuntimeError(f"the example {example.name} is answered otherwise: {document}")
        yield example, document


def write_answers() -> None:
    """Package the answers of the application as it is now, in the source tree."""
    # All of them first: a failure in the middle leaves everything as it was.
    for example, document in list(answers()):
        text = json.dumps(document, indent=1, ensure_ascii=False)
        Path(str(example.answer_file)).write_text(f"{text}\n", encoding="utf-8")
