"""Rate constants and how they follow temperature: one class for each form.

A form answers ``ln_at``, the logarithm of its value in SI, because equilibrium
constants of the same forms run over hundreds of decades; ``at`` is the value
itself, for what must be a usable number. Parameters may be arrays over N cases
wherever a float is written, and a temperature a symbol of a calculation that is
recorded (:mod:`core.numerics.straight_line`).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Protocol, TypeAlias

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fact, Subject, refuse
from core.numerics.straight_line import is_symbol

Values: TypeAlias = float | FloatArray
"""One number, or an array over N cases."""

_LARGEST_EXPONENT = 700.0
"""exp of it, or of its opposite, is still a normal number with room for products."""


class TemperatureDependent(Protocol):
    """What the forms of a rate constant have in common."""

    needs_temperature: ClassVar[bool]

    def ln_at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return the logarithm of the constant's SI value."""
        ...  # pragma: no cover


def at(
    constant: TemperatureDependent, temperature: Values | None, subject: Subject = ()
) -> FloatArray:
    """Return a constant at a temperature, see :func:`ln_in_range`, in SI, shape (...)."""
    value: FloatArray = np.exp(ln_in_range(constant, temperature, subject))
    return value


def ln_in_range(
    constant: TemperatureDependent, temperature: Values | None, subject: Subject = ()
) -> FloatArray:
    """Return the logarithm of a constant whose value is a usable number.

    Parameters
    ----------
    constant : TemperatureDependent
    temperature : float or ndarray, shape (...), or None
        K; may be None for a form that does not need it.
    subject : Subject
        Names the constant in a refusal.

    Returns
    -------
    ndarray, shape (...)
        Of the value in the SI unit of the constant's own parameters.

    Raises
    ------
    Refused
        ``condition-missing``: no temperature for a form that needs one.
        ``impossible-value``: a parameter is not above zero or not finite.
        ``rate-constant-out-of-range``: the value overflows or vanishes.
    """
    ln = constant.ln_at(temperature, subject)
    far = np.abs(ln)
    if far.max() > _LARGEST_EXPONENT:
        i = int(np.argmax(far))
        worst = float(ln.flat[i])
        facts: dict[str, Fact] = {"power": round(worst / float(np.log(10.0)))}
        when = ""
        if temperature is not None:
            hot = float(np.broadcast_to(temperature, ln.shape).flat[i])
            facts["temperature"] = Amount(hot, "temperature")
            when = "at {temperature} "
        raise refuse(
            "rate-constant-out-of-range",
            subject,
            when + "the constant is 10^{power} in SI units, beyond any use; check its parameters "
            "and their units",
            **facts,
        )
    return ln


@dataclass(frozen=True, eq=False)
class Constant:
    """The same at every temperature.

    Attributes
    ----------
    value : float or ndarray, shape (...)
        SI, above zero.
    """

    value: Values
    needs_temperature: ClassVar[bool] = False

    def ln_at(
        self,
        temperature: Values | None = None,  # noqa: ARG002 - the forms' common signature
        subject: Subject = (),
    ) -> FloatArray:
        """Return ln(value), shape (...)."""
        return np.log(positive(self.value, subject, "constant"))

    def activation(self) -> tuple[Values, Values]:
        """Return 0 and 0, see :func:`activation`."""
        return 0.0, 0.0

    def at(self, temperature: Values | None = None, subject: Subject = ()) -> FloatArray:
        """Return the value, see :func:`at`."""
        # Through a logarithm and back the last digits would suffer.
        ln_in_range(self, temperature, subject)
        return np.asarray(self.value, dtype=float)


