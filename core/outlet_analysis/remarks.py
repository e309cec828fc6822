"""What a reader of an estimate must know beside its numbers."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Fact, Note, Readings, Subject
from core.outlet_analysis.account import Account, listed
from core.outlet_analysis.analysis_sums import COVERAGE, REMARKED, WHOLE, percent, sum_u
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.readings import BELOW
from core.streams.known import meter_note

ILL_CONDITIONED = 1e8
"""Inflation of a variance from which on the answer is called ill-conditioned."""

ASSUMPTIONS = frozenset({"per-mole-of-key", "removed-taken-as-absent", "outlet-placement"})
"""Codes of what an estimate takes for granted; the other remarks are about what it found."""
BY_DIFFERENCE = 0.005
"""Share of what leaves of a substance from which on it is said where it is found by difference."""
UNREAD = 0.03
"""Share of a stream that no value names from which on a whole analysis is doubted."""

Counted = Callable[[BoolArray], tuple[str, dict[str, Fact]]]


def counting(samples: int | None) -> Counted:
    """Return what says, of a series, how many samples a remark concerns."""

    def counted(marks: BoolArray) -> tuple[str, dict[str, Fact]]:
        if samples is None:
            return "", {}
        return " ({count} of {samples} samples)", {
            "count": int(marks.sum()),
            "samples": len(marks),
        }

    return counted


def remarks(found: Estimate) -> Iterator[Note]:
    """Yield what a reader of the estimate must know."""
    account = found.account
    problem, samples = account.problem, account.readings.samples
    names = problem.reactions.names

    counted = counting(samples)
    if found.per_mole_of_key.any():
        words, facts = counted(found.per_mole_of_key)
        yield Note(
            "per-mole-of-key",
            "no reading tells how much flows; every flow is given per mole of {key} fed" + words,
            subject=("feed",),
            facts={"key": names[problem.key], **facts},
        )
    unchecked = (found.degrees_of_freedom == 0) & np.isfinite(found.chi_square)
    if unchecked.any():
        words, facts = counted(unchecked)
        yield Note(
            "no-redundancy",
            "the readings just suffice: none of them is checked by the others" + words,
            subject=("outlet",) if problem.outlet else ("feed",),
            facts=facts,
        )
    poor = found.inflation > ILL_CONDITIONED
    if poor.any():
        words, facts = counted(poor)
        yield Note(
            "ill-conditioned",
            "the readings barely tell the unknowns apart; small errors move the answer far, as"
            " its uncertainty says" + words,
            severity="warning",
            subject=("outlet",) if problem.outlet else ("feed",),
            facts=facts,
        )
    if found.absent.any():
        yield from _absent(found, counted)
    yield from _placement(found)
    yield from _below_zero(found, counted)
    yield from _backwards(found, counted)
    if found.ways > len(found.without_suspects):
        yield Note(
            "alternatives-not-all-given",
            "of {ways} ways to leave out readings so that the rest agree, {shown} are given: those"
            " that leave the least chi-square",
            subject=("reconciliation",),
            facts={"ways": found.ways, "shown": len(found.without_suspects)},
        )
    elif found.cut:
        yield Note(
            "alternatives-not-all-given",
            "there are too many readings to try every way to leave some of them out; what is named"
            " and given is what was found first",
            subject=("reconciliation",),
        )
    named = found.readings.suspect_set.any()
    if named and samples is None and not found.without_suspects and not found.cut:
        yield Note(
            "nothing-left-without-suspects",
            "no answer without the suspects is given: the readings that are left do not settle an"
            " account, or none comes near them",
            subject=("reconciliation",),
        )
    if found.readings.contradicted.any():
        yield from _contradicted(found, counted)
    yield from _sum_notes(found, counted)
    yield from _removal_notes(found, counted)
    yield from _meters(found)


def _contradicted(found: Estimate, counted: Counted) -> Iterator[Note]:
    """Limits beyond which the readings proper put the value."""
    for k in np.flatnonzero(found.readings.contradicted.any(axis=0)).tolist():
        words, facts = counted(found.readings.contradicted[:, k])
        yield Note(
            "limit-contradicted",
            "the other readings put this value beyond its limit by more than twice the uncertainty"
            " that they leave it: doubt the limit, or them. "
            + (
                "The limit is heeded nevertheless; see the answer without it"
                if (found.readings.bound[:, k] == BELOW).any()
                else "A value off scale is not heeded in the answer"
            )
            + words,
            severity="warning",
            subject=found.readings.subjects[k],
            facts=facts,
        )


def _absent(found: Estimate, counted: Counted) -> Iterator[Note]:
    """What was removed from a feed's sample, and is taken not to have been there."""
    account = found.account
    for column in np.flatnonzero(found.absent.any(axis=0)).tolist():
        unknown = account.unknowns[column]
        if unknown.stream >= len(account.problem.feed):
            continue
        subject = next(
            analysis.subject
            for analysis in account.streams[unknown.stream].analyses
            if any(removal.substance == unknown.index for removal in analysis.removed)
        )
        words, facts = counted(found.absent[:, column])
        yield Note(
            "removed-taken-as-absent",
            "{substance} is removed from the sample before it is analysed, and no reading tells"
            " how much of it is fed: taken as none. If there is some, state its flow as a feed"
            " stream of its own" + words,
            subject=subject,
            facts={"substance": account.problem.reactions.names[unknown.index], **facts},
        )


