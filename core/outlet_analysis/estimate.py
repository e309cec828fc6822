"""The account as estimated, and every reading beside what the account makes of it."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from core.arrays import BoolArray, FloatArray, IntArray
from core.errors import Fault, Note, Subject
from core.outlet_analysis.account import Account
from core.outlet_analysis.consistency import WithoutSuspects
from core.outlet_analysis.nonlinearity import Local
from core.outlet_analysis.readings import VOLUME


@dataclass(frozen=True, eq=False)
class ReadingTable:
    """Every reading against the account, m of them; not a number where there is none.

    Attributes
    ----------
    subjects : tuple of Subject, length m
    measured, u : ndarray, shape (..., m)
        SI; the limit of a bound, whose ``u`` is absent.
    bound : ndarray of int8, shape (..., m)
        ``BELOW``, ``ABOVE`` or 0.
    reconciled, reconciled_u : ndarray, shape (..., m)
    adjustment_over_u : ndarray, shape (..., m)
        (measured - reconciled)/sqrt(u^2 - u_reconciled^2), standard normal
        where nothing is wrong; absent without redundancy. Above zero where
        the reading lies above its reconciled value: what the account does to
        the reading has the other sign.
    measurement_test : ndarray, shape (..., m)
        Of a reading whose error is correlated with another's, in place of
        adjustment_over_u: the test of greatest power (Tamhane and Mah, 1985);
        absent of the others.
    redundancy : ndarray, shape (..., m)
        1 - leverage, which is 1 - (reconciled_u/u)^2: 0 where no other reading
        checks this one; absent of a bound. Of a correlated reading no more than
        (3.24 u/smallest_detectable_error)^2.
    smallest_detectable_error : ndarray, shape (..., m)
        SI; an error this large is found nine times in ten by a test that
        raises one false alarm in twenty: 3.24 u/sqrt(redundancy), or of a
        correlated reading 3.24 over the root of what it weighs in its test.
    suspect_set : ndarray of int, shape (..., m)
        Number, from 1, of the set of readings that cannot be told apart and
        one of which errs; 0 where nothing is suspected.
    within_limit : ndarray of int8, shape (..., m)
        1 within, 0 beyond, -1 where there is no limit.
    contradicted : ndarray of bool, shape (..., m)
        A limit beyond which the readings proper put the value, by more than
        twice the uncertainty that they leave it.
    """

    subjects: tuple[Subject, ...]
    measured: FloatArray
    u: FloatArray
    bound: NDArray[np.int8]
    reconciled: FloatArray
    reconciled_u: FloatArray
    adjustment_over_u: FloatArray
    measurement_test: FloatArray
    redundancy: FloatArray
    smallest_detectable_error: FloatArray
    suspect_set: IntArray
    within_limit: NDArray[np.int8]
    contradicted: BoolArray

    def in_order(self, order: IntArray) -> ReadingTable:
        """Return the readings in another order."""
        changed: dict[str, Any] = {
            name: value[..., order] if isinstance(value, np.ndarray) else value
            for name, value in vars(self).items()
        }
        changed["subjects"] = tuple(self.subjects[k] for k in order.tolist())
        return ReadingTable(**changed)


@dataclass(frozen=True, eq=False)
class Estimate:
    """The account that fits the readings best.

    A series has a leading axis of N samples everywhere (``...``); a single
    sample has none. A sample that cannot be estimated is in ``failed`` and
    not a number everywhere else.

    Attributes
    ----------
    account : Account
        Its maps lead from ``z`` to flows and extents.
    z : ndarray, shape (..., n)
    covariance : ndarray, shape (..., n, n)
    readings : ReadingTable
    chi_square, limit, p_value : ndarray, shape (...)
        Weighted sum of squares of the readings proper, its 95 % limit and the
        probability of a larger one; the last two absent without redundancy.
    degrees_of_freedom : ndarray of int, shape (...)
    inconsistent : ndarray of bool, shape (...)
        chi_square is above its limit, or a limit is contradicted.
    per_mole_of_key : ndarray of bool, shape (...)
        No reading tells how much flows: flows are per mole of key fed.
    told : ndarray of bool, shape (..., n)
        Unknowns that the readings tell. The others stand where they were
        guessed; no flow or extent depends on them.
    absent : ndarray of bool, shape (..., n)
        Unknown flows taken as nothing: of what was removed from a feed's
        sample and no reading tells.
    inflation : ndarray, shape (...)
        Largest inflation of a variance by what the readings fail to tell apart.
    without_suspects : tuple of WithoutSuspects
        Of a single sample with suspects: the account without them, then every
        other way to leave out as few readings and have the rest agree, as far
        as there is room.
    ways : int
        How many such ways were found.
    cut : bool
        There were more to try than are tried.
    failed : Mapping of int to Fault
        By sample, counted from the first of this estimate.
    first : int
        Where in the series this estimate begins.
    notes : tuple of Note
    local : Local or None
        Of a single sample: its fit and what it looks like there.
    """

    account: Account
    z: FloatArray
    covariance: FloatArray
    readings: ReadingTable
    chi_square: FloatArray
    degrees_of_freedom: IntArray
    limit: FloatArray
    p_value: FloatArray
    inconsistent: BoolArray
    per_mole_of_key: BoolArray
    told: BoolArray
    absent: BoolArray
    inflation: FloatArray
    without_suspects: tuple[WithoutSuspects, ...] = ()
    ways: int = 0
    cut: bool = False
    failed: Mapping[int, Fault] = field(default_factory=dict)
    first: int = 0
    notes: tuple[Note, ...] = ()
    local: Local | None = None

    @property
    def feed_flows(self) -> FloatArray:
        """Flows into the reactor, shape (..., S), mol/s (batch: mol)."""
        return np.asarray(self.z @ self.account.feed_map.T)

    @property
    def fresh_flows(self) -> FloatArray:
        """Flows from outside, shape (..., S), mol/s (batch: mol)."""
        return np.asarray(self.z @ self.account.fresh_map.T)

    @property
    def outlet_flows(self) -> FloatArray:
        """Flows out of the reactor, shape (..., S), mol/s (batch: mol)."""
        return np.asarray(self.z @ self.account.outlet_map.T)

    def stream_forms(self, g: int) -> FloatArray:
        """Return the slopes of the flows in stream ``g`` over ``z``, shape (S, n).

        Streams are counted from 0, as in :attr:`Account.streams`. Where the
        split has a part in the flows each sample has its own, (..., S, n).
        """
        return self.account.stream_forms(g, self.z)

    def stream_flows(self, g: int) -> FloatArray:
        """Return the flows in stream ``g``, shape (..., S), mol/s.

        Not a number where the readings do not tell how a substance is shared
        out among streams that leave. Uncertainties: :meth:`u_of` the
        :meth:`stream_forms`.
        """
        forms = self.stream_forms(g)
        told = ~((~self.told[..., None, :]) & (forms != 0)).any(axis=-1)
        return np.where(told, self.account.stream_flows(g, self.z), np.nan)

    @property
    def product_forms(self) -> FloatArray:
        """Slopes of the flows in all products together; as :meth:`stream_forms`."""
        account = self.account
        if account.purge is None:
            return account.leaving_map
        return np.asarray(account.leaving_map - self.stream_forms(account.purge))

    @property
    def product_flows(self) -> FloatArray:
        """Flows in all products together, shape (..., S); as :meth:`stream_flows`."""
        leaving = self.account.product_flows(self.z)
        if self.account.purge is None:
            return leaving
        return np.where(np.isfinite(self.stream_flows(self.account.purge)), leaving, np.nan)

    @property
    def extents(self) -> FloatArray:
        """Extents of the reactions, shape (..., R), mol/s (batch: mol).

        Of a set of dependent reactions the extents are not unique: those of
        the independent ones that come first are given, the others are 0.
        """
        return np.asarray(self.z @ self.account.extent_map.T)

    def u_of(self, forms: FloatArray) -> FloatArray:
        """Standard uncertainties of linear forms (k, n) of ``z``, or (..., k, n); (..., k)."""
        variance = ((forms @ self.covariance) * forms).sum(axis=-1)
        return np.asarray(np.sqrt(np.maximum(variance, 0.0)))

    def liquid_volume(self, streams: Iterable[int]) -> FloatArray | None:
        """Volumetric flow of the liquids among some streams, shape (...), m3/s (batch: m3).

        Not a number where the readings do not tell it; None where none of
        them speaks of it.
        """
        form = self.liquid_volume_form(streams)
        if form is None:
            return None
        told = self.told[..., form != 0].all(axis=-1)
        return np.asarray(np.where(told, self.z @ form, np.nan))

    def liquid_volume_form(self, streams: Iterable[int]) -> FloatArray | None:
        """That volumetric flow in terms of the unknowns, shape (n,)."""
        account = self.account
        rows = [
            account.writer.place(g, VOLUME) for g in streams if account.streams[g].phase == "liquid"
        ]
        forms = self.account.stream_map[rows]
        if not rows or not forms.any(axis=1).all():
            return None
        return np.asarray(forms.sum(axis=0))
