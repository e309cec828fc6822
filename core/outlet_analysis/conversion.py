"""Conversion, yields and selectivities of an estimated account, with their uncertainty."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.errors import Amount, Fact, Note, refuse
from core.outlet_analysis.account import Account, listed
from core.outlet_analysis.analysis_sums import percent
from core.outlet_analysis.closure import Closures, element_closures
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.monte_carlo import MEAN_DIFFERS, Draws
from core.outlet_analysis.nonlinearity import (
    BIAS,
    RECTANGULAR,
    SPREAD,
    may_be_curved,
    rectangular_share,
    second_order,
)
from core.outlet_analysis.ratios import Uncertain, forms_of, ratios
from core.outlet_analysis.readings import BELOW
from core.outlet_analysis.remarks import counting
from core.outlet_analysis.space_time_yield import (
    ReactorSize,
    SpaceTimeYields,
    space_time_yields,
)
from core.reactions.reaction_set import ReactionSet

YieldBasis = Literal["key", "element"]

POORLY_KNOWN = 0.25
"""Standard uncertainty of a conversion from which on it says little."""


@dataclass(frozen=True, eq=False)
class Yields:
    """Yields and selectivities of the P products.

    Attributes
    ----------
    basis : "key" or "element"
    element : str or None
    products : tuple of int, length P
        Substances that a reaction makes from the key's side; on element basis
        those that hold the element.
    factors : ndarray, shape (P,)
        s_P: moles of key (or atoms of the element per those in the key) that a
        mole of product stands for; not a number where there is no one such.
    yields : Uncertain, shape (..., P)
        s_P (F_P - F_P0)/F_A0.
    selectivities : Uncertain, shape (..., P)
        s_P (F_P - F_P0)/(F_A0 - F_A).
    """

    basis: YieldBasis
    element: str | None
    products: tuple[int, ...]
    factors: FloatArray
    yields: Uncertain
    selectivities: Uncertain


@dataclass(frozen=True, eq=False)
class Overall:
    """What an account says of a reactor with recycle and all around it.

    Attributes
    ----------
    conversion : Uncertain, shape (...)
        (fresh - leaving in purge and products)/fresh of the key.
    yields : Uncertain, shape (..., P)
        s_P (leaving - fresh of P)/fresh of the key, of the products that
        :class:`Yields` names. Selectivities are those of the reactor, as what
        is made and used up is the same.
    recycle_ratio : Uncertain, shape (...)
        Moles returned to the reactor inlet over moles leaving.
    closures : Closures or None
    without_suspects : tuple of Uncertain
        The overall conversion in each way of ``found.without_suspects``.
    """

    conversion: Uncertain
    yields: Uncertain
    recycle_ratio: Uncertain
    closures: Closures | None
    without_suspects: tuple[Uncertain, ...]


@dataclass(frozen=True, eq=False)
class ConversionResults:
    """What an account says of the reactor; a ratio is not a number where it has no meaning.

    Attributes
    ----------
    conversion : Uncertain, shape (...)
        (F_A0 - F_A)/F_A0, net.
    extents : Uncertain, shape (..., R), or None
        mol/s (batch: mol); None of dependent reactions.
    key_consumed_by, key_produced_by : Uncertain, shape (..., R), or None
        -nu_Aj xi_j, and nu_Aj xi_j, over the sum of the terms that consume the
        key; each reaction stands in one of the two.
    yields : Yields
    closures : Closures or None
    space_time_yields : SpaceTimeYields or None
        Of a single sample, where the size of the reactor is stated.
    without_suspects : tuple of (removed readings, conversion)
        For each way to leave out one reading of every suspect set; always by
        linear propagation.
    notes : tuple of Note
    overall : Overall or None
        With a recycle.
    draws : Draws or None
        Where the uncertainties are those of draws.
    """

    conversion: Uncertain
    extents: Uncertain | None
    key_consumed_by: Uncertain | None
    key_produced_by: Uncertain | None
    yields: Yields
    closures: Closures | None
    space_time_yields: SpaceTimeYields | None
    without_suspects: tuple[tuple[tuple[int, ...], Uncertain], ...]
    notes: tuple[Note, ...]
    overall: Overall | None = None
    draws: Draws | None = None


def conversion_results(
    found: Estimate,
    *,
    basis: YieldBasis = "key",
    element: str | None = None,
    per_key: Mapping[int, float] | None = None,
    closures: bool = True,
    size: ReactorSize | None = None,
    draws: Draws | None = None,
) -> ConversionResults:
    """Return conversion, yields, selectivities and closures of an estimate with an outlet.

    Parameters
    ----------
    found : Estimate
    basis : "key" or "element"
        What a mole of product is weighed by in yields and selectivities.
    element : str or None
        Of the element basis; None is carbon.
    per_key : Mapping of int to float
        Moles of key that a mole of product stands for, where the caller says.
    closures : bool
        Whether to form the element closures, which take an estimation more.
    size : ReactorSize or None
        What to count space-time yields by, of a single sample.
    draws : Draws or None
        Of a single sample, to take the uncertainties from; None is linear propagation.

    Raises
    ------
    Refused
        ``element-not-in-key``, ``element-not-named``.
    """
    account, problem = found.account, found.account.problem
    reactions, key = problem.reactions, problem.key
    z, covariance = found.z, found.covariance
    fed, left = account.feed_map[key], account.outlet_map[key]
    stated = tuple(sorted((per_key or {}).items()))
    chosen, factors, of_factors = _factors(reactions, key, basis, element, stated)
    products, notes = list(chosen), list(of_factors)

    # One call gives the conversion, every yield and every selectivity, and what they are overall.
    made = np.nan_to_num(factors)[:, None] * (account.outlet_map - account.feed_map)[products]
    count = len(products)
    numerators = np.concatenate([(fed - left)[None], made, made])
    denominators = np.concatenate(
        [np.broadcast_to(fed, (1 + count, len(fed))), np.broadcast_to(fed - left, made.shape)]
    )
    if problem.recycle is not None:
        above, below = _overall_forms(account, made)
        numerators = np.concatenate([numerators, above])
        denominators = np.concatenate([denominators, below])
    largest = account.largest_flow(z)
    linear = all_ratios = ratios(z, covariance, numerators, denominators, largest)
    if draws is not None:
        all_ratios = draws.ratios(linear, z, numerators, denominators)
    nowhere = np.isnan(factors)

    def part(first: int, last: int, hidden: BoolArray | bool) -> Uncertain:
        return all_ratios.each(lambda of: np.where(hidden, np.nan, of[..., first:last]))

    conversion = _first(all_ratios)
    unique = problem.reactions.rank == len(problem.reactions.reactions)
    consumed = produced = None
    if unique:
        consumed, produced = _key_by(account, z, covariance, draws)
    results = ConversionResults(
        conversion=conversion,
        extents=flows_of(found, account.extent_map, draws) if unique else None,
        key_consumed_by=consumed,
        key_produced_by=produced,
        yields=Yields(
            basis,
            _element(reactions, key, element) if basis == "element" else None,
            tuple(products),
            factors,
            part(1, 1 + count, nowhere),
            part(1 + count, 1 + 2 * count, nowhere),
        ),
        closures=element_closures(found, draws=draws) if closures else None,
        space_time_yields=None
        if size is None
        else space_time_yields(found, products_of(reactions, key), size, draws),
        without_suspects=tuple(
            (way.removed, _converted(account, fed, left, way.z, way.covariance))
            for way in found.without_suspects
        ),
        notes=(),
        overall=None
        if problem.recycle is None
        else _overall(found, part, 1 + 2 * count, nowhere, whole=closures, draws=draws),
        draws=draws,
    )
    notes += _null_notes(found, results)
    if draws is None:
        hidden = np.concatenate([[False], nowhere, nowhere])
        if problem.recycle is not None:
            hidden = np.concatenate([hidden, [False], nowhere, [False]])
        named = _names(found, products)
        notes += _doubtful(found, linear, numerators, denominators, hidden, named)
    else:
        notes += draws.notes
        notes += _mean_note(draws, numerators[0], denominators[0], conversion)
    for of in (
        results.closures,
        results.overall.closures if results.overall else None,
        results.space_time_yields,
    ):
        if of is not None:
            notes += of.notes
    return ConversionResults(**{**vars(results), "notes": tuple(notes)})


def _overall_forms(account: Account, made: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Numerators and denominators, (P + 2, n), of the overall conversion, yields, recycle ratio.

    ``made`` are the products made, as key, shape (P, n).
    """
    key, fresh, leaving = account.problem.key, account.fresh_map, account.leaving_map
    per_key = np.broadcast_to(fresh[key], (1 + len(made), fresh.shape[1]))
    return (
        np.concatenate([(fresh - leaving)[[key]], made, account.returned_map.sum(axis=0)[None]]),
        np.concatenate([per_key, leaving.sum(axis=0)[None]]),
    )