def _placement(found: Estimate) -> Iterator[Note]:
    """What several outlet streams are taken to hold."""
    account = found.account
    if len(account.outlet) > 1:
        yield _placed(found, account.outlet, account.outlet_map)
    if account.products:
        around = (account.returned, *(() if account.purge is None else (account.purge,)))
        yield _placed(found, (*around, *account.products), account.leaving_map)


def _placed(found: Estimate, streams: Sequence[int], leaving: FloatArray) -> Note:
    """What streams are taken to hold that share out what comes out of the reactor, or leaves."""
    account = found.account
    outlets = [account.streams[g] for g in streams]
    free = tuple(stream.subject for stream in outlets if stream.present is None)
    named = tuple(stream.subject for stream in outlets if stream.present is not None)
    facts: dict[str, Fact] = {}
    words = []
    side = "outlet" if streams[0] in account.outlet else "product"
    leave, leaves = ("leave", "leaves") if side == "outlet" else ("be", "is")
    if free:
        facts["free"] = Readings(free)
        words.append(f"anything that the phase can carry may {leave} in {{free}}")
    if named:
        facts["named"] = Readings(named)
        words.append(f"only what is named there {leaves} in {{named}}")
    detail = ", and ".join(words)
    for q, (g, stream) in enumerate(zip(streams, outlets, strict=True)):
        by_difference = stream.present is None and g in (*account.outlet, *account.products)
        shares = _by_difference(found, g, leaving) if by_difference else []
        if shares:
            facts[f"stream_{q}"], facts[f"shares_{q}"] = Readings((stream.subject,)), listed(shares)
            detail += (
                f". What the other streams leave over, and no value there tells, is in"
                f" {{stream_{q}}}: {{shares_{q}}}; state the phase of what cannot be there, or"
                " complete the analysis"
            )
    return Note("outlet-placement", detail, subject=(side,), facts=facts)


def _by_difference(found: Estimate, g: int, leaving: FloatArray) -> list[str]:
    """Substances, with the share of all that leaves, in stream ``g`` and in no value of it."""
    account = found.account
    read: set[int] = set()
    for analysis in account.streams[g].analyses:
        read.update(*(component.weights for component in analysis.components))
    flows, left = np.atleast_2d(found.stream_flows(g)), np.atleast_2d(found.z @ leaving.T)
    forms = found.stream_forms(g)
    carried = forms.any(axis=-1) & (forms != leaving).any(axis=-1)
    words = []
    for i in np.flatnonzero(np.atleast_2d(carried).any(axis=0)).tolist():
        there = np.isfinite(flows[:, i]) & (left[:, i] > 0)
        if i in read or not there.any():
            continue
        share = float((flows[there, i] / left[there, i]).mean())
        if share > BY_DIFFERENCE:
            words.append(f"{account.problem.reactions.names[i]} ({100 * share:.2g} %)")
    return words


