"""What the words and numbers that stand beside a value say of it."""

from __future__ import annotations

from enum import IntEnum


class Quality(IntEnum):
    """How good a value is said to be."""

    GOOD = 0
    UNCERTAIN = 1
    BAD = 2
    UNKNOWN = 3
    """A 0, which is good as a status code and bad as a quality byte."""


def quality_word(said: str | float) -> str:
    """Return one spelling for each word or number: ``192``, ``"192.0"`` and ``" 192"`` agree."""
    if isinstance(said, str):
        text = said.strip()
        try:
            said = float(text)
        except ValueError:
            return text.casefold()
    return str(int(said)) if float(said).is_integer() else repr(float(said))


def by_standard(word: str) -> Quality:
    """Return what a word of :func:`quality_word` means by the open standards.

    Words are the severities of OPC UA (IEC 62541-4, StatusCode: Good, Uncertain, Bad,
    also as the head of a longer name such as ``BadNoData``), and their status codes the numbers
    from 2**30 up, by the two highest bits. Numbers from 1 to 255 are the quality byte of the
    older standard (192 and above good, from 64 uncertain; common practice). Everything else is
    bad: what is not said to be good is not used.
    """
    for head, quality in (
        ("good", Quality.GOOD),
        ("uncertain", Quality.UNCERTAIN),
        ("bad", Quality.BAD),
    ):
        if word.startswith(head):
            return quality
    if word in ("", "nan"):
        return Quality.UNCERTAIN
    try:
        number = float(word)
    except ValueError:
        return Quality.BAD
    if number == 0:
        return Quality.UNKNOWN
    if 192 <= number <= 255:
        return Quality.GOOD
    if 64 <= number < 128 or 2**30 <= number < 2**31:
        return Quality.UNCERTAIN
    return Quality.BAD
