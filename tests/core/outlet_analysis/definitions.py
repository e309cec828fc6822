"""The same minimum, sought by a general solver in what the readings are defined to mean."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import null_space
from scipy.optimize import least_squares

from core.outlet_analysis.account import AccountProblem, Unknown
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.readings import ABOVE, BELOW
from tests.core.outlet_analysis.random_accounts import (
    Place,
    State,
    as_state,
    as_unknowns,
    covariance_of,
    per_mole_fed,
    predicted,
    purged_alone,
)

WELL_CONDITIONED = 1e8
"""Ratio of the largest singular value to the smallest up to which a general solver can tell."""


@dataclass(frozen=True)
class Comparison:
    """One account against a general solver.

    ``difference`` is the largest over u among the flows, extents and unknowns
    that the readings tell; ``gradient`` the largest cosine between the
    weighted residuals (of length 1 at least) and what a step changes in them;
    ``form`` the largest relative difference between what the account makes of
    a reading and what the reading is defined to be; ``cost`` is ours less
    that of the other.
    """

    difference: float
    gradient: float
    form: float
    condition: float
    cost: float
    readings: int
    freedom: int


def readings_of(
    problem: AccountProblem, unknowns: Sequence[Unknown], z: np.ndarray, subjects: Sequence[Place]
) -> np.ndarray:
    """What the subjects would read at the unknowns ``z``, which may be complex or several."""
    made = predicted(problem, as_state(problem, unknowns, z))
    return np.array([np.broadcast_to(made[subject], z.shape[1:]) for subject in subjects])


def slopes_of(
    problem: AccountProblem, unknowns: Sequence[Unknown], z: np.ndarray, subjects: Sequence[Place]
) -> np.ndarray:
    """Derivatives of the readings, (m, n), by complex steps: exact to rounding."""
    steps = 1e-30 * np.where(z != 0, np.abs(z), 1.0)
    stepped = z[:, None] + 1j * np.diag(steps)
    return readings_of(problem, unknowns, stepped, subjects).imag / steps


def compare(problem: AccountProblem, state: State, found: Estimate) -> Comparison:
    """Fit the first sample of ``problem`` from its true state with ``scipy.optimize``.

    Exact readings and unknown flows taken as absent are linear conditions, met
    by moving in the space that they leave; so is the key fed without any flow.
    What the readings leave open stays where it was found.
    """
    unknowns, z = found.account.unknowns, found.z[0]
    limited = {s: 0 if of.bound is None else int(of.bound[0]) for s, of in problem.series.items()}
    values: dict[Place, tuple[float, float]] = {}
    for subject, of in problem.series.items():
        value, u = float(of.value[0]), float(of.u[0])
        if limited[subject] == BELOW:  # rectangular on [0, limit]
            value, u = value / 2, value / 12**0.5
        if np.isfinite(value) and limited[subject] != ABOVE:
            values[subject] = (value, u)
    known = set(found.readings.subjects)
    values = {subject: of for subject, of in values.items() if subject in known}
    shared = {s for s, of in problem.series.items() if of.shared}
    soft = [subject for subject, (_, u) in values.items() if u > 0 or subject in shared]
    exact = [subject for subject in values if subject not in soft]
    measured, u = (np.array([values[s][k] for s in soft]) for k in (0, 1))
    dense = covariance_of(problem, tuple(soft), dict(zip(soft, u.tolist(), strict=True)))
    u = np.sqrt(np.diag(dense))
    whitening = np.linalg.inv(np.linalg.cholesky(dense / u / u[:, None])) / u

    def readings(z: np.ndarray, subjects: list[Place]) -> np.ndarray:
        return readings_of(problem, unknowns, z, subjects)

    def slopes(z: np.ndarray, subjects: list[Place]) -> np.ndarray:
        return slopes_of(problem, unknowns, z, subjects)

    held = [slopes(z, exact)] if exact else []
    if found.per_mole_of_key[0]:
        held.append(found.account.feed_map[[problem.key]])
    one = np.eye(len(z))
    held += [one[[k]] for k in np.flatnonzero(found.absent[0])]
    covariance = found.covariance[0]
    # What is purged and leaves nowhere else follows from the split.
    back, alone = found.account.returned, purged_alone(problem)
    follows = np.array(
        [u.kind == "flow" and u.stream == back and u.index in alone for u in unknowns]
    )
    held += [one[[k]] for k in np.flatnonzero(follows)]
    told = found.told[0] & ~found.absent[0] & ~follows
    held += [one[[k]] for k in np.flatnonzero(~found.told[0])]
    size = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    size = np.where(size > 0, size, np.abs(z))
    size = np.where(size > 0, size, 1.0)
    free = np.eye(len(z))
    if held:
        rows = np.concatenate(held) * size
        rows /= np.linalg.norm(rows, axis=1, keepdims=True)
        free = null_space(rows)
    free = size[:, None] * free

    truth = per_mole_fed(state, problem.key) if found.per_mole_of_key[0] else state
    start = np.where(found.told[0], as_unknowns(truth, unknowns), z)

    def residuals(t: np.ndarray) -> np.ndarray:
        return np.asarray(whitening @ (readings(z + free @ t, soft) - measured))

    def jacobian(t: np.ndarray) -> np.ndarray:
        return np.asarray(whitening @ slopes(z + free @ t, soft) @ free)

    here = jacobian(np.zeros(free.shape[1]))
    singular = np.linalg.svd(here / np.linalg.norm(here, axis=0), compute_uv=False)
    other = least_squares(
        residuals,
        np.linalg.lstsq(free, start - z, rcond=None)[0],
        jac=jacobian,
        xtol=1e-15,
        ftol=1e-15,
        gtol=1e-15,
    )
    account = found.account
    forms = np.concatenate(
        [account.fresh_map, account.leaving_map, account.extent_map, np.eye(len(z))[told]]
    )
    spread = np.sqrt(np.maximum(((forms @ covariance) * forms).sum(axis=1), 0.0))
    moved = np.abs(forms @ free @ other.x)
    seen = spread > 1e-9 * np.abs(forms @ z).max()
    at = residuals(np.zeros(free.shape[1]))
    length = np.linalg.norm(here, axis=0) * max(1.0, float(np.linalg.norm(at)))
    places = {subject: k for k, subject in enumerate(found.readings.subjects)}
    ours = np.array([found.readings.reconciled[0, places[s]] for s in soft])
    theirs = readings(z, soft)
    known_reading = np.isfinite(ours)
    form = np.abs(ours - theirs)[known_reading] / np.maximum(
        np.abs(theirs)[known_reading], 1e-3 * np.abs(theirs).max()
    )
    return Comparison(
        difference=float((moved[seen] / spread[seen]).max(initial=0.0)),
        gradient=float(np.abs(here.T @ at / length).max(initial=0.0)),
        form=float(form.max(initial=0.0)),
        condition=float(singular[0] / singular[-1]) if singular.size else 1.0,
        cost=float(at @ at / 2 - other.cost),
        readings=len(soft),
        freedom=len(soft) - free.shape[1],
    )
