"""Element closures of the raw readings: what leaves over what enters, before reconciling.

A reconciled account closes by construction, so the closure is taken from the
same estimation with feed and outlet left unconnected: every stream is then
what its own readings say. Where no meter tells how much leaves in a stream,
the inert substances tie it to the feed, as one would by hand; an element whose
closure then holds by that tie alone has none of its own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Note, Subject
from core.outlet_analysis.account import (
    Account,
    AccountProblem,
    Around,
    release_around,
    release_outlet,
)
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.monte_carlo import MOST_LEFT_OUT, Draws, drawn_blocks
from core.outlet_analysis.preparation import BLOCK, prepare
from core.outlet_analysis.ratios import Uncertain, forms_of, ratios
from core.outlet_analysis.remarks import counting
from core.outlet_analysis.solving import Fitted, fit_block
from core.reactions.elements import element_matrix

NAMES = ("into", "out", "ratio")


@dataclass(frozen=True, eq=False)
class Closures:
    """Elements in, out, and out over in; E elements, absent where the readings do not tell.

    Attributes
    ----------
    elements : tuple of str, length E
    into, out : Uncertain, shape (..., E)
        mol/s of atoms (batch: mol).
    ratio : Uncertain, shape (..., E)
    notes : tuple of Note
    """

    elements: tuple[str, ...]
    into: Uncertain
    out: Uncertain
    ratio: Uncertain
    notes: tuple[Note, ...]


def element_closures(
    found: Estimate, around: Around = "reactor", draws: Draws | None = None
) -> Closures:
    """Return the element closures of the readings of an estimate with an outlet.

    With a recycle they are those ``around`` the reactor, or the whole that it
    stands in: what leaves over what comes from outside. With ``draws``, of a
    single sample, their uncertainties come from the same draws of the readings.
    """
    reactions = found.account.problem.reactions
    elements, atoms = element_matrix(reactions)
    single = found.account.readings.samples is None
    absent = np.atleast_2d(found.absent)
    of = _Closures(len(absent), len(elements), len(reactions.substances))
    flowing = np.any([found.account.feed_map, found.account.outlet_map], axis=(0, 2))
    opaque = [
        i
        for i, substance in enumerate(reactions.substances)
        if substance.formula is None and flowing[i]
    ]
    silent = _silent(found.account.problem, around)
    if elements and not opaque and not silent:
        # What was taken as absent from the feed is so here; mostly that is nothing at all.
        patterns, which = absent[:1], np.zeros(len(absent), dtype=np.intp)
        if absent.any():
            patterns, which = np.unique(absent, axis=0, return_inverse=True)
        for k, pattern in enumerate(patterns):
            account = _released(found.account, around, np.flatnonzero(pattern))
            rows = np.flatnonzero(which.reshape(-1) == k)
            for first in range(0, len(rows), BLOCK):
                of.fill(account, atoms, rows[first : first + BLOCK], found.first)
    into, out, ratio = (
        Uncertain(value[0], u[0]) if single else Uncertain(value, u)
        for value, u in ((of.values[name], of.spread[name]) for name in NAMES)
    )
    if draws is not None and elements and not opaque and not silent:
        into, out, ratio = _drawn(found, around, draws, atoms, (into, out, ratio))
        for name, part in zip(NAMES, (into, out, ratio), strict=True):
            of.values[name] = part.value[None]
    notes = (
        [silent]
        if silent is not None
        else _notes(found.account, elements, atoms, of, opaque, around)
    )
    return Closures(elements, into, out, ratio, tuple(notes))


def _released(account: Account, around: Around, absent: IntArray) -> Account:
    """Return a part of an account with feed and outlet unconnected."""
    if account.problem.recycle is None:
        return release_outlet(account, absent.tolist())
    return release_around(account, around, absent.tolist())


def _drawn(
    found: Estimate,
    around: Around,
    draws: Draws,
    atoms: FloatArray,
    estimated: tuple[Uncertain, Uncertain, Uncertain],
) -> tuple[Uncertain, Uncertain, Uncertain]:
    """Closures with the spread that draws give them; absent where too many have none."""
    account = _released(found.account, around, np.flatnonzero(found.absent))
    forms = np.concatenate([atoms @ account.feed_map, atoms @ account.outlet_map])
    flows = np.full((draws.sampling.draws, len(forms)), np.nan)
    for rows, series in drawn_blocks(found.account, draws.sampling, account, draws.factors):
        block = flows[rows]
        for outcome in fit_block(prepare(series, slice(0, len(block))), None):
            if isinstance(outcome, Fitted):
                block[outcome.rows] = outcome.z @ forms.T
    flows = flows[draws.kept & np.isfinite(flows).all(axis=1)]
    into, out, ratio = estimated
    if len(flows) < (1 - MOST_LEFT_OUT) * draws.sampling.draws:
        nothing = np.zeros(len(atoms), dtype=bool)
        return into.where(nothing), out.where(nothing), ratio.where(nothing)
    fed, left = np.split(flows, 2, axis=1)
    return (
        draws.spread(into.value, fed),
        draws.spread(out.value, left),
        draws.quotient(ratio.value, into.value, left, fed),
    )


def _silent(problem: AccountProblem, around: Around) -> Note | None:
    """Return what to say where no stream out of a part with recycle has any reading."""
    recycle = problem.recycle
    if recycle is None:
        return None
    streams, place = problem.outlet, "out of the reactor, in 'outlet',"
    closure: Subject = ("closure",)
    if around == "whole":
        purge = () if recycle.purge is None else (recycle.purge,)
        streams, place = (*recycle.products, *purge), "that leaves, in 'product' and 'purge',"
        closure = ("overall", "closure")
    if any(stream.flows or stream.analyses for stream in streams):
        return None
    return Note(
        "closure-not-read",
        f"no element closure around the {around} is given: nothing {place} is read",
        subject=closure,
    )


class _Closures:
    """Arrays of N samples' closures, to be filled account by account."""

    def __init__(self, samples: int, elements: int, substances: int) -> None:
        shape = (samples, elements)
        self.values = {name: np.full(shape, np.nan) for name in NAMES}
        self.spread = {name: np.full(shape, np.nan) for name in NAMES}
        self.tied = np.zeros(shape, dtype=bool)
        self.unread = np.zeros((samples, 2, substances), dtype=bool)

    def fill(self, account: Account, atoms: FloatArray, rows: IntArray, offset: int) -> None:
        count = len(atoms)
        into, out = atoms @ account.feed_map, atoms @ account.outlet_map
        tied = np.all(np.abs(into - out) < 1e-12, axis=1) & into.any(axis=1)
        self.tied[rows] = tied
        for outcome in fit_block(prepare(account, offset + rows), None):
            if not isinstance(outcome, Fitted):
                continue
            at = rows[outcome.rows]
            z, covariance, known = outcome.with_covariance()
            everything = np.concatenate([into, out, account.feed_map, account.outlet_map])
            is_open = _open(outcome, everything) | ((~known) @ (everything != 0).T)
            hidden_of = np.split(is_open, [count, 2 * count], axis=1)
            open_in, open_out = hidden_of[:2]
            for name, forms, hidden in (("into", into, open_in), ("out", out, open_out)):
                part = forms_of(z, covariance, forms)
                self.values[name][at] = np.where(hidden, np.nan, part.value)
                self.spread[name][at] = np.where(hidden, np.nan, part.u)
            part = ratios(z, covariance, out, into, account.largest_flow(z))
            hidden = open_in | open_out | tied
            self.values["ratio"][at] = np.where(hidden, np.nan, part.value)
            self.spread["ratio"][at] = np.where(hidden, np.nan, part.u)
            self.unread[at] = hidden_of[2].reshape(len(at), *self.unread.shape[1:])


