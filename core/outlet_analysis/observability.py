"""What the readings leave open, and which further reading would settle it.

The test is the rank of the slopes of all readings that are there, each row and
each unknown in its natural size, so that it asks what *can* be known and not
how well: a poorly determined quantity is answered with its large uncertainty.
Source of the notion: observability of a measurement set by the null space of
its linearisation, C. M. Crowe, Chem. Eng. Sci. 44 (1989) 2909-2913.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fact, Fault, Readings, Subject
from core.outlet_analysis.account import Account, describe_stream, fed_in, listed
from core.outlet_analysis.budget import WORK_OF_SETTLING
from core.outlet_analysis.forms import Forms
from core.outlet_analysis.readings import (
    FRACTIONS,
    VOLUME,
    ReadingWriter,
)
from core.streams.metered import Analysis, Basis, FlowKind, FlowReading, Measurement

OPEN = 1e-7
"""Singular value, relative to the largest, below which a direction is open."""
CANCELLED = 1e-9
"""Slope of a reading, relative to that of what it counts, which is rounding alone."""
TOUCHED = 1e-6
"""Part of an open direction that a quantity must take to be open itself."""
SETTLED = 1e-8
"""Part of what was open that further readings may leave: less than TOUCHED, since where a split is
among the unknowns the slopes are others once there are values."""
USEFUL = 1e-3
"""Part of its slope along what is open that a further reading must have to be worth making."""
LARGEST_SET = 3
FEW = 5

BLANK = Measurement(1.0, 1.0, ())
FLOW_WORDS: dict[bool, dict[FlowKind, str]] = {
    False: {"amount": "flow", "mass": "mass flow", "volume": "volumetric flow"},
    True: {"amount": "amount", "mass": "mass", "volume": "volume"},
}
"""What is metered of a flow, and of a batch."""
FEED_WORDS = {False: "feed", True: "fresh feed"}
"""What comes from outside is called, without a recycle and with one."""


def equilibrated(forms: Forms, z: FloatArray, active: BoolArray, natural: FloatArray) -> FloatArray:
    """Slopes (N, m, n) of the readings that are there, in natural sizes, rows of unit length.

    A row is nothing where its parts cancel: a fraction that is the same
    whatever the unknowns are tells nothing.
    """
    found = forms.at(z)
    rows = forms.jacobian(found) * natural[:, None, :]
    length = np.sqrt((rows * rows).sum(axis=-1))
    if forms.split is None:
        counted = np.sqrt((natural * natural) @ (forms.numerators * forms.numerators).T)
    else:
        counted = np.linalg.norm(found.numerators * natural[:, None, :], axis=-1)
    usable = active & (length > CANCELLED * np.abs(found.product) * counted) & (length > 0)
    scaled: FloatArray = rows * np.where(usable, 1 / np.where(usable, length, 1.0), 0.0)[..., None]
    return scaled


def open_patterns(scaled: FloatArray) -> BoolArray:
    """Whether each stack of scaled slopes (N, m, n) leaves a direction open, shape (N,)."""
    n = scaled.shape[-1]
    if scaled.shape[1] < n:
        return np.ones(len(scaled), dtype=bool)
    values = np.linalg.svd(scaled, compute_uv=False)
    return np.asarray(~(values[:, -1] > OPEN * values[:, 0]))


def open_directions(scaled: FloatArray) -> FloatArray:
    """Orthonormal basis (n, d) of what the scaled slopes (m, n) leave open."""
    _, values, right = np.linalg.svd(scaled, full_matrices=True)
    rank = int((values > OPEN * values[0]).sum()) if values.size else 0
    return np.asarray(right[rank:].T)


def touched(forms: FloatArray, natural: FloatArray, directions: FloatArray) -> BoolArray:
    """Which linear forms (k, n) of the unknowns change along the open directions."""
    scaled = forms * natural
    length = np.linalg.norm(scaled, axis=-1)
    moved = np.linalg.norm(scaled @ directions, axis=-1)
    return np.asarray(moved > TOUCHED * np.where(length > 0, length, 1.0))


_Claim = tuple[int, str, str]


def taken_as_absent(
    account: Account, z: FloatArray, natural: FloatArray, directions: FloatArray
) -> IntArray:
    """Unknown flows that may be taken as nothing so that all that is asked for is settled.

    They are those of substances removed fully from a feed's sample, whose flow
    no reading tells, and of the same substances leaving where no reaction
    makes them. None, where anything else is open with them: a conversion, an
    extent or another flow.
    """
    none = np.empty(0, dtype=np.intp)
    problem = account.problem
    inert = ~np.any(problem.reactions.nu != 0, axis=0)
    removed = {(g, i) for g, i in _removed_from_feed(account)}
    always = {
        i
        for _, i in removed
        if all((g, i) in removed for g, s in enumerate(problem.feed) if i in fed_in(s))
    }
    columns = np.array(
        [
            column
            for column, of in enumerate(account.unknowns)
            if of.kind == "flow"
            and (
                (of.stream, of.index) in removed
                or (of.stream >= len(problem.feed) and of.index in always and inert[of.index])
            )
        ],
        dtype=np.intp,
    )
    moved = np.linalg.norm(directions[columns], axis=1) > TOUCHED
    columns = columns[moved]
    if not len(columns):
        return none
    substances = {account.unknowns[column].index for column in columns.tolist()}
    others = np.array([i not in substances for i in range(len(inert))])
    kept = [account.feed_map[others], account.fresh_map[others], account.returned_map[others]]
    if problem.outlet:
        key = problem.key
        slope = _conversion_slope(account.feed_map[key], account.outlet_map[key], z)
        kept += [account.outlet_map[others], account.extent_map, slope[None]]
    if touched(np.concatenate(kept), natural, directions).any():
        return none
    rest = without_columns(directions, columns)
    flows = np.concatenate([account.feed_map, account.outlet_map, account.returned_map])
    return none if touched(flows, natural, rest).any() else columns


def without_columns(directions: FloatArray, columns: IntArray) -> FloatArray:
    """What of the open directions (n, d) is left with some unknowns known, (n, d')."""
    _, values, right = np.linalg.svd(directions[columns], full_matrices=True)
    rank = int((values > TOUCHED).sum())
    return np.asarray(directions @ right[rank:].T)


def _removed_from_feed(account: Account) -> list[tuple[int, int]]:
    """Feed stream and substance of everything that was fully removed and may be there.

    What another analysis of the same stream has read is no longer in question.
    """
    found = [
        (g, removal.substance)
        for g, stream in enumerate(account.problem.feed)
        for analysis in stream.analyses
        for removal in analysis.removed
        if removal.residual == 0
        and removal.substance in fed_in(stream)
        and not any(_reads(other, removal.substance) for other in stream.analyses)
    ]
    return list(dict.fromkeys(found))


def _reads(analysis: Analysis, substance: int) -> bool:
    """Whether a value of an analysis counts a substance, or its balance is that."""
    return substance == analysis.balance or any(
        substance in component.weights for component in analysis.components
    )


@dataclass(frozen=True, eq=False)
class _Candidate:
    """A reading that could be stated.

    Attributes
    ----------
    words : str
    slope : ndarray, shape (k, n)
        In natural sizes; of a stream of its own for a substance that is removed
        from the samples of several feeds, in each of them.
    flow : bool
        It tells how much flows.
    claims : frozenset of (stream, place, what)
        What it makes of the form of its stream; of each place there is one.
    """

    words: str
    slope: FloatArray
    flow: bool
    claims: frozenset[_Claim]


def _can_be_stated(chosen: Iterable[_Candidate]) -> bool:
    claims = {claim for candidate in chosen for claim in candidate.claims}
    return len({claim[:2] for claim in claims}) == len(claims)


def under_determined(
    account: Account,
    z: FloatArray,
    natural: FloatArray,
    scaled: FloatArray,
    missing: tuple[Subject, ...] = (),
    off_scale: tuple[Subject, ...] = (),
) -> Fault:
    """Say what the readings leave open, and the fewest further readings that would settle it.

    Parameters
    ----------
    account : Account
    z, natural : ndarray, shape (n,)
        Where the readings are met, and the sizes of the unknowns there.
    scaled : ndarray, shape (m + 1, n)
        As :func:`equilibrated` gives it: the readings, and the key fed where
        no reading tells how much flows.
    missing : tuple of Subject
        Readings of the account that are missing from this sample.
    off_scale : tuple of Subject
        Those of which only a lower limit is known.
    """
    names = account.problem.reactions.names
    key, flow = account.problem.key, FLOW_WORDS[account.problem.batch]["amount"]
    directions = open_directions(scaled)
    words: list[str] = []
    fed, left = account.feed_map, account.outlet_map
    reported, where = [fed], [(fed, "fed")]
    if account.problem.outlet:
        converted = _conversion_slope(fed[key], left[key], z)
        if touched(converted[None], natural, directions)[0]:
            words.append(f"the conversion of {names[key]}")
        of_extents = touched(account.extent_map, natural, directions)
        words += [
            f"the extent of {account.problem.reactions.reactions[j].id}"
            for j in np.flatnonzero(of_extents)
        ]
        reported += [left, account.extent_map]
        where.append((left, "leaving"))
    if account.problem.recycle is not None:
        into, out = account.fresh_map[key], account.leaving_map[key]
        if touched(_conversion_slope(into, out, z)[None], natural, directions)[0]:
            words.insert(0, f"the overall conversion of {names[key]}")
        reported += [account.fresh_map, account.returned_map]
        where = [
            (account.fresh_map, "in the fresh feed"),
            (account.returned_map, "in the recycle"),
            (fed, "into the reactor"),
            (left, "out of it"),
        ]
    for forms, place in where:
        found = [names[i] for i in np.flatnonzero(touched(forms, natural, directions))]
        if found:
            words.append(f"the {flow} of {listed(found)} {place}")
    subject: Subject = ("outlet",) if account.problem.outlet else ("feed",)
    if not words:
        return Fault(
            "under-determined",
            subject,
            "the readings of this sample do not tell the unknowns apart within double precision:"
            " a reading that should decide between them is next to nothing here; add one that"
            " carries information, such as a flow or the fraction of a main substance",
        )
    target = np.concatenate(reported) * natural
    sets = _settling(_candidates(account, z, natural), target, scaled)
    if sets:
        options = "; or ".join(" together with ".join(chosen) for chosen in sets)
        cure = "One more reading would settle it" if len(sets[0]) == 1 else "What would settle it"
        detail = "the readings leave open {open}. " + cure + ": {further}"
    else:
        options = "none found among the flows and fractions of these streams"
        detail = "the readings leave open {open}; readings that would settle it: {further}"
    facts: dict[str, Fact] = {"open": listed(words), "further": options}
    open_flows = touched(account.stream_map, natural, directions)
    for k, (g, i) in enumerate(_removed_from_feed(account)):
        if open_flows[g * len(names) + i]:
            stream = describe_stream(account.problem, g)
            facts[f"removed_{k}"] = names[i]
            detail += (
                f". {{removed_{k}}} is removed from the sample of {stream}, and no reading tells"
                f" its {flow}"
            )
    if missing:
        detail += ". Missing here: {missing}"
        facts["missing"] = Readings(missing)
    if off_scale:
        detail += ". A value off scale bounds the account and settles nothing: {off_scale}"
        facts["off_scale"] = Readings(off_scale)
    return Fault("under-determined", subject, detail, facts)


def _conversion_slope(fed: FloatArray, left: FloatArray, z: FloatArray) -> FloatArray:
    into = float(fed @ z)
    if not into:
        return fed - left
    return np.asarray((fed - left) / into - fed * float((fed - left) @ z) / into**2)


def _candidates(account: Account, z: FloatArray, natural: FloatArray) -> list[_Candidate]:
    """Readings that could be stated beside those that are."""
    forms = _Further(account)
    for g in range(len(account.streams)):
        forms.of_stream(g)
    written = account.over_unknowns(forms.writer.forms())
    scaled = equilibrated(written, z[None], np.ones((1, len(forms.words)), bool), natural[None])[0]
    told = scaled.any(axis=1)
    found: dict[str, _Candidate] = {}
    for (words, claims), slope, flow, tells in zip(
        forms.words, scaled, forms.writer.flow, told, strict=True
    ):
        if not tells:
            continue
        slopes = slope[None]
        if words in found:
            slopes = np.concatenate([found[words].slope, slopes])
        found[words] = _Candidate(words, slopes, flow, claims)
    return list(found.values())


class _Further:
    """Writes the readings that could be stated of a stream in the form that it has."""

    def __init__(self, account: Account) -> None:
        self.account = account
        problem = account.problem
        self.streams, self.feeds = account.streams, len(problem.feed)
        self.names = problem.reactions.names
        self.flow_words = FLOW_WORDS[problem.batch]
        self.writer = ReadingWriter(problem.reactions, self.streams, self.feeds)
        self.words: list[tuple[str, frozenset[_Claim]]] = []

    def note(self, words: str, *claims: _Claim) -> None:
        """Say what the reading written last is."""
        self.words.append((words, frozenset(claims)))

    def of_stream(self, g: int) -> None:
        """Write what could be read of stream ``g``.

        A stream states the flows of its substances, or an analysis with or
        without its total flow.
        """
        stream = self.streams[g]
        where = describe_stream(self.account.problem, g)
        rows = self.account.stream_forms(g, np.ones(len(self.account.unknowns)))
        carried = np.flatnonzero(np.any(rows != 0, axis=1)).tolist()
        by_substance = {f.substance for f in stream.flows if f.substance is not None}
        if stream.analyses or not by_substance:
            self._analysed(g, where, carried)
        if not stream.analyses:
            for i in carried:
                if i not in by_substance:
                    self._flow(g, FlowReading("amount", BLANK, substance=i))
                    words = f"the {self.flow_words['amount']} of {self.names[i]} in {where}"
                    self.note(words, (g, "form", "flows"))
        elif g < self.feeds:
            removed = _removed_from_feed(self.account)
            for stream_, i in removed:
                if stream_ == g and i in carried:
                    self._flow(g, FlowReading("amount", BLANK, substance=i))
                    self.note(
                        f"the {self.flow_words['amount']} of {self.names[i]}, as a"
                        f" {FEED_WORDS[self.account.problem.recycle is not None]} stream of its"
                        " own",
                        *((h, self.names[i], "alone") for h, j in removed if j == i),
                    )
        self._volume(g, where)

    def _flow(self, g: int, reading: FlowReading) -> None:
        self.writer.flow_reading(g, reading)

    def _analysed(self, g: int, where: str, carried: list[int]) -> None:
        stream, writer = self.streams[g], self.writer
        basis: Basis = "mass" if stream.phase == "liquid" else "mole"
        analyses = stream.analyses or (Analysis(basis, (), stream.subject),)
        for k, analysis in enumerate(analyses):
            known = {next(iter(c.weights)) for c in analysis.components if len(c.weights) == 1}
            known |= {removal.substance for removal in analysis.removed}
            constant, powers, _ = writer.divisor(g, analysis)
            share = "fraction" if analysis.basis in FRACTIONS else "concentration"
            place = "the analysis of" if stream.analyses else "an analysis of"
            if len(analyses) > 1:
                place = f"analysis {k + 1} of"
            for i in carried:
                # What is not of the stream's phase is read as part of it only once it has a value.
                if i not in known and writer.own[g][i]:
                    form = writer.counted(g, analysis, {i: 1.0})
                    writer.add(g, BLANK, form, powers, constant=constant)
                    self.note(
                        f"the {share} of {self.names[i]} in {place} {where}",
                        (g, "form", "analysis"),
                        (g, self.names[i], "in the stream"),
                    )
        if any(reading.substance is None for reading in stream.flows):
            return
        analysis = analyses[0]
        kind: FlowKind = "mass" if analysis.basis == "mass" else "amount"
        if stream.phase == "liquid" and analysis.basis not in FRACTIONS:
            kind = "volume"
        self._flow(g, FlowReading(kind, BLANK))
        analysed: _Claim = (g, "form", "analysis")
        self.note(f"the total {self.flow_words[kind]} of {where}", analysed, (g, "flow", "whole"))
        alike = len({frozenset(one.removed) for one in analyses}) == 1
        if analysis.removed and alike and kind != "volume":
            self._flow(g, FlowReading(kind, BLANK, as_analysed=True))
            self.note(
                f"the {self.flow_words[kind]} of {where} as analysed", (g, "flow", "as-analysed")
            )

    def _volume(self, g: int, where: str) -> None:
        stream, writer = self.streams[g], self.writer
        place = writer.place(g, VOLUME)
        if not self.account.stream_map[place].any():
            return
        if stream.phase == "liquid":
            # Of a liquid that keeps its density a density of its own would make two.
            shared = any(
                self.account.unknowns[column].stream != g
                for column in np.flatnonzero(self.account.stream_map[place]).tolist()
            )
            if stream.density is None and not shared:
                writer.density(g, BLANK)
                self.note(f"the density of {where}")
            if not stream.analyses:
                self._flow(g, FlowReading("volume", BLANK))
                self.note(f"the {self.flow_words['volume']} of {where}", (g, "form", "flows"))
        elif not writer.has_conditions(g):
            volume = writer.further_base(g, VOLUME)
            writer.add(g, BLANK, writer.flows(g, writer.own[g]), [(volume, -1.0)])
            self.note(f"the temperature and pressure of {where}")


def _settling(
    candidates: list[_Candidate], target: FloatArray, scaled: FloatArray
) -> list[tuple[str, ...]]:
    """Smallest sets of candidates after which the target no longer changes, a few of them.

    The first flow that is read takes the place of the key fed, the last row of
    ``scaled``: with it the account is no longer kept per mole of key.
    """
    directions = open_directions(scaled[:-1])
    per_key = scaled[-1:] @ directions
    if not candidates:
        return []
    seen = [candidate.slope @ directions for candidate in candidates]
    wanted = target @ directions
    strength = np.array([np.linalg.norm(of, axis=1).max() for of in seen])
    # Those that see most of what is open come first; alike ones keep their order.
    order = np.argsort(-np.round(strength, 2), kind="stable")
    useful = [int(k) for k in order if strength[k] > USEFUL]
    need = np.linalg.norm(wanted)
    tries = max(len(useful), int(WORK_OF_SETTLING / (len(target) * directions.shape[1] ** 2 + 1)))

    def left_open(rows: list[int]) -> FloatArray:
        """Orthonormal basis of what stays open with some candidates read."""
        of = np.concatenate([np.empty((0, directions.shape[1])), *(seen[k] for k in rows)])
        if not any(candidates[k].flow for k in rows):
            of = np.concatenate([of, per_key])
        _, values, right = np.linalg.svd(of, full_matrices=True)
        return np.asarray(right[int((values > USEFUL).sum()) :].T)

    def settles(rows: list[int]) -> bool:
        if not _can_be_stated(candidates[k] for k in rows):
            return False
        return bool(np.linalg.norm(wanted @ left_open(rows)) <= SETTLED * need)

    found: list[tuple[str, ...]] = []
    for size in range(1, LARGEST_SET + 1):
        pool = useful if size < LARGEST_SET else useful[:20]
        for chosen in combinations(pool, size):
            tries -= 1
            if tries < 0:
                break
            words = tuple(candidates[k].words for k in chosen)
            if words not in found and settles(list(chosen)):
                found.append(words)
                if len(found) == FEW:
                    return found
        if found:
            return found
    chosen_rows: list[int] = []
    while len(chosen_rows) < directions.shape[1]:
        left = left_open(chosen_rows)
        useful = [k for k in useful if _can_be_stated(candidates[j] for j in (*chosen_rows, k))]
        best = max(useful, key=lambda k: float(np.linalg.norm(seen[k] @ left)), default=-1)
        if best < 0:
            break
        if np.linalg.norm(seen[best] @ left) <= USEFUL:
            break
        chosen_rows.append(best)
        if settles(chosen_rows):
            # What was taken first may be told by what came later.
            for k in tuple(chosen_rows):
                fewer = [j for j in chosen_rows if j != k]
                chosen_rows = fewer if settles(fewer) else chosen_rows
            return [tuple(candidates[k].words for k in chosen_rows)]
    return found
