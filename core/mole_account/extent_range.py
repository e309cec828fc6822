"""How far the reactions can go before some substance runs out."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from core.arrays import FloatArray
from core.errors import refuse
from core.reactions.reaction_set import ReactionSet


@dataclass(frozen=True)
class ConversionRange:
    """Conversions of the key that leave no flow negative.

    Attributes
    ----------
    largest : float
        -, over all extents that the feed and the directions allow.
    smallest : float
        -, below zero where a reaction can run backwards and its products are
        there; 0 where nothing is reversible.
    limiting : int or None
        The substance whose want sets ``largest``; the key where it is used up.
        None where no reaction can run at all.
    exhausted_backwards : int or None
        The substance whose want sets ``smallest``.
    """

    largest: float
    smallest: float
    limiting: int | None
    exhausted_backwards: int | None


def extent_limits(nu: FloatArray, flows: FloatArray) -> tuple[float, int, float, int]:
    """Return how far one reaction can go each way, and what runs out.

    Parameters
    ----------
    nu : ndarray, shape (S,)
        Stoichiometric coefficients; both signs occur.
    flows : ndarray, shape (S,)
        mol/s, not negative.

    Returns
    -------
    forward : float
        Largest extent, mol/s.
    reactant : int
        The reactant that sets it; of several at once the first.
    backward : float
        Smallest extent (not above zero), mol/s.
    product : int
        The product that sets it.
    """
    forward, reactant, backward, product = np.inf, -1, -np.inf, -1
    # Few substances, asked for with every table: plain numbers are faster than arrays here.
    for i, (coefficient, flow) in enumerate(zip(nu.tolist(), flows.tolist(), strict=True)):
        if coefficient < 0 and flow / -coefficient < forward:
            forward, reactant = flow / -coefficient, i
        elif coefficient > 0 and -flow / coefficient > backward:
            backward, product = -flow / coefficient, i
    return forward, reactant, min(backward, 0.0), product


def conversion_range(reactions: ReactionSet, key: int, flows: FloatArray) -> ConversionRange:
    """Return the smallest and the largest conversion of the key.

    For one reaction in closed form; for several by linear programming over the
    extents, those of irreversible reactions not negative (the simplex form of
    the problem is that of the extent-of-reaction polytope: Aris, 1965,
    Introduction to the Analysis of Chemical Reactors, ch. 2).

    Parameters
    ----------
    reactions : ReactionSet
    key : int
        Index of the key; its flow is above zero.
    flows : ndarray, shape (S,)
        Feed, mol/s, not negative.

    Raises
    ------
    Refused
        ``extents-unbounded`` when the linear programme has no finite answer.
    """
    if len(reactions.reactions) == 1:
        return _one_reaction(reactions, key, flows)
    return _several_reactions(reactions, key, flows)


def _one_reaction(reactions: ReactionSet, key: int, flows: FloatArray) -> ConversionRange:
    nu = reactions.nu[0]
    forward, reactant, backward, product = extent_limits(nu, flows)
    coefficient = float(nu[key])
    per_extent = -coefficient / float(flows[key])
    largest = forward * per_extent
    # Of several substances that run out together the key is the one to name.
    if coefficient < 0 and largest >= 1 - 1e-12:
        reactant, largest = key, 1.0
    if not reactions.reactions[0].reversible:
        return ConversionRange(largest, 0.0, reactant, None)
    smallest = backward * per_extent if backward else 0.0
    return ConversionRange(largest, smallest, reactant, product)


def _several_reactions(reactions: ReactionSet, key: int, flows: FloatArray) -> ConversionRange:
    # Only here: the import costs a quarter of a second and one reaction needs none of it.
    from scipy.optimize import linprog

    # In an order of names, so that what runs out first does not hang on the request's order.
    order = sorted(range(len(reactions.names)), key=lambda i: reactions.names[i])
    turn = sorted(range(len(reactions.reactions)), key=lambda j: reactions.reactions[j].id)
    nu, own_key = reactions.nu[np.ix_(turn, order)], order.index(key)
    fed = flows[order]
    scale = float(fed.max())
    bounds = [(None if reactions.reactions[j].reversible else 0.0, None) for j in turn]
    ends: list[float] = []
    short: list[int | None] = []
    for sign in (1.0, -1.0):
        solved = linprog(
            sign * nu[:, own_key], A_ub=-nu.T, b_ub=fed / scale, bounds=bounds, method="highs"
        )
        if not solved.success or solved.x is None:
            raise refuse(
                "extents-unbounded",
                ("reactions",),
                "the extents that the feed allows have no end: reactions that undo each other"
                " without a balance were given; state each conversion of matter once",
            )
        ends.append(float(-(nu[:, own_key] @ solved.x) * scale / flows[key]))
        marginals, slack = solved.ineqlin.marginals, solved.slack
        found = _exhausted(np.asarray(marginals), np.asarray(slack), own_key)
        short.append(None if found is None else order[found])
    return ConversionRange(ends[0], ends[1], short[0], short[1])


def _exhausted(marginals: FloatArray, slack: FloatArray, key: int) -> int | None:
    if slack[key] <= 1e-12:
        return key
    strongest = int(np.argmin(marginals))
    return strongest if marginals[strongest] < 0 else None
