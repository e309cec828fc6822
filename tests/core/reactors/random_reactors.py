# ruff: noqa: T201 - it prints a table
"""Seeded random reactors of every kind that is marched or made of others: none may fail.

Networks of one to four reactions among up to six substances, orders 1 and 2, activation
energies 40 to 120 kJ/mol, Damkoehler numbers over three decades, enthalpies of formation
that make the heats consistent, gases that change their volume and liquids, every way of
passing heat. One in fifty is held against another solver on balances that are written
again here. ``python -m tests.core.reactors.random_reactors [cases a kind]``.
"""

from __future__ import annotations

import sys
from collections import Counter
from dataclasses import replace

import numpy as np
from scipy.integrate import solve_ivp

from core.constants import GAS_CONSTANT as R
from core.errors import Refused
from core.rates.constants import ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.rate_law import ByAffinity
from core.reactors.problem import (
    Adiabatic,
    Batch,
    ConversionTarget,
    Exchange,
    FedStream,
    Isothermal,
    PackedBed,
    PlugFlow,
    ReactorProblem,
    ReactorStage,
    RecyclePlugFlow,
    Size,
    StirredTank,
    TanksInSeries,
    TemperatureStage,
    Train,
)
from core.reactors.rating import rating
from core.reactors.volume import volume
from tests.core.reactors.accounts import T_HEAT, account, gas, law, liquid, problem

NAMES = "ABCDEI"
EQUATIONS = ("A -> B", "A -> 2 C", "B -> 2 C", "A + B -> D", "B -> E", "2 C -> B")
MASSES = {"A": 0.06, "B": 0.06, "C": 0.03, "D": 0.12, "E": 0.06, "I": 0.028}
KINDS = (
    "plug-flow",
    "packed-bed",
    "batch",
    "fed-batch",
    "recycle-plug-flow",
    "tanks-in-series",
    "train",
    "volume",
)
ACCEPTED = {"pressure-exhausted"}
"""Refusals that a random reactor may bring about."""


def network(rng: np.random.Generator, *, batch: bool, phase: str, counter: bool) -> ReactorProblem:
    """Return a random network in plug flow of size 1, or in a batch of 1 s."""
    count = int(rng.integers(1, 5))
    chosen = [EQUATIONS[k] for k in rng.choice(len(EQUATIONS), count, replace=False)]
    if not any(e.startswith("A") for e in chosen):
        chosen[0] = "A -> B"
    cp = {n: rng.uniform(20, 120) for n in NAMES}
    reactions = account(chosen, MASSES, cp)
    fed = {n: float(rng.uniform(0.0, 1.0)) * (rng.random() < 0.6) for n in "BCDE"}
    fed |= {"A": float(rng.uniform(0.2, 1.0)), "I": float(rng.uniform(0.2, 8.0))}
    t = float(rng.uniform(300, 700))
    if phase == "gas":
        feed = gas(reactions, fed, t, float(10 ** rng.uniform(5, 6.5)), batch=batch)
    else:
        feed = liquid(reactions, fed, float(10 ** rng.uniform(-4.5, -3)), t, batch=batch)
    v = float(feed.volumetric_flow)
    # Heats that follow from enthalpies of formation, none of which melts the plant.
    per_mass = rng.normal(0.0, 250e3, len(reactions.names))
    formed = per_mass * reactions.molar_masses
    heats = reactions.nu @ formed
    laws, constants = [], []
    c = feed.flows / v
    for j, row in enumerate(reactions.nu):
        of = int(np.flatnonzero(row < 0)[0])
        reactants = {reactions.names[i]: float(-row[i]) for i in np.flatnonzero(row < 0)}
        order = sum(reactants.values())
        scale = max(float(c.max()), 1e-3)
        k = float(10 ** rng.uniform(-1.5, 1.0)) * scale ** (1 - order) * (1.0 if batch else v)
        energy = float(rng.uniform(40e3, 120e3))
        reverse = constant = None
        if rng.random() < 0.4:
            kind = "concentration" if phase == "liquid" else "thermodynamic"
            dn = float(row.sum())
            k_eq = float(10 ** rng.uniform(-1, 3)) * (scale**dn if phase == "liquid" else 1.0)
            constant = EquilibriumConstant(kind, VantHoff(t, k_eq, float(heats[j])))
            reverse = ByAffinity(constant)
        laws.append(
            law(
                reactions,
                reactions.names[of],
                0.0,
                reactants,
                constant=ConstantAt(t, k, energy),
                reverse=reverse,
            )
        )
        constants.append(constant)
    capacity = float(feed.flows @ np.array([cp[n] for n in reactions.names]))
    ways = [Isothermal(), Adiabatic(), Exchange(capacity * rng.uniform(0.5, 20), t - 20.0)]
    if not batch:
        arranged = "counter-current" if counter else "co-current"
        ways.append(
            Exchange(
                capacity * rng.uniform(0.5, 4), t - 30.0, capacity * rng.uniform(0.7, 5), arranged
            )
        )
    thermal = ways[int(rng.integers(len(ways)))]
    reactor = Batch(size=Size("time", 1.0)) if batch else PlugFlow(Size("volume", 1.0))
    return problem(reactions, laws, feed, reactor, thermal, heats.tolist(), constants)