def _overall(
    found: Estimate,
    part: Callable[[int, int, BoolArray | bool], Uncertain],
    first: int,
    nowhere: BoolArray,
    *,
    whole: bool,
    draws: Draws | None,
) -> Overall:
    """Return the ratios of what leaves to what comes from outside.

    They are the ``part`` from ``first`` on; ``nowhere`` marks yields without a
    factor. ``whole`` asks for element closures.
    """
    account = found.account
    key, fresh, leaving = account.problem.key, account.fresh_map, account.leaving_map
    last = first + 1 + len(nowhere)
    return Overall(
        _first(part(first, first + 1, False)),
        part(first + 1, last, nowhere),
        _first(part(last, last + 1, False)),
        element_closures(found, "whole", draws) if whole else None,
        tuple(
            _converted(account, fresh[key], leaving[key], way.z, way.covariance)
            for way in found.without_suspects
        ),
    )


def _converted(
    account: Account, into: FloatArray, out: FloatArray, z: FloatArray, covariance: FloatArray
) -> Uncertain:
    """Return (in - out)/in, of linear forms of shape (n,)."""
    largest = account.largest_flow(z)
    return _first(ratios(z, covariance, (into - out)[None], into[None], largest))


def _first(of: Uncertain) -> Uncertain:
    return of.each(lambda values: values[..., 0])


