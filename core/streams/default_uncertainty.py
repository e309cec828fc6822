"""Standard uncertainties taken where the caller states none.

The figures are common practice for plant instruments, not a property of the
caller's own: whoever uses one lists it among the assumptions of the answer.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class DefaultUncertainty:
    """``share`` of the reading plus ``absolute`` (SI), and how to say it."""

    share: float
    absolute: float
    words: str

    def of(self, value: float) -> float:
        """Return the standard uncertainty of a reading, SI."""
        return self.share * abs(value) + self.absolute


DEFAULT_UNCERTAINTIES = {
    "flow": DefaultUncertainty(0.02, 0.0, "2 % of the reading for flows and charges"),
    "gas-analysis": DefaultUncertainty(
        0.01, 0.0002, "1 % of the reading plus 0.02 % absolute for gas analyses"
    ),
    "wet-chemistry": DefaultUncertainty(
        0.01, 0.0, "1 % of the reading for analyses of liquids and for concentrations"
    ),
    "temperature": DefaultUncertainty(0.0, 1.5, "1.5 K for temperatures"),
    "pressure": DefaultUncertainty(0.005, 0.0, "0.5 % of the absolute pressure for pressures"),
    "density": DefaultUncertainty(0.01, 0.0, "1 % of the reading for densities"),
}
"""By kind of reading; common practice, no source."""
