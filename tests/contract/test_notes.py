"""Every note that an answer can carry is explained, and none is explained that cannot come."""

import re
from pathlib import Path

from core.problems import NOTES

SOURCES = [
    *Path("core").rglob("*.py"),
    *Path("schemas").glob("*.py"),
]
MADE = re.compile(r'Note\(\s*(?:code=)?"([a-z-]+)"')


def test_the_notes_that_are_made_are_those_that_are_explained():
    made = {code for file in SOURCES for code in MADE.findall(file.read_text(encoding="utf-8"))}
    assert made == set(NOTES)


def test_they_read_as_words():
    for code, entry in NOTES.items():
        assert re.fullmatch(r"[a-z]+(-[a-z]+)*", code)
        assert entry.text.endswith(".")
