"""Metered streams read directly: what they make together, and what is not known of it."""

from dataclasses import replace

import numpy as np
import pytest

from core.constants import GAS_CONSTANT
from core.errors import Refused
from core.reactions.build import ReactionInput, build_reaction_set
from core.streams.known import Conditions, direct_flows, is_direct, join_streams
from core.streams.metered import (
    Analysis,
    Component,
    FlowReading,
    Measurement,
    MeteredStream,
    Removal,
)

REACTIONS = build_reaction_set([ReactionInput("r1", "CO + H2O -> CO2 + H2", ("reactions", 0))])[0]
CO, WATER = REACTIONS.index("CO"), REACTIONS.index("H2O")


def reading(value, name="x"):
    return Measurement(value, 0.0, ("feed", name))


def flows(**values):
    made = tuple(
        FlowReading(kind, reading(value), REACTIONS.index(name))
        for name, (kind, value) in values.items()
    )
    return MeteredStream("gas", frozenset(range(4)), ("feed",), flows=made)


def liquid(concentrations, volume, density=None):
    components = tuple(
        Component({REACTIONS.index(n): 1.0}, reading(c)) for n, c in concentrations.items()
    )
    return MeteredStream(
        "liquid",
        frozenset(range(4)),
        ("feed",),
        flows=(FlowReading("volume", reading(volume)),),
        analyses=(Analysis("concentration", components, ("feed", "concentrations")),),
        density=None if density is None else reading(density),
    )


def join(*streams, **conditions):
    stated = {"phase": streams[0].phase, "subject": ("feed",), **conditions}
    each = [direct_flows(stream, REACTIONS.molar_masses) for stream in streams]
    return join_streams(
        REACTIONS, np.sum(each, axis=0), streams, Conditions(**stated), each=each, batch=False
    )


def test_mass_and_molar_flows_add_up():
    stream, assumed = join(
        flows(CO=("amount", 2.0)), flows(H2O=("mass", 0.018015), CO=("amount", 1.0))
    )
    assert stream.flows[CO] == pytest.approx(3.0)
    assert stream.flows[WATER] == pytest.approx(1.0, rel=1e-4)
    assert assumed == ()


def test_concentrations_times_volume_are_flows():
    stream, _ = join(liquid({"CO": 100.0, "H2O": 50.0}, 0.02))
    assert stream.flows[CO] == pytest.approx(2.0)
    assert float(stream.volumetric_flow) == pytest.approx(0.02)


def test_a_liquid_given_by_concentrations_may_hold_a_solvent_unless_its_density_says_not():
    unknown, _ = join(liquid({"H2O": 100.0}, 0.02))
    assert unknown.solvent_unknown
    dilute, _ = join(liquid({"H2O": 100.0}, 0.02, density=1000.0))
    assert dilute.solvent_unknown
    everything, _ = join(liquid({"H2O": 1000.0 / 0.018015}, 0.02, density=1000.0))
    assert not everything.solvent_unknown


def test_volumes_of_mixed_liquids_are_added_and_that_is_said():
    stream, assumed = join(liquid({"CO": 1.0}, 0.02), liquid({"H2O": 1.0}, 0.03))
    assert float(stream.volumetric_flow) == pytest.approx(0.05)
    assert [note.code for note in assumed] == ["volumes-add-up"]


def test_the_volume_of_a_gas_gives_its_pressure_or_must_agree_with_it():
    gas = MeteredStream(
        "gas",
        frozenset(range(4)),
        ("feed",),
        flows=(
            FlowReading("amount", reading(10.0), CO),
            FlowReading("volume", reading(0.5)),
        ),
    )
    follows = 10.0 * GAS_CONSTANT * 400.0 / 0.5
    stream, assumed = join(gas, temperature=reading(400.0))
    assert stream.pressure == pytest.approx(follows)
    assert [note.code for note in assumed] == ["pressure-from-volume"]
    join(gas, temperature=reading(400.0), pressure=reading(follows * 1.005))
    with pytest.raises(Refused, match="volume-contradicts-conditions"):
        join(gas, temperature=reading(400.0), pressure=reading(follows * 1.05))


def test_what_needs_an_estimation_is_not_direct():
    analysed = MeteredStream(
        "gas",
        frozenset(range(4)),
        ("feed",),
        flows=(FlowReading("amount", reading(10.0)),),
        analyses=(Analysis("mole", (Component({CO: 1.0}, reading(0.5)),), ("feed", "analysis")),),
    )
    assert not is_direct(analysed)
    assert is_direct(flows(CO=("amount", 1.0)))
    known = liquid({"CO": 1.0}, 0.02)
    assert is_direct(known)
    # Peaks on a scale of their own, dried samples and lumps are no concentrations of the stream.
    (of,) = known.analyses
    lump = Component({CO: 1.0, 1: 1.0}, of.components[0].measurement)
    for other in (
        replace(of, normalised=True),
        replace(of, removed=(Removal(1, 0.0),)),
        replace(of, components=(lump,)),
    ):
        assert not is_direct(replace(known, analyses=(other,)))


def test_nothing_flowing_is_refused():
    with pytest.raises(Refused, match="no-flow"):
        join(flows(CO=("amount", 0.0)))


def test_carbon_in_a_gas_is_remarked_on_unless_it_is_said_to_be_solid():
    from core.streams.known import solids_taken_as_gas

    def notes(*equations):
        inputs = [ReactionInput("r1", text, ("reactions", 0)) for text in equations]
        made = build_reaction_set(inputs)[0]
        return [note.code for note in solids_taken_as_gas(made, "gas")]

    assert notes("CH4 -> C + 2 H2") == ["solid-taken-as-gas"]
    assert notes("CH4 -> C(s) + 2 H2") == []
    assert notes("2 SO2 + O2 -> 2 SO3") == []
