"""The mole account written out as formulas, for people who check it by hand."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from core.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Term:
    """What stands behind F, N or C of a substance, as a function of the key's conversion.

    ``F_i = F_A0 (theta_i + nu_i/|nu_A| X)``. A substance that takes no part
    keeps its flow. What does not depend on the feed is written once.

    Attributes
    ----------
    before, after : str
        Around theta; empty where it plays no part.
    alone : str
        The whole term where theta is nothing.
    """

    before: str
    after: str
    alone: str

    def at(self, theta: float) -> str:
        """Return the term for a feed."""
        if self.before and theta:
            return f"{self.before}{theta:.6g}{self.after}"
        return self.alone


def term(name: str, key: str, ratio: float, *, is_key: bool) -> Term:
    """Return the term of a substance; ``ratio`` is ``nu_i/|nu_A|``."""
    if is_key:
        return Term("", "", f"{key}0 (1 - X)")
    if ratio == 0:
        return Term("", "", f"{name}0")
    change = _signed(ratio, "X")
    alone = change.removeprefix("+ ").replace("- ", "-")
    return Term(f"{key}0 (", f" {change})", f"{key}0 ({alone})")


def volume_factors(epsilon: float, conditions: str) -> str:
    """Return what turns the term of a flow into that of a concentration.

    ``epsilon`` 0 leaves the volume's own factor out; ``conditions`` is the text
    of the factors for temperature, pressure and compressibility, if any change.
    """
    expansion = f"/(1 {_signed(epsilon)} X)" if epsilon else ""
    return f"{expansion} {conditions}".rstrip()


def extents_expression(name: str, ids: Sequence[str], nu: FloatArray, *, batch: bool) -> str:
    """Return the flow of a substance as a function of the extents of several reactions."""
    letter = "N" if batch else "F"
    terms = [f"{_signed(c, 'xi_' + id_)}" for id_, c in zip(ids, nu, strict=True) if c]
    return " ".join([f"{letter}_{name}0", *terms])


def condition_factors(changes: Sequence[str]) -> str:
    """Return the factors by which changed conditions enter a gas concentration.

    The letters with 0 are the inlet's, as in the table itself.
    """
    factor = {"temperature": "(T0/T)", "pressure": "(P/P0)", "compressibility": "(Z0/Z)"}
    return "".join(
        factor[name] for name in ("pressure", "temperature", "compressibility") if name in changes
    )


def _signed(value: float, symbol: str = "") -> str:
    sign = "-" if value < 0 else "+"
    size = abs(value)
    if not symbol:
        return f"{sign} {_figure(size)}"
    return f"{sign} {symbol}" if size == 1 else f"{sign} {_figure(size)} {symbol}"


def _figure(value: float) -> str:
    return f"{value:.6g}"