def _sides(account: Account) -> Iterator[tuple[Subject, str, FloatArray, Iterable[int]]]:
    """Yield each side of the account, in words, its flows for scale, and its streams."""
    problem = account.problem
    feeds = range(len(problem.feed))
    if problem.recycle is None:
        yield ("feed",), "fed", account.feed_map, feeds
    else:
        yield ("fresh_feed",), "in the fresh feed", account.fresh_map, feeds
        yield ("feed",), "fed", account.feed_map, account.inlet
    if problem.outlet:
        yield ("outlet",), "leaving", account.outlet_map, account.outlet
    if problem.recycle is not None:
        yield ("recycle",), "returned", account.returned_map, (account.returned,)
        if account.purge is not None:
            yield ("purge",), "purged", account.leaving_map, (account.purge,)
        yield ("product",), "in the product", account.leaving_map, account.products


def _below_zero(found: Estimate, counted: Counted) -> Iterator[Note]:
    """Flows below zero by more than twice their uncertainty, stream by stream or in the sum."""
    account = found.account
    names = account.problem.reactions.names
    if not (account.every_flow(found.z) < 0).any():
        return
    for side, way, forms, streams in _sides(account):
        scale = np.abs(found.z @ forms.T).max(axis=-1, keepdims=True)
        parts = [
            (account.streams[g].subject, found.stream_forms(g), found.stream_flows(g))
            for g in streams
        ]
        if len(parts) > 1 and side != ("product",):
            parts.append((side, forms, found.z @ forms.T))
        said: set[int] = set()
        for subject, of, flows in parts:
            if not (flows < 0).any():
                continue
            below = flows < -np.maximum(2 * found.u_of(of), 1e-9 * scale)
            there = set(np.flatnonzero(below.any(axis=0)).tolist())
            # Of the sum only what no single stream shows.
            new = there - said if of is forms else there
            said |= there
            for i in sorted(new):
                words, facts = counted(below[:, i])
                yield Note(
                    "negative-flow",
                    "the readings put the flow of {substance} {way} below zero by more than twice"
                    " its uncertainty, which cannot be: look for a wrong reading, basis, removal"
                    " or a missing reaction" + words,
                    severity="warning",
                    subject=(*subject, names[i]),
                    facts={"substance": names[i], "way": way, **facts},
                )


def _backwards(found: Estimate, counted: Counted) -> Iterator[Note]:
    """One-way reactions whose extent is below zero by more than twice its uncertainty."""
    reactions = found.account.problem.reactions
    extents = found.extents
    if reactions.rank < len(reactions.reactions) or not (extents < 0).any():
        return
    scale = np.abs(found.feed_flows).max(axis=-1, keepdims=True)
    u = found.u_of(found.account.extent_map)
    below = extents < -np.maximum(2 * u, 1e-9 * scale)
    for j in np.flatnonzero(below.any(axis=0)).tolist():
        if reactions.reactions[j].reversible:
            continue
        name = reactions.reactions[j].id
        words, facts = counted(below[:, j])
        yield Note(
            "one-way-reaction-backwards",
            "the readings have the one-way reaction {reaction} run backwards by more than twice"
            " the uncertainty of its extent: look for a wrong reading, basis or removal, or write"
            " it as reversible (<=>)" + words,
            severity="warning",
            subject=("reactions", name),
            facts={"reaction": name, **facts},
        )