def flows_of(found: Estimate, forms: FloatArray, draws: Draws | None) -> Uncertain:
    """Return linear forms (k, n) of the unknowns, shape (..., k), u by the draws where given."""
    if draws is None:
        return forms_of(found.z, found.covariance, forms)
    return draws.forms(found.z, forms)


def _names(found: Estimate, products: list[int]) -> list[str]:
    """Name the ratios in the order in which they are computed."""
    made = [found.account.problem.reactions.names[i] for i in products]
    names = [
        "the conversion",
        *(f"the yield of {name}" for name in made),
        *(f"the selectivity of {name}" for name in made),
    ]
    if found.account.problem.recycle is not None:
        names += [
            "the overall conversion",
            *(f"the overall yield of {name}" for name in made),
            "the recycle ratio",
        ]
    return names


def _doubtful(
    found: Estimate,
    linear: Uncertain,
    numerators: FloatArray,
    denominators: FloatArray,
    hidden: BoolArray,
    names: Sequence[str],
) -> list[Note]:
    """Return the note that linear propagation is in doubt, of a single sample."""
    local = found.local
    if local is None:
        return []
    there = np.flatnonzero(np.isfinite(linear.value) & (linear.u > 0) & ~hidden)
    if not len(there):
        return []
    notes = []
    if may_be_curved(local, denominators[there]):
        bias, spread = second_order(local, numerators[there], denominators[there])
        u = linear.u[there]
        doubt = (np.abs(bias) > BIAS * u) | (spread > SPREAD * u)
        if doubt.any():
            worst = float((np.maximum(np.abs(bias), spread) / u).max())
            notes.append(
                _doubt(
                    "linear propagation is in doubt for {results}: what is curved in the account"
                    " shifts or widens them by up to {share} of u",
                    listed([names[k] for k in there[doubt].tolist()]),
                    worst,
                )
            )
    below = found.account.readings.bound[0] == BELOW
    if below.any():
        share = rectangular_share(local, below, numerators[there], denominators[there])
        doubt = share > RECTANGULAR
        if doubt.any():
            notes.append(
                _doubt(
                    "the intervals are in doubt for {results}: non-detects bring up to {share} of"
                    " the variance, and what lies below a limit is not distributed normally",
                    listed([names[k] for k in there[doubt].tolist()]),
                    float(share.max()),
                )
            )
    return notes


def _doubt(detail: str, results: str, share: float) -> Note:
    return Note(
        "linear-propagation-doubtful",
        detail + "; ask for the uncertainty by Monte Carlo (method 'monte-carlo')",
        "warning",
        ("uncertainty",),
        {"results": results, "share": percent(share, 2)},
    )