def made(kind: str, rng: np.random.Generator) -> ReactorProblem:
    """Return a random problem of a kind."""
    phase = "gas" if rng.random() < 0.6 else "liquid"
    if kind in ("batch", "fed-batch"):
        if kind == "fed-batch":
            phase = "liquid"
        asked = network(rng, batch=True, phase=phase, counter=False)
        hold = "volume" if rng.random() < 0.5 else "pressure"
        fed = None
        if kind == "fed-batch":
            v = float(asked.feed.volumetric_flow)
            stream = replace(
                asked.feed,
                flows=asked.feed.flows * rng.uniform(0, 2, len(asked.feed.flows)),
                batch=False,
                liquid_volumetric_flow=v * rng.uniform(0.2, 1.5),
                temperature=float(rng.uniform(290, 350)),
            )
            fed = FedStream(stream, float(rng.uniform(0.2, 1.5)))
        return replace(asked, reactor=Batch(hold, fed, Size("time", 1.0)))
    asked = network(rng, batch=False, phase=phase, counter=kind == "plug-flow")
    size = Size("volume", float(10 ** rng.uniform(-1, 0.7)))
    if kind == "packed-bed":
        bed = PackedBed(
            cross_section=float(10 ** rng.uniform(-2, 0)),
            particle_diameter=float(10 ** rng.uniform(-3, -1.7)),
            void_fraction=float(rng.uniform(0.35, 0.55)),
            viscosity=3e-5,
            pressure_drop=phase == "gas",
            size=size,
        )
        return replace(asked, reactor=bed)
    if kind == "recycle-plug-flow":
        return replace(asked, reactor=RecyclePlugFlow(float(10 ** rng.uniform(-1, 1)), size))
    if kind == "tanks-in-series":
        return replace(asked, reactor=TanksInSeries(int(rng.integers(2, 5)), size))
    if kind == "train":
        t = float(asked.feed.temperature)
        held = asked.thermal
        stages = (
            ReactorStage("bed", PlugFlow(size), held),
            TemperatureStage("exchanger", temperature=t + 5.0),
            ReactorStage("tank", StirredTank(size), held),
        )
        return replace(asked, reactor=Train(stages))
    return replace(asked, reactor=PlugFlow(size))


