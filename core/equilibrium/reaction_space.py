"""What the reactions as a whole can change, and what they leave as it is.

An equilibrium belongs to the space that the reactions span, not to the way in
which they are written: any reactions that can be made of each other have the
same one. Their coefficients are rational, so ranks, dependences and conserved
quantities are exact.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.reactions.elimination import null_space
from core.reactions.reaction_set import ReactionSet


@dataclass(frozen=True, eq=False)
class Steps:
    """Independent reactions that leave certain substances alone.

    Attributes
    ----------
    weights : ndarray, shape (r, R)
        How much of each reaction as stated goes into each; their ln K follow alike.
    nu : ndarray, shape (r, S)
        Their coefficients, exactly zero for the substances left alone.
    """

    weights: FloatArray
    nu: FloatArray


@dataclass(frozen=True, eq=False)
class ReactionSpace:
    """The space of a reaction set.

    Attributes
    ----------
    reactions : ReactionSet
    independent : tuple of int, length r
        Positions of reactions that make up all others.
    dependences : ndarray, shape (R - r, R)
        Weights with which reactions add up to no change at all; zero rows if none.
    conserved : ndarray, shape (S - r, S)
        Quantities that no reaction changes, per mole: the elements, and whatever
        else these reactions happen to keep (as any that stand in none).
    """

    reactions: ReactionSet
    independent: tuple[int, ...]
    dependences: FloatArray
    conserved: FloatArray
    _steps: dict[bytes, Steps] = field(default_factory=dict, repr=False)
    _reach: dict[bytes, tuple[BoolArray, FloatArray | None]] = field(
        default_factory=dict, repr=False
    )

    def steps(self, still: BoolArray) -> Steps:
        """Return independent reactions that leave the substances ``still`` (S,) alone."""
        key = np.packbits(still).tobytes()
        if key not in self._steps:
            self._steps[key] = self._make_steps(still)
        return self._steps[key]

    def reach(self, fed: BoolArray) -> tuple[BoolArray, FloatArray | None]:
        """Return which substances can be there where just those in ``fed`` (S,) are.

        Only which are fed counts, not how much. What is not in reach is held at
        zero by a conserved quantity of which there is none: an element that is
        not fed, say.

        Returns
        -------
        ndarray of bool, shape (S,)
        ndarray, shape (S,), or None
            A change of all amounts that makes everything in reach at once and takes
            only from what is fed, if single reactions taken one after the other
            in either direction do not get there.
        """
        key = np.packbits(fed).tobytes()
        if key not in self._reach:
            self._reach[key] = reach(self.reactions.nu, fed)
        return self._reach[key]

    def _make_steps(self, still: BoolArray) -> Steps:
        reactions = self.reactions.reactions
        names = self.reactions.names
        rows = [
            {j: c for j in self.independent if (c := reactions[j].coefficients.get(names[i]))}
            for i in np.flatnonzero(still).tolist()
        ]
        vectors = null_space(rows, self.independent)
        weights = np.zeros((len(vectors), len(reactions)))
        nu = np.zeros((len(vectors), len(names)))
        place = {name: i for i, name in enumerate(names)}
        for k, vector in enumerate(vectors):
            for j, weight in vector.items():
                weights[k, j] = float(weight)
            for name in names:
                total = sum(
                    weight * reactions[j].coefficients.get(name, 0) for j, weight in vector.items()
                )
                nu[k, place[name]] = float(total)
        return Steps(weights, nu)


def reach(nu: FloatArray, fed: BoolArray) -> tuple[BoolArray, FloatArray | None]:
    """Return what reactions (R, S) can make of what is fed; see :meth:`ReactionSpace.reach`."""
    reached = _one_by_one(nu, fed)
    if reached[(nu != 0).any(axis=0)].all():
        return reached, None
    return _all_at_once(nu, fed, reached)


def _one_by_one(nu: FloatArray, fed: BoolArray) -> BoolArray:
    reached = np.array(fed)
    for _ in range(len(nu) + 1):
        before = reached.sum()
        for row in nu:
            if reached[row < 0].all() or reached[row > 0].all():
                reached |= row != 0
        if reached.sum() == before:
            break
    return reached


def _all_at_once(
    nu: FloatArray, fed: BoolArray, reached: BoolArray
) -> tuple[BoolArray, FloatArray | None]:
    # Only here: the import costs a quarter of a second and few feeds need it.
    from scipy.optimize import linprog

    absent = np.flatnonzero(~fed & (nu != 0).any(axis=0))
    count, total = len(nu), len(absent)
    rows = np.concatenate([-nu[:, absent].T, np.eye(total)], axis=1)
    solved = linprog(
        np.append(np.zeros(count), -np.ones(total)),
        A_ub=rows,
        b_ub=np.zeros(total),
        bounds=[(None, None)] * count + [(0.0, 1.0)] * total,
        method="highs",
    )
    if not solved.success or solved.x is None:
        return reached, None
    more = absent[solved.x[count:] > 0.5]
    if reached[more].all():
        return reached, None
    everything = np.array(fed)
    everything[more] = True
    change: FloatArray = solved.x[:count] @ nu
    change[~everything] = 0.0
    return everything, change


@lru_cache(maxsize=128)
def reaction_space(reactions: ReactionSet) -> ReactionSpace:
    """Return the space of a reaction set."""
    count = len(reactions.reactions)
    by_substance = [
        {
            j: c
            for j, reaction in enumerate(reactions.reactions)
            if (c := reaction.coefficients.get(name))
        }
        for name in reactions.names
    ]
    vectors = null_space(by_substance, range(count))
    dependences = np.zeros((len(vectors), count))
    for row, vector in zip(dependences, vectors, strict=True):
        for j, weight in vector.items():
            row[j] = float(weight)
    redundant = {next(reversed(vector)) for vector in vectors}  # the column that is no pivot
    kept = null_space(
        [
            {name: c for name, c in reaction.coefficients.items() if c}
            for reaction in reactions.reactions
        ],
        reactions.names,
    )
    conserved = np.array([[float(v.get(name, 0)) for name in reactions.names] for v in kept])
    return ReactionSpace(
        reactions,
        tuple(j for j in range(count) if j not in redundant),
        dependences,
        conserved.reshape(len(kept), len(reactions.names)),
    )
