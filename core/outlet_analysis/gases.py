"""Accounts of gases that are not ideal: Z of what the readings speak of, found with the account.

Z of a gas hangs on its composition, which the account tells, and some readings
count by it: volumes at a meter, volumetric flows, concentrations, flows of
differential-pressure meters. The account is estimated with a Z for each of
them, at first that of the gas as its own readings have it; Z is found of the
gas that the account then has, and so on until it stays (successive
substitution, by the secant of each Z from the second step on; Z moves little
with composition).

The covariance of the account counts that Z moves with it: with what a change of
Z does to the account, G = dz/dZ, and an account to Z, H = dZ/dz, errors of the
readings reach it as (1 - G H)^-1 times what they do at a Z that stays. Tests of
readings, and the conditions at a meter, take Z as exact.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fact, Fault, Note, Refused, Subject, refuse
from core.numerics.linear import solve_stack
from core.outlet_analysis.account import Account, AccountProblem, build_account
from core.outlet_analysis.estimate import Estimate, ReadingTable
from core.outlet_analysis.preparation import BLOCK
from core.outlet_analysis.readings import (
    FRACTIONS,
    PRESSURE,
    TEMPERATURE,
    ReadingWriter,
    Series,
)
from core.outlet_analysis.reconciliation import estimate
from core.outlet_analysis.solving import fitted
from core.real_gas.equation import KnownGas
from core.real_gas.remarks import NEARLY_IDEAL
from core.real_gas.witness import witness_of
from core.streams.known import in_phase
from core.streams.metered import Analysis, FlowReading, MeteredStream

SETTLED = 1e-12
"""Relative change of every Z at which the account is taken."""
NOISE = 1e-10
"""And at which it is taken when no further step brings it nearer: rounding of the fit."""
STEPS = 20
_STEP_OF_Z = 0.02
"""Of ln Z: far more than rounding of a fit, and small beside what curves in it."""
_STEP_OF_UNKNOWN = 1e-6
STEEPEST = 0.7
"""Change of Z by the account over that put in, beyond which the secant is not trusted."""


@dataclass(frozen=True, eq=False)
class _Gas:
    """A gas whose Z some reading counts by.

    Attributes
    ----------
    place : tuple
        ``(g,)`` a stream, ``(g, k)`` what its analysis k saw of it, or ``(g,
        subject)`` what passes the meter of a flow reading.
    subject : Subject
    amounts : ndarray, shape (S, T)
        Its substances over the stream space.
    at_meter : tuple or None
        Temperature and pressure, each one number or (N,); None: those of the stream.
    """

    place: tuple[int | Subject, ...]
    subject: Subject
    amounts: FloatArray
    at_meter: tuple[float | FloatArray, float | FloatArray] | None = None


def estimate_of_gas(problem: AccountProblem, gas: KnownGas | None) -> Estimate:
    """Find the account that fits the readings best, with every open Z by a gas model.

    As :func:`core.outlet_analysis.reconciliation.estimate`, on one sample or on
    a series, each sample by itself. ``account.problem`` of the estimate has the Z found.

    Parameters
    ----------
    problem : AccountProblem
        Its streams and meters say which Z are open.
    gas : KnownGas or None
        None where none is.

    Raises
    ------
    Refused
        As :func:`~core.outlet_analysis.reconciliation.estimate`;
        ``not-a-gas`` where the account found has no gas there, and
        ``gas-not-converged``. In a series such samples stand in ``failed``.
    """
    if gas is None:
        return judged_as_ideal(estimate(problem))
    account = build_account(problem)
    gases = list(_gases(account))
    if not gases:
        return estimate(problem)
    z = np.stack([_guess(account, gas, of) for of in gases], axis=-1)
    if account.readings.samples is None:
        z = z[0]
    found = estimate(_with_compressibility(problem, gases, z))
    moved = np.full(z.shape, np.inf)
    last: tuple[FloatArray, FloatArray] | None = None
    for _ in range(STEPS):
        following = np.stack([_compressibility(found, gas, of) for of in gases], axis=-1)
        # A sample that has no account, or no gas, now goes on with what it had.
        following = np.where(np.isfinite(following), following, z)
        before, moved = moved, np.abs(following / z - 1)
        open_ = ~_resting(moved, before)
        if not open_.any():
            break
        # What has settled stays as it is, whatever the others do.
        stepped = np.where(open_[..., None], _step(z, following, last), z)
        last, z = (z, following), stepped
        found = estimate(_with_compressibility(problem, gases, z))
    return with_moving_gases(_judged(found, gas, gases, z, moved), gas)


def _step(
    z: FloatArray, following: FloatArray, last: tuple[FloatArray, FloatArray] | None
) -> FloatArray:
    """Return the Z to take next: by the secant of each, as far as that is a small correction."""
    if last is None:
        return following
    before, after = last
    with np.errstate(invalid="ignore", divide="ignore"):
        slope = (following - after) / (z - before)
        secant = z + (following - z) / (1 - slope)
    return np.where(np.abs(slope) < STEEPEST, secant, following)


def judged_as_ideal(found: Estimate) -> Estimate:
    """Return an estimate with remarks on meters whose gas was taken as ideal and is not."""
    metered = [of for of in _gases(found.account) if of.at_meter is not None]
    if not metered:
        return found
    inside = in_phase(found.account.problem.reactions, "gas")
    witness = witness_of(found.account.problem.reactions, inside.tobytes())
    if witness is None:
        return found
    notes: list[Note] = []
    for of in metered:
        (t, p), amounts = _conditions(found, of), _amounts(found, of)
        z = witness.gas.compressibility(t, p, amounts)
        good = np.isfinite(z)
        if ((z < NEARLY_IDEAL[0]) | (z > NEARLY_IDEAL[1])).any():
            t, p = (np.broadcast_to(np.asarray(x), z.shape)[good] for x in (t, p))
            notes += witness.gas.remarks(
                t, p, amounts[good], taken_as_ideal=True, subject=of.subject
            )
    return replace(found, notes=(*found.notes, *notes))


def _resting(moved: FloatArray, before: FloatArray) -> BoolArray:
    """Whether all that still moves is the rounding of the fit, shape (...)."""
    return np.asarray(((moved <= NOISE) & (moved >= before / 2) | (moved <= SETTLED)).all(axis=-1))


def _judged(
    found: Estimate, gas: KnownGas, gases: Sequence[_Gas], z: FloatArray, moved: FloatArray
) -> Estimate:
    """Return the estimate with what its gases are, or raise what stands against it."""
    failed = dict(found.failed)
    notes: list[Note] = []
    there = np.asarray(np.isfinite(found.z).all(axis=-1))
    for k, of in enumerate(gases):
        is_gas = np.isfinite(_compressibility(found, gas, of))
        settled = moved[..., k] <= NOISE
        for marks, code, detail in (
            (there & ~is_gas, "not-a-gas", NOT_A_GAS),
            (there & is_gas & ~settled, "gas-not-converged", NOT_CONVERGED),
        ):
            for row in np.flatnonzero(marks).tolist():
                failed.setdefault(row, _fault(found, of, row, code, detail))
        notes += _remarks(found, gas, of, z[..., k], there & is_gas & settled)
    if found.account.readings.samples is None and failed:
        raise Refused(failed[0])
    lost = sorted(set(failed) - set(found.failed))
    if lost:
        found = _without(found, lost)
    return replace(found, failed=failed, notes=(*found.notes, *notes))


NOT_A_GAS = (
    "at {temperature} and {pressure} the equation of state has what flows here as a liquid only, or"
    " the readings do not tell what it is; correct temperature, pressure or analysis, or state its"
    " compressibility"
)
NOT_CONVERGED = (
    "at {temperature} and {pressure} no Z was found that agrees with the composition that it leads"
    " to; state the compressibility"
)


def _fault(found: Estimate, of: _Gas, row: int, code: str, detail: str) -> Fault:
    t, p = (float(np.ravel(x)[row if np.ndim(x) else 0]) for x in _conditions(found, of))
    facts = {"temperature": Amount(t, "temperature"), "pressure": Amount(p, "pressure")}
    return Fault(code, of.subject, detail, facts)


def _without(found: Estimate, rows: list[int]) -> Estimate:
    """Return the series without numbers in samples that failed after all."""

    def blank(values: Any) -> Any:
        if not isinstance(values, np.ndarray):
            return values
        made = values.copy()
        made[rows] = np.nan if made.dtype == float else 0
        return made

    table: dict[str, Any] = {name: blank(of) for name, of in vars(found.readings).items()}
    whole: dict[str, Any] = {name: blank(of) for name, of in vars(found).items()}
    return Estimate(**{**whole, "readings": ReadingTable(**table)})


def _remarks(
    found: Estimate, gas: KnownGas, of: _Gas, z: FloatArray, good: BoolArray
) -> Iterator[Note]:
    if not good.any():
        return
    low, high = float(z[good].min()), float(z[good].max())
    facts: dict[str, Fact] = {"z": f"{low:.4f}"}
    if high != low:
        facts["z_most"] = f"{high:.4f}"
    yield Note(
        "compressibility-found",
        "the readings here were taken with Z = {z}"
        + (" to {z_most}" if high != low else "")
        + ", that of the gas in the account by the equation of state, which is taken as exact",
        "info",
        of.subject,
        facts,
    )
    t, p = (np.broadcast_to(np.asarray(x), z.shape)[good] for x in _conditions(found, of))
    yield from gas.remarks(
        t, p, _amounts(found, of)[good], taken_as_ideal=False, subject=of.subject
    )


def _gases(account: Account) -> Iterator[_Gas]:
    """Yield the gases whose open Z some reading counts by."""
    writer = account.writer
    for g, stream in enumerate(account.streams):
        if stream.phase != "gas":
            continue
        if stream.real and writer.has_conditions(g):
            per_volume = [
                (k, of)
                for k, of in enumerate(stream.analyses)
                if of.basis not in FRACTIONS and not of.normalised
            ]
            volumes = any(
                flow.kind == "volume" and flow.molar_volume is None for flow in stream.flows
            )
            if volumes or any(not of.removed for _, of in per_volume):
                yield _Gas((g,), stream.subject, _of_stream(writer, g, None))
            for k, of in per_volume:
                if of.removed:
                    yield _Gas((g, k), of.subject, _of_stream(writer, g, of))
        for reading in stream.flows:
            if reading.at_meter is not None:
                series = writer.series.get(reading.measurement.subject)
                at = None if series is None else series.at_meter
                yield _Gas(
                    (g, reading.measurement.subject),
                    reading.measurement.subject,
                    _at_meter(writer, g, reading),
                    reading.at_meter if at is None else at,
                )


def _guess(account: Account, gas: KnownGas, of: _Gas) -> FloatArray:
    """Return Z of a gas as its readings alone have it, shape (N,); 1 where they do not tell.

    Not just a shorter way: by Z of an ideal gas the concentrations of a dense
    one add up to more than there can be.
    """
    g, place = of.place[0], of.place[-1]
    assert isinstance(g, int)
    stream, readings, writer = account.streams[g], account.readings, account.writer
    samples, masses = len(readings.measured), writer.masses
    t, p = (np.full(samples, np.nan) for _ in range(2))
    conditions = of.at_meter
    if conditions is None:
        assert stream.temperature is not None
        assert stream.pressure is not None
        t_read, p_read = (
            one.value if one.subject not in writer.series else writer.series[one.subject].value
            for one in (stream.temperature, stream.pressure)
        )
        conditions = (t_read, p_read)
    t[:], p[:] = conditions
    amounts = np.zeros((samples, writer.count))
    read = np.zeros(writer.count, dtype=bool)
    metered = [flow.substance for flow in stream.flows if flow.measurement.subject == place]
    k = place if len(of.place) > 1 and isinstance(place, int) else 0
    if metered and metered[0] is not None:
        amounts[:, metered[0]] = 1.0
        return _or_ideal(gas, t, p, amounts)
    if not stream.analyses:
        for flow in stream.flows:
            if flow.substance is not None:
                by = masses[flow.substance] if flow.kind == "mass" else 1.0
                amounts[:, flow.substance] += flow.measurement.value / by
        return _or_ideal(gas, t, p, amounts)
    analysis = stream.analyses[k]
    by_mass = analysis.basis in ("mass", "mass-concentration")
    values = np.nan_to_num(readings.measured[:, writer.places[g, k]])
    for component, value in zip(analysis.components, values.T, strict=True):
        for i in component.weights:
            read[i] = True
            amounts[:, i] += value / len(component.weights) / (masses[i] if by_mass else 1.0)
    if analysis.basis in FRACTIONS:
        if analysis.balance is not None:
            rest = np.maximum(1.0 - values.sum(axis=1), 0.0)
            amounts[:, analysis.balance] += rest / (masses[analysis.balance] if by_mass else 1.0)
        return _or_ideal(gas, t, p, amounts)
    others = gas.in_gas & ~read
    others[[removal.substance for removal in analysis.removed]] = False
    found, z = amounts, np.ones(samples)
    for _ in range(10):
        z = _or_ideal(gas, t, p, found)
        rest = np.maximum(p / (z * GAS_CONSTANT * t) - amounts.sum(axis=1), 0.0)
        found = amounts + np.where(others, rest[:, None] / max(1, np.count_nonzero(others)), 0.0)
    return z


def _or_ideal(gas: KnownGas, t: FloatArray, p: FloatArray, amounts: FloatArray) -> FloatArray:
    with np.errstate(invalid="ignore"):
        z = gas.compressibility(t, p, amounts)
    return np.where(np.isfinite(z), z, 1.0)


def _of_stream(writer: ReadingWriter, g: int, analysis: Analysis | None) -> FloatArray:
    """Return the substances of a gas, as far as an analysis saw it, over the stream space."""
    rows = []
    for i in range(writer.count):
        weights = np.zeros(writer.count)
        weights[i] = writer.own[g][i]
        if analysis is not None:
            weights = writer.sampled(g, weights, analysis)
        rows.append(writer.flows(g, weights))
    return np.array(rows)


def _at_meter(writer: ReadingWriter, g: int, reading: FlowReading) -> FloatArray:
    """Return the substances of what passes a meter over the stream space."""
    if reading.substance is None:
        return _of_stream(writer, g, writer.metered_as(g, reading))
    rows = np.zeros((writer.count, writer.width))
    rows[reading.substance] = writer.flows(
        g, writer.component({reading.substance: 1.0}, writer.ones)
    )
    return rows


@dataclass(frozen=True, eq=False)
class GasesOfAccount:
    """The gases of an estimate whose Z readings count by, for the account at other unknowns.

    Attributes
    ----------
    account : Account
        With the Z found.
    gas : KnownGas
    gases : tuple, length k
    z : ndarray, shape (k,) or (N, k)
        Z that was put in.
    exponents : ndarray, shape (k, m)
        Powers of each Z that each reading counts with.
    """

    account: Account
    gas: KnownGas
    gases: tuple[_Gas, ...]
    z: FloatArray
    exponents: FloatArray

    def compressibility(self, unknowns: FloatArray, samples: IntArray | None = None) -> FloatArray:
        """Return Z over that put in, of the account at unknowns (M, n), shape (M, k).

        Not a number where there is no gas. ``samples`` (M,) says which of a series they are of.
        """
        each = []
        for of in self.gases:
            g, weights = _weights(self.account, of)
            flows = self.account.stream_flows(g, unknowns) @ weights.T
            t, p = _conditions_at(self.account, unknowns, of)
            if of.at_meter is not None and samples is not None:
                t, p = (x[samples] if isinstance(x, np.ndarray) else x for x in (t, p))
            with np.errstate(invalid="ignore"):
                each.append(self.gas.compressibility(t, p, flows))
        z = self.z if samples is None or self.z.ndim == 1 else self.z[samples]
        return np.asarray(np.stack(each, axis=-1) / z)

    def factors(self, ratio: FloatArray) -> FloatArray:
        """Return what Z times ``ratio`` (N, k) makes of the constants of the forms, (N, m)."""
        return np.asarray(np.exp(np.log(ratio) @ self.exponents))


def gases_of(found: Estimate, gas: KnownGas | None) -> GasesOfAccount | None:
    """Return the gases of an estimate by :func:`estimate_of_gas`; None where no Z was open."""
    if gas is None:
        return None
    account = found.account
    gases = tuple(_gases(account))
    if not gases:
        return None
    z = np.stack([_compressibility(found, gas, of) for of in gases], axis=-1)
    # Z goes into constants alone: what twice as much makes of them tells with which power.
    exponents = []
    constants = np.log(np.atleast_2d(account.readings.forms.constants)[0])
    for k in range(len(gases)):
        twice = np.ones(z.shape)
        twice[..., k] = 2.0
        other = build_account(_with_more(account.problem, gases, twice))
        changed = np.log(np.atleast_2d(other.readings.forms.constants)[0])
        exponents.append((changed - constants) / np.log(2.0))
    return GasesOfAccount(account, gas, gases, z, np.array(exponents))


def _with_more(problem: AccountProblem, gases: Sequence[_Gas], times: FloatArray) -> AccountProblem:
    """Return a problem that has the Z put in with as many times as much, shape (..., k)."""
    put_in = np.array(times)
    for k, of in enumerate(gases):
        g = of.place[0]
        assert isinstance(g, int)
        stream = problem.streams[g]
        if of.at_meter is not None:
            continue  # in its volume and its density already
        own: float | FloatArray | None = stream.compressibility
        if len(of.place) > 1:
            analysis = of.place[1]
            assert isinstance(analysis, int)
            own = stream.analyses[analysis].compressibility
        put_in[..., k] *= 1.0 if own is None else own
    return _with_compressibility(problem, gases, put_in)


def with_moving_gases(found: Estimate, gas: KnownGas) -> Estimate:
    """Return an estimate by :func:`estimate_of_gas` whose covariance counts that Z moves."""
    gases = gases_of(found, gas)
    single = found.account.readings.samples is None
    z = np.atleast_2d(found.z)
    rows = np.flatnonzero(np.isfinite(z).all(axis=1))
    if gases is None or not len(rows):
        return found
    covariance = np.array(found.covariance if not single else found.covariance[None])
    for part in np.array_split(rows, -(-len(rows) // BLOCK)):
        moved = _moved_by_gases(gases, z[part], part) @ _moving_gases(gases, z[part], part)
        identity = np.broadcast_to(np.eye(z.shape[1]), moved.shape)
        spread = solve_stack(identity - moved, identity)
        # Where an account a little aside is none, Z is taken to stay.
        good = np.isfinite(spread).all(axis=(1, 2))
        spread, at = spread[good], part[good]
        covariance[at] = spread @ covariance[at] @ spread.transpose(0, 2, 1)
    return replace(found, covariance=covariance[0] if single else covariance)


def _moved_by_gases(gases: GasesOfAccount, z: FloatArray, rows: IntArray) -> FloatArray:
    """Return d(unknowns)/d ln Z of the best account of some samples, shape (N, n, k)."""
    account, count = gases.account, len(gases.gases)
    readings = account.readings
    at = np.repeat(rows, count)
    forms = readings.forms
    constants = np.atleast_2d(forms.constants)
    ratio = np.tile(np.exp(_STEP_OF_Z * np.eye(count)), (len(rows), 1))
    series = replace(
        readings,
        forms=replace(
            forms, constants=constants[at if len(constants) > 1 else 0 * at] * gases.factors(ratio)
        ),
        measured=readings.measured[at],
        u=readings.u[at],
        bound=readings.bound[at],
        per_mole=readings.per_mole if readings.per_mole.ndim == 1 else readings.per_mole[at],
        correlated=None if readings.correlated is None else readings.correlated.samples(at),
        samples=len(at),
    )
    start = np.repeat(z, count, axis=0)
    moved = fitted(replace(account, readings=series), slice(0, len(at)), start) - start
    by_gas: FloatArray = moved.reshape(len(rows), count, -1).transpose(0, 2, 1)
    return by_gas / _STEP_OF_Z


def _moving_gases(gases: GasesOfAccount, z: FloatArray, rows: IntArray) -> FloatArray:
    """Return d ln Z/d(unknowns) of some samples at unknowns (N, n), shape (N, k, n)."""
    account = gases.account
    flows = account.of_flow | account.of_extent
    size = np.where(flows, account.largest_flow(z)[:, None], np.abs(z))
    size = np.where(size > 0, size, 1.0)
    step = _STEP_OF_UNKNOWN * size
    n = z.shape[1]
    aside = (z[:, None, :] + step[:, :, None] * np.eye(n)).reshape(-1, n)
    there = np.log(gases.compressibility(aside, np.repeat(rows, n))).reshape(len(z), n, -1)
    found = there - np.log(gases.compressibility(z, rows))[:, None]
    return np.nan_to_num(found / step[:, :, None]).transpose(0, 2, 1)


def _weights(account: Account, of: _Gas) -> tuple[int, FloatArray]:
    """Return the stream that a gas is of, and its weights on the flows of that, (S, S)."""
    g = of.place[0]
    assert isinstance(g, int)
    count = account.writer.count
    return g, of.amounts[:, g * count : (g + 1) * count]


def _amounts(found: Estimate, of: _Gas) -> FloatArray:
    """Return the substances of a gas in the account, shape (..., S), mol/s."""
    g, weights = _weights(found.account, of)
    flows = found.stream_flows(g)
    untold = np.isnan(flows).astype(float) @ (weights != 0).T.astype(float) > 0
    return np.where(untold, np.nan, np.nan_to_num(flows) @ weights.T)


def _conditions(found: Estimate, of: _Gas) -> tuple[float | FloatArray, float | FloatArray]:
    return _conditions_at(found.account, found.z, of)


def _conditions_at(
    account: Account, unknowns: FloatArray, of: _Gas
) -> tuple[float | FloatArray, float | FloatArray]:
    """Return temperature and pressure of a gas at unknowns (..., n)."""
    if of.at_meter is not None:
        return of.at_meter
    g = of.place[0]
    assert isinstance(g, int)
    t, p = (
        np.asarray(unknowns @ account.stream_map[account.writer.place(g, quantity)])
        for quantity in (TEMPERATURE, PRESSURE)
    )
    return t, p


def _compressibility(found: Estimate, gas: KnownGas, of: _Gas) -> FloatArray:
    t, p = _conditions(found, of)
    with np.errstate(invalid="ignore"):
        return gas.compressibility(t, p, _amounts(found, of))


def _with_compressibility(
    problem: AccountProblem, gases: Sequence[_Gas], z: FloatArray
) -> AccountProblem:
    """Return the problem with the Z, shape (...) or (N, ...), put in."""
    known: dict[tuple[int | Subject, ...], float | FloatArray] = {
        of.place: float(z[k]) if z.ndim == 1 else z[:, k] for k, of in enumerate(gases)
    }
    streams = [_stream_with(stream, g, known) for g, stream in enumerate(problem.streams)]
    series = dict(problem.series)
    for place, own in known.items():
        subject = place[-1]
        if isinstance(subject, tuple) and subject in series:
            series[subject] = _series_with(series[subject], own)
    return replace(problem.of_streams(streams), series=series)


def _stream_with(
    stream: MeteredStream, g: int, known: Mapping[tuple[int | Subject, ...], float | FloatArray]
) -> MeteredStream:
    return replace(
        stream,
        compressibility=known.get((g,), stream.compressibility),
        analyses=tuple(
            replace(analysis, compressibility=known.get((g, k)))
            for k, analysis in enumerate(stream.analyses)
        ),
        flows=tuple(
            reading
            if (g, reading.measurement.subject) not in known
            else metered_with(reading, known[g, reading.measurement.subject])
            for reading in stream.flows
        ),
    )


def metered_with(reading: FlowReading, z: float | FloatArray) -> FlowReading:
    """Return a flow reading with Z of the gas at its meter put in; one number or (N,)."""
    volume, design = reading.molar_volume, reading.design
    return replace(
        reading,
        molar_volume=None if volume is None else volume * z,
        design=None if design is None else replace(design, ratio=design.ratio / z),
    )


def _series_with(series: Series, z: float | FloatArray) -> Series:
    volume, ratio = series.molar_volume, series.density_ratio
    return replace(
        series,
        molar_volume=None if volume is None else volume * z,
        density_ratio=None if ratio is None else ratio / z,
    )


def single_substances_metered(
    streams: Sequence[MeteredStream], gas: KnownGas
) -> tuple[list[MeteredStream], tuple[Note, ...]]:
    """Return streams whose meters each pass one substance with Z of it put in.

    Raises
    ------
    Refused
        ``not-a-gas``.
    """
    notes: list[Note] = []

    def put(reading: FlowReading) -> FlowReading:
        if reading.at_meter is None or reading.substance is None:
            return reading
        pure = np.zeros(len(gas.in_gas))
        pure[reading.substance] = 1.0
        if not gas.in_gas[reading.substance]:
            raise refuse(
                "not-a-gas",
                reading.measurement.subject,
                "found a meter of gas, and the one substance that passes it is not declared as a"
                " gas; correct its phase under 'species', or state the compressibility",
            )
        subject = reading.measurement.subject
        z = float(gas.known_compressibility(*reading.at_meter, pure, subject))
        notes.append(
            Note(
                "compressibility-found",
                "the readings here were taken with Z = {z}, that of the gas in the account by the"
                " equation of state, which is taken as exact",
                "info",
                subject,
                {"z": f"{z:.4f}"},
            )
        )
        notes.extend(gas.remarks(*reading.at_meter, pure, taken_as_ideal=False, subject=subject))
        return metered_with(reading, z)

    put_in = [replace(one, flows=tuple(map(put, one.flows))) for one in streams]
    return put_in, tuple(notes)
