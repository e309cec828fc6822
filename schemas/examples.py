"""Runnable examples, packaged: each a request, and the answer that this release gives.

The plant in them is invented. The contract publishes them, the command line
offers them for pasting, and a test replays every one.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from importlib.resources.abc import Traversable
from typing import Any

PLACE = files("schemas").joinpath("published/examples")


@dataclass(frozen=True)
class Example:
    """A request of one operation; its answer is read when it is asked for."""

    name: str
    operation: str
    title: str
    request: Any
    status: int = 200
    """What it is answered with: 200, or the status of a refusal."""

    @property
    def answer_file(self) -> Traversable:
        """Where the answer is packaged."""
        return PLACE.joinpath(f"{self.name}.answer.json")

    def answer(self) -> Any:
        """Return the packaged answer."""
        return json.loads(self.answer_file.read_bytes())


@cache
def _load() -> tuple[Example, ...]:
    found = []
    for file in sorted(PLACE.iterdir(), key=lambda file: file.name):
        if file.name.endswith(".request.json"):
            document = json.loads(file.read_bytes())
            name = file.name.removesuffix(".request.json")
            found.append(Example(name, **document))
    return tuple(found)


EXAMPLES = _load()

PASTED = (
    "high-temperature-shift",
    "shift-converter-outlet",
    "hydrolysis-in-a-stirred-tank",
    "reforming-and-shift-at-equilibrium",
)
"""One of each calculation, for a person's first minute."""


def paste(base_url: str, most: int = len(PASTED)) -> str:
    """Return curl commands for a first look at a running service."""
    by_name = {example.name: example for example in EXAMPLES}
    commands = []
    for name in PASTED[:most]:
        example = by_name[name]
        body = json.dumps(example.request, ensure_ascii=False)
        commands.append(
            f"# {example.title}\n"
            f"curl -s '{base_url}/v1/{example.operation}?pretty=1' \\\n"
            f"  -H 'Content-Type: application/json' \\\n"
            f"  -d '{body}'\n"
        )
    return "\n".join(commands)