def _mean_note(
    draws: Draws,
    numerator: FloatArray,
    denominator: FloatArray,
    conversion: Uncertain,
) -> list[Note]:
    """Return the note that the draws' mean conversion is another than the estimate."""
    if not np.isfinite(conversion.value):
        return []
    mean = float(((draws.z @ numerator) / (draws.z @ denominator)).mean())
    u = float(conversion.u)
    # What chance alone does to the mean of so many draws says nothing.
    if abs(mean - float(conversion.value)) <= max(MEAN_DIFFERS, 3 / len(draws.z) ** 0.5) * u:
        return []
    return [
        Note(
            "mean-of-draws-differs",
            "the mean conversion of the draws is {mean}, off the estimate by more than a tenth of"
            " u: the account is curved over its uncertainties. The value given is the estimate",
            subject=("conversion",),
            facts={"mean": Amount(mean)},
        )
    ]


def _key_by(
    account: Account, z: FloatArray, covariance: FloatArray, draws: Draws | None
) -> tuple[Uncertain, Uncertain]:
    """Shares of the reactions in what is consumed of the key."""
    problem = account.problem
    nu = problem.reactions.nu[:, problem.key]
    terms = -nu[:, None] * account.extent_map
    takes_part = nu != 0
    consuming = (z @ terms.T >= 0) & takes_part
    total = consuming.astype(float) @ terms
    signed = ratios(z, covariance, terms, total[..., None, :], account.largest_flow(z))
    if draws is not None:
        # Which reactions consume the key is what the estimate says, in every draw.
        signed = draws.ratios(signed, z, terms, np.broadcast_to(total, terms.shape))
    makes = takes_part & ~consuming
    return signed.where(consuming), signed.negative().where(makes)


def _element(reactions: ReactionSet, key: int, element: str | None) -> str:
    """Return the element of an element basis, which the key must hold."""
    formula = reactions.substances[key].formula
    name = element or "C"
    if formula is not None and formula.elements.get(name):
        return name
    held = ", ".join(formula.elements) if formula is not None else "no known element"
    if element is None:
        raise refuse(
            "element-not-named",
            ("yields", "element"),
            "the element basis counts carbon unless another element is named, and the key {key}"
            " holds none; name one of: {held}",
            key=reactions.names[key],
            held=held,
        )
    raise refuse(
        "element-not-in-key",
        ("yields", "element"),
        "found the element {element}, which the key {key} does not hold; name one of: {held}",
        element=element,
        key=reactions.names[key],
        held=held,
    )


def makes(reactions: ReactionSet, key: int, j: int) -> list[int]:
    """Substances on the product side of reaction ``j``.

    That is the right-hand side as written, or of a reversible reaction with
    the key among its products the left-hand side.
    """
    nu = reactions.nu[j]
    turned = reactions.reactions[j].reversible and nu[key] > 0
    return [int(i) for i in np.flatnonzero(nu < 0 if turned else nu > 0) if i != key]


def products_of(reactions: ReactionSet, key: int) -> tuple[int, ...]:
    """Substances that some reaction makes, as :func:`makes` has it."""
    made = {i for j in range(len(reactions.reactions)) for i in makes(reactions, key, j)}
    return tuple(sorted(made))


@lru_cache(maxsize=128)
def _factors(
    reactions: ReactionSet,
    key: int,
    basis: YieldBasis,
    element: str | None,
    stated: tuple[tuple[int, float], ...],
) -> tuple[tuple[int, ...], FloatArray, tuple[Note, ...]]:
    """Products, their factors s_P, and a note where there is none."""
    per_key = dict(stated)
    products = products_of(reactions, key)
    names = reactions.names
    notes: list[Note] = []
    factors: list[float] = []
    if basis == "element":
        name = _element(reactions, key, element)
        in_key = reactions.substances[key].formula
        assert in_key is not None
        kept = []
        for i in products:
            formula = reactions.substances[i].formula
            if formula is not None and not formula.elements.get(name):
                continue
            kept.append(i)
            if formula is None:
                factors.append(np.nan)
                notes.append(_no_factor(names[i], f"its content of {name} is not known"))
            else:
                factors.append(float(formula.elements[name] / in_key.elements[name]))
        return tuple(kept), np.array(factors), tuple(notes)
    for i in products:
        if i in per_key:
            factors.append(float(per_key[i]))
            continue
        share = key_per_product(reactions, key, i)
        if share is None:
            factors.append(np.nan)
            notes.append(
                _no_factor(
                    names[i],
                    f"the reactions that make it do not all consume {names[key]} at one ratio;"
                    " state per_key or an element basis",
                )
            )
        else:
            factors.append(share)
    return products, np.array(factors), tuple(notes)


