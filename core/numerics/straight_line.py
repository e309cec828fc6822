"""A calculation written once, run many ways.

A function of a few numbers, written in ordinary arithmetic and NumPy's elementary
functions, is run once on symbols that record what is done to them. The record is a
graph without branches or loops. It is written out as straight-line Python that runs

- on floats, for integrators that ask for one state at a time: fourteen times as fast
  as the same in small arrays (measured on four reactions of eight substances);
- on arrays over many cases, every statement one operation on all of them;
- on anything else that knows arithmetic, such as intervals, for enclosures.

Derivatives are exact: the graph is differentiated by the chain rule (A. Griewank, A.
Walther, Evaluating Derivatives, 2nd ed., SIAM 2008, ch. 3: forward mode).

The text of the code holds names made here and operations alone: every number is a
parameter, so that problems of one structure share one compiled function, and nothing
that a caller wrote gets into the text.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property, lru_cache
from types import CodeType
from typing import Any, TypeAlias

import numpy as np
from scipy.special import i0e, i1e

from core.arrays import FloatArray

Number: TypeAlias = Any
"""A float, an array over cases, or a :class:`Symbol`; mypy cannot tell their arithmetic apart."""

LARGEST_EXPONENT = 700.0
"""Of exp: beyond it the exponential stays as it is, so that a trial step of an integrator that
goes astray is turned back by its error and does not overflow."""

LARGEST_WHOLE_POWER = 100
"""That is written as products."""

_COMMUTE = {"add", "mul", "max", "min"}


class Symbol:
    """A number that is not known yet; arithmetic on it is recorded."""

    __slots__ = ("at", "tape")
    __array_priority__ = 1000

    def __init__(self, tape: Tape, at: int) -> None:
        self.tape, self.at = tape, at

    def __add__(self, other: Number) -> Number:
        return self.tape.operate("add", self, other)

    __radd__ = __add__

    def __sub__(self, other: Number) -> Number:
        return self.tape.operate("sub", self, other)

    def __rsub__(self, other: Number) -> Number:
        return self.tape.operate("sub", other, self)

    def __mul__(self, other: Number) -> Number:
        return self.tape.operate("mul", self, other)

    __rmul__ = __mul__

    def __truediv__(self, other: Number) -> Number:
        return self.tape.operate("div", self, other)

    def __rtruediv__(self, other: Number) -> Number:
        return self.tape.operate("div", other, self)

    def __pow__(self, power: float) -> Number:
        return self.tape.to_the(self, power)

    def __neg__(self) -> Number:
        return self.tape.operate("sub", 0.0, self)

    def __array_ufunc__(
        self, ufunc: np.ufunc, method: str, *inputs: Number, **kwargs: Any
    ) -> Number:
        name = _UFUNCS.get(ufunc)
        if method != "__call__" or kwargs or name is None:
            return NotImplemented
        if name == "pow":
            return self.tape.to_the(inputs[0], inputs[1])
        if name == "neg":
            return -inputs[0]
        return self.tape.operate(name, *inputs)


_UFUNCS: dict[np.ufunc, str] = {
    np.add: "add",
    np.subtract: "sub",
    np.multiply: "mul",
    np.divide: "div",
    np.power: "pow",
    np.negative: "neg",
    np.exp: "exp",
    np.expm1: "expm1",
    np.log: "log",
    np.log1p: "log1p",
    np.sqrt: "sqrt",
    np.tanh: "tanh",
    np.maximum: "max",
    np.minimum: "min",
}


def is_symbol(value: Number) -> bool:
    """Whether a number is recorded and not known."""
    return isinstance(value, Symbol)


def array_or_symbol(value: Number) -> Number:
    """Return a known number as an array, and a symbol as it is."""
    return value if isinstance(value, Symbol) else np.asarray(value, dtype=float)


def where_below(a: Number, b: Number, then: Number, otherwise: Number) -> Number:
    """Return ``then`` where a < b, else ``otherwise``; of symbols, arrays or floats."""
    for each in (a, b, then, otherwise):
        if isinstance(each, Symbol):
            return each.tape.operate("below", a, b, then, otherwise)
    return np.where(np.asarray(a) < b, then, otherwise)


def bessel_ratio(x: Number) -> Number:
    """Return I1(x)/I0(x), of the modified Bessel functions; of a symbol, an array or a float."""
    if isinstance(x, Symbol):
        return x.tape.operate("bessel_ratio", x)
    # Scaled functions: their common factor exp(x) cancels before it overflows.
    return i1e(x) / i0e(x)


def power_of_amount(amount: Number, power: float | FloatArray) -> Number:
    """Return what there is of something to a power; nothing, where there is none or less.

    An integrator may try a trace less than nothing. A whole power is left smooth
    there; a broken one is not defined and counts as nothing.
    """
    if not isinstance(amount, Symbol):
        there = np.asarray(amount, dtype=float)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(there > 0, there**power, np.where(power == 0, 1.0, 0.0))
    return amount.tape.to_the(amount, power, amount_only=True)


@dataclass(eq=False)
class Tape:
    """The record of a calculation: each entry an operation on earlier ones.

    Attributes
    ----------
    entries : list of (operation, arguments)
    numbers : dict from entry to value
        Of the entries that are numbers.
    """

    entries: list[tuple[Any, ...]] = field(default_factory=list)
    numbers: dict[int, Any] = field(default_factory=dict)
    known: dict[tuple[Any, ...], int] = field(default_factory=dict)

    def enter(self, *entry: Any) -> int:
        """Return where an entry stands, made if it is new."""
        at = self.known.get(entry)
        if at is None:
            at = self.known[entry] = len(self.entries)
            self.entries.append(entry)
        return at

    def number(self, value: Any) -> int:
        """Return the entry of a number, or of an array over cases."""
        if isinstance(value, np.ndarray) and value.ndim == 0:
            value = value.item()
        if isinstance(value, np.ndarray):
            at = self.enter("number", id(value))
        else:
            value = float(value)
            at = self.enter("number", value)
        self.numbers[at] = value
        return at

    def entry_of(self, value: Number) -> int:
        """Return the entry of a symbol or a number."""
        return value.at if isinstance(value, Symbol) else self.number(value)

    def value_of(self, at: int) -> Any:
        """Return the number an entry is, else None."""
        return self.numbers.get(at)

    def symbol(self, at: int) -> Number:
        """Return the number that an entry stands for, known or not."""
        value = self.numbers.get(at)
        return Symbol(self, at) if value is None else value

    def operate(self, name: str, *values: Number) -> Number:
        """Record an operation, or do it where its arguments are numbers."""
        ats = [self.entry_of(v) for v in values]
        plain = [self.numbers.get(at) for at in ats]
        if all(v is not None for v in plain):
            return _ARRAY[name](*plain)
        found = self._simple(name, ats, plain)
        if found is not None:
            return self.symbol(found)
        if name in _COMMUTE:
            ats.sort()
        return Symbol(self, self.enter(name, *ats))

    def _simple(self, name: str, ats: list[int], plain: list[Any]) -> int | None:
        """Return the entry that an operation with a zero or a one comes to."""
        first = _scalar(plain[0])
        second = _scalar(plain[1]) if len(plain) > 1 else None
        if name == "add":
            return ats[1] if first == 0 else ats[0] if second == 0 else None
        if name == "sub":
            return ats[0] if second == 0 else None
        if name == "mul":
            if 0 in (first, second):
                return self.number(0.0)
            return ats[1] if first == 1 else ats[0] if second == 1 else None
        if name == "div":
            return self.number(0.0) if first == 0 else ats[0] if second == 1 else None
        if name == "below":
            return ats[2] if ats[2] == ats[3] else None
        return None

    def to_the(self, base: Number, power: Any, *, amount_only: bool = False) -> Number:
        """Record a power with a known exponent."""
        if isinstance(power, Symbol):
            raise TypeError("an exponent must be a number")
        if isinstance(power, np.ndarray) and power.ndim and (power == power.flat[0]).all():
            power = power.flat[0]
        if isinstance(power, np.ndarray) and power.ndim:
            return self.operate("amount_to" if amount_only else "to", base, power)
        p = float(power)
        if p == 0:
            return 1.0
        if p == 1:
            return base
        if p == int(p) and abs(p) <= LARGEST_WHOLE_POWER:
            return self._whole_power(base, int(p))
        return self.operate("amount_to" if amount_only else "to", base, p)

    def _whole_power(self, base: Number, power: int) -> Number:
        """Record a power as products, those of other powers among them."""
        if power < 0:
            return self.operate("div", 1.0, self._whole_power(base, -power))
        if power == 1:
            return base
        half = self._whole_power(base, power // 2)
        square = self.operate("mul", half, half)
        return self.operate("mul", square, base) if power % 2 else square


def _scalar(value: Any) -> float | None:
    return value if isinstance(value, float) else None


def record(
    calculation: Callable[..., Sequence[Number]], inputs: int, tape: Tape | None = None
) -> StraightLine:
    """Return what a function of several numbers does, as straight-line code.

    Parameters
    ----------
    calculation : callable
        Takes ``inputs`` numbers; returns a sequence of numbers. It may not branch on
        them: :func:`where_below` does.
    inputs : int
    """
    tape = Tape() if tape is None else tape
    ats = [tape.enter("input", k) for k in range(inputs)]
    found = calculation(*(Symbol(tape, at) for at in ats))
    return StraightLine(tape, inputs, tuple(tape.entry_of(value) for value in found))


@dataclass(frozen=True, eq=False)
class StraightLine:
    """A recorded calculation.

    Attributes
    ----------
    tape : Tape
    inputs : int
    outputs : tuple of int
        Entries of the tape.
    """

    tape: Tape
    inputs: int
    outputs: tuple[int, ...]

    @cached_property
    def _needed(self) -> list[int]:
        """The entries that the outputs hang on, in order."""
        entries, seen = self.tape.entries, set()
        stack = list(self.outputs)
        while stack:
            at = stack.pop()
            if at in seen:
                continue
            seen.add(at)
            name, *rest = entries[at]
            if name not in ("input", "number"):
                stack.extend(rest)
        return sorted(seen)

    @cached_property
    def operations(self) -> int:
        """How many operations an evaluation takes."""
        entries = self.tape.entries
        return sum(entries[at][0] not in ("input", "number") for at in self._needed)

    def derivatives(self, of: Sequence[int] | None = None) -> StraightLine:
        """Return the calculation of the derivatives, row by row: d output / d input.

        Parameters
        ----------
        of : sequence of int, optional
            Inputs; all of them by default.
        """
        tape = self.tape
        wanted = range(self.inputs) if of is None else of
        order = self._needed
        columns = []
        for k in wanted:
            slopes: dict[int, Number] = {}
            for at in order:
                name, *ats = tape.entries[at]
                if name == "input":
                    if ats[0] == k:
                        slopes[at] = 1.0
                elif name != "number" and any(a in slopes for a in ats):
                    slope = _slope(tape, name, at, ats, slopes)
                    if not (isinstance(slope, float) and slope == 0):
                        slopes[at] = slope
            columns.append([slopes.get(at, 0.0) for at in self.outputs])
        rows = [tape.entry_of(column[i]) for i in range(len(self.outputs)) for column in columns]
        return StraightLine(tape, self.inputs, tuple(rows))

    @cached_property
    def constant_outputs(self) -> tuple[float | FloatArray | None, ...]:
        """The outputs that do not hang on the inputs; None elsewhere."""
        return tuple(self.tape.value_of(at) for at in self.outputs)

    def on_floats(self) -> Callable[[float, Sequence[float]], list[float]]:
        """Return f(x, y): the first input a float, the others a list of floats."""
        found: Callable[[float, Sequence[float]], list[float]] = self._bound(
            "floats", _FLOATS, None
        )
        return found

    def on_arrays(self, case: np.ndarray | None = None) -> Callable[..., list[Any]]:
        """Return f(x, y) for rows y of shape (inputs - 1, m), x of shape (m,).

        Parameters
        ----------
        case : ndarray of int, shape (m,), optional
            Which of the cases that arrays among the numbers run over.
        """
        found: Callable[..., list[Any]] = self._bound("arrays", _ARRAY, case)
        return found

    def on(
        self, operations: Mapping[str, Callable[..., Any]], case: np.ndarray | None = None
    ) -> Callable[..., list[Any]]:
        """Return f(x, y) for numbers of any kind with arithmetic and these operations.

        They are ``exp``, ``expm1``, ``log``, ``log1p``, ``sqrt``, ``tanh``,
        ``bessel_ratio``, ``max``, ``min``, ``to`` (to a power), ``amount_to`` and ``below``;
        ``case`` as in :meth:`on_arrays`.
        """
        found: Callable[..., list[Any]] = self._bound("arrays", operations, case)
        return found

    def _bound(self, style: str, operations: Mapping[str, Any], case: np.ndarray | None) -> Any:
        text, numbers = self._written(style)
        values = [n[case] if case is not None and isinstance(n, np.ndarray) else n for n in numbers]
        bind = _bindings.get((text, id(operations)))
        if bind is None:
            names: dict[str, Any] = {}
            exec(_compiled(text), {"__builtins__": {}, **operations}, names)  # noqa: S102 - ours
            bind = names["bind"]
            if operations in (_FLOATS, _ARRAY):
                while len(_bindings) >= _MOST_KEPT:
                    _bindings.pop(next(iter(_bindings)), None)
                _bindings[text, id(operations)] = bind
        return bind(*values)

    def _written(self, style: str) -> tuple[str, list[Any]]:
        cached = self._texts.get(style)
        if cached is None:
            cached = self._texts[style] = self._write(style)
        return cached

    @cached_property
    def _texts(self) -> dict[str, tuple[str, list[Any]]]:
        return {}

    def _write(self, style: str) -> tuple[str, list[Any]]:
        """Return the text, and the numbers in the order of its parameters."""
        entries = self.tape.entries
        order = self._needed
        numbers = [at for at in order if entries[at][0] == "number"]
        used = {entries[at][1] for at in order if entries[at][0] == "input"}
        unpacked = ", ".join(
            f"v{self.tape.enter('input', k)}" if k in used else "_" for k in range(1, self.inputs)
        )
        floats = style == "floats"
        lines = [f"def bind({', '.join(f'v{at}' for at in numbers)}):", "  def f(x, y):"]
        if self.inputs > 1:
            lines.append(f"    [{unpacked}] = y")
        if 0 in used:
            lines.append(f"    v{self.tape.enter('input', 0)} = x")
        forms = _FLOAT_FORMS if floats else _FORMS
        for at in order:
            name, *ats = entries[at]
            if name not in ("input", "number"):
                lines.append(f"    v{at} = " + forms[name].format(*(f"v{a}" for a in ats)))
        lines.append(f"    return [{', '.join(f'v{at}' for at in self.outputs)}]")
        lines.append("  return f")
        return "\n".join(lines), [self.tape.numbers[at] for at in numbers]


_MOST_KEPT = 256
_bindings: dict[tuple[str, int], Callable[..., Any]] = {}
"""What texts were compiled to, for floats and for arrays."""


@lru_cache(maxsize=_MOST_KEPT)
def _compiled(text: str) -> CodeType:
    return compile(text, "<straight line>", "exec")


_OF_ONE = ("exp", "expm1", "log", "log1p", "sqrt", "tanh", "bessel_ratio")
_FORMS = {
    "add": "{} + {}",
    "sub": "{} - {}",
    "mul": "{} * {}",
    "div": "{} / {}",
    **{name: name + "({})" for name in _OF_ONE},
    **{name: name + "({}, {})" for name in ("max", "min", "to", "amount_to")},
    "below": "below({}, {}, {}, {})",
}
_FLOAT_FORMS = _FORMS | {
    "max": "{0} if {0} > {1} else {1}",
    "min": "{0} if {0} < {1} else {1}",
    "to": "{0}**{1} if {0} > 0 else nan",
    "amount_to": "{0}**{1} if {0} > 0 else 0.0",
    "below": "{2} if {0} < {1} else {3}",
}


def _exp(x: float) -> float:
    return math.exp(x) if x < LARGEST_EXPONENT else _HUGE


def _log(x: float) -> float:
    return math.log(x) if x > 0 else -math.inf if x == 0 else math.nan


_HUGE = math.exp(LARGEST_EXPONENT)
_FLOATS: dict[str, Any] = {
    "exp": _exp,
    "expm1": lambda x: math.expm1(x) if x < LARGEST_EXPONENT else _HUGE,
    "log": _log,
    "log1p": lambda x: math.log1p(x) if x > -1 else math.nan,
    "sqrt": lambda x: math.sqrt(x) if x >= 0 else math.nan,
    "tanh": math.tanh,
    "bessel_ratio": lambda x: float(i1e(x) / i0e(x)),
    "nan": math.nan,
}


def _quiet(f: Callable[..., Any]) -> Callable[..., Any]:
    def quiet(*args: Any) -> Any:
        with np.errstate(all="ignore"):
            return f(*args)

    return quiet


_ARRAY: dict[str, Callable[..., Any]] = {
    "add": np.add,
    "sub": np.subtract,
    "mul": np.multiply,
    "div": _quiet(np.divide),
    "exp": lambda x: np.exp(np.minimum(x, LARGEST_EXPONENT)),
    "expm1": lambda x: np.expm1(np.minimum(x, LARGEST_EXPONENT)),
    "log": _quiet(np.log),
    "log1p": _quiet(np.log1p),
    "sqrt": _quiet(np.sqrt),
    "tanh": np.tanh,
    "bessel_ratio": lambda x: i1e(x) / i0e(x),
    "max": np.maximum,
    "min": np.minimum,
    "to": _quiet(np.power),
    "amount_to": _quiet(
        lambda x, p: np.where(np.asarray(x) > 0, np.power(np.maximum(x, 1e-300), p), 0.0)
    ),
    "below": lambda a, b, then, otherwise: np.where(np.asarray(a) < b, then, otherwise),
}


def _slope(tape: Tape, name: str, at: int, ats: list[int], slopes: dict[int, Number]) -> Number:
    """Return the derivative of one entry from those of its arguments."""
    v = [tape.symbol(a) for a in ats]
    d = [slopes.get(a, 0.0) for a in ats]
    here = tape.symbol(at)
    if name == "add":
        return d[0] + d[1]
    if name == "sub":
        return d[0] - d[1]
    if name == "mul":
        return d[0] * v[1] + v[0] * d[1]
    if name == "div":
        return (d[0] - here * d[1]) / v[1]
    if name == "exp":
        return here * d[0]
    if name == "expm1":
        return (here + 1.0) * d[0]
    if name == "log":
        return d[0] / v[0]
    if name == "log1p":
        return d[0] / (v[0] + 1.0)
    if name == "sqrt":
        return 0.5 * d[0] / here
    if name == "tanh":
        return (1.0 - here * here) * d[0]
    if name == "bessel_ratio":
        return (1.0 - here / v[0] - here * here) * d[0]
    if name in ("to", "amount_to"):
        power = v[1]
        lower = tape.operate(name, v[0], power - 1.0)
        return power * lower * d[0]
    if name == "max":
        return tape.operate("below", v[0], v[1], d[1], d[0])
    if name == "min":
        return tape.operate("below", v[0], v[1], d[0], d[1])
    assert name == "below"
    return tape.operate("below", v[0], v[1], d[2], d[3])
