"""What the README shows is what the service answers."""

import json
import re
import shlex
from pathlib import Path

import pytest

README = Path(__file__).parents[2].joinpath("README.md").read_text(encoding="utf-8")
BLOCK = re.compile(r"```(\w+)\n(.*?)```", re.DOTALL)
BLOCKS = [(match[1], match[2]) for match in BLOCK.finditer(README)]
CALLS = [
    (text, BLOCKS[i + 1][1] if i + 1 < len(BLOCKS) and BLOCKS[i + 1][0] == "json" else None)
    for i, (language, text) in enumerate(BLOCKS)
    if language == "sh" and text.startswith("curl")
]


def holds(answer, shown, place=""):
    """Hold what is shown against the answer: every member shown is there, to its printed digits."""
    if isinstance(shown, dict):
        for name, inner in shown.items():
            assert name in answer, f"{place}/{name}"
            holds(answer[name], inner, f"{place}/{name}")
    elif isinstance(shown, list):
        assert len(answer) == len(shown), place
        for i, inner in enumerate(shown):
            holds(answer[i], inner, f"{place}/{i}")
    elif isinstance(shown, float):
        assert answer == pytest.approx(shown, rel=5e-6, abs=5e-7), place
    else:
        assert answer == shown, place


@pytest.mark.parametrize(("command", "shown"), CALLS)
def test_a_request_of_the_readme_is_answered_as_shown(client, command, shown):
    words = shlex.split(command)
    headers = dict(words[i + 1].split(": ") for i, word in enumerate(words) if word == "-H")
    body = words[words.index("-d") + 1]
    path = next(word for word in words if word.startswith("http")).partition(":8410")[2]
    response = client.post(path, data=body, headers=headers)
    if shown is not None:
        holds(response.get_json(), json.loads(shown))
    elif headers.get("Accept") == "text/csv":
        assert response.mimetype == "text/csv"
    else:
        assert response.status_code == 422
        assert {fault["code"] for fault in response.get_json()["errors"]} == {
            "unbalanced-reaction",
            "unknown-unit",
        }


def test_there_are_calls_to_check():
    assert len(CALLS) == 12
    assert sum(shown is not None for _, shown in CALLS) == 9


def test_the_test_command_is_marked_for_continuous_integration():
    assert README.count("<!-- test-command -->\n```sh\n") == 1