def by_hand(asked: ReactorProblem) -> np.ndarray:
    """Return the outlet flows of plug flow or a batch, from balances that are written again."""
    reactions, feed, thermal = asked.reactions, asked.feed, asked.thermal
    nu, s = reactions.nu, len(feed.flows)
    known = asked.heats.of_all[1]
    cp = np.array([float(c.at(300.0)) for c in known.heat_capacities])
    batch = feed.batch
    hold = asked.reactor.hold if batch else "pressure"
    held = feed.phase == "liquid" or (batch and hold == "volume")
    v0, p0, t0 = float(feed.volumetric_flow), feed.pressure, float(feed.temperature)
    exchange = isinstance(thermal, Exchange)
    utility = exchange and thermal.utility_heat_capacity_flow is not None

    def f(_, y):
        n, t = y[:s], y[s]
        v = v0 if held else n.sum() * R * t / p0
        c = n / v
        r = np.zeros(len(nu))
        for j, one in enumerate(asked.laws):
            k = one.constant
            kf = k.constant * np.exp(k.activation_energy / R * (1 / k.temperature - 1 / t))
            rate = kf * np.prod(c**one.orders)
            if one.reverse is not None:
                eq = one.reverse.equilibrium
                vh = eq.constant
                ln_k = np.log(vh.constant) + vh.enthalpy / R * (1 / vh.temperature - 1 / t)
                a = c if eq.kind == "concentration" else c * R * t / 1e5
                up, down = np.maximum(nu[j], 0), np.maximum(-nu[j], 0)
                # The orders are those of the reactants, so that they cancel in Q.
                rate = kf * (
                    np.prod(c**down)
                    - np.prod(a**up)
                    * np.exp(-ln_k)
                    * (np.prod(c**down) / np.prod(np.maximum(a, 1e-300) ** down))
                )
            r[j] = rate / abs(nu[j, one.of])
        per = v if batch else 1.0
        dn = per * r @ nu
        if isinstance(thermal, Isothermal):
            return np.append(dn, [0.0, 0.0])
        h = known.enthalpies + nu @ cp * (t - T_HEAT)
        capacity = n @ cp
        if batch and held and feed.phase == "gas":
            h = h - nu.sum(axis=1) * R * t
            capacity = capacity - n.sum() * R
        passed = thermal.coefficient_area_per_volume * (y[s + 1] - t) * per if exchange else 0.0
        dtu = -passed / thermal.utility_heat_capacity_flow if utility else 0.0
        return np.append(dn, [(-per * (r @ h) + passed) / capacity, dtu])

    start = np.append(feed.flows, [t0, thermal.utility_temperature if exchange else 0.0])
    size = asked.reactor.size.value
    with np.errstate(invalid="ignore"):  # a trial may take a trace below nothing
        solved = solve_ivp(f, (0, size), start, method="LSODA", rtol=1e-11, atol=1e-13)
    return np.append(solved.y[:s, -1], solved.y[s, -1])


def check(kind: str, cases: int, seed: int) -> tuple[Counter, list[str], float]:
    """Return how the cases ended, what failed, and the worst departure from the other solver."""
    rng = np.random.default_rng([seed, KINDS.index(kind)])
    ends: Counter = Counter()
    failed: list[str] = []
    worst = 0.0
    for case in range(cases):
        asked = made(kind, rng)
        try:
            if kind == "volume":
                reached = rating(asked)
                target = 0.9 * reached.conversion
                sized = replace(asked, reactor=replace(asked.reactor, size=None))
                found = volume(sized, ConversionTarget(target))
                off = abs(found.conversion - target)
                if off > 1e-8:
                    failed.append(f"{kind} {case}: target missed by {off:.1e}")
            else:
                found = rating(asked)
        except Refused as refused:
            code = refused.faults[0].code
            ends[code] += 1
            if code not in ACCEPTED:
                failed.append(f"{kind} {case}: {refused}")
            continue
        except Exception as error:
            failed.append(f"{kind} {case}: {type(error).__name__}: {error}")
            continue
        ends["answered"] += 1
        off = _mass_off(asked, found)
        if off > 1e-8:
            failed.append(f"{kind} {case}: mass is off by {off:.1e}")
        against = isinstance(asked.thermal, Exchange) and "counter" in asked.thermal.arrangement
        if case % 50 == 0 and kind in ("plug-flow", "batch") and not against:
            hand = by_hand(asked)
            size = float(np.abs(asked.feed.flows).sum())
            off = float(np.abs(found.outlet.flows - hand[:-1]).max()) / size
            off = max(off, abs(float(found.outlet.temperature) / hand[-1] - 1))
            worst = max(worst, off)
            if off > 1e-7:
                failed.append(f"{kind} {case}: {off:.1e} from the other solver")
    return ends, failed, worst


def _mass_off(asked: ReactorProblem, found) -> float:
    masses = asked.reactions.molar_masses
    fed = float(asked.feed.flows @ masses)
    reactor = asked.reactor
    if isinstance(reactor, Batch) and reactor.fed is not None:
        fed += float(reactor.fed.stream.flows @ masses) * min(reactor.fed.until, 1.0)
    return abs(float(found.outlet.flows @ masses) / fed - 1.0)


def main() -> int:
    """Run them all; not zero where any failed."""
    cases = int(sys.argv[1]) if len(sys.argv) > 1 else 10_000
    bad = 0
    for kind in KINDS:
        ends, failed, worst = check(kind, cases, 1)
        print(kind, dict(ends), f"worst {worst:.1e}", flush=True)
        for line in failed[:10]:
            print("  ", line[:300], flush=True)
        bad += len(failed)
    return 1 if bad else 0


if __name__ == "__main__":
    sys.exit(main())
