"""Chemical equilibrium of the reactions stated, under four kinds of hold.

The equilibrium is that of the stated reactions alone: what they cannot make is
inert, and what all of them together keep is kept, whatever else thermodynamics
would allow.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from core.arrays import BoolArray, FloatArray, IntArray
from core.constants import GAS_CONSTANT
from core.equilibrium.budget import CALL, work_of_state
from core.equilibrium.composition import Composition, Status, Task, find
from core.equilibrium.problem import Equilibrium, EquilibriumProblem
from core.equilibrium.reaction_space import ReactionSpace, reaction_space
from core.errors import Amount, Fault, refuse
from core.numerics.roots import find_root
from core.real_gas.cubic import GasState

CONSISTENT = 1e-6
"""|sum w ln K| of reactions that add up to nothing, below which their constants agree."""
_FUGACITIES_SETTLED = 5e-12
_MOST_ROUNDS = 80
_ROUNDS_TO_BRACKET = 25  # where another temperature will do as well
_TELLING = 1e-4  # of all matter: an extent from which on any change tells it well
_LEAST_SIZE = 1e-290  # of a trace, whose reciprocal times a coefficient is still a number
_JUMP = 1e-6  # of the enthalpies fed: an energy that no temperature has
_RUNGS = 30  # between the bounds of a temperature that is sought, where there is no answer at one
_HALVINGS = 20


@np.errstate(divide="ignore", invalid="ignore", over="ignore", under="ignore")
def solve_equilibrium(problem: EquilibriumProblem) -> Equilibrium:
    """Bring every sample to equilibrium.

    Temperature holds are solved by :func:`core.equilibrium.composition.find`,
    with the fugacity coefficients of a real gas by Broyden's method around it
    (C. G. Broyden, Math. Comp. 19 (1965) 577-593). Energy holds bracket the
    temperature: at equilibrium enthalpy and energy rise with it.

    Raises
    ------
    Refused
        For the problem as a whole: ``inconsistent-constants``, ``no-flow``,
        ``flow-negative``, ``compute-budget``. What concerns a sample is in ``faults``:
        ``equilibrium-not-found``, ``mixture-vanishes``, ``not-a-gas``,
        ``no-such-temperature``, ``inconsistent-constants``.
    """
    _check_feed(problem)
    solver = _Solver(problem)
    count = len(problem.feed)
    rows = np.arange(count)
    if problem.hold.startswith("temperature"):
        temperature = _given(problem.temperature, count)
    else:
        temperature = solver.find_temperature()
    return solver.answer(temperature, rows)


def _extents(nu: FloatArray, change: FloatArray, size: FloatArray) -> FloatArray:
    """Return the extents behind changes (N, S), each known to rounding of its ``size``.

    A trace that is made out of nothing tells its extent to the last digit,
    where the loss of what there is much of tells none.
    """
    found: FloatArray = change @ np.linalg.pinv(nu) if len(nu) else np.zeros((len(change), 0))
    if not len(nu):
        return found
    # Only where an extent is small against what there is does it hang on which change tells it.
    small = np.flatnonzero((np.abs(found) < _TELLING * size.max(axis=1)[:, None]).any(axis=1))
    if not len(small):
        return found
    weight = 1.0 / np.where(size[small] > 0, np.maximum(size[small], _LEAST_SIZE), 1.0)
    # Each reaction in units in which what it makes or uses of the scarcest is one.
    weighted = nu * weight[:, None, :]
    unit = 1.0 / np.abs(weighted).max(axis=2)
    back = np.linalg.pinv(weighted * unit[:, :, None])
    found[small] = ((change[small] * weight)[:, None, :] @ back)[:, 0] * unit
    return found


def _given(values: FloatArray | None, count: int) -> FloatArray:
    found = np.full(count, np.nan)
    if values is not None:
        found[:] = values
    return found


def _check_feed(problem: EquilibriumProblem) -> None:
    feed = problem.feed
    if not (np.isfinite(feed) & (feed >= 0)).all():
        i, s = np.argwhere(~(np.isfinite(feed) & (feed >= 0)))[0]
        raise refuse(
            "flow-negative",
            (*problem.subject, "feed", problem.reactions.names[s]),
            "the feed of {name} is {found}; it is at least zero",
            name=problem.reactions.names[s],
            found=f"{feed[i, s]:.6g}",
        )
    if not feed.any(axis=1).all():
        raise refuse("no-flow", (*problem.subject, "feed"), "nothing is fed; state what is")


@dataclass(frozen=True, eq=False)
class _Point:
    """Samples at a temperature each."""

    composition: Composition
    ln_gamma: FloatArray  # (m, S)
    gas: GasState | None
    settled: BoolArray  # (m,)


class _Solver:
    """One problem being solved; keeps what was found last as a start."""

    def __init__(self, problem: EquilibriumProblem) -> None:
        self.problem = problem
        self.space: ReactionSpace = reaction_space(problem.reactions)
        self.faults: dict[int, Fault] = {}
        count = len(problem.feed)
        self.pressure = _given(problem.pressure, count)
        self.volume = _given(problem.volume, count)
        self.last = Composition(
            np.full(problem.feed.shape, -np.inf),
            np.full(count, Status.NOT_CONVERGED, dtype=np.intp),
            np.zeros(count, dtype=np.intp),
        )
        self.ln_gamma = np.zeros(problem.feed.shape)
        self.liquid: BoolArray = np.zeros(count, dtype=bool)
        self.most_rounds = _MOST_ROUNDS

    @cached_property
    def per_total(self) -> bool:
        """Whether activities go by mole fractions."""
        gas = self.problem.mixture.phase == "gas"
        return gas and self.problem.hold.endswith("pressure")

    @cached_property
    def in_mixture(self) -> BoolArray:
        return self.problem.mixture.in_mixture

    @cached_property
    def orders(self) -> FloatArray:
        """Sum of the coefficients in the mixture, (R,), free of rounding."""
        inside = self.problem.reactions.nu[:, self.in_mixture]
        total = inside.sum(axis=1)
        return np.where(np.abs(total) <= 1e-12 * np.abs(inside).sum(axis=1), 0.0, total)

    def ln_constants(self, temperature: FloatArray, rows: IntArray) -> FloatArray:
        """Return ln K as stated; note samples whose constants contradict each other."""
        ln_k = self.problem.constants.ln_k(temperature, rows)
        for combination in self.space.dependences:
            off = ln_k @ combination
            for at in np.flatnonzero(~(np.abs(off) <= CONSISTENT)).tolist():
                ids = [r.id for r in self.problem.reactions.reactions]
                self.faults[int(rows[at])] = Fault(
                    "inconsistent-constants",
                    (*self.problem.subject, "reactions"),
                    "the reactions {ids} add up to no change at all, and the logarithms of their"
                    " constants to {off} in place of zero; leave one of them out, or correct a"
                    " constant",
                    {
                        "ids": ", ".join(ids[j] for j in np.flatnonzero(combination).tolist()),
                        "off": f"{off[at]:.3g}",
                    },
                )
        return ln_k

    def ln_unit(self, temperature: FloatArray, rows: IntArray) -> FloatArray:
        """Return ln of the activity of an ideal substance over its share or its amount, (m,)."""
        mixture = self.problem.mixture
        if self.per_total:
            return np.log(self.pressure[rows] / mixture.standard_pressure)
        if mixture.phase == "liquid":
            return -np.log(self.volume[rows])
        per_volume = GAS_CONSTANT * temperature / self.volume[rows]
        return np.log(per_volume / mixture.standard_pressure)

    def of_units(self, temperature: FloatArray, rows: IntArray) -> FloatArray:
        """Return what that adds to ln Q of each reaction, (m, R); nothing where moles stay."""
        unit = self.ln_unit(temperature, rows)[:, None]
        return np.where(self.orders == 0, 0.0, unit * self.orders)

    def at(self, temperature: FloatArray, rows: IntArray) -> _Point:
        """Return the equilibrium of some samples at a temperature each."""
        problem = self.problem
        if problem.budget is not None:
            reactions, width = problem.reactions.nu.shape
            # The terms of a constant, of an enthalpy.
            each = 100 * len(rows) + 0.2 * CALL
            problem.budget.spend((4 * reactions + width) * each)
        ln_k = self.ln_constants(temperature, rows)
        ideal = ln_k - self.of_units(temperature, rows)
        task = Task(
            self.space,
            self.in_mixture,
            self.per_total,
            ideal,
            problem.feed[rows],
            problem.budget,
        )
        if problem.mixture.equation is None or problem.mixture.phase == "liquid":
            found = find(task, self.last.samples(rows))
            self.keep(rows, found)
            settled = found.status != Status.NOT_CONVERGED
            return _Point(found, np.zeros(problem.feed[rows].shape), None, settled)
        return self.with_fugacities(task, temperature, rows)

    def keep(self, rows: IntArray, found: Composition) -> None:
        """Remember where samples stood."""
        self.last.ln_amounts[rows] = found.ln_amounts
        self.last.status[rows] = found.status

    def with_fugacities(self, task: Task, temperature: FloatArray, rows: IntArray) -> _Point:
        """Solve for ln K as the fugacity coefficients at their own answer shift it."""
        nu = self.problem.reactions.nu
        shift = self.ln_gamma[rows] @ nu.T
        inverse = np.broadcast_to(-np.eye(nu.shape[0]), (len(rows), *(nu.shape[0],) * 2)).copy()
        on = np.arange(len(rows))
        found = self.last.samples(rows)
        settled = np.zeros(len(rows), dtype=bool)
        ln_gamma = np.zeros(task.feed.shape)
        iterations = np.zeros(len(rows), dtype=np.intp)
        previous: tuple[FloatArray, FloatArray] | None = None
        for _ in range(self.most_rounds):
            if task.budget is not None:
                task.budget.spend(work_of_state(len(on), task.feed.shape[1]))
            part = replace(task, ln_k=task.ln_k[on] - shift[on], feed=task.feed[on])
            now = find(part, found.samples(on))
            found.ln_amounts[on], found.status[on] = now.ln_amounts, now.status
            iterations[on] += now.iterations
            gamma = self.ln_corrections(temperature[on], rows[on], now.ln_amounts)
            ln_gamma[on] = gamma
            gap = gamma @ nu.T - shift[on]
            good = np.isfinite(gap).all(axis=1) & (now.status == Status.FOUND)
            done = good & (np.abs(gap) <= _FUGACITIES_SETTLED).all(axis=1)
            settled[on[done]] = True
            live = good & ~done
            if previous is not None:
                step, before = previous
                change = gap - before
                h = inverse[on]
                toward = (h @ change[:, :, None])[:, :, 0]
                left = (step[:, None, :] @ h)[:, 0]
                size = (step * toward).sum(axis=1)
                safe = np.abs(size) > 1e-12 * (step * step).sum(axis=1)
                update = ((step - toward) / np.where(safe, size, 1.0)[:, None])[:, :, None]
                h = h + np.where(safe[:, None, None], update * left[:, None, :], 0.0)
                inverse[on] = h
            step = -(inverse[on] @ gap[:, :, None])[:, :, 0]
            length = np.abs(step).max(axis=1)
            step *= np.minimum(1.0, 1.5 / np.maximum(length, 1e-300))[:, None]
            if not live.any():
                break
            on, step, gap = on[live], step[live], gap[live]
            shift[on] += step
            previous = step, gap
        found = Composition(found.ln_amounts, found.status, iterations)
        self.keep(rows, found)
        self.ln_gamma[rows] = np.where(settled[:, None], ln_gamma, 0.0)
        pressure = self.pressure_at(temperature, rows, found.ln_amounts)
        equation = self.problem.mixture.equation
        assert equation is not None
        inside = self.in_gas(found.ln_amounts)
        gas = equation.state(temperature, pressure, inside, of_gas=True)
        self.liquid[rows] = settled & gas.liquid_like
        settled &= ~gas.liquid_like
        if not self.per_total:
            # At such a pressure another root is the stable one: one gas does not fill the volume.
            filled = (
                gas.compressibility * inside.sum(axis=1) * GAS_CONSTANT * temperature / pressure
            )
            settled &= np.abs(filled / self.volume[rows] - 1) < 1e-6
        return _Point(found, ln_gamma, gas, settled)

    def in_gas(self, ln_amounts: FloatArray) -> FloatArray:
        """Return the amounts in the mixture, (m, S of it)."""
        return np.exp(ln_amounts[:, self.in_mixture])

    def pressure_at(
        self, temperature: FloatArray, rows: IntArray, ln_amounts: FloatArray
    ) -> FloatArray:
        """Return the pressure, Pa, (m,)."""
        if self.per_total or self.problem.mixture.phase == "liquid":
            return self.pressure[rows]
        amounts, volume = self.in_gas(ln_amounts), self.volume[rows]
        if self.problem.mixture.equation is None:
            ideal: FloatArray = GAS_CONSTANT * temperature * amounts.sum(axis=1) / volume
            return ideal
        return self.problem.mixture.equation.pressure(temperature, volume, amounts)

    def ln_corrections(
        self, temperature: FloatArray, rows: IntArray, ln_amounts: FloatArray
    ) -> FloatArray:
        """Return what ln of an activity gains over that of an ideal gas, (m, S)."""
        equation = self.problem.mixture.equation
        assert equation is not None
        pressure = self.pressure_at(temperature, rows, ln_amounts)
        pressure = np.where(pressure > 0, pressure, np.nan)
        gas = equation.state(temperature, pressure, self.in_gas(ln_amounts), of_gas=True)
        found = np.zeros(ln_amounts.shape)
        found[:, self.in_mixture] = gas.ln_fugacity_coefficients
        if not self.per_total:
            found[:, self.in_mixture] += np.log(gas.compressibility)[:, None]
        return found

    def energy_at(self, temperature: FloatArray, rows: IntArray) -> tuple[FloatArray, BoolArray]:
        """Return enthalpy or internal energy at equilibrium, J, and where there is one."""
        point = self.at(temperature, rows)
        enthalpies = self.problem.enthalpies
        assert enthalpies is not None
        amounts = np.exp(point.composition.ln_amounts)
        h = enthalpies.enthalpies(temperature, rows)
        total: FloatArray = np.where(amounts > 0, amounts * h, 0.0).sum(axis=1)
        gas = self.in_gas(point.composition.ln_amounts).sum(axis=1)
        if point.gas is not None:
            total = total + gas * point.gas.residual_enthalpy
        if self.problem.hold == "energy-volume" and self.problem.mixture.phase == "gas":
            z = 1.0 if point.gas is None else point.gas.compressibility
            total = total - z * gas * GAS_CONSTANT * temperature
        return total, point.settled & np.isfinite(total)

    def find_temperature(self) -> FloatArray:
        """Return the temperature at which each sample has its energy, K; NaN with a fault."""
        problem = self.problem
        count = len(problem.feed)
        wanted = _given(problem.energy, count)
        every = np.arange(count)
        lower, low, beneath = self.last_sound(wanted, every, *problem.temperatures)
        upper, high, above = self.last_sound(wanted, every, *problem.temperatures[::-1])
        for at in np.flatnonzero(~(beneath & above)).tolist():
            end = 0 if above[at] else 1
            self.at(np.full(1, problem.temperatures[end]), every[at : at + 1])
            self.faults.setdefault(at, self.not_found(at, problem.temperatures[end]))
        for at in np.flatnonzero(~((low <= 0) & (high >= 0))).tolist():
            self.faults.setdefault(
                at,
                Fault(
                    "no-such-temperature",
                    problem.subject,
                    "between {lower} and {upper} no equilibrium has the energy of the feed and the"
                    " heat supplied; check the feed's temperature and the heat",
                    {
                        "lower": Amount(problem.temperatures[0], "temperature"),
                        "upper": Amount(problem.temperatures[1], "temperature"),
                    },
                ),
            )
        found = np.full(count, np.nan)
        rows = np.array([i for i in range(count) if i not in self.faults], dtype=np.intp)
        if not len(rows):
            return found

        def excess(t: FloatArray, case: IntArray) -> FloatArray:
            mine = rows[case]
            energy, sound = self.energy_at(t, mine)
            for at in np.flatnonzero(~sound).tolist():
                self.faults.setdefault(int(mine[at]), self.not_found(int(mine[at]), float(t[at])))
            return np.where(sound, energy - wanted[mine], 0.0)

        found[rows] = find_root(excess, lower[rows], upper[rows], subject=problem.subject)
        self.refuse_jumps(found, wanted, rows)
        for at in self.faults:
            found[at] = np.nan
        return found

    def refuse_jumps(self, found: FloatArray, wanted: FloatArray, rows: IntArray) -> None:
        """Refuse samples whose energy jumps past the one wanted at the temperature found.

        Where pure phases alone fix the pressure of the gas it is there or gone all at once.
        """
        energy, sound = self.energy_at(found[rows], rows)
        enthalpies = self.problem.enthalpies
        assert enthalpies is not None
        size = (np.abs(enthalpies.enthalpies(found[rows], rows)) * self.problem.feed[rows]).sum(1)
        for at in np.flatnonzero(sound & (np.abs(energy - wanted[rows]) > _JUMP * size)).tolist():
            row = int(rows[at])
            self.faults.setdefault(
                row,
                Fault(
                    "equilibrium-not-found",
                    self.problem.subject,
                    "at {temperature} pure solids and liquids alone fix the pressure of the gas, so"
                    " that it is there or gone all at once, and some part of it would match the"
                    " energy of the feed. Hold that temperature a little higher or lower, or add an"
                    " inert gas",
                    {"temperature": Amount(float(found[row]), "temperature")},
                ),
            )

    def last_sound(
        self, wanted: FloatArray, rows: IntArray, first: float, towards: float
    ) -> tuple[FloatArray, FloatArray, BoolArray]:
        """Return the temperatures nearest to ``first`` at which there is an answer, to bracket by.

        Mostly that is ``first`` itself. Where all of the gas would be solid there, or a real
        gas liquid, some way ``towards`` the other end, and no further than is needed.

        Returns
        -------
        temperature, excess : ndarray, shape (N,)
            K; of the energy there over the one wanted, J.
        found : ndarray of bool, shape (N,)
            Whether there is an answer that leaves the wanted energy beyond it.
        """
        t = np.full(len(rows), first)
        self.most_rounds = _ROUNDS_TO_BRACKET
        energy, sound = self.energy_at(t, rows)
        excess = energy - wanted
        side = np.sign(towards - first)
        bad, good = t.copy(), np.full(len(rows), np.nan)
        live = np.flatnonzero(~sound)
        for step in range(_RUNGS + _HALVINGS):
            if not len(live):
                break
            rung = first + (towards - first) * min(step + 1, _RUNGS) / _RUNGS
            trial = np.where(np.isnan(good[live]), rung, 0.5 * (bad[live] + good[live]))
            energy, fine = np.full(len(live), np.nan), np.zeros(len(live), dtype=bool)
            first_look = np.isnan(good[live])
            for part, rounds in ((first_look, _ROUNDS_TO_BRACKET), (~first_look, _MOST_ROUNDS)):
                if part.any():
                    self.most_rounds = rounds
                    energy[part], fine[part] = self.energy_at(trial[part], rows[live[part]])
            bad[live[~fine]] = trial[~fine]
            here = live[fine]
            good[here] = t[here] = trial[fine]
            excess[here] = energy[fine] - wanted[here]
            sound[here] = excess[here] * side <= 0
            on = ~sound[live]
            if step + 1 >= _RUNGS:
                on &= ~np.isnan(good[live])
            live = live[on]
        self.most_rounds = _MOST_ROUNDS
        return t, excess, sound

    def not_found(self, row: int, temperature: float) -> Fault:
        """Say why a sample has no answer at a temperature."""
        facts = {"temperature": Amount(temperature, "temperature")}
        if self.last.status[row] == Status.MIXTURE_VANISHED:
            return Fault(
                "mixture-vanishes",
                self.problem.subject,
                "at {temperature} nothing is left in the gas: the pure solids and liquids hold"
                " everything at this pressure, as far as can be told without a gas to take"
                " fugacities from. Take the gas as ideal, hold the volume, lower the pressure, or"
                " add an inert gas",
                facts,
            )
        if self.liquid[row]:
            return Fault(
                "not-a-gas",
                self.problem.subject,
                "at {temperature} the equation of state has what comes to equilibrium as a liquid"
                " only: correct temperature or pressure, or declare the phase of what is condensed"
                " under 'species'",
                facts,
            )
        return Fault(
            "equilibrium-not-found",
            self.problem.subject,
            "no equilibrium was found at {temperature}; check the constants, and pressure or"
            " volume, for values beyond sense, and whether all of the gas can be a gas there",
            facts,
        )

    def answer(self, temperature: FloatArray, rows: IntArray) -> Equilibrium:
        """Return the answer at the temperatures found or held."""
        problem = self.problem
        nu = problem.reactions.nu
        count, width = problem.feed.shape
        good = np.array([i for i in rows.tolist() if i not in self.faults], dtype=np.intp)
        blank = np.full(count, np.nan)
        ln_amounts, ln_phi = np.full((count, width), np.nan), np.full((count, width), np.nan)
        pressure, volume, z = blank.copy(), blank.copy(), blank.copy()
        iterations = np.zeros(count, dtype=np.intp)
        excess = np.full((count, len(nu)), np.nan)
        stopped: BoolArray = np.zeros((count, len(nu)), dtype=bool)
        if len(good):
            point = self.at(temperature[good], good)
            for at in np.flatnonzero(~point.settled).tolist():
                row = int(good[at])
                self.faults.setdefault(row, self.not_found(row, float(temperature[row])))
            sound = np.array([int(i) not in self.faults for i in good])
            ln_n = point.composition.ln_amounts
            ln_amounts[good], ln_phi[good] = ln_n, 0.0
            if point.gas is not None:
                ln_phi[np.ix_(good, self.in_mixture)] = point.gas.ln_fugacity_coefficients
            pressure[good] = self.pressure_at(temperature[good], good, ln_n)
            volume[good] = self.volume[good]
            z[good] = 1.0 if point.gas is None else point.gas.compressibility
            iterations[good] = point.composition.iterations
            if problem.mixture.phase == "gas" and self.per_total:
                amount = self.in_gas(ln_n).sum(axis=1)
                volume[good] = z[good] * amount * GAS_CONSTANT * temperature[good] / pressure[good]
            excess[good], stopped[good] = self.affinities(temperature[good], good, point)
            bad = good[~sound]
            for values in (ln_amounts, ln_phi, pressure, volume, z, excess):
                values[bad] = np.nan
            stopped[bad] = False
        amounts = np.exp(ln_amounts)
        still = (nu == 0).all(axis=0)
        amounts[:, still] = np.where(np.isnan(amounts), np.nan, problem.feed)[:, still]
        # What rounding leaves of no change at all is none.
        same = np.abs(amounts - problem.feed) <= 4 * np.finfo(float).eps * problem.feed
        amounts = np.where(same.all(axis=1, keepdims=True), problem.feed, amounts)
        change = amounts - problem.feed
        extents = _extents(nu, change, np.maximum(amounts, problem.feed))
        conserved = self.space.conserved
        off = np.abs(change @ conserved.T)
        size = (amounts + problem.feed) @ np.abs(conserved.T)
        share = np.where(size > 0, off / np.where(size > 0, size, 1.0), off)
        return Equilibrium(
            amounts,
            ln_amounts,
            extents,
            excess,
            stopped,
            np.where(np.isnan(ln_amounts).any(axis=1), np.nan, temperature),
            pressure,
            volume,
            z,
            ln_phi,
            share.max(axis=1, initial=0.0),
            iterations,
            self.faults,
        )

    def affinities(
        self, temperature: FloatArray, rows: IntArray, point: _Point
    ) -> tuple[FloatArray, BoolArray]:
        """Return ln(Q/K) of the reactions as stated, and which of them stopped short."""
        nu = self.problem.reactions.nu
        ln_n = point.composition.ln_amounts
        ln_activity = np.where(self.in_mixture, ln_n, 0.0)
        if self.per_total:
            inside = ln_n[:, self.in_mixture]
            most = inside.max(axis=1, keepdims=True)
            total = most + np.log(np.exp(inside - most).sum(axis=1, keepdims=True))
            ln_activity = np.where(self.in_mixture, ln_n - total, 0.0)
        ln_activity = ln_activity + point.ln_gamma
        ln_k = self.problem.constants.ln_k(temperature, rows) - self.of_units(temperature, rows)
        terms = np.where(nu != 0, nu * ln_activity[:, None, :], 0.0)
        there = np.where(nu != 0, np.isfinite(ln_n)[:, None, :] | ~self.in_mixture, True)
        excess = np.where(there.all(axis=2), terms.sum(axis=2) - ln_k, np.nan)
        lacks = (np.isneginf(ln_n)[:, None, :] & (nu != 0) & ~self.in_mixture).any(axis=2)
        return excess, np.asarray(lacks & ~(np.abs(excess) <= 1e-9))
