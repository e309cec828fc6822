"""The quick judgement of an ideal gas is that of the whole equation of state."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from core.real_gas.witness import witness_of
from core.streams.known import in_phase
from tests.core.outlet_analysis.plant import reactions_of

AMMONIA = reactions_of({"r1": "N2 + 3 H2 <=> 2 NH3"}, ["CH4", "CO2"])
WITNESS = witness_of(AMMONIA, in_phase(AMMONIA, "gas").tobytes())


@settings(max_examples=200, deadline=None)
@given(
    t=st.floats(200, 1200),
    ln_p=st.floats(np.log(1e3), np.log(4e7)),
    flows=st.lists(st.floats(0, 1), min_size=5, max_size=5).filter(lambda x: sum(x) > 0.01),
)
def test_it_agrees_with_the_equation_of_state(t, ln_p, flows):
    z = float(WITNESS.gas.compressibility(t, np.exp(ln_p), np.array(flows)))
    if np.isfinite(z) and min(abs(z - 0.95), abs(z - 1.05)) > 1e-9:
        assert WITNESS.nearly_ideal(t, float(np.exp(ln_p)), flows) == (0.95 <= z <= 1.05)


def test_nothing_is_nearly_ideal():
    assert WITNESS.nearly_ideal(300.0, 1e5, [0.0] * 5)


def test_it_is_made_once_for_an_account():
    inside = in_phase(AMMONIA, "gas").tobytes()
    assert witness_of(AMMONIA, inside) is witness_of(AMMONIA, inside)


def test_a_substance_that_is_not_known_leaves_no_witness():
    reactions = reactions_of({"r1": "N2 + 3 H2 <=> 2 NH3"}, ["Fe2O3"])
    assert witness_of(reactions, in_phase(reactions, "gas").tobytes()) is None
