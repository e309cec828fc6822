"""How far an outlet is from equilibrium, on the wire."""

from __future__ import annotations

import math
from collections.abc import Callable

from core.equilibrium.outlet import ReactionApproach
from schemas.edge import Json
from schemas.results import OpenSchema, number

LARGEST_EXPONENT = 690.0
"""ln of what a number of a computer holds."""


class ApproachSchema(OpenSchema):
    """How far an outlet is from the equilibrium of one reaction."""

    approach = number(
        "Equilibrium temperature of the outlet's composition less the outlet's, of an exothermic"
        " reaction; the opposite of an endothermic one: positive means short of equilibrium.",
        required=True,
    )
    equilibrium_temperature = number(
        "At which the outlet's composition would be at equilibrium.", required=True
    )
    quotient_over_constant = number(
        "Q/K at the outlet's temperature; below one: short of equilibrium, as the reaction is"
        " written. Null where it is beyond what a number of a computer holds.",
        required=True,
    )


def write_approach(
    found: ReactionApproach | None, number_of: Callable[[float, float, str], Json]
) -> Json | None:
    """Return the approach of one reaction.

    Parameters
    ----------
    found : ReactionApproach or None
    number_of : callable
        Makes the number of a value, its standard uncertainty (SI) and its dimension.
    """
    if found is None:
        return None
    ratio = found.ln_quotient_over_constant
    within = abs(ratio) < LARGEST_EXPONENT
    q = math.exp(ratio) if within else 0.0
    return {
        "approach": number_of(found.approach, found.u, "temperature_difference"),
        "equilibrium_temperature": number_of(
            found.equilibrium_temperature, found.equilibrium_temperature_u, "temperature"
        ),
        "quotient_over_constant": number_of(q, q * found.ln_quotient_u, "dimensionless")
        if within
        else None,
    }
