import numpy as np

from core.real_gas.remarks import remark_on_constants, remark_on_gas

NONE = np.zeros(3, dtype=bool)


def codes(z, condenses=NONE, *, ideal=True):
    return [
        note.code
        for note in remark_on_gas(np.array(z), condenses, taken_as_ideal=ideal, subject=())
    ]


def test_a_gas_that_passes_for_ideal():
    assert codes([0.951, 1.0, 1.049]) == []
    assert codes([0.94, 1.0, 1.049]) == ["gas-not-ideal"]
    assert codes([0.96, 1.0, 1.06]) == ["gas-not-ideal"]
    assert codes([np.nan, 1.0, 1.0]) == []


def test_a_gas_that_was_not_taken_for_ideal():
    assert codes([0.5, 1.0, 1.0], ideal=False) == []


def test_a_gas_that_may_condense():
    note = next(
        remark_on_gas(
            np.ones(3), np.array([True, False, True]), taken_as_ideal=False, subject=("feed",)
        )
    )
    assert note.code == "gas-may-condense"
    assert "2 of 3" in str(note)
    assert note.subject == ("feed",)


def test_the_error_of_the_volume_is_told():
    note = next(remark_on_gas(np.array([0.8]), NONE[:1], taken_as_ideal=True, subject=()))
    assert "Z = 0.800" in str(note)
    assert "25 %" in str(note)


def test_a_constant_that_fugacities_change_is_told():
    shift = np.array([[0.04, -0.01], [np.nan, np.nan], [0.01, -0.2]])
    (note,) = remark_on_constants(shift, ["a", "b"], ("gas_model",))
    assert note.code == "fugacities-not-ideal"
    assert "of b, in partial pressures, 1.22 times" in str(note)
    assert not list(remark_on_constants(shift[:2], ["a", "b"], ()))
    assert not list(remark_on_constants(np.zeros((0, 2)), ["a", "b"], ()))