def _sum_notes(found: Estimate, counted: Counted) -> Iterator[Note]:
    """Analyses that do not quite add up, or do so though substances are missing from them."""
    account = found.account
    names = account.problem.reactions.names
    rows = slice(found.first, found.first + len(found.z))
    good = np.isfinite(found.chi_square)
    for of in account.sums:
        if not (of.off or of.unread):
            continue
        subject = of.analysis.subject
        least, most = of.least[rows], of.most[rows]
        if of.off:
            # Of part of a sample, or all of it but a balance, less than the whole is right.
            below = np.minimum(most - 1, 0) if of.complete else 0.0
            off = np.where(least > 1, least - 1, below)
            u = sum_u(account.readings, of, rows)
            wide = good & (np.abs(off) > np.maximum(REMARKED, COVERAGE * u))
            if wide.any():
                words, facts = counted(wide)
                yield Note(
                    "analysis-sum",
                    "the fractions sum to {sum}, which their uncertainties do not explain; name a"
                    " balance or the missing substances, correct the values, or say that they are"
                    " normalised" + words,
                    severity="warning",
                    subject=subject,
                    facts={"sum": percent(1 + float(off[wide][0])), **facts},
                )
        if not of.unread:
            continue
        unread = list(of.unread)
        marks = good & (
            (least >= 1 - WHOLE) & (most <= 1 + WHOLE) | (of.analysis.balance is not None)
        )
        if not marks.any():
            continue
        weights = account.writer.weights(of.analysis)
        flows = found.stream_flows(of.stream)
        own = account.writer.own[of.stream]
        seen = account.writer.sampled(of.stream, weights * own, of.analysis, weights)
        whole = np.nan_to_num(flows) @ seen
        marks &= whole > 0
        share = flows[:, unread] * weights[unread] / np.where(marks, whole, 1.0)[:, None]
        marks &= share.sum(axis=1) > UNREAD
        if marks.any():
            words, facts = counted(marks)
            most = np.where(marks[:, None], share, 0.0).max(axis=0)
            named = [names[i] for i, part in zip(unread, most, strict=True) if part > UNREAD / 10]
            yield Note(
                "sample-may-be-dried",
                "the analysis makes up a whole sample, and yet {share} of the stream is"
                " {substances}, which it does not name: was the sample dried, or {substances}"
                " removed before the analyser? Say so under 'removed'; if not, give a value or"
                " leave the analysis open" + words,
                severity="warning",
                subject=subject,
                facts={
                    "share": percent(float(share.sum(axis=1)[marks].max())),
                    "substances": listed(named),
                    **facts,
                },
            )


def _meters(found: Estimate) -> Iterator[Note]:
    """What the flows of differential-pressure meters are corrected by."""
    account = found.account
    there = np.atleast_1d(np.isfinite(found.chi_square))
    rows = slice(found.first, found.first + len(there))
    for meter in account.writer.by_pressure:
        design = meter.reading.design
        flows = account.every_flow(found.z)
        amount, mass = (
            np.atleast_1d(flows @ form[: flows.shape[-1]]) for form in (meter.amount, meter.mass)
        )
        passing = there & (amount > 0) & (mass > 0)
        if design is None or not passing.any():
            continue
        ratio = meter.ratio[rows][passing] if isinstance(meter.ratio, np.ndarray) else meter.ratio
        yield meter_note(meter.reading, design, ratio, mass[passing] / amount[passing])


def _removal_notes(found: Estimate, counted: Counted) -> Iterator[Note]:
    """Removals whose residual is more than the stream holds of the substance."""
    account = found.account
    names = account.problem.reactions.names
    of_streams = [(g, a) for g, stream in enumerate(account.streams) for a in stream.analyses]
    for g, analysis in of_streams:
        if not any(removal.residual for removal in analysis.removed):
            continue
        left = 1 - sum(removal.residual for removal in analysis.removed)
        gone = [removal.substance for removal in analysis.removed]
        flows = account.stream_flows(g, found.z)
        own = account.writer.own[g]
        rest = flows @ own - flows[..., gone] @ own[gone]
        for removal in analysis.removed:
            kept = removal.residual / left * rest
            over = kept > flows[..., removal.substance] * (1 + 1e-9)
            if removal.residual > 0 and over.any():
                words, facts = counted(over)
                yield Note(
                    "residual-above-content",
                    "the residual of {substance} in the analysed sample is more than the stream"
                    " holds of it; it cannot have been removed down to there" + words,
                    severity="warning",
                    subject=analysis.subject,
                    facts={"substance": names[removal.substance], **facts},
                )
