"""Errors that readings have in common: from what is stated to the correlation of every pair.

The error of a reading is its own, plus what it shares:

    e_i = u_i n_i + sum over instruments k of a_ik s_k

with n and s of variance one. The shared parts are independent of each other
and of the own ones; the own ones may be stated to be correlated. So two
readings have the covariance rho_ij u_i u_j + sum of a_ik a_jk (GUM, JCGM
100:2008, 5.2 and F.1.2.3), and that is one whatever the uncertainties are, if
the stated coefficients are.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from core.arrays import FloatArray, IntArray
from core.errors import Amount, Readings, Refused, Subject, refuse
from core.streams.metered import Instrument, Measurement

IMPOSSIBLE = -1e-10
"""Eigenvalue below which coefficients are those of no correlation matrix, beyond rounding."""


@dataclass(frozen=True)
class Correlation:
    """The correlation coefficient of the own errors of two readings.

    ``subject`` names the statement itself.
    """

    readings: tuple[Subject, Subject]
    coefficient: float
    subject: Subject


@dataclass(frozen=True, eq=False)
class Correlated:
    """Readings whose errors are not independent, k of them.

    Attributes
    ----------
    rows : ndarray of int, shape (k,)
        Their places among the readings, ascending.
    coefficients : ndarray, shape (N, k, k), or (1, k, k) for all samples
        Correlation of their whole errors.
    """

    rows: IntArray
    coefficients: FloatArray

    def samples(self, rows: slice | IntArray) -> Correlated:
        """Return those of the samples marked."""
        if len(self.coefficients) == 1:
            return self
        return Correlated(self.rows, self.coefficients[rows])


Shared = Mapping[Instrument, float | FloatArray]


@dataclass
class Errors:
    """What is stated of the errors of m readings over N samples.

    Attributes
    ----------
    measurements : sequence of Measurement, length m
    own : ndarray, shape (N, m)
        Standard uncertainties of their own errors.
    shared : mapping of int to Shared
        By place of the reading, where it shares any: for each instrument how far one standard
        deviation of its error moves the reading.
    """

    measurements: Sequence[Measurement]
    own: FloatArray
    shared: Mapping[int, Shared] = field(default_factory=dict)

    def together(self, stated: Sequence[Correlation]) -> tuple[FloatArray, Correlated | None]:
        """Return the standard uncertainties, shape (N, m), and what is correlated.

        Raises
        ------
        Refused
            ``unknown-reading``, ``correlation-not-usable``, ``correlations-impossible``.
        """
        if not self.shared and not stated:
            return self.own, None
        u = np.array(self.own)
        by_instrument: dict[Instrument, list[int]] = {}
        for row, parts in self.shared.items():
            for instrument, part in parts.items():
                u[:, row] = np.hypot(u[:, row], part)
                by_instrument.setdefault(instrument, []).append(row)
        pairs = self._pairs(stated)
        linked = {row for rows in by_instrument.values() if len(rows) > 1 for row in rows}
        linked.update(row for pair in pairs for row in pair)
        if not linked:
            return u, None
        rows = np.array(sorted(linked), dtype=np.intp)
        place = {row: k for k, row in enumerate(rows.tolist())}
        own = np.eye(len(rows))
        for (i, j), coefficient in pairs.items():
            own[place[i], place[j]] = own[place[j], place[i]] = coefficient
        if pairs:
            self._check(rows, own, stated)
        # Each part by the whole, whose square may be too small or large a number.
        scale = np.where(u[:, rows] > 0, u[:, rows], 1.0)
        spread = self.own[:, rows] / scale
        coefficients = spread[:, :, None] * own * spread[:, None, :]
        for instrument, sharing in by_instrument.items():
            part = np.zeros_like(spread)
            for row in sharing:
                if row in place:
                    part[:, place[row]] = self.shared[row][instrument]
            part /= scale
            coefficients += part[:, :, None] * part[:, None, :]
        coefficients[:, range(len(rows)), range(len(rows))] = 1.0
        if (coefficients == coefficients[0]).all():
            coefficients = coefficients[:1]
        return u, Correlated(rows, coefficients)

    def _pairs(self, stated: Sequence[Correlation]) -> dict[tuple[int, int], float]:
        """Coefficients by the places of the two readings, the lower one first."""
        places = {of.subject: row for row, of in enumerate(self.measurements)}
        pairs: dict[tuple[int, int], float] = {}
        for said in stated:
            for reading in said.readings:
                if reading not in places:
                    raise refuse(
                        "unknown-reading",
                        said.subject,
                        "found {reading}, which the account does not use as a reading; the"
                        " readings are {readings}",
                        reading=Readings((reading,)),
                        readings=Readings(tuple(places)),
                    )
            i, j = sorted(places[reading] for reading in said.readings)
            why = self._not_usable(i, j, said.coefficient, pairs)
            if why is not None:
                raise refuse(
                    "correlation-not-usable",
                    said.subject,
                    why,
                    readings=Readings(said.readings),
                    coefficient=Amount(said.coefficient),
                )
            pairs[i, j] = said.coefficient
        return pairs

    def _not_usable(
        self, i: int, j: int, coefficient: float, pairs: Mapping[tuple[int, int], float]
    ) -> str | None:
        if i == j:
            return "found {readings}: one reading twice; a correlation is one of two readings"
        if (i, j) in pairs:
            return "found the pair {readings} a second time; state it once"
        if not -1 <= coefficient <= 1:
            return "found the coefficient {coefficient}; allowed: -1 to 1"
        for row in (i, j):
            if self.measurements[row].bound is not None:
                return (
                    "found {readings}, one of which is a limit: it has no error that another could"
                    " share. Leave the correlation out"
                )
            if not (self.own[:, row] > 0).any():
                return (
                    "found {readings}, one of which has no error of its own: it is exact, or has"
                    " 'u_shared' alone. Give it its 'u', or leave the correlation out"
                )
        return None

    def _check(self, rows: IntArray, own: FloatArray, stated: Sequence[Correlation]) -> None:
        """Refuse coefficients that no errors can have, naming the pair that is most at odds."""
        values, vectors = np.linalg.eigh(own)
        if values[0] >= IMPOSSIBLE:
            return
        raise impossible(rows, own, values, vectors, self.measurements, stated)


def impossible(
    rows: IntArray,
    own: FloatArray,
    values: FloatArray,
    vectors: FloatArray,
    measurements: Sequence[Measurement],
    stated: Sequence[Correlation],
) -> Refused:
    """Return the refusal of coefficients of which some combination has a negative variance."""
    worst = vectors[:, 0]
    part = worst[:, None] * own * worst
    np.fill_diagonal(part, 0.0)
    at = {measurements[int(row)].subject: k for k, row in enumerate(rows.tolist())}
    parts = [part[at[said.readings[0]], at[said.readings[1]]] for said in stated]
    # Of several that are equally at odds the last: those before it might have been all.
    place = stated[max(range(len(parts)), key=lambda k: (round(-parts[k], 9), k))].subject
    held = np.flatnonzero(np.abs(worst) > 1e-3).tolist()
    return refuse(
        "correlations-impossible",
        place,
        "found coefficients that no errors can have together: a combination of {readings} would"
        " have a variance below zero (smallest eigenvalue of their correlation matrix: {value})."
        " Pairs that are not stated count as 0; state them all, with enough digits",
        readings=Readings(tuple(measurements[int(rows[k])].subject for k in held)),
        value=Amount(float(values[0])),
    )
