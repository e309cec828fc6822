"""Every note that an answer can carry is explained, and none is explained that cannot come."""

import re
from pathlib import Path

from core.notes import NOTES

SOURCES = [
    file.read_text(encoding="utf-8")
    for file in (*Path("core").rglob("*.py"), *Path("schemas").rglob("*.py"))
    if file.name != "notes.py"
]
MADE = re.compile(r'Note\(\s*"([a-z-]+)"')


def test_the_notes_that_are_made_are_explained():
    made = {code for text in SOURCES for code in MADE.findall(text)}
    assert made <= set(NOTES)


def test_the_notes_that_are_explained_are_made():
    assert [code for code in NOTES if not any(f'"{code}"' in text for text in SOURCES)] == []


def test_they_read_as_words():
    for code, entry in NOTES.items():
        assert re.fullmatch(r"[a-z]+(-[a-z]+)*", code)
        assert entry.text.endswith(".")
