"""What reading a reactor needs at hand, and the readers of single quantities and sizes."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

from core.errors import Subject
from core.reactions.reaction_set import ReactionSet
from core.reactors.problem import Size
from core.records import record
from core.streams.stream import Stream
from schemas.edge import Json, RequestReader
from schemas.feed import read_feed
from schemas.gas_model import GasReader
from schemas.shape import child

SIZES = ("volume", "catalyst_mass", "time")
"""The members by which a reactor is sized."""
_DIMENSIONS = {"volume": "volume", "catalyst_mass": "mass", "time": "time"}


@record()
class ReactorReading:
    """A request about a reactor while it is read.

    Attributes
    ----------
    reader : RequestReader
    reactions : ReactionSet
    key : int
        -1 after a fault.
    models : GasReader
    feed : Stream or None
        None after a fault.
    size_asked : bool
        Whether the size is what is asked for, rather than stated.
    """

    reader: RequestReader
    reactions: ReactionSet
    key: int
    models: GasReader
    feed: Stream | None
    size_asked: bool

    def quantity(
        self,
        said: Json,
        name: str,
        pointer: str,
        subject: Subject,
        *dimensions: str,
        above: float | None = 0.0,
        at_least: float | None = None,
    ) -> float | None:
        """Return a member in SI, above zero unless said otherwise; None if left out, or faulty."""
        place, about = child(pointer, name), (*subject, name)
        self.reader.at(about, place)
        if name not in said:
            return None
        found = self.reader.quantity(
            said[name], place, about, *dimensions, above=above, at_least=at_least
        )
        return None if found is None else found.value

    def stream(self, document: Json, pointer: str, subject: Subject) -> Stream | None:
        """Return a stream that joins the feed on its way; None after a fault."""
        reader = self.reader
        models, phase = self.models, document.get("phase")
        if models.real and phase == "liquid":
            # That there is no gas is told of the feed.
            models = GasReader(reader, self.reactions, None, {})
        known = read_feed(
            document, pointer, reader, self.reactions, self.key, models, subject, flows_only=True
        )
        if known is None:
            return None
        if known.per_mole_of_key:
            reader.fault(
                "field-needed",
                child(pointer, "flow"),
                "what joins the feed must state how much flows; state its flow",
            )
            return None
        own = known.stream
        if self.feed is not None and own.phase != self.feed.phase:
            reader.fault(
                "conflicting-fields",
                child(pointer, "phase"),
                f"found a {own.phase} that joins a {self.feed.phase}; one phase reacts here, so"
                f" state what of it goes into the {self.feed.phase}",
            )
            return None
        return own

    def size(self, said: Json, pointer: str, subject: Subject) -> Size | None:
        """Return the size that a reactor states; None where it states none, or after a fault."""
        stated = [name for name in SIZES if name in said]
        if not stated:
            return None
        if len(stated) > 1:
            self.reader.fault(
                "conflicting-fields",
                child(pointer, stated[1]),
                f"found {' and '.join(repr(name) for name in stated)}; state one of them, and where"
                " both count the 'bulk_density' of a packed bed",
            )
            return None
        (name,) = stated
        value = self.quantity(said, name, pointer, subject, _DIMENSIONS[name])
        return None if value is None else Size(name, value)  # type: ignore[arg-type]

    def size_as_asked(
        self, said: Json, pointer: str, subject: Subject, allowed: tuple[str, ...]
    ) -> Size | None:
        """Return the size of the one reactor of a request, which states it unless it is asked."""
        size = self.size(said, pointer, subject)
        stated = [name for name in SIZES if name in said]
        if self.size_asked and stated:
            self.reader.fault(
                "field-not-used",
                child(pointer, stated[0]),
                "the size is what is asked for here; leave it out, or ask what comes out of the"
                " reactor as it is (/v1/rating)",
            )
        elif not self.size_asked and not stated:
            self.reader.fault(
                "size-not-stated",
                pointer,
                f"found no size; state {' or '.join(repr(name) for name in allowed)}",
            )
        return size

    @contextmanager
    def aside(self) -> Iterator[None]:
        """Read what says nothing of the units to report in: those of particles and meters."""
        used = dict(self.reader.used)
        yield
        self.reader.used.clear()
        self.reader.used.update(used)