def key_per_product(reactions: ReactionSet, key: int, product: int) -> float | None:
    """Moles of key that a mole of a product takes: s_P of a yield on key basis.

    None where the reactions that make it do not all consume the key at one ratio.
    """
    of = [j for j in range(len(reactions.reactions)) if product in makes(reactions, key, j)]
    shares = {_per_product(reactions, j, key, product) for j in of}
    share = shares.pop() if len(shares) == 1 else None
    return None if share is None else float(share)


def _per_product(reactions: ReactionSet, j: int, key: int, product: int) -> Fraction | None:
    """|nu_A|/nu_P of reaction ``j``; None where it does not consume the key."""
    coefficients = reactions.reactions[j].coefficients
    of_key = coefficients.get(reactions.names[key], Fraction(0))
    of_product = coefficients[reactions.names[product]]
    share = -Fraction(of_key) / Fraction(of_product)
    return share if share > 0 else None


def _no_factor(product: str, why: str) -> Note:
    return Note(
        "yield-factor-missing",
        "no yield or selectivity of {product} is given: " + why,
        subject=("yields", product),
        facts={"product": product},
    )


def _null_notes(found: Estimate, results: ConversionResults) -> list[Note]:
    """Notes on ratios whose denominators are next to nothing, and on a poor conversion."""
    account = found.account
    names, key = account.problem.reactions.names, account.problem.key
    counted = counting(account.readings.samples)
    estimated = np.isfinite(found.chi_square)
    key_named: dict[str, Fact] = {"key": names[key]}
    notes: list[Note] = []
    zero = "is within twice its uncertainty of zero, or of what rounding leaves"
    if results.draws is not None:
        zero += ", or comes near zero in some of the draws"

    def remark(
        marks: BoolArray,
        code: str,
        detail: str,
        subject: str,
        *,
        severity: str = "info",
        named: Mapping[str, Fact] = key_named,
    ) -> None:
        if marks.any():
            words, facts = counted(marks)
            notes.append(Note(code, detail + words, severity, (subject,), {**named, **facts}))

    remark(
        estimated & np.isnan(results.conversion.value),
        "denominator-near-zero",
        "no conversion or yield is given: the flow of {key} fed " + zero,
        "conversion",
        severity="warning",
    )
    if results.overall is not None:
        remark(
            estimated & np.isnan(results.overall.conversion.value),
            "denominator-near-zero",
            "no overall conversion or yield is given: the flow of {key} in the fresh feed is"
            " within twice its uncertainty of zero, or of what rounding leaves",
            "overall",
            severity="warning",
        )
        remark(
            estimated & np.isnan(results.overall.recycle_ratio.value),
            "denominator-near-zero",
            "no recycle ratio is given: what leaves is within twice its uncertainty of zero, or of"
            " what rounding leaves",
            "overall",
            severity="warning",
            named={},
        )
    of = results.yields
    lost = np.isnan(of.selectivities.value) & ~np.isnan(of.factors)
    remark(
        estimated & lost.any(axis=-1),
        "denominator-near-zero",
        "no selectivity is given: the amount of {key} converted " + zero,
        "selectivities",
    )
    if results.key_consumed_by is not None and results.key_produced_by is not None:
        shares = (results.key_consumed_by.value, results.key_produced_by.value)
        remark(
            estimated & np.all([np.isnan(share).all(axis=-1) for share in shares], axis=0),
            "denominator-near-zero",
            "no shares of the reactions are given: what they consume of {key} " + zero,
            "key_consumed_by",
        )
    remark(
        estimated & (np.nan_to_num(results.conversion.u) > POORLY_KNOWN),
        "conversion-poorly-known",
        "the readings determine the conversion only loosely; its uncertainty counts"
        " more than its value",
        "conversion",
        severity="warning",
        named={},
    )
    return notes
