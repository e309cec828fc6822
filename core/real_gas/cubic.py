"""Cubic equations of state for gas mixtures.

P = RT/(v - b) - a/((v + d1 b)(v + d2 b)) with van der Waals' one-fluid mixing,
a = sum_ij y_i y_j sqrt(a_i a_j) (1 - k_ij) and b = sum_i y_i b_i, and
a_i = a_ci (1 + m_i (1 - sqrt(T/T_ci)))^2.

* Peng-Robinson: D.-Y. Peng, D. B. Robinson, Ind. Eng. Chem. Fundam. 15 (1976)
  59-64; m for acentric factors above 0.49: D. B. Robinson, D.-Y. Peng, GPA
  Research Report 28, 1978.
* Soave-Redlich-Kwong: G. Soave, Chem. Eng. Sci. 27 (1972) 1197-1203.

The factors of a_c and b follow from the critical point; the papers print them
rounded (0.45724, 0.07780; 0.42747, 0.08664).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.numerics.straight_line import Number

_RECORDED_STEPS = 10
"""Of Newton's method; of a gas up to its critical pressure seven settle the last digits."""

GasModel = Literal["peng-robinson", "soave-redlich-kwong"]


def _peng_robinson_m(w: FloatArray) -> FloatArray:
    low = 0.37464 + 1.54226 * w - 0.26992 * w**2
    high = 0.379642 + 1.48503 * w - 0.164423 * w**2 + 0.016666 * w**3
    return np.where(w > 0.49, high, low)


def _soave_m(w: FloatArray) -> FloatArray:
    m: FloatArray = 0.480 + 1.574 * w - 0.176 * w**2
    return m


@dataclass(frozen=True)
class _Form:
    d1: float
    d2: float
    factor_a: float
    factor_b: float
    critical_z: float
    m: Callable[[FloatArray], FloatArray]


def _form(d1: float, d2: float, m: Callable[[FloatArray], FloatArray]) -> _Form:
    """Return the form whose isotherm has its critical point where the data say.

    There the cubic in Z has a triple root: three equations for A, B and Z_c.
    """
    u, w = d1 + d2, d1 * d2
    # Z^3 + (B(u-1) - 1) Z^2 + (A + B^2 (w-u) - u B) Z - (A B + w B^2 + w B^3) = (Z - Z_c)^3
    b = 0.08
    for _ in range(50):
        z = (1 - b * (u - 1)) / 3
        a = 3 * z * z - b * b * (w - u) + u * b
        f = a * b + w * b * b + w * b**3 - z**3
        dz = -(u - 1) / 3
        da = 6 * z * dz - 2 * b * (w - u) + u
        b -= f / (da * b + a + 2 * w * b + 3 * w * b * b - 3 * z * z * dz)
    z = (1 - b * (u - 1)) / 3
    return _Form(d1, d2, 3 * z * z - b * b * (w - u) + u * b, b, z, m)


_FORMS: dict[GasModel, _Form] = {
    "peng-robinson": _form(1 + 2**0.5, 1 - 2**0.5, _peng_robinson_m),
    "soave-redlich-kwong": _form(1.0, 0.0, _soave_m),
}


@dataclass(frozen=True, eq=False)
class GasState:
    """A gas mixture at N temperatures and pressures.

    Attributes
    ----------
    compressibility : ndarray, shape (N,)
        Z of the root that was asked for.
    ln_fugacity_coefficients : ndarray, shape (N, S)
    residual_enthalpy : ndarray, shape (N,)
        h less that of the ideal gas, J/mol.
    residual_heat_capacity : ndarray, shape (N,)
        c_p less that of the ideal gas, J/(mol K).
    liquid_like : ndarray of bool, shape (N,)
        The fluid is on the liquid side of its isotherm: it is no gas.
    """

    compressibility: FloatArray
    ln_fugacity_coefficients: FloatArray
    residual_enthalpy: FloatArray
    residual_heat_capacity: FloatArray
    liquid_like: BoolArray


