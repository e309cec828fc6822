"""Whether an equation conserves elements, charge and mass.

Elements and charge are counted exactly, in whole numbers and fractions; where
a substance is opaque only mass can be compared, and molar masses are rounded,
so that a small difference is let through with a warning.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

from core.errors import Amount, Fact, Note, Subject, refuse
from core.reactions.elimination import null_vector
from core.reactions.equation import ParsedEquation, spell_equation
from core.substances.substance import Substance

MASS_REFUSED = 0.005
"""Relative difference of mass between the sides above which a reaction is refused."""

MASS_WARNED = 1e-4
"""Relative difference of mass between the sides above which it is remarked upon."""

CHARGE = "charge"
"""Stands beside the symbols of the elements for what else is conserved."""


@dataclass(frozen=True)
class _Finding:
    """What is wrong with a reaction, whoever asks."""

    code: str
    detail: str
    facts: Mapping[str, Fact]


def check_balance(
    equation: ParsedEquation,
    substances: Mapping[str, Substance],
    *,
    reaction: str,
    subject: Subject,
) -> tuple[Note, ...]:
    """Check that a reaction conserves what it must.

    Parameters
    ----------
    equation : ParsedEquation
    substances : Mapping[str, Substance]
        At least those of the equation, by name.
    reaction : str
        The id of the reaction, for the sentence.
    subject : Subject
        The equation in the request.

    Returns
    -------
    tuple of Note
        ``mass-imbalance`` where the molar masses leave more than 0.01 % open.

    Raises
    ------
    Refused
        ``unbalanced-reaction``, with both counts of every offending element and
        the balanced form where there is exactly one; ``mass-not-conserved``
        where the sides differ by more than 0.5 % of mass;
        ``reaction-without-change``.
    """
    finding = _finding(equation, tuple(substances[name] for name in equation.coefficients))
    if finding is None:
        return ()
    facts = {"reaction": reaction, **finding.facts}
    if finding.code == "mass-imbalance":
        return (Note(finding.code, finding.detail, "warning", subject, facts),)
    raise refuse(finding.code, subject, finding.detail, **facts)


def composition(substance: Substance) -> Mapping[str, Fraction]:
    """Return the atoms of each element, and the charge where there is one.

    An opaque substance has none that are known.
    """
    formula = substance.formula
    if formula is None:
        return {}
    if formula.charge:
        return {**formula.elements, CHARGE: Fraction(formula.charge)}
    return formula.elements


@lru_cache(maxsize=1024)
def _finding(equation: ParsedEquation, substances: tuple[Substance, ...]) -> _Finding | None:
    """Judge an equation; ``substances`` stand in the order of its coefficients."""
    if not any(equation.coefficients.values()):
        return _Finding(
            "reaction-without-change",
            "reaction {reaction} has the same substances in the same amounts on both sides, so"
            " that nothing changes; correct the equation.",
            {},
        )
    by_name = dict(zip(equation.coefficients, substances, strict=True))
    opaque = [name for name, substance in by_name.items() if substance.formula is None]
    if not opaque:
        finding = _unbalanced(equation, by_name)
        if finding is not None:
            return finding
    return _mass(equation, by_name, opaque)


def _counts(side: Mapping[str, Fraction], by_name: Mapping[str, Substance]) -> dict[str, Fraction]:
    counts: dict[str, Fraction] = {}
    for name, coefficient in side.items():
        for element, atoms in composition(by_name[name]).items():
            counts[element] = counts.get(element, Fraction(0)) + coefficient * atoms
    return counts


def _unbalanced(equation: ParsedEquation, by_name: Mapping[str, Substance]) -> _Finding | None:
    left, right = _counts(equation.left, by_name), _counts(equation.right, by_name)
    facts: dict[str, Fact] = {}
    clauses = []
    for element in dict.fromkeys((*left, *right)):
        count_left, count_right = left.get(element, 0), right.get(element, 0)
        if count_left != count_right:
            facts[f"{element}_left"] = str(count_left)
            facts[f"{element}_right"] = str(count_right)
            clauses.append(
                f"{element} {{{element}_left}} on the left and {{{element}_right}} on the right"
            )
    if not clauses:
        return None
    advice, found = _advice(equation, by_name)
    return _Finding(
        "unbalanced-reaction",
        "reaction {reaction} is not balanced: " + "; ".join(clauses) + ". " + advice,
        {**facts, **found},
    )


def _advice(
    equation: ParsedEquation, by_name: Mapping[str, Substance]
) -> tuple[str, dict[str, Fact]]:
    """Say how to mend an unbalanced equation."""
    if any(name in equation.right for name in equation.left):
        return "Correct the coefficients.", {}
    names = list(equation.coefficients)
    rows: dict[str, dict[str, Fraction]] = {}
    for name in names:
        for element, atoms in composition(by_name[name]).items():
            rows.setdefault(element, {})[name] = atoms
    dimensions, vector = null_vector(rows.values(), names)
    if dimensions > 1:
        return (
            "It can be balanced in more than one way: correct the coefficients, or write it as"
            " several reactions.",
            {},
        )
    if vector and all(vector[name] > 0 for name in equation.left):
        right = {name: -vector[name] for name in equation.right}
        if all(count > 0 for count in right.values()):
            left = {name: vector[name] for name in equation.left}
            balanced = spell_equation(left, right, equation.arrow)
            return "Balanced, it reads {balanced}.", {"balanced": balanced}
    return (
        "No coefficients above zero balance these substances: one is missing, misspelt or on the"
        " wrong side.",
        {},
    )


def _mass(
    equation: ParsedEquation, by_name: Mapping[str, Substance], opaque: list[str]
) -> _Finding | None:
    # From net coefficients: what stands on both sides hides no imbalance of the others.
    consumed = produced = 0.0
    for name, coefficient in equation.coefficients.items():
        mass = float(coefficient) * by_name[name].molar_mass
        if mass < 0:
            consumed -= mass
        else:
            produced += mass
    larger = max(consumed, produced)
    imbalance = abs(produced - consumed) / larger
    if imbalance <= MASS_WARNED:
        return None
    facts: dict[str, Fact] = {
        "consumed": Amount(consumed, "mass_per_amount"),
        "produced": Amount(produced, "mass_per_amount"),
        "imbalance": Amount(imbalance),
    }
    found = "{consumed} of reactants against {produced} of products, a difference of {imbalance}."
    if opaque:
        facts["opaque"] = ", ".join(opaque)
        why = " Only mass can be compared, for want of a formula of {opaque}."
    else:
        why = " Its elements balance, so that a stated molar mass does not fit its formula."
    if imbalance > MASS_REFUSED:
        facts["allowed"] = Amount(MASS_REFUSED)
        return _Finding(
            "mass-not-conserved",
            "reaction {reaction} does not conserve mass: " + found + why + " At most {allowed} is"
            " allowed: correct a coefficient or a molar mass, or add what is missing.",
            facts,
        )
    return _Finding(
        "mass-imbalance",
        "the molar masses of reaction {reaction} leave mass open: " + found + why,
        facts,
    )
