"""Answers of the core made by hand: every member that an answer can have, of invented size."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from core.equilibrium.outlet import ReactionApproach
from core.errors import Amount, Note
from core.reactors.reacted import (
    Accumulation,
    AdiabaticEquilibrium,
    ConversionLimit,
    EquilibriumBesides,
    HeatCurves,
    Hottest,
    OperatingPoints,
    Optimum,
    Reacted,
    ReactorHeat,
    ReactorProfile,
    Sensitivity,
    Solution,
    StageReached,
    SteadyState,
    SteadyStates,
)


def reached(problem, conversion, temperature, pressure=None):
    """Return the outlet of the first reaction alone at a conversion of the key."""
    feed, nu, key = problem.feed, problem.reactions.nu[0], problem.key
    flows = feed.flows + conversion * feed.flows[key] * nu / -nu[key]
    return replace(
        feed,
        flows=flows,
        temperature=temperature,
        pressure=feed.pressure if pressure is None else pressure,
    )


def profile(problem, conversion, rise, **sizes):
    """Return a way to a conversion on which the temperature rises and the pressure falls."""
    x = np.linspace(0, conversion, 11)
    feed, nu, key = problem.feed, problem.reactions.nu[0], problem.key
    made = x * feed.flows[key] / -nu[key]
    extents = np.zeros((11, len(problem.reactions.reactions)))
    extents[:, 0] = made
    share = np.linspace(0, 1, 11) ** 2
    rate = 3.0 * (1.2 - x)
    return ReactorProfile(
        conversion=x,
        **{name: size * share for name, size in sizes.items()},
        extents=extents,
        flows=feed.flows + made[:, None] * nu,
        temperature=feed.temperature + rise * x,
        pressure=None if feed.pressure is None else feed.pressure * (1 - 0.1 * share),
        volumetric_flow=np.full(11, 2.0),
        key_rate=rate,
        rates=rate[:, None] / -nu[key] * np.eye(len(extents[0]))[0],
    )


def bed(problem):
    """Return an adiabatic bed at work, with all that a bed can have."""
    key_flow = float(problem.feed.flows[problem.key])
    way = replace(
        profile(problem, 0.62, 280.0, volume=32.0, catalyst_mass=19200.0, length=0.842),
        utility_temperature=np.linspace(650.0, 690.0, 11),
    )
    t = problem.feed.temperature + 0.62 * 280
    sensitivities = (
        Sensitivity(
            ("feed", "temperature"),
            Amount(1.0, "temperature_difference"),
            {"conversion": Amount(-0.0011), "temperature": Amount(0.7, "temperature_difference")},
        ),
        Sensitivity(
            ("reactions", "oxidation", "rate", "constant"),
            Amount(0.01),
            {"conversion": Amount(0.0021)},
        ),
    )
    return Reacted(
        inlet=problem.feed,
        outlet=reached(problem, 0.62, t, problem.feed.pressure * 0.9),
        conversion=0.62,
        extents=np.array([0.62 * key_flow]),
        volume=32.0,
        catalyst_mass=19200.0,
        length=0.842,
        limit=ConversionLimit(0.74, "equilibrium"),
        space_time=1.9,
        mean_residence_time=1.6,
        key_rate=0.8,
        hottest=Hottest(t, Amount(32.0, "volume")),
        utility_outlet_temperature=690.0,
        heat=ReactorHeat(np.array([-98.2e3]), problem.feed.temperature, 0.0, 173.6, 281.0),
        equilibrium=EquilibriumBesides(
            0.69,
            over_temperature=True,
            adiabatic=AdiabaticEquilibrium(0.74, 905.0),
            approaches={0: ReactionApproach(31.0, 0.0, t + 31.0, 0.0, -0.4, 0.0)},
        ),
        profile=way,
        sensitivities=sensitivities,
        method="the balances of moles, energy and pressure, integrated along the bed",
        assumed=(Note("constant-pressure", "made by hand"),),
    )


def tank(problem):
    """Return a stirred tank with three steady states, of which the middle one is unstable."""
    states = tuple(
        SteadyState(reached(problem, x, t), x, np.array([x * 5.0, 0.0]), stable)
        for x, t, stable in ((0.04, 335.0, True), (0.42, 362.0, False), (0.93, 398.0, True))
    )
    t = np.linspace(320.0, 420.0, 41)
    curves = HeatCurves(t, 4e5 / (1 + np.exp(-(t - 364) / 6)), 5.1e3 * (t - 333.15))
    return Reacted(
        inlet=problem.feed,
        outlet=states[0].outlet,
        conversion=0.04,
        extents=states[0].extents,
        volume=3.0,
        space_time=1080.0,
        mean_residence_time=1080.0,
        key_rate=0.1,
        steady_states=SteadyStates(states, complete=False, curves=curves),
        method="the balances of the tank, by a search over temperature",
    )


def train(problem):
    """Return a train of two beds with a cooler between."""
    first, last = reached(problem, 0.6, 860.0), reached(problem, 0.85, 760.0)
    way = profile(problem, 0.6, 280.0, volume=32.0)
    second = replace(
        profile(problem, 0.85, 60.0, volume=32.0), conversion=np.linspace(0.6, 0.85, 11)
    )
    stages = (
        StageReached("bed-1", "packed-bed", first, 0.6, volume=32.0, rate=0.5, profile=way),
        StageReached("cooler", "cool", reached(problem, 0.6, 713.15), 0.6, duty=-6.1e6),
        StageReached("bed-2", "packed-bed", last, 0.85, volume=32.0, rate=0.2, profile=second),
        StageReached(
            "absorber", "separate", last, 0.85, removed=replace(last, flows=last.flows * 0.1)
        ),
    )
    return Reacted(
        inlet=problem.feed,
        outlet=last,
        conversion=0.85,
        extents=None,
        volume=64.0,
        stages=stages,
        hottest=Hottest(860.0),
        method="stage by stage",
    )


def fed_batch(problem):
    """Return a fed batch in which what is fed accumulates."""
    end = replace(problem.feed, flows=problem.feed.flows * 0.5, temperature=333.15)
    way = replace(profile(problem, 0.9, 0.0, time=10800.0), utility_temperature=None)
    return Reacted(
        inlet=problem.feed,
        outlet=end,
        conversion=0.9,
        extents=np.array([9.0, 1.0]),
        volume=5.0,
        time=10800.0,
        profile=way,
        accumulation=Accumulation(0, 2600.0, 5400.0, 0.14, 351.0),
        heat=ReactorHeat(np.array([-80e3, -20e3]), 333.15, -7.2e8, 60.0, 66.0),
        method="the balances over time",
    )


def points(problem, *, solutions=2):
    """Return operating points between 313.15 and 350 K."""
    found = tuple(
        Solution(t, replace(tank(problem), steady_states=None, outlet=reached(problem, 0.8, t)))
        for t in (318.0, 341.0)[:solutions]
    )
    values = np.linspace(313.15, 350.0, 21)
    conversions = 0.85 - 4e-4 * (values - 330) ** 2
    conversions[3] = np.nan
    return OperatingPoints(
        found,
        complete=False,
        optimum=Optimum(330.0, 0.85),
        values=values,
        conversions=conversions,
        notes=(Note("search-not-proven", "made by hand"),),
    )