@dataclass(frozen=True, eq=False)
class Arrhenius:
    """k = A (T/K)^n exp(-E / RT) (Arrhenius, 1889; n: Kooij, 1893).

    Attributes
    ----------
    pre_exponential : float or ndarray, shape (...)
        A, in the unit of k: the power of temperature counts kelvins.
    activation_energy : float or ndarray, shape (...)
        E, J/mol.
    temperature_exponent : float or ndarray, shape (...)
        n, -.
    """

    pre_exponential: Values
    activation_energy: Values
    temperature_exponent: Values = 0.0
    needs_temperature: ClassVar[bool] = True

    def ln_at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return ln k at the temperature, K, shape (...)."""
        t = needed_temperature(temperature)
        a = positive(self.pre_exponential, (*subject, "pre_exponential"), "pre-exponential factor")
        e = finite(self.activation_energy, (*subject, "activation_energy"), "activation energy")
        n = finite(self.temperature_exponent, (*subject, "temperature_exponent"), "exponent")
        ln: FloatArray = np.log(a) - e / (GAS_CONSTANT * t) + n * np.log(t)
        return ln

    def activation(self) -> tuple[Values, Values]:
        """Return E/R and n, see :func:`activation`."""
        return np.asarray(self.activation_energy) / GAS_CONSTANT, self.temperature_exponent

    def at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return k, see :func:`at`."""
        return at(self, temperature, subject)


@dataclass(frozen=True, eq=False)
class ConstantAt:
    """Known at one temperature: k = k1 exp(-E/R (1/T - 1/T1)).

    Attributes
    ----------
    temperature : float or ndarray, shape (...)
        T1, K.
    constant : float or ndarray, shape (...)
        k1, SI.
    activation_energy : float or ndarray, shape (...)
        E, J/mol.
    """

    temperature: Values
    constant: Values
    activation_energy: Values
    needs_temperature: ClassVar[bool] = True

    def ln_at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return ln k at the temperature, K, shape (...)."""
        e = finite(self.activation_energy, (*subject, "activation_energy"), "activation energy")
        return ln_from_reference(self.temperature, self.constant, e, temperature, subject)

    def activation(self) -> tuple[Values, Values]:
        """Return E/R and 0, see :func:`activation`."""
        return np.asarray(self.activation_energy) / GAS_CONSTANT, 0.0

    def at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return k, see :func:`at`."""
        return at(self, temperature, subject)


RATE_CONSTANT_FORMS: tuple[type[TemperatureDependent], ...] = (Constant, Arrhenius, ConstantAt)
"""The forms that a rate constant may be given in."""


def activation(constant: TemperatureDependent) -> tuple[Values, Values] | None:
    """Return E/R (K) and n of a constant that goes as T^n exp(-E/RT); None of any other form."""
    tell = getattr(constant, "activation", None)
    return None if tell is None else tell()


def ln_from_reference(
    reference: Values,
    constant: Values,
    energy: FloatArray,
    temperature: Values | None,
    subject: Subject,
) -> FloatArray:
    """Return ln of a constant known at a reference temperature; energy in J/mol."""
    t = needed_temperature(temperature)
    t1 = positive(reference, (*subject, "at"), "temperature")
    k1 = positive(constant, (*subject, "constant"), "constant")
    # One difference of temperatures loses nothing where the two are close.
    ln: FloatArray = np.log(k1) - energy / GAS_CONSTANT * ((t1 - t) / (t * t1))
    return ln


def positive(value: Values, subject: Subject, what: str) -> FloatArray:
    """Return the value as an array; refuse it unless finite and above zero."""
    array = np.asarray(value, dtype=float)
    if type(value) is float and 0.0 < value < np.inf:
        return array
    good = (array > 0) & (array < np.inf)
    if not good.all():
        raise _out_of_range(array, good, subject, what, "a finite number above zero")
    return array


def finite(value: Values, subject: Subject, what: str) -> FloatArray:
    """Return the value as an array; refuse it unless finite."""
    array = np.asarray(value, dtype=float)
    good = np.isfinite(array)
    if not good.all():
        raise _out_of_range(array, good, subject, what, "a finite number")
    return array


def _out_of_range(
    array: FloatArray, good: np.ndarray, subject: Subject, what: str, allowed: str
) -> Exception:
    return refuse(
        "impossible-value",
        subject,
        "the {what} is {found} in SI units; {allowed} is needed",
        what=what,
        found=f"{array[~good].flat[0]:.6g}",
        allowed=allowed,
    )


def needed_temperature(temperature: Values | None) -> FloatArray:
    """Return the temperature as an array; refuse it where there is none."""
    if temperature is None:
        raise refuse(
            "condition-missing",
            ("feed", "temperature"),
            "a constant that depends on temperature was given, and no temperature: state the "
            "feed's, or a constant that holds at the feed's temperature",
        )
    if is_symbol(temperature):
        return temperature  # type: ignore[return-value]
    return positive(temperature, ("feed", "temperature"), "temperature")
