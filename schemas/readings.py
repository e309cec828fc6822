"""Readings of a request as measurements of the core, each with an uncertainty."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, field

from core.errors import Note, Subject
from core.streams.default_uncertainty import DEFAULT_UNCERTAINTIES
from core.streams.metered import Instrument, Measurement
from schemas.edge import Measured, RequestReader


@dataclass
class Readings:
    """Makes measurements, and remembers what had to be taken for granted.

    ``defaults`` keeps which readings have a default uncertainty in place of a
    stated one, by kind of reading, and how large it is over the reading: an
    answer that used them lists them. Where nothing is estimated nothing is
    ``weighed``, and no default is needed.
    """

    reader: RequestReader
    weighed: bool = True
    defaults: dict[str, list[tuple[Subject, bool]]] = field(default_factory=dict)
    instruments: dict[str, list[tuple[Subject, bool]]] = field(default_factory=dict)
    """Readings that name each instrument, and whether they state what they share."""

    def measurement(
        self, found: Measured | None, subject: Subject, kind: str
    ) -> Measurement | None:
        """Return a reading with its uncertainty, stated or the default of its kind."""
        if found is None:
            return None
        if not self.weighed:
            return Measurement(found.value, found.u or 0.0, subject, found.bound)
        u = found.u
        shared: tuple[tuple[Instrument, float], ...] = ()
        if found.u_shared is not None:
            u = u or 0.0
            if found.u_shared > 0:
                shared = ((found.instrument or subject, found.u_shared),)
        if found.instrument is not None:
            named = self.instruments.setdefault(found.instrument, [])
            named.append((subject, bool(shared)))
        if u is None and found.bound is None:
            u = DEFAULT_UNCERTAINTIES[kind].of(found.value)
            swamped = u > abs(found.value) > 0
            self.defaults.setdefault(kind, []).append((subject, swamped))
        return Measurement(found.value, u or 0.0, subject, found.bound, shared)

    def instrument_notes(self) -> list[Note]:
        """Return what is to be said of instruments that several readings name for nothing."""
        return [
            Note(
                "instrument-shares-nothing",
                f"of the readings of the instrument {instrument} fewer than two state 'u_shared',"
                " so their errors count as independent: 'u' and 'u_rel' are each reading's own",
                subject=named[0][0],
            )
            for instrument, named in self.instruments.items()
            if len(named) > 1 and sum(shares for _, shares in named) < 2
        ]

    def default_notes(self, used: Collection[Subject]) -> list[Note]:
        """Return the assumptions that the default uncertainties of the readings used are."""
        notes = []
        for kind, entries in self.defaults.items():
            there = [(self._pointer(s), swamped) for s, swamped in entries if _counts(s, used)]
            if not there:
                continue
            words = DEFAULT_UNCERTAINTIES[kind].words
            listed = _listed([pointer for pointer, _ in there])
            notes.append(
                Note(
                    "default-uncertainty",
                    f"{words} (common practice), where none is stated: {listed}",
                )
            )
            large = [pointer for pointer, swamped in there if swamped]
            if large:
                notes.append(
                    Note(
                        "default-uncertainty-large",
                        "the default uncertainty is larger than the reading itself; state 'u':"
                        f" {_listed(large)}",
                        "warning",
                    )
                )
        return notes

    def _pointer(self, subject: Subject) -> str:
        return self.reader.places[subject][0]


def _counts(subject: Subject, used: Collection[Subject]) -> bool:
    """Whether a reading is one of those used, or stands at the meter of one."""
    if subject in used:
        return True
    if subject[-2:-1] != ("meter",):
        return False
    stream = subject[:-2]
    flows = (*stream, "flows")
    return (*stream, "flow") in used or any(one[: len(flows)] == flows for one in used)


def _listed(pointers: list[str], most: int = 8) -> str:
    shown = ", ".join(pointers[:most])
    left = len(pointers) - most
    return f"{shown} and {left} more" if left > 0 else shown