def _open(outcome: Fitted, forms: FloatArray) -> BoolArray:
    """Which forms change along what the readings leave open."""
    if not outcome.directions.shape[1]:
        return np.zeros(len(forms), dtype=bool)
    length = np.linalg.norm(forms * outcome.natural[0], axis=1)
    moved = np.linalg.norm(forms @ outcome.directions, axis=1)
    return np.asarray(moved > 1e-6 * np.where(length > 0, length, 1.0))


def _notes(
    account: Account,
    elements: tuple[str, ...],
    atoms: FloatArray,
    of: _Closures,
    opaque: list[int],
    around: Around,
) -> list[Note]:
    names = account.problem.reactions.names
    closure, place = ("closure", ()) if around == "reactor" else ("overall closure", ("overall",))
    if opaque:
        return [
            Note(
                "closure-opaque",
                f"no element {closure} is given: the atoms of {{substances}} are not known;"
                " declare a formula to have it",
                subject=(*place, "closure"),
                facts={"substances": ", ".join(names[i] for i in opaque)},
            )
        ]
    counted = counting(account.readings.samples)
    notes = []
    anywhere = of.unread.any(axis=0)
    for e, element in enumerate(elements):
        found = anywhere & (atoms[e] > 0)
        if found.any():
            words, facts = counted(np.asarray((of.unread & found).any(axis=(1, 2))))
            where = [
                f"{', '.join(names[i] for i in np.flatnonzero(found[side]))} {way}"
                for side, way in ((0, "fed"), (1, "leaving"))
                if found[side].any()
            ]
            notes.append(
                Note(
                    "closure-not-read",
                    f"the {closure} of {{element}} cannot be formed from the readings alone, which"
                    " do not tell the flow of {substances}" + words,
                    subject=(*place, "closure", element),
                    facts={"element": element, "substances": " and ".join(where), **facts},
                )
            )
        elif of.tied[:, e].any():
            notes.append(
                Note(
                    "closure-by-tie",
                    f"the {closure} of {{element}} says nothing: no meter tells how much leaves,"
                    " and the inert substances that hold it were used to tell",
                    subject=(*place, "closure", element),
                    facts={"element": element},
                )
            )
        elif (none := np.isnan(of.values["ratio"][:, e]) & ~np.isnan(of.values["out"][:, e])).any():
            words, facts = counted(none)
            notes.append(
                Note(
                    "denominator-near-zero",
                    f"no {closure} of {{element}} is given: what is fed of it is within twice its"
                    " uncertainty of zero, or of what rounding leaves" + words,
                    subject=(*place, "closure", element),
                    facts={"element": element, **facts},
                )
            )
        elif (lost := np.isnan(of.values["out"][:, e])).any():
            words, facts = counted(lost)
            notes.append(
                Note(
                    "closure-not-read",
                    f"the {closure} of {{element}} is not given: from the readings alone, feed and"
                    " outlet unconnected, no account was found" + words,
                    subject=(*place, "closure", element),
                    facts={"element": element, **facts},
                )
            )
    return notes