@dataclass(frozen=True, eq=False)
class CubicEquation:
    """An equation of state for a mixture of S substances.

    Attributes
    ----------
    model : GasModel
    critical_temperature : ndarray, shape (S,)
        K.
    critical_pressure : ndarray, shape (S,)
        Pa.
    acentric_factor : ndarray, shape (S,)
    interaction : ndarray, shape (S, S), or None
        k_ij, symmetric, zero on the diagonal; None: all zero.
    """

    model: GasModel
    critical_temperature: FloatArray
    critical_pressure: FloatArray
    acentric_factor: FloatArray
    interaction: FloatArray | None = None

    @cached_property
    def _parameters(self) -> tuple[_Form, FloatArray, FloatArray, FloatArray, FloatArray]:
        """The form; sqrt(a_c) and b by substance; m; 1 - k_ij."""
        form = _FORMS[self.model]
        rt = GAS_CONSTANT * self.critical_temperature
        root = np.sqrt(form.factor_a * rt**2 / self.critical_pressure)
        b = form.factor_b * rt / self.critical_pressure
        size = len(b)
        k = np.zeros((size, size)) if self.interaction is None else self.interaction
        return form, root, b, form.m(self.acentric_factor), 1.0 - k

    @property
    def parameters(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """sqrt(a_c), Pa^(1/2) m3/mol; b, m3/mol; m; by substance, each of shape (S,)."""
        _, root, b, m, _ = self._parameters
        return root, b, m

    def _attraction(
        self, temperature: FloatArray, y: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """Return a, sum_j y_j a_ij, da/dT and d2a/dT2 of the mixtures."""
        _, root, _, m, factor = self._parameters
        reduced = np.sqrt(temperature[:, None] / self.critical_temperature)
        plain = 1.0 + m * (1.0 - reduced)
        sign = np.sign(plain)
        s = root * np.abs(plain)
        ds = -sign * root * m * reduced / (2 * temperature[:, None])
        dds = -ds / (2 * temperature[:, None])
        with_s = (y * s) @ factor
        with_ds = (y * ds) @ factor
        each = s * with_s
        a = (y * each).sum(axis=1)
        da = 2 * (y * ds * with_s).sum(axis=1)
        dda = 2 * (y * (dds * with_s + ds * with_ds)).sum(axis=1)
        return a, each, da, dda

    def state(
        self,
        temperature: FloatArray,
        pressure: FloatArray,
        amounts: FloatArray,
        *,
        of_gas: bool = False,
    ) -> GasState:
        """Return the state at a temperature and a pressure.

        Parameters
        ----------
        temperature, pressure : ndarray, shape (N,)
            K and Pa.
        amounts : ndarray, shape (N, S)
            In any unit, not all zero.
        of_gas : bool
            The largest root, as of :meth:`compressibility_of_gas`; else that of the
            lowest Gibbs energy.
        """
        form, _, b_each, _, _ = self._parameters
        y = amounts / amounts.sum(axis=1, keepdims=True)
        a, each, da, dda = self._attraction(temperature, y)
        b = y @ b_each
        rt = GAS_CONSTANT * temperature
        big_a, big_b = a * pressure / rt**2, b * pressure / rt
        if of_gas:
            z, _ = _outer_roots(*_cubic(form, big_a, big_b))
        else:
            z = self._root(big_a, big_b)
        span = form.d1 - form.d2
        log = np.log1p(span * big_b / (z + form.d2 * big_b))
        ratio = b_each / b[:, None]
        pull = (a / (b * rt * span) * log)[:, None] * (2 * each / a[:, None] - ratio)
        ln_phi = ratio * (z - 1)[:, None] - np.log(z - big_b)[:, None] - pull
        h = rt * (z - 1) + (temperature * da - a) / (b * span) * log
        v = z * rt / pressure
        slope_t = GAS_CONSTANT / (v - b) - da / ((v + form.d1 * b) * (v + form.d2 * b))
        slope_v = (
            -rt / (v - b) ** 2
            + a * (2 * v + (form.d1 + form.d2) * b) / ((v + form.d1 * b) * (v + form.d2 * b)) ** 2
        )
        cv = temperature * dda / (b * span) * log
        cp = cv - temperature * slope_t**2 / slope_v - GAS_CONSTANT
        # Below the temperature at which the isotherm loses its loop, the volume tells.
        loops = a / (b * rt) > form.factor_a / form.factor_b
        dense = v < b * form.critical_z / form.factor_b
        return GasState(z, ln_phi, h, cp, np.asarray(loops & dense))

    def compressibility_of_gas(
        self, temperature: FloatArray, pressure: FloatArray, amounts: FloatArray
    ) -> FloatArray:
        """Return Z of mixtures that are gases, shape (N,).

        That of the largest root, though a liquid were more stable: a gas a little
        below its dew point is still a gas. Not a number where there is no gas at all.
        Parameters as of :meth:`state`.
        """
        form, _, b_each, _, _ = self._parameters
        y = amounts / amounts.sum(axis=1, keepdims=True)
        a, _, _, _ = self._attraction(temperature, y)
        b = y @ b_each
        rt = GAS_CONSTANT * temperature
        big_a, big_b = a * pressure / rt**2, b * pressure / rt
        z, _ = _outer_roots(*_cubic(form, big_a, big_b))
        loops = a / (b * rt) > form.factor_a / form.factor_b
        dense = z / big_b < form.critical_z / form.factor_b
        return np.where((z > big_b) & ~(loops & dense), z, np.nan)

    def packing(
        self,
        temperature: FloatArray,
        pressure: FloatArray,
        amounts: FloatArray,
        compressibility: FloatArray,
    ) -> FloatArray:
        """Return the share of the volume that the molecules take, b/v, shape (N,)."""
        _, _, b_each, _, _ = self._parameters
        b = (amounts @ b_each) / amounts.sum(axis=1)
        share: FloatArray = b * pressure / (compressibility * GAS_CONSTANT * temperature)
        return share

    def pressure(
        self, temperature: FloatArray, volume: FloatArray, amounts: FloatArray
    ) -> FloatArray:
        """Return the pressure of amounts, mol (N, S), in a volume, m3 (N,); Pa.

        Not above zero, or NaN, where so much matter does not go into the volume as a gas.
        """
        form, _, b_each, _, _ = self._parameters
        total = amounts.sum(axis=1)
        y = amounts / total[:, None]
        a, _, _, _ = self._attraction(temperature, y)
        b, v = y @ b_each, volume / total
        found = GAS_CONSTANT * temperature / (v - b) - a / ((v + form.d1 * b) * (v + form.d2 * b))
        return np.where(v > b, found, np.nan)

    def record(
        self,
        temperature: Number,
        fractions: Sequence[Number],
        pressure: Number | None = None,
        molar_volume: Number | None = None,
    ) -> tuple[Number, list[Number]]:
        """Return Z and the logarithms of the fugacity coefficients of a gas that is recorded.

        At a pressure: the largest root of the cubic, by Newton's method from 1 + B, where
        Z would be without attraction; above the root the cubic is convex. Where there is
        no gas, or close to the critical point, what comes out is not the root: who uses
        it compares its results with :meth:`compressibility_of_gas`.

        Parameters
        ----------
        temperature : Number
            K; see :mod:`core.numerics.straight_line`.
        fractions : sequence of Number, length S
            Mole fractions.
        pressure, molar_volume : Number
            Pa, or m3/mol; one of them.
        """
        form, root, b_each, m, factor = self._parameters
        reduced = [np.sqrt(temperature / float(t)) for t in self.critical_temperature]
        plain = [1.0 + float(w) * (1.0 - r) for w, r in zip(m, reduced, strict=True)]
        s = [float(q) * np.maximum(p, -p) for q, p in zip(root, plain, strict=True)]
        parts = [y * each for y, each in zip(fractions, s, strict=True)]
        whole = _sum(parts)
        lessened = [
            _sum([(1.0 - float(f)) * p for f, p in zip(row, parts, strict=True)]) for row in factor
        ]
        shared = [whole - less for less in lessened]
        a = _sum([p * each for p, each in zip(parts, shared, strict=True)])
        b = _sum([y * float(each) for y, each in zip(fractions, b_each, strict=True)])
        rt = temperature * GAS_CONSTANT
        span = form.d1 - form.d2
        if molar_volume is not None:
            v = molar_volume
            z = v / (v - b) - a * v / (rt * (v + form.d1 * b) * (v + form.d2 * b))
            big_b = b * z / v
        else:
            big_b = b * pressure / rt
            c2, c1, c0 = _cubic(form, a * pressure / rt**2, big_b)
            z = 1.0 + big_b
            for _ in range(_RECORDED_STEPS):
                value = c0 + z * (c1 + z * (c2 + z))
                z = z - value / (c1 + z * (2.0 * c2 + 3.0 * z))
        log = np.log1p(span * big_b / (z + form.d2 * big_b))
        rest, free = z - 1.0, np.log(z - big_b)
        pull = log / (b * rt * span)
        ln_phi = []
        for each, own, with_all in zip(b_each.tolist(), s, shared, strict=True):
            ratio = each / b
            ln_phi.append(ratio * rest - free - pull * (2.0 * own * with_all - a * ratio))
        return z, ln_phi

    def _root(self, a: FloatArray, b: FloatArray) -> FloatArray:
        """Return the root Z of the cubic with the lowest Gibbs energy."""
        form = _FORMS[self.model]
        high, low = _outer_roots(*_cubic(form, a, b))
        span = form.d1 - form.d2

        def gibbs(z: FloatArray) -> FloatArray:
            log = np.log1p(span * b / (z + form.d2 * b))
            value: FloatArray = z - 1 - np.log(z - b) - a / (b * span) * log
            return value

        with np.errstate(invalid="ignore", divide="ignore"):
            dense = (low > b) & (low < high) & (gibbs(low) < gibbs(high))
        return np.where(dense, low, high)


def _sum(numbers: Sequence[Number]) -> Number:
    total: Number = 0.0
    for number in numbers:
        total = total + number
    return total


def _cubic(form: _Form, a: FloatArray, b: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return the coefficients of Z^2, Z and 1 of the cubic whose first is 1."""
    u, w = form.d1 + form.d2, form.d1 * form.d2
    return b * (u - 1) - 1, a + b * b * (w - u) - u * b, -(a * b + w * b * b + w * b**3)


def _outer_roots(c2: FloatArray, c1: FloatArray, c0: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the largest and the smallest real root of z^3 + c2 z^2 + c1 z + c0."""
    shift = -c2 / 3
    p = c1 - c2 * c2 / 3
    q = c0 + shift * (c1 + shift * (c2 + shift))
    inside = (q / 2) ** 2 + (p / 3) ** 3
    with np.errstate(invalid="ignore", divide="ignore"):
        size = 2 * np.sqrt(np.maximum(-p / 3, 0.0))
        cosine = np.clip(np.where(size > 0, 3 * q / (p * size), 0.0), -1.0, 1.0)
        angle = np.arccos(cosine) / 3
        radical = np.sqrt(np.maximum(inside, 0.0))
        one = np.cbrt(-q / 2 - np.copysign(radical, q))
        single = np.where(one != 0, one - p / (3 * one), 0.0)
    three = inside < 0
    high = shift + np.where(three, size * np.cos(angle), single)
    low = shift + np.where(three, size * np.cos(angle + 2 * np.pi / 3), single)

    def polished(z: FloatArray) -> FloatArray:
        for _ in range(3):
            value = c0 + z * (c1 + z * (c2 + z))
            slope = c1 + z * (2 * c2 + 3 * z)
            with np.errstate(invalid="ignore", divide="ignore"):
                step = value / slope
            z = np.where(np.abs(step) < 0.1 * np.abs(z), z - step, z)
        return z

    return polished(high), polished(low)
