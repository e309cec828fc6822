"""What the readings leave open, and which further reading would settle it.

The test is the rank of the slopes of all readings that are there, each row and
each unknown in its natural size, so that it asks what *can* be known and not
how well: a poorly determined quantity is answered with its large uncertainty.
Source of the notion: observability of a measurement set by the null space of
its linearisation, C. M. Crowe, Chem. Eng. Sci. 44 (1989) 2909-2913.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Fact, Fault, Readings, Subject
from core.outlet_analysis.account import Account, listed
from core.outlet_analysis.readings import FURTHER, VOLUME, ReadingWriter, describe_stream
from core.streams.metered import FlowReading, Measurement

OPEN = 1e-7
"""Singular value, relative to the largest, below which a direction is open."""
TOUCHED = 1e-6
"""Part of an open direction that a quantity must take to be open itself."""
LARGEST_SET = 3
FEW = 5


def equilibrated(slopes: FloatArray, active: BoolArray, natural: FloatArray) -> FloatArray:
    """Slopes (N, m, n) of the readings that are there, in natural sizes, rows of unit length."""
    rows = slopes * natural[:, None, :]
    length = np.sqrt((rows * rows).sum(axis=-1))
    usable = active & (length > 0)
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


@dataclass(frozen=True, eq=False)
class _Candidate:
    """A reading that could be made: its words and its slope in natural sizes (n,)."""

    words: str
    slope: FloatArray


def under_determined(
    account: Account,
    z: FloatArray,
    natural: FloatArray,
    directions: FloatArray,
    missing: tuple[Subject, ...],
) -> Fault:
    """Say what the readings leave open, and the fewest further readings that would settle it.

    Parameters
    ----------
    account : Account
    z, natural : ndarray, shape (n,)
        Where the readings are met, and the sizes of the unknowns there.
    directions : ndarray, shape (n, d)
        As :func:`open_directions` gives them.
    missing : tuple of Subject
        Readings of the account that are missing from this sample.
    """
    names = account.problem.reactions.names
    key = account.problem.key
    words: list[str] = []
    fed, left = account.feed_map, account.outlet_map
    reported = [fed]
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
    for forms, where in ((fed, "fed"), (left, "leaving")):
        found = [names[i] for i in np.flatnonzero(touched(forms, natural, directions))]
        if found:
            words.append(f"the flow of {listed(found)} {where}")
    target = np.concatenate(reported) * natural @ directions
    sets = _settling(_candidates(account, z, natural), target, directions)
    if sets:
        options = "; or ".join(" together with ".join(chosen) for chosen in sets)
        cure = "One more reading would settle it" if len(sets[0]) == 1 else "What would settle it"
        detail = "the readings leave open {open}. " + cure + ": {further}"
    else:
        options = "none found among the flows and fractions of these streams"
        detail = "the readings leave open {open}; readings that would settle it: {further}"
    facts: dict[str, Fact] = {"open": listed(words), "further": options}
    if missing:
        detail += ". Missing here: {missing}"
        facts["missing"] = Readings(missing)
    subject: Subject = ("outlet",) if account.problem.outlet else ("feed",)
    return Fault("under-determined", subject, detail, facts)


def _conversion_slope(fed: FloatArray, left: FloatArray, z: FloatArray) -> FloatArray:
    into = float(fed @ z)
    if not into:
        return fed - left
    return np.asarray((fed - left) / into - fed * float((fed - left) @ z) / into**2)


def _candidates(account: Account, z: FloatArray, natural: FloatArray) -> list[_Candidate]:
    problem, streams = account.problem, account.streams
    names = problem.reactions.names
    writer = ReadingWriter(problem.reactions, streams, len(problem.feed))
    words: list[str] = []
    blank = Measurement(1.0, 1.0, ())

    def note(text: str) -> None:
        words.extend([text] * (len(writer.measurements) - len(words)))

    count = len(names)
    for g, stream in enumerate(streams):
        where = describe_stream(streams, len(problem.feed), g)
        analysis = stream.analysis
        carried = np.any(account.stream_map[g * count : (g + 1) * count] != 0, axis=1)
        removed = {r.substance for r in analysis.removed} if analysis else set()
        read = {
            next(iter(component.weights))
            for component in (analysis.components if analysis else ())
            if len(component.weights) == 1
        }
        for i in np.flatnonzero(carried).tolist():
            if i in removed or i in read:
                continue
            total = writer.sample_total(g, writer.ones, "amount")
            form = writer.flows(g, writer.sampled(g, np.eye(count)[i]))
            writer.add(g, blank, form, [(total, -1.0)])
            note(f"the fraction of {names[i]} in {'the analysis of ' if analysis else ''}{where}")
        writer.flow_reading(g, FlowReading("amount", blank))
        note(f"the total flow of {where}")
        if analysis is not None and analysis.removed:
            writer.flow_reading(g, FlowReading("amount", blank, as_analysed=True))
            note(f"the flow of {where} as analysed")
        for i in np.flatnonzero(carried).tolist():
            if g < len(problem.feed) or i in removed:
                writer.flow_reading(g, FlowReading("amount", blank, substance=i))
                note(f"the flow of {names[i]} in {where}")
        place = len(streams) * count + g * FURTHER + VOLUME
        if account.stream_map[place].any():
            volume = writer.further_base(g, VOLUME)
            if stream.phase == "liquid":
                writer.flow_reading(g, FlowReading("volume", blank))
                note(f"the density or the volumetric flow of {where}")
            else:
                moles = writer.flows(g, writer.own[g])
                writer.add(g, blank, moles, [(volume, -1.0)])
                note(f"the temperature and pressure of {where}")
    forms = writer.forms().through(account.stream_map)
    found = forms.at(z[None])
    slopes = forms.jacobian(found)[0] * natural
    length = np.linalg.norm(slopes, axis=1)
    return [
        _Candidate(text, slope / size)
        for text, slope, size in zip(words, slopes, length, strict=True)
        if size > 0 and np.isfinite(size)
    ]


def _settling(
    candidates: list[_Candidate], target: FloatArray, directions: FloatArray
) -> list[tuple[str, ...]]:
    """Smallest sets of candidates after which the target no longer changes, a few of them."""
    seen = np.array([candidate.slope @ directions for candidate in candidates]).reshape(
        len(candidates), directions.shape[1]
    )
    strength = np.linalg.norm(seen, axis=1)
    # Those that see most of what is open come first; alike ones keep their order.
    order = np.argsort(-np.round(strength, 2), kind="stable")
    useful = [int(k) for k in order if strength[k] > TOUCHED]
    need = np.linalg.norm(target)

    def settles(rows: list[int]) -> bool:
        _, values, right = np.linalg.svd(seen[rows], full_matrices=True)
        rank = int((values > TOUCHED).sum())
        return bool(np.linalg.norm(target @ right[rank:].T) <= 10 * TOUCHED * need)

    found: list[tuple[str, ...]] = []
    for size in range(1, LARGEST_SET + 1):
        pool = useful if size < LARGEST_SET else useful[:20]
        for chosen in combinations(pool, size):
            words = tuple(candidates[k].words for k in chosen)
            if words not in found and settles(list(chosen)):
                found.append(words)
                if len(found) == FEW:
                    return found
        if found:
            return found
    chosen_rows: list[int] = []
    while useful and len(chosen_rows) < directions.shape[1]:
        _, values, right = np.linalg.svd(seen[chosen_rows], full_matrices=True)
        left = right[int((values > TOUCHED).sum()) :].T if chosen_rows else np.eye(len(right))
        best = max(useful, key=lambda k: float(np.linalg.norm(seen[k] @ left)))
        if np.linalg.norm(seen[best] @ left) <= TOUCHED:
            break
        chosen_rows.append(best)
        if settles(chosen_rows):
            return [tuple(candidates[k].words for k in chosen_rows)]
    return found
